"""Write tests/vectors/paper_v1.json: paper forms and typed lines by FORMAT.md, section 11, and forms to be refused.

Run as ``python make_paper_v1.py [FOLDER]``. Shares no code with the package: field, code and form are worked out here
from the page alone, the code by dividing polynomials. Nothing in it is random: what stands for random bytes is SHAKE256
of a name.
"""

from __future__ import annotations

import base64
import hashlib
import json
import sys
from pathlib import Path
from typing import Any

VECTORS = Path(__file__).parents[1]
LETTERS = "ABCDEFGHIJKLMNOPQRSTUVWXYZ234567"
SUITES = {"mlkem768-x25519": 2, "x25519": 3}
SOURCE = {
    "title": "The documents of `shares`, format version 1",
    "section": "11",
    "link": "shares/documents/FORMAT.md",
    "obtained": "worked out by tests/vectors/make/make_paper_v1.py, which shares no code with the package",
}


def product(a: int, b: int) -> int:
    """Multiply in GF(2)[a] / (a^5 + a^2 + 1)."""
    whole = 0
    for i in range(5):
        whole ^= (a << i) * (b >> i & 1)
    for i in range(8, 4, -1):
        whole ^= (0b100101 << (i - 5)) * (whole >> i & 1)
    return whole


def generator() -> list[int]:
    """(x - a) (x - a^2) ... (x - a^6), from the highest power."""
    g, root = [1], 1
    for _ in range(6):
        root = product(root, 2)
        g = [a ^ product(root, b) for a, b in zip([*g, 0], [0, *g], strict=True)]
    return g


def remainder(word: list[int]) -> list[int]:
    rest, g = list(word), generator()
    for i in range(len(rest) - 6):
        factor = rest[i]
        for j, coefficient in enumerate(g):
            rest[i + j] ^= product(factor, coefficient)
    return rest[-6:]


def fixed_end() -> list[int]:
    """The last six of the word with r(a) = 1 and r(a^j) = 0 for j = 2, ..., 6: a multiple of the product of those."""
    h, root = [1], 2
    for _ in range(5):
        root = product(root, 2)
        h = [a ^ product(root, b) for a, b in zip([*h, 0], [0, *h], strict=True)]
    value = 0
    for coefficient in h:
        value = product(value, 2) ^ coefficient
    factor = next(f for f in range(32) if product(f, value) == 1)
    return [product(factor, coefficient) for coefficient in h]


def line(number: int, letters: str) -> str:
    data = [number - 1, *(LETTERS.index(letter) for letter in letters)]
    end = [a ^ b for a, b in zip(remainder([*data, *[0] * 6]), fixed_end(), strict=True)]
    return "".join(LETTERS[symbol] for symbol in [*data, *end])


def number(value: int) -> bytes:
    digits = [value % 128]
    while value >= 128:
        value //= 128
        digits.append(value % 128 + 128)
    return bytes(reversed(digits))


def raw(text: str) -> bytes:
    return base64.urlsafe_b64decode(text + "=" * (-len(text) % 4))


def fingerprint(text: str) -> bytes:
    return base64.b32decode(text.replace("-", ""))


def parts(share: dict[str, Any]) -> list[bytes]:
    """The body, part by part in the order of the page."""
    wrapping = share.get("wrapping")
    kind, wrapped = 0, b""
    if wrapping and wrapping["method"] == "passphrase":
        kind = 1
        wrapped = number(wrapping["memory"]) + bytes([wrapping["passes"], wrapping["lanes"]])
        wrapped += raw(wrapping["salt"]) + raw(wrapping["commitment"])
    elif wrapping:
        kind, key = SUITES[wrapping["suite"]], raw(wrapping["key"])
        wrapped = fingerprint(wrapping["card"]) + raw(wrapping["commitment"]) + number(len(key)) + key
    what = 32 + kind + 8 * (share["record"] is not None) + 16 * (share["encrypted_file"] is not None)
    name = share["custodian"].encode()
    rows = raw(share["sealed"]) if wrapping else b"".join(map(raw, share["rows"]))
    length = (len(rows) - 16 * bool(wrapping)) // len(share["paths"])
    paths = number(len(share["paths"]))
    for path in share["paths"]:
        paths += bytes([len(path), *(value for step in path for value in step)])
    return [
        bytes([what]),
        bytes.fromhex(share["set"]),
        number(share["epoch"]),
        bytes([len(name)]) + name,
        bytes([int(share["field"], 16) % 256]),
        paths,
        bytes.fromhex(share["secret_commitment"]),
        bytes.fromhex(share["encrypted_file"] or ""),
        fingerprint(share["record"]) if share["record"] else b"",
        wrapped,
        number(length),
        rows,
    ]


def form(body: bytes, *, blocks: int | None = None, filling: bytes = b"") -> bytes:
    blocks = -(-(len(body) + 5) // 15) if blocks is None else blocks
    whole = body + filling + bytes(max(0, blocks * 15 - 5 - len(body) - len(filling)))
    check = hashlib.sha256(b"shares/v1/paper" + bytes([blocks]) + whole).digest()[:4]
    return bytes([blocks]) + check + whole


def made_up(name: str, length: int) -> str:
    data = hashlib.shake_256(name.encode()).digest(length)
    return base64.urlsafe_b64encode(data).decode().rstrip("=")


def shares() -> dict[str, dict[str, Any]]:
    """The documents, of which some are wrapped in name only: their sealed bytes open to nothing."""
    golden = VECTORS / "golden" / "v1"
    bare = json.loads((golden / "flat" / "north-pier.share.json").read_text())
    two = json.loads((golden / "tree" / "light-house.share.json").read_text())
    facts = {name: value for name, value in bare.items() if name not in ("rows", "digest")} | {"kind": "wrapped-share"}
    commitment = made_up("commitment", 32)
    cost = {"memory": 65536, "passes": 3, "lanes": 4, "salt": made_up("salt", 16), "commitment": commitment}
    card = {"method": "card", "card": two["record"], "commitment": commitment}
    sealed = made_up("sealed", 96 + 16)
    hybrid = card | {"suite": "mlkem768-x25519", "key": made_up("hybrid", 1120 + 48)}
    curve = card | {"suite": "x25519", "key": made_up("curve", 32 + 48)}
    later = {"epoch": 2**32 - 1, "custodian": "Hafenb\u00fcro \u6e2f", "field": "0x1f5", "record": None}
    return {
        "a bare share of one point": bare,
        "a bare share of two points, one below a node": two,
        "the last epoch, another field, no record, an encrypted file": bare | later | {"encrypted_file": "a5" * 32},
        "wrapped by passphrase": facts | {"wrapping": {"method": "passphrase", **cost}, "sealed": sealed},
        "wrapped for a card, hybrid": facts | {"wrapping": hybrid, "sealed": sealed},
        "wrapped for a card, curve alone": facts | {"wrapping": curve, "sealed": sealed},
    }


def refused() -> dict[str, bytes]:
    """Forms that are wrong in one respect each. Where nothing else is said, their check is right."""
    bare = parts(shares()["a bare share of one point"])
    body, good = b"".join(bare), form(b"".join(bare))
    locked = b"".join(parts(shares()["wrapped by passphrase"]))

    def changed(place: int, part: bytes) -> bytes:
        return form(b"".join([*bare[:place], part, *bare[place + 1 :]]))

    return {
        "nothing": b"",
        "the check is wrong in one bit": bytes([*good[:4], good[4] ^ 1, *good[5:]]),
        "a row is wrong in one bit": bytes([*good[:-20], good[-20] ^ 128, *good[-19:]]),
        "the last block is missing": good[:-15],
        "a block too many is given": good + bytes(15),
        "a byte too many is given": good + b"\0",
        "a block of zeros more than needed": form(body, blocks=len(good) // 15 + 1),
        "what fills the last block is not zero": form(body, filling=b"\1"),
        "the body ends within a row": form(body[:-30]),
        "version 0": changed(0, bytes([bare[0][0] - 32])),
        "version 2": changed(0, bytes([bare[0][0] + 32])),
        "a kind that is not known": changed(0, bytes([bare[0][0] + 4])),
        "a record that is not there": changed(0, bytes([bare[0][0] - 8])),
        "epoch 0": changed(2, b"\0"),
        "epoch 2^32": changed(2, number(2**32)),
        "a number with a leading zero": changed(2, b"\x80\1"),
        "a number without an end": changed(2, b"\xff" * 6),
        "no name": changed(3, b"\0"),
        "a name that is not UTF-8": changed(3, b"\2\xff\xfe"),
        "a name of two lines": changed(3, b"\3a\nb"),
        "a reducible polynomial": changed(4, b"\x1c"),
        "no paths": changed(5, b"\0"),
        "a path of no steps": changed(5, b"\1\0"),
        "a point at 0": changed(5, b"\1\1\3\0"),
        "rows too short": form(b"".join(bare[:10]) + number(52) + bare[11][:52]),
        "wrapped, no passes": form(locked.replace(number(65536) + b"\3", number(65536) + b"\0")),
        "wrapped, a byte of the tag missing": form(locked[:-15]),
    }


def main(folder: Path) -> None:
    valid, invalid = [], []
    for comment, share in shares().items():
        data = form(b"".join(parts(share)))
        text = base64.b32encode(data).decode()
        lines = [line(i + 1, text[24 * i : 24 * i + 24]) for i in range(len(data) // 15)] if len(data) <= 480 else []
        test = {"tcId": len(valid) + 1, "comment": comment, "flags": ["Right"], "share": share, "form": data.hex()}
        valid.append(test | {"lines": lines, "result": "valid"})
    for comment, data in refused().items():
        at = len(valid) + len(invalid) + 1
        invalid.append({"tcId": at, "comment": comment, "flags": ["Wrong"], "form": data.hex(), "result": "invalid"})
    notes = {
        "Right": ("BASIC", "A form as a writer makes it.", "a sheet cannot be read"),
        "Wrong": ("MALFORMED", "A form that no writer makes.", "a share that is not the one dealt"),
    }
    body = {
        "algorithm": "paper form and typed lines of a share",
        "schema": "paper",
        "numberOfTests": len(valid) + len(invalid),
        "notes": {
            flag: {"bugType": kind, "description": what, "effect": effect, "links": []}
            for flag, (kind, what, effect) in notes.items()
        },
        "testGroups": [{"source": SOURCE, "tests": valid}, {"source": SOURCE, "tests": invalid}],
    }
    (folder / "paper_v1.json").write_text(json.dumps(body, indent=1, ensure_ascii=True) + "\n")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else VECTORS)
