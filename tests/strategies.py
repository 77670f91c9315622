"""What the tests draw from, weighted to edges, and what they do to shares.

Everything here is made up: no secret in the tests protects anything. The dealer below follows FORMAT.md, sections 2 to
6, with the package's own parts, but lets a test bend the dealing at any stage, as a faulty or dishonest dealer would.
"""

from __future__ import annotations

import itertools
import json
import secrets
from collections.abc import Callable, Iterable, Iterator, Sequence
from datetime import UTC, datetime
from typing import Any

from hypothesis import strategies as st

from shares.custody.payload import commitment, make_payload
from shares.custody.presented import Presented
from shares.custody.split import Dealt
from shares.documents.record import Custodian, Record
from shares.documents.share import Share
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.consistency import check_matrix, checks_of
from shares.sharing.rule import Dealing, Path, Point, Rule, deal

HARBOUR = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock", "east-quay", "west-quay", "signal-tower")
"""Custodians of the demo harbour; eight, so that every k-of-n up to eight has its names."""

MODULI = (0x11B, 0x11D, 0x1F5)
"""The default polynomial and two others, both irreducible (checked against published lists in tests/field)."""

CREATED = datetime(2026, 12, 1, 7, 0, 0, tzinfo=UTC)
EDGE_BYTES = (0x00, 0x01, 0x7F, 0x80, 0xFE, 0xFF)

# Field: products by shift and add, independent of the package, for references written in the tests.


def product(a: int, b: int, modulus: int = 0x11B) -> int:
    """Multiply in GF(2)[x]/(modulus): schoolbook product, then long division."""
    whole = 0
    for i in range(8):
        if b >> i & 1:
            whole ^= a << i
    for i in range(14, 7, -1):
        if whole >> i & 1:
            whole ^= modulus << (i - 8)
    return whole


def inverse(a: int, modulus: int = 0x11B) -> int:
    """Find the inverse by trying all."""
    return next(b for b in range(256) if product(a, b, modulus) == 1)


# Strategies.


def octets(least: int = 0, most: int = 64) -> st.SearchStrategy[bytes]:
    """Byte strings, constant ones of edge bytes among them."""
    edges = st.builds(lambda b, n: bytes([b]) * n, st.sampled_from(EDGE_BYTES), st.integers(least, most))
    return st.one_of(st.binary(min_size=least, max_size=most), edges)


def moduli() -> st.SearchStrategy[int]:
    """Field polynomials: the default most often."""
    return st.sampled_from(MODULI)


@st.composite
def thresholds(draw: st.DrawFn, most: int = 8) -> tuple[int, int]:
    """(k, n) with 1 <= k <= n <= most; k = 1 and k = n often."""
    total = draw(st.integers(1, most))
    return draw(st.one_of(st.just(1), st.just(total), st.integers(1, total))), total


@st.composite
def rules(draw: st.DrawFn, *, depth: int = 3, most: int = 9) -> Rule:
    """Rules of up to ``most`` leaves and ``depth`` nodes deep, with weights: a name may stand several times."""
    left = [most]

    def node(levels: int) -> Rule:
        count = draw(st.integers(1, min(4, max(1, left[0]))))
        left[0] -= count
        children: list[Rule | str] = []
        for _ in range(count):
            if levels > 1 and left[0] > 1 and draw(st.integers(0, 2)) == 0:
                children.append(node(levels - 1))
            else:
                children.append(draw(st.sampled_from(HARBOUR)))
        need = draw(st.one_of(st.just(1), st.just(count), st.integers(1, count)))
        return Rule(need, tuple(children))

    return node(depth)


# Shares: looking into them, bending them.


def revealed(secret: Secret) -> bytes:
    """Copy a secret out, to compare it in a test. Nothing else here does."""
    with secret.view() as view:
        return bytes(view)


def copy_of(secret: Secret) -> Secret:
    """A secret of the same bytes, in its own memory."""
    return Secret.of(revealed(secret))


def flat(need: int, total: int) -> Rule:
    """The rule need-of-total over the harbour's custodians."""
    return Rule(need, HARBOUR[:total])


def presented(shares: Iterable[Share]) -> list[Presented]:
    """Shares as they are given, each called by its custodian's name."""
    return [Presented(share.custodian, share) for share in shares]


def resealed(share: Share, **changes: Any) -> Share:
    """The share with some members changed and its own digest made to fit again, as a forger would."""
    changed = share.model_copy(update=changes)
    return changed.model_copy(update={"digest": changed._digest()})


def with_rows(share: Share, bend: Callable[[bytearray], None]) -> tuple[Secret, ...]:
    """New rows of a share, the first of them bent."""
    first = bytearray(revealed(share.rows[0]))
    bend(first)
    return (Secret.of(first), *(copy_of(row) for row in share.rows[1:]))


def flipped(bit: int) -> Callable[[bytearray], None]:
    """A change of one bit, for ``with_rows``."""

    def bend(row: bytearray) -> None:
        row[bit // 8] ^= 1 << bit % 8

    return bend


def bits_flipped(data: bytes) -> Iterator[tuple[int, bytes]]:
    """Every way to flip one bit: (bit number, the changed bytes)."""
    for bit in range(8 * len(data)):
        changed = bytearray(data)
        changed[bit // 8] ^= 1 << bit % 8
        yield bit, bytes(changed)


def crooked_split(
    secret: bytes,
    rule: Rule,
    *,
    field: Field | None = None,
    epoch: int = 1,
    set_id: bytes | None = None,
    bend: Callable[[Dealing], None] = lambda dealing: None,
    bend_checks: Callable[[list[tuple[bytes, ...]]], Sequence[tuple[bytes, ...]]] = lambda checks: checks,
    facts: dict[str, Any] | None = None,
) -> Dealt:
    """Deal as FORMAT.md says, but bend the dealing before the shares are committed to, or the record after.

    Args:
        bend: changes rows or coefficients in place.
        bend_checks: changes the checks that the record will hold.
        facts: members of the record to write otherwise than the shares say.
    """
    field = field or Field()
    set_id = set_id or secrets.token_bytes(16)
    payload = make_payload(field, Secret.of(secret))
    secret_commitment = commitment(set_id, payload)
    dealing = deal(field, rule, payload)
    bend(dealing)
    shares = [
        Share.of(
            set_id=set_id, epoch=epoch, custodian=name, points=points, field=field, secret_commitment=secret_commitment
        )
        for name, points in dealing.points.items()
    ]
    commitments = [share.commitment() for share in shares]
    matrix = check_matrix(set_id, epoch, field, commitments, len(payload))
    members: dict[str, Any] = {
        "set_id": set_id,
        "epoch": epoch,
        "label": "Tide archive backup root",
        "created": CREATED,
        "field": field,
        "row_length": len(payload),
        "rule": rule,
        "custodians": [
            Custodian(name=share.custodian, share_commitment=committed, attestation_key=share.attestation_key())
            for share, committed in zip(shares, commitments, strict=True)
        ],
        "checks": bend_checks([checks_of(field, matrix, polynomial) for polynomial in dealing.polynomials]),
        "secret_commitment": secret_commitment,
    }
    record = Record.of(**(members | (facts or {})))
    notes = {"label": record.label, "rule": rule.words(), "record": record.fingerprint}
    return Dealt(record, tuple(share.noted(**notes) for share in shares))


# Rules by brute force, to hold the package's quorums against.


def is_quorum(paths: Sequence[Path], depth: int = 0) -> bool:
    """Say whether points at these paths are a minimal quorum: at every node exactly ``need`` children, one row each."""
    needs = {path[depth][0] for path in paths}
    below = {x: [path for path in paths if path[depth][1] == x] for x in {path[depth][1] for path in paths}}
    if len(needs) != 1 or len(below) != next(iter(needs)):
        return False
    return all(
        len(inner) == 1 if any(len(path) == depth + 1 for path in inner) else is_quorum(inner, depth + 1)
        for inner in below.values()
    )


def all_quorums(paths: Sequence[Path]) -> set[frozenset[int]]:
    """Every minimal quorum among ``paths``, found by trying every subset."""
    subsets = itertools.chain.from_iterable(
        itertools.combinations(range(len(paths)), size) for size in range(1, len(paths) + 1)
    )
    return {frozenset(chosen) for chosen in subsets if is_quorum([paths[i] for i in chosen])}


def satisfies(rule: Rule, held: set[Path], path: Path = ()) -> bool:
    """Say whether whoever holds the points at these paths is authorised: follows the rule, not the paths."""
    met = 0
    for x, child in enumerate(rule.children, start=1):
        place = (*path, (rule.need, x))
        met += satisfies(child, held, place) if isinstance(child, Rule) else place in held
    return met >= rule.need


def points_of(dealing: Dealing) -> list[Point]:
    """All points of a dealing, custodian by custodian."""
    return [point for points in dealing.points.values() for point in points]


# Policies: as the data that a TOML reader would give, and as text.

PEOPLE = ("keeper one", "keeper two", "keeper three", "keeper four")
SITES = ("pier house", "dock house", "light house")
MANAGERS = ("harbour master", "board of the trust", "keeper one")


@st.composite
def policies(draw: st.DrawFn, *, most: int = 6, heaviest: int = 3) -> dict[str, Any]:
    """Policies of up to ``most`` custodians and three groups, each a part of those after it; all of them used."""
    names = HARBOUR[: draw(st.integers(1, most))]
    custodians = [
        {
            "name": name,
            "person": draw(st.sampled_from(PEOPLE)),
            "site": draw(st.sampled_from(SITES)),
            "reports_to": draw(st.sampled_from(MANAGERS)),
            "weight": draw(st.one_of(st.just(1), st.integers(1, heaviest))),
        }
        for name in names
    ]
    weights = {custodian["name"]: custodian["weight"] for custodian in custodians}
    nodes: dict[str, dict[str, Any]] = {}
    for name in [*("east", "west", "all")[: draw(st.integers(0, 3))], "rule"]:
        choice = [*names, *nodes]
        chosen = draw(st.lists(st.sampled_from(choice), min_size=1, max_size=4, unique=True))
        if name == "rule":
            used = {child for node in nodes.values() for child in node["from"]}
            chosen += [child for child in choice if child not in used and child not in chosen]
        total = sum(weights.get(child, 1) for child in chosen)
        nodes[name] = {"need": draw(st.one_of(st.just(1), st.just(total), st.integers(1, total))), "from": chosen}
    rule = nodes.pop("rule")
    return {"label": "Tide archive", "custodian": custodians, "group": nodes, "rule": rule}


LISTS = ("custodian", "site", "line", "medium")
"""The keys of a policy that hold lists of tables."""


def toml_of(data: dict[str, Any]) -> bytes:
    """Write policy data as TOML; the JSON forms of text, numbers, booleans and lists are TOML as well."""

    def holds_tables(value: Any) -> bool:
        return isinstance(value, dict) or (isinstance(value, list) and any(isinstance(one, dict) for one in value))

    def lines(table: dict[str, Any]) -> str:
        plain = {key: value for key, value in table.items() if key != "custodian" and not holds_tables(value)}
        return "".join(f"{key} = {json.dumps(value, ensure_ascii=False)}\n" for key, value in plain.items())

    text = lines(data)
    for key in LISTS:
        text += "".join(f"[[{key}]]\n{lines(table)}" for table in data.get(key, []))
    if "rates" in data:
        text += f"[rates]\n{lines(data['rates'])}"
    for name, group in data.get("group", {}).items():
        text += f"[group.{json.dumps(name, ensure_ascii=False)}]\n{lines(group)}"
    return (text + f"[rule]\n{lines(data['rule'])}" if "rule" in data else text).encode()


def authorised(data: dict[str, Any], held: Iterable[str], node: dict[str, Any] | None = None) -> bool:
    """Say whether custodians satisfy a policy, by its data alone: a name counts for its weight, a group for one."""
    held, node = set(held), node or data["rule"]
    weights = {custodian["name"]: custodian["weight"] for custodian in data["custodian"]}
    met = 0
    for name in node["from"]:
        if name in weights:
            met += weights[name] if name in held else 0
        else:
            met += authorised(data, held, data["group"][name])
    return met >= node["need"]


def sets_of(things: Iterable[str]) -> list[frozenset[str]]:
    """Every set of them, the empty one first."""
    different = list(dict.fromkeys(things))
    return [
        frozenset(chosen) for size in range(len(different) + 1) for chosen in itertools.combinations(different, size)
    ]


def minimal_by_trying(rule: Rule, label_of: dict[str, str]) -> set[frozenset[str]]:
    """Every minimal satisfying set of labels, found by trying all sets, with the rule followed by hand."""
    paths = rule.paths()
    satisfying = [
        chosen
        for chosen in sets_of(label_of[name] for name in paths)
        if satisfies(rule, {path for name in paths if label_of[name] in chosen for path in paths[name]})
    ]
    return {chosen for chosen in satisfying if not any(other < chosen for other in satisfying)}


@st.composite
def labelled(draw: st.DrawFn) -> tuple[Rule, dict[str, str]]:
    """A rule and labels of its custodians: sometimes their own names, sometimes shared."""
    rule = draw(rules(most=12))
    names = list(rule.paths())
    if draw(st.booleans()):
        return rule, {name: name for name in names}
    return rule, {name: draw(st.sampled_from("ABCDE")) for name in names}
