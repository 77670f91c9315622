"""The self-test passes here, and each of its tests fails when what it tests is broken.

Checked against: breakage made here, one part at a time.
"""

from __future__ import annotations

import base64
import hashlib

import curve
import pytest

from shares.custody import selftest as module
from shares.custody.selftest import selftest
from shares.errors import ParameterError, VerificationError
from shares.field.gf256 import Field
from shares.group import edwards25519
from shares.group.edwards25519 import BASE


def failures() -> list[str]:
    return [outcome.about.split(":")[0] for outcome in selftest() if outcome.problem is not None]


def test_everything_passes_here() -> None:
    assert failures() == []
    assert len(selftest()) >= 10


def test_the_point_to_refuse_is_what_its_comment_says() -> None:
    point = curve.add(curve.BASE, (0, curve.P - 1))
    assert curve.order(point) == 2 * curve.L
    assert curve.encode(point).hex() == module._MIXED_ORDER


def broken(*_: object, **__: object) -> None:
    raise ParameterError("broken")


BREAKAGE = {
    "products of public numbers": ((Field, "multiply", lambda self, a, b: a ^ b), "field"),
    "products of secret rows": ((Field, "combine", lambda self, matrix, rows, out: None), "field"),
    "polynomials": ((module, "irreducibles", lambda degree: []), "field"),
    "interpolation": ((module, "interpolate", lambda field, xs, rows, at=0: rows[0]), "sharing"),
    "recovery": ((module, "recover", broken), "whole job"),
    "verification": ((module, "verify_share", broken), "whole job"),
    "SHA-256": ((hashlib, "sha256", hashlib.sha512), "hashes"),
    "SHAKE256": ((hashlib, "shake_256", hashlib.shake_128), "hashes"),
    "Argon2id": ((module, "Argon2id", lambda **_: module.HKDF(module.hashes.SHA256(), 32, None, b"")), "passphrases"),
    "multiplication": ((module, "BASE", BASE + BASE), "group"),
    "second base": ((module, "SECOND_BASE", BASE), "group"),
    "points of mixed order": (
        (edwards25519.sodium, "crypto_core_ed25519_is_valid_point", lambda octets: curve.decode(octets) is not None),
        "group",
    ),
    "opening a wrapping": ((module, "open_by_passphrase", broken), "wrapping"),
    "base32": ((base64, "b32encode", base64.b16encode), "encodings"),
    "canonical JSON": ((module, "canonical", lambda value: str(value).encode()), "encodings"),
}


@pytest.mark.parametrize("name", BREAKAGE)
def test_a_broken_part_is_noticed(name: str, monkeypatch) -> None:
    (owner, attribute, instead), about = BREAKAGE[name]
    monkeypatch.setattr(owner, attribute, instead)
    assert about in failures()


@pytest.mark.parametrize("error", [VerificationError("x"), ValueError("x"), TypeError("x"), ZeroDivisionError("x")])
def test_a_test_that_is_stopped_is_named_with_its_reason(error: Exception, monkeypatch) -> None:
    def stopped() -> bool:
        raise error

    monkeypatch.setattr(module, "_TESTS", {"one": stopped, "two": lambda: True})
    assert [outcome.problem for outcome in selftest()] == [f"stopped by {type(error).__name__}", None]
