"""The examples in docstrings hold, on the package that is installed.

Source: none; each example says in its docstring what it shows.
"""

from __future__ import annotations

import doctest
import importlib
import pkgutil

import pytest

import shares

# The entrance runs the command line when it is imported as a program, and the C module has no source to read.
MODULES = [
    "shares",
    *(
        found.name
        for found in pkgutil.walk_packages(shares.__path__, "shares.")
        if found.name not in ("shares.__main__", "shares.field._kernel")
    ),
]


@pytest.mark.parametrize("name", MODULES)
def test_examples_of_the_module_hold(name: str) -> None:
    failed, _ = doctest.testmod(importlib.import_module(name))
    assert failed == 0


def test_the_examples_are_found() -> None:
    examples = [
        example
        for name in MODULES
        for found in doctest.DocTestFinder().find(importlib.import_module(name))
        for example in found.examples
    ]
    assert len(MODULES) > 35
    assert len(examples) > 25
