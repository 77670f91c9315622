"""Splitting: what a dealing holds, and what is refused before anything is drawn.

Checked against: FORMAT.md, sections 2 to 6, recomputed here with ``hashlib`` and schoolbook products; the bounds are
the format's own.
"""

from __future__ import annotations

import base64
import hashlib
import itertools
import json
from datetime import UTC, datetime, timedelta, timezone

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import CREATED, HARBOUR, flat, moduli, octets, presented, product, revealed, rules

from shares import clock
from shares.custody.recover import recover
from shares.custody.split import flat_rule, split
from shares.documents.base import MAX_FILE
from shares.documents.record import Record
from shares.documents.share import Share
from shares.errors import ParameterError
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.rule import Rule

SECRET = b"not a real key, made up for a test"


@given(rules(), moduli(), octets(1, 70), st.integers(1, 40))
def test_a_dealing_is_what_the_format_says(rule, modulus, secret, pad) -> None:
    dealt = split(Secret.of(secret), rule, label="Tide archive", field=Field(modulus), pad=pad, created=CREATED)
    record = json.loads(dealt.record.to_file())
    shares = [json.loads(share.to_file()) for share in dealt.shares]
    length = record["row_length"]
    assert length - 48 == -(-(4 + len(secret)) // pad) * pad
    assert record["created"] == "2026-12-01T07:00:00Z"
    assert [share["custodian"] for share in shares] == list(rule.paths())
    assert [tuple(tuple(map(tuple, path)) for path in share["paths"]) for share in shares] == list(
        rule.paths().values()
    )
    # Share commitments, the public matrix R and every custodian's check, from the files alone.
    committed = []
    for share in shares:
        header = {name: share[name] for name in sorted(share) if name in HEADER}
        core = json.dumps(header, separators=(",", ":"), sort_keys=True, ensure_ascii=False).encode()
        committed.append(hashlib.sha256(b"shares/v1/share" + core + b"".join(map(unpadded, share["rows"]))).digest())
    assert [custodian["share_commitment"] for custodian in record["custodians"]] == [one.hex() for one in committed]
    stream = b"shares/v1/check" + bytes.fromhex(record["set"]) + (1).to_bytes(4, "big") + modulus.to_bytes(2, "big")
    matrix = hashlib.shake_256(stream + b"".join(committed)).digest(16 * (length - 16))
    share, place = shares[-1], -1
    row, path = unpadded(share["rows"][place]), share["paths"][place]
    checks = record["checks"][[*nodes(record["rule"])].index([x for _, x in path[:-1]])]
    for i in range(16):
        line = matrix[i * (length - 16) : (i + 1) * (length - 16)]
        value = row[length - 16 + i]
        for factor, octet in zip(line, row, strict=False):
            value ^= product(factor, octet, modulus)
        power, x = 1, path[-1][1]
        for check in checks:
            value ^= product(power, unpadded(check)[i], modulus)
            power = product(power, x, modulus)
        assert value == 0


HEADER = ("kind", "version", "set", "epoch", "custodian", "field", "paths", "secret_commitment", "encrypted_file")


def unpadded(text: str) -> bytes:
    return base64.urlsafe_b64decode(text + "=" * (-len(text) % 4))


def nodes(rule: dict, at: tuple[int, ...] = ()):
    """Yield the places of the nodes, parents first, from left to right."""
    yield list(at)
    for x, child in enumerate(rule["from"], start=1):
        if isinstance(child, dict):
            yield from nodes(child, (*at, x))


def test_the_commitment_is_to_set_message_and_blind() -> None:
    dealt = split(Secret.of(SECRET), flat(1, 1), label="Tide archive")
    payload = revealed(dealt.shares[0].rows[0])
    committed = hashlib.sha256(b"shares/v1/secret" + dealt.record.set + payload[:-16]).digest()
    assert dealt.record.secret_commitment == dealt.shares[0].secret_commitment == committed
    assert payload[: 4 + len(SECRET)] == len(SECRET).to_bytes(4, "big") + SECRET


def test_two_dealings_of_one_secret_have_nothing_in_common() -> None:
    one, two = (split(Secret.of(SECRET), flat(2, 3), label="Tide archive") for _ in range(2))
    assert one.record.set != two.record.set
    assert one.record.secret_commitment != two.record.secret_commitment
    rows = [revealed(share.rows[0]) for dealt in (one, two) for share in dealt.shares]
    assert len(set(rows)) == 6


@pytest.mark.parametrize("length", [1, 2, 11, 12, 13, 65_535, 65_536])
def test_secrets_from_one_byte_to_64_kibibytes_come_back_from_their_files(length: int) -> None:
    secret = bytes(i * 7 % 251 for i in range(length))
    dealt = split(Secret.of(secret), flat(2, 3), label="Tide archive")
    files = [share.to_file() for share in dealt.shares]
    assert max(map(len, files)) <= MAX_FILE
    recovery = recover(presented(Share.parse(file) for file in files[1:]), Record.parse(dealt.record.to_file()))
    assert revealed(recovery.secret) == secret


# Refusals.


@pytest.mark.parametrize("length", [0, 65_537])
def test_an_empty_or_too_large_secret_is_refused(length: int) -> None:
    with pytest.raises(ParameterError, match="the secret is"):
        split(Secret(length), flat(2, 3), label="Tide archive")


@pytest.mark.parametrize(("need", "total"), [(0, 3), (-1, 3), (4, 3), (1, 0), (1, 256), (256, 256)])
def test_a_threshold_or_total_out_of_range_is_refused(need: int, total: int) -> None:
    with pytest.raises(ParameterError):
        flat_rule(need, [f"pier {i}" for i in range(total)])


@pytest.mark.parametrize(
    "names", [["a", "a"], ["Pier", "pier"], ["stra\u00dfe", "STRASSE"], ["a", ""], ["a", "x/y"], ["a", "n\u0303"]]
)
def test_custodians_that_cannot_be_told_apart_or_named_are_refused(names: list[str]) -> None:
    with pytest.raises(ParameterError):
        flat_rule(1, names)


@pytest.mark.parametrize("names", [("Pier", "pier"), ("a", "..")])
def test_a_rule_made_by_hand_is_checked_like_a_flat_one(names: tuple[str, ...]) -> None:
    """Case was left to the record, and its refusal was no error of this package's tree."""
    with pytest.raises(ParameterError):
        split(Secret.of(SECRET), Rule(1, (Rule(1, names[:1]), *names[1:])), label="Tide archive")


@pytest.mark.parametrize("label", ["", "x" * 501, "a\nb", "a\x00", "\u202eabc", "\ud800"])
def test_a_label_that_a_page_cannot_carry_is_refused(label: str) -> None:
    with pytest.raises(ParameterError, match="label"):
        split(Secret.of(SECRET), flat(2, 3), label=label)


@pytest.mark.parametrize("pad", [0, -1, 4097])
def test_a_pad_out_of_range_is_refused(pad: int) -> None:
    with pytest.raises(ParameterError, match="pad"):
        split(Secret.of(SECRET), flat(2, 3), label="Tide archive", pad=pad)


@pytest.mark.parametrize(
    "moment",
    [
        datetime(2026, 12, 1),
        datetime(2026, 12, 1, tzinfo=timezone(timedelta(hours=1))),
        datetime(2026, 12, 1, microsecond=1, tzinfo=UTC),
    ],
)
def test_a_time_that_documents_do_not_carry_is_refused(moment: datetime) -> None:
    with pytest.raises(ParameterError, match="UTC"):
        split(Secret.of(SECRET), flat(2, 3), label="Tide archive", created=moment)


def test_without_a_time_the_present_one_is_written() -> None:
    before = clock.now()
    created = split(Secret.of(SECRET), flat(2, 3), label="Tide archive").record.created
    assert before <= created <= clock.now()


def test_a_share_that_would_not_fit_its_file_is_refused_before_anything_is_drawn(monkeypatch) -> None:
    def never(*_: object) -> None:
        raise AssertionError("drawn")

    monkeypatch.setattr("shares.custody.split.deal", never)
    with pytest.raises(ParameterError, match="larger than 1 MiB"):
        split(Secret.of(bytes(65_536)), Rule(1, ("north-pier",) * 12), label="Tide archive")


def chain(levels: int, leaf: Rule | str) -> Rule | str:
    """A node over a node over ... a leaf, each with one child."""
    return leaf if levels == 0 else Rule(1, (chain(levels - 1, leaf),))


LONG = "\u4e00" * 40
LARGE_RULES = {
    "more nodes than places": (Rule(1, tuple(chain(7, f"pier {i}") for i in range(200))), None),
    "1,000 names": (Rule(4, tuple(Rule(2, tuple(f"pier {i} {j}" for j in range(250))) for i in range(4))), None),
    "one custodian in 1,000 deep places": (
        Rule(1, tuple(chain(6, Rule(1, ("north-pier",) * 4)) for _ in range(250))),
        "a custodian's share would be larger than 1 MiB",
    ),
    "1,000 long names": (
        Rule(1, tuple(Rule(2, tuple(f"{i} {j:3} {'x' * 58}" for j in range(100, 350))) for i in range(4))),
        "the rule in words would be longer than 65,536 characters",
    ),
    "far more nodes than places": (
        Rule(1, tuple(chain(4, Rule(1, tuple(chain(2, f"{i} {j} {LONG}") for j in range(4)))) for i in range(250))),
        "its record would be larger than 1 MiB",
    ),
}


@pytest.mark.parametrize("name", LARGE_RULES)
def test_a_large_rule_either_gives_files_that_parse_or_is_refused(name: str) -> None:
    """The limits of the format: 1,000 places, 8 levels, 1 MiB a file, 65,536 characters of rule in words."""
    rule, refusal = LARGE_RULES[name]
    if refusal:
        with pytest.raises(ParameterError, match=refusal):
            split(Secret.of(bytes(500)), rule, label="\u4e00" * 500)
        return
    dealt = split(Secret.of(SECRET), rule, label="\u4e00" * 500)
    assert Record.parse(dealt.record.to_file()).fingerprint == dealt.record.fingerprint
    for share in itertools.islice(dealt.shares, 3):
        assert Share.parse(share.to_file()).is_whole()


def test_after_a_split_only_the_rows_of_the_shares_are_open_and_close_wipes_them() -> None:
    from shares import memory

    before = set(memory._open)
    secret = Secret.of(SECRET)
    dealt = split(secret, Rule(2, (Rule(2, HARBOUR[:3]), *HARBOUR[3:5])), label="Tide archive")
    assert len(set(memory._open) - before) == 1 + 5
    dealt.close()
    assert len(set(memory._open) - before) == 1
    assert revealed(secret) == SECRET
