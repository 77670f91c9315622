"""``shares.field``: which kernel is taken, and that the choice is never silent."""

from __future__ import annotations

import subprocess
import sys

import pytest

import shares.field
from shares.errors import KernelUnavailableError, ParameterError
from shares.field import kernel
from shares.field.gf256 import Field


@pytest.fixture(autouse=True)
def fresh_choice():
    kernel.cache_clear()
    yield
    kernel.cache_clear()


@pytest.fixture
def no_native(monkeypatch):
    # An entry of None makes the import system raise ImportError.
    monkeypatch.setitem(sys.modules, "shares.field._kernel", None)
    monkeypatch.delattr(shares.field, "_kernel", raising=False)


@pytest.mark.parametrize("setting", [None, ""])
@pytest.mark.usefixtures("no_native")
def test_falls_back_to_portable_when_nothing_is_demanded(monkeypatch, setting):
    if setting is None:
        monkeypatch.delenv("SHARES_KERNEL", raising=False)
    else:
        monkeypatch.setenv("SHARES_KERNEL", setting)
    assert kernel().name == "portable"


@pytest.mark.usefixtures("no_native")
def test_a_demanded_native_kernel_fails_loudly(monkeypatch):
    monkeypatch.setenv("SHARES_KERNEL", "native")
    with pytest.raises(KernelUnavailableError, match="native") as caught:
        kernel()
    assert isinstance(caught.value.__cause__, ImportError)
    with pytest.raises(KernelUnavailableError):
        Field()


def test_portable_never_loads_the_native_kernel():
    code = (
        "import sys; from shares.field.gf256 import Field; "
        "assert Field().kernel.name == 'portable'; assert 'shares.field._kernel' not in sys.modules"
    )
    subprocess.run([sys.executable, "-c", code], env={"SHARES_KERNEL": "portable"}, check=True)


def test_an_unknown_choice_is_refused(monkeypatch):
    monkeypatch.setenv("SHARES_KERNEL", "fast")
    with pytest.raises(ParameterError, match="native or portable"):
        kernel()


def test_the_choice_is_made_once(monkeypatch):
    monkeypatch.setenv("SHARES_KERNEL", "portable")
    first = kernel()
    monkeypatch.setenv("SHARES_KERNEL", "fast")
    assert kernel() is first


def test_the_implementation_under_test_says_who_it_is(implementation):
    assert (implementation.name, implementation.path) == ("portable", "integers") or (
        implementation.name == "native" and implementation.path != "integers"
    )
    assert Field(kernel=implementation).kernel is implementation
