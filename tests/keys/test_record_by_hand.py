"""A key record and its key shares, read by a page of Python that is written from FORMAT_KEYS.md, sections 21 and 22.

Checked against: that text alone, with json, hashlib and base64 of the standard library, Ed25519 by ``cryptography``,
and the curve in plain integers. What the package writes is read here, and what is wrong in it is found here too.
"""

from __future__ import annotations

import base64
import functools
import hashlib
import json
from typing import Any

import curve
import pytest
from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey
from parties import card, unlocked

from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.errors import DocumentError
from shares.group.edwards25519 import Scalar
from shares.group.montgomery import public_of
from shares.keys.deal import DealtKey, deal

NAMES = ("north-pier", "south-pier", "light-house")
P = 2**255 - 19


def b64(text: str) -> bytes:
    return base64.urlsafe_b64decode(text + "=" * (-len(text) % 4))


def canonical(value: Any) -> bytes:
    """RFC 8785 for what stands in these documents: texts, integers, lists and objects with ASCII names."""
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=False).encode()


def without(members: dict[str, Any], *names: str) -> dict[str, Any]:
    return {name: value for name, value in members.items() if name not in names}


def fingerprint(kind: str, members: dict[str, Any]) -> str:
    """FORMAT.md, section 1."""
    digest = hashlib.sha256(
        b"shares/v1/fingerprint" + kind.encode() + canonical(without(members, "fingerprint", "signatures"))
    ).digest()
    letters = base64.b32encode(digest[:20]).decode()
    return "-".join(letters[i : i + 4] for i in range(0, 32, 4))


def problems(record: dict[str, Any]) -> list[str]:
    """Whatever section 21 has a reader refuse, of what these tests change."""
    found = []
    if record["fingerprint"] != fingerprint("key-record", record):
        found.append("fingerprint")
    if len(record["commitments"]) != record["need"] or not 2 <= record["need"] <= len(record["custodians"]):
        found.append("need")
    for member in ("name", "index"):
        if len({str(one[member]).casefold() for one in record["custodians"]}) != len(record["custodians"]):
            found.append(member)
    points = [curve.decode(b64(one)) for one in record["commitments"]]
    if any(one is None or one == curve.IDENTITY or curve.multiply(curve.L, one) != curve.IDENTITY for one in points):
        found.append("point")
    for one in record["signatures"]:
        signer = {"time": one["time"], "card": one["card"]["fingerprint"], "record": without(record, "signatures")}
        try:
            key = Ed25519PublicKey.from_public_bytes(b64(one["card"]["ed25519"]))
            key.verify(b64(one["signature"]), b"shares/v1/sign/key-record" + canonical(signer))
        except InvalidSignature:
            found.append("signature")
    if not record["signatures"]:
        found.append("unsigned")
    return found


@functools.cache
def key() -> DealtKey:
    with unlocked("harbour-office") as dealer:
        return deal(
            Scalar.drawn(), 2, [card(name) for name in NAMES], label="Harbour release key, für alle", dealer=dealer
        )


def record() -> dict[str, Any]:
    return json.loads(key().record.to_file())


def test_what_the_package_writes_is_what_the_page_says() -> None:
    assert problems(record()) == []
    assert list(record()) == [
        *("kind", "version", "key", "epoch", "label", "created", "origin", "need", "custodians", "commitments"),
        *("generation", "previous", "fingerprint", "signatures"),
    ]


@pytest.mark.parametrize("name", NAMES)
def test_a_key_share_fits_the_record(name: str) -> None:
    share = json.loads(next(one for one in key().shares if one.custodian == name).to_file())
    own = next(one for one in record()["custodians"] if one["name"] == name)
    assert (share["index"], share["need"], share["record"]) == (own["index"], 2, record()["fingerprint"])
    assert share["digest"] == hashlib.sha256(b"shares/v1/envelope" + canonical(without(share, "digest"))).hexdigest()
    with unlocked(name) as party:
        scalar = KeyShare.parse(json.dumps(share).encode()).open(party.open)
    number = int.from_bytes(scalar.encode(), "little")
    points = [curve.decode(b64(one)) for one in record()["commitments"]]
    terms = [curve.multiply(share["index"] ** j, one) for j, one in enumerate(points) if one is not None]
    assert curve.multiply(number, curve.BASE) == curve.add(*terms)


def test_the_key_to_encrypt_to_is_the_image_of_the_one_to_verify_by() -> None:
    (_, y) = curve.decode(b64(record()["commitments"][0])) or (0, 0)
    u = (1 + y) * pow(1 - y, -1, P) % P
    assert public_of(key().record.public_key) == u.to_bytes(32, "little")


@pytest.mark.parametrize(
    ("changed", "wrong"),
    [
        ({"label": "Another key"}, "fingerprint"),
        ({"need": 3}, "need"),
        ({"signatures": []}, "unsigned"),
        ({"commitments": 1}, "need"),
        ({"created": "2026-01-01T00:00:00Z", "fingerprint": None}, "signature"),
        ({"custodians": 0}, "name"),
        ({"commitments": "small"}, "point"),
    ],
)
def test_both_readers_refuse_the_same(changed: dict[str, Any], wrong: str) -> None:
    members = record() | changed
    if changed.get("commitments") == 1:
        members["commitments"] = record()["commitments"][:1]
    if changed.get("commitments") == "small":
        small = base64.urlsafe_b64encode(curve.encode(curve.TORSION[1])).decode().rstrip("=")
        members["commitments"] = [record()["commitments"][0], small]
    if "custodians" in changed:
        members["custodians"] = [record()["custodians"][0], *record()["custodians"][:2]]
    if "fingerprint" in changed:
        members["fingerprint"] = fingerprint("key-record", members)
    assert wrong in problems(members)
    if wrong == "unsigned":
        assert not KeyRecord.parse(json.dumps(members).encode()).is_confirmed()
    else:
        with pytest.raises(DocumentError):
            KeyRecord.parse(json.dumps(members).encode())
