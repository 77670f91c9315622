"""Check a journal by its published format alone: chain, sequence and signatures. Nothing of the package is used.

Source: FORMAT.md, sections 1 and 9; FORMAT_EVIDENCE.md, section 16; FIPS 180-4 by hashlib; RFC 8032 by the library
``cryptography``. Canonical JSON (RFC 8785) of what stands in a journal is what ``json`` writes with sorted names and no
white space, since every number is a small integer, every name ASCII, and no text holds a control character.
"""

from __future__ import annotations

import base64
import hashlib
import json
import sys
from pathlib import Path
from typing import Any

from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey


def canonical(value: Any) -> bytes:
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=False).encode()


def digest(line: bytes) -> bytes:
    return hashlib.sha256(b"shares/v1/journal" + line).digest()


def head(number: int, line: bytes) -> tuple[int, str]:
    letters = base64.b32encode(digest(line)[:20]).decode()
    return number, "-".join(letters[i : i + 4] for i in range(0, 32, 4))


def is_signed(entry: dict[str, Any], one: dict[str, str], cards: dict[str, dict[str, Any]]) -> bool:
    if one["card"] not in cards:
        return False
    unsigned = {name: value for name, value in entry.items() if name != "signatures"}
    text = b"shares/v1/sign/journal-entry" + canonical({"card": one["card"], "entry": unsigned})
    public = base64.urlsafe_b64decode(cards[one["card"]]["ed25519"] + "=")
    try:
        Ed25519PublicKey.from_public_bytes(public).verify(base64.urlsafe_b64decode(one["signature"] + "=="), text)
    except InvalidSignature:
        return False
    return True


def check(data: bytes) -> tuple[list[int], tuple[int, str] | None]:
    """Return the lines that are wrong, from 1, and the head."""
    wrong, before, number, line = [], None, 0, b""
    cards: dict[str, dict[str, Any]] = {}
    for line in data.split(b"\n")[:-1]:
        number += 1
        entry = json.loads(line)
        cards |= {card["fingerprint"]: card for card in entry["cards"]}
        fits = entry["sequence"] == number and entry["previous"] == (before and before.hex())
        signed = all(is_signed(entry, one, cards) for one in entry["signatures"])
        if not (fits and signed and canonical(entry) == line):
            wrong.append(number)
        before = digest(line)
    return wrong, head(number, line) if number else None


if __name__ == "__main__":
    lines, stands = check(Path(sys.argv[1]).read_bytes())
    print(json.dumps({"wrong": lines, "head": stands}))
    sys.exit(4 if lines else 0)
