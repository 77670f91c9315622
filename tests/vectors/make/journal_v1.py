"""The golden sample of a journal: one entry of every event, signed by two parties, beside the set that it tells of.

Source: shares/documents/FORMAT_EVIDENCE.md, section 16.
May import: the standard library and the `_v1` modules beside it.
Secret: nothing; the keys are those of `wrapped_v1`, made up and worthless.
Does not: test anything. test_make_set_v1.py and tests/history/test_golden.py do.
"""

import base64
import hashlib

import wrapping_v1 as by_hand
from wrapped_v1 import private_keys
from wrapping_v1 import Json, b64

DUE = "2026-02-01T12:00:00Z"
CHALLENGE = "c4" * 32
SCRIPT = "5c" * 32


def events(record: Json, card: Json) -> list[Json]:
    """Give one event of each kind, in an order in which they could have happened."""
    piers = ["north-pier", "south-pier"]
    dealt = [{"name": custodian["name"], "packed": "bare", "card": None} for custodian in record["custodians"]]
    dealt[0] |= {"packed": "passphrase"}
    dealt[-1] |= {"packed": "card", "card": card["fingerprint"]}
    return [
        {"what": "dealt", "set": record["set"], "epoch": 1, "record": record["fingerprint"], "custodians": dealt,
         "practice": None},
        {"what": "introduced", "custodian": "registrar", "card": card["fingerprint"], "remark": None},
        {"what": "acknowledged", "custodian": "north-pier", "remark": "form signed by hand"},
        {"what": "delivered", "custodian": "north-pier", "serial": "HT-0001", "channel": "own boat", "remark": None},
        {"what": "received", "custodian": "north-pier", "serial": "HT-0001", "remark": None},
        {"what": "copied", "custodian": "north-pier", "copy": "HT-0002", "remark": "on paper, for the dry-dock"},
        {"what": "transcribed", "custodian": "north-pier", "persons": ["A. Keeper", "B. Keeper"], "remark": None},
        {"what": "handed-on", "custodian": "south-pier", "to": "C. Keeper", "remark": None},
        {"what": "challenged", "challenge": CHALLENGE, "custodians": piers, "due": DUE, "drill": None},
        {"what": "attested", "challenge": CHALLENGE, "custodian": "north-pier", "grade": "content",
         "result": "intact", "attributed": True, "late": False, "opened": True, "place": "the pier house",
         "serial": "HT-0001"},
        {"what": "drill-opened", "kind": "recovery", "scope": "from storage", "objectives": ["find every pack"],
         "custodians": piers, "target": 14400},
        {"what": "brought", "drill": 11, "custodians": piers, "persons": ["A. Keeper", "C. Keeper"]},
        {"what": "rehearsed", "drill": 11, "custodians": piers, "persons": ["A. Keeper", "C. Keeper"],
         "passed": False, "outcome": "not enough shares", "seconds": 5400, "probe": None, "probe_seconds": None},
        {"what": "drill-closed", "drill": 11, "passed": False},
        {"what": "recovered", "custodians": piers, "persons": ["A. Keeper"], "reason": "the backup store burnt",
         "disposition": "replace", "by": DUE},
        {"what": "departed", "person": "B. Keeper", "custodians": ["north-pier"], "due": DUE, "remark": None},
        {"what": "incident", "custodians": ["south-pier"], "persons": [], "exposed": True, "due": DUE,
         "remark": "seal HT-0003 found broken, “as if by a gull” \u2013 Möwe"},
        {"what": "resolved", "entry": 17, "action": None, "how": "key replaced", "remark": None},
        {"what": "step", "script": SCRIPT, "step": 7, "initials": "AK", "repeats": False, "remark": None},
        {"what": "exception", "remark": "the clock of the machine was an hour late", "remedy": "set by the witness",
         "script": SCRIPT, "step": 8, "initials": "BK"},
        {"what": "set-aside", "remark": "12 bytes of a line that a stopped run did not finish"},
        {"what": "noted", "remark": 'paths with \\ and quotation marks " stay as they are'},
        {"what": "destroyed", "custodian": "south-pier", "copy": "original", "by": "C. Keeper",
         "witness": "auditor-east", "method": "cross-cut"},
        {"what": "lost", "custodian": "south-pier", "copy": "HT-0004", "by": "C. Keeper", "witness": "auditor-east",
         "reason": "washed off the quay"},
        {"what": "retired", "keep_until": "2028-02-01T12:00:00Z", "remark": None},
    ]  # fmt: skip


def line_digest(line: bytes) -> bytes:
    return hashlib.sha256(b"shares/v1/journal" + line).digest()


def lines(record: Json, cards: list[Json]) -> list[bytes]:
    """Write the journal of a set."""
    return chained(events(record, cards[-1]), cards, {4: [{"path": "record.json", "digest": "1d" * 32}]})


def chained(told: list[Json], cards: list[Json], named: dict[int, list[Json]] | None = None) -> list[bytes]:
    """Write a journal: the first party signs every entry, the second, where there is one, every other."""
    made: list[bytes] = []
    for i, event in enumerate(told):
        unsigned: Json = {
            "kind": "journal-entry",
            "version": 1,
            "sequence": i + 1,
            "time": f"2026-01-{i + 5:02}T09:{i:02}:00Z",
            "previous": line_digest(made[-1]).hex() if made else None,
            "event": event,
            "documents": (named or {}).get(i, []),
            "cards": cards[i : i + 1],
        }
        signatures = []
        for card in cards[: 1 + i % 2]:
            text = by_hand.signed("journal-entry", {"card": card["fingerprint"], "entry": unsigned})
            signature = private_keys(card["name"]).signing.sign(text)
            signatures.append({"card": card["fingerprint"], "signature": b64(signature)})
        made.append(by_hand.canonical({**unsigned, "signatures": signatures}))
    return made


def head(line: bytes) -> str:
    """Give what is read aloud of a journal that ends in this line."""
    letters = base64.b32encode(line_digest(line)[:20]).decode()
    return "-".join(letters[i : i + 4] for i in range(0, 32, 4))


def text(record: Json, cards: list[Json]) -> str:
    """Give the file."""
    return "".join(line.decode() + "\n" for line in lines(record, cards))
