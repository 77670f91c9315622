"""``shares selftest``: right here, and able to fail: each known answer is seen to notice a broken part."""

from __future__ import annotations

import hashlib
from collections.abc import Callable

import pytest
from cli.harness import run, spawn

import shares
from shares.custody import selftest as tests
from shares.errors import VerificationError
from shares.field import kernel
from shares.field.gf256 import Field


def test_everything_is_right_here() -> None:
    result = spawn("selftest")
    assert (result.code, result.err) == (0, "")
    running = kernel()
    assert result.out.startswith(f"shares {shares.__version__}, kernel {running.name} ({running.path})\n")
    assert "FAILED" not in result.out
    assert result.out.count("  right ") == len(tests._TESTS)
    assert f"All {len(tests._TESTS)} known answers are right." in result.out
    assert "yes     core dumps of this process are off" in result.out


def test_json() -> None:
    result = spawn("selftest", "--json")
    told = result.json
    assert (result.code, result.err, told["done"]) == (0, "", True)
    assert {test["problem"] for test in told["tests"]} == {None}
    assert (told["core_limit_zero"], told["not_dumpable"]) == (True, True)
    assert told["kernel"] in ("native", "portable")


@pytest.mark.parametrize("name", ["portable", "native"])
def test_the_kernel_asked_for_runs_or_is_missed_loudly(name: str) -> None:
    result = spawn("selftest", env={"SHARES_KERNEL": name})
    if name == "native" and result.code:
        assert (result.code, result.out) == (1, "")
        assert result.err.startswith("shares: ")
        assert "kernel" in result.err
    else:
        assert f"kernel {name} (" in result.out


def test_an_unknown_kernel_is_refused_in_one_line() -> None:
    for arguments in (["selftest"], ["--version"]):
        result = spawn(*arguments, env={"SHARES_KERNEL": "quick"})
        assert (result.code, result.out, result.err.count("\n")) == (2, "", 1)
        assert "SHARES_KERNEL" in result.err


def broken_product(self: Field, a: int, b: int) -> int:
    return a ^ b


def broken_hash(*_: object) -> object:
    return hashlib.sha1(b"", usedforsecurity=False)


def refused(*_: object, **__: object) -> None:
    raise VerificationError("a share does not verify")


BREAKAGES: dict[str, Callable[[pytest.MonkeyPatch], None]] = {
    "field: products": lambda patch: patch.setattr(Field, "multiply", broken_product),
    "field: the 30": lambda patch: patch.setattr(tests, "count_irreducible", lambda p, m: 31),
    "sharing": lambda patch: patch.setattr(tests, "interpolate", lambda field, xs, rows, at=0: rows[0]),
    "whole job": lambda patch: patch.setattr(tests, "verify_share", refused),
    "hashes": lambda patch: patch.setattr(hashlib, "sha256", broken_hash),
    "encodings": lambda patch: patch.setattr(tests, "canonical", lambda value: b"{}"),
}


@pytest.mark.parametrize("part", BREAKAGES)
def test_a_broken_part_is_noticed(part: str, monkeypatch: pytest.MonkeyPatch) -> None:
    BREAKAGES[part](monkeypatch)
    by_hand = run("selftest")
    by_script = run("selftest", "--json")
    monkeypatch.undo()
    assert (by_hand.code, by_script.code) == (1, 1)
    failed = [line for line in by_hand.out.splitlines() if line.startswith("  FAILED")]
    assert [line for line in failed if part in line]
    assert f"{len(failed)} of {len(tests._TESTS)} known answers are WRONG: do not use this installation." in by_hand.out
    assert by_script.json["done"] is False
    assert [test for test in by_script.json["tests"] if test["problem"] and part in test["about"]]
