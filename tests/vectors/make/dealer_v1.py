"""Deal a share set by FORMAT.md, version 1, with stated seeds in place of randomness: the maker's own dealer.

Source: shares/documents/FORMAT.md; A. Shamir, How to share a secret, CACM 22(11), 1979; FIPS 180-4; FIPS 202; RFC 4648;
RFC 5869; RFC 8032; RFC 8785.
May import: the standard library and `cryptography` (HKDF, Ed25519); nothing of the package, for it is a second
    opinion on it.
Secret: nothing. Every secret here is made up, and worthless.
Does not: keep time constant (it multiplies through tables of logarithms), nor ever deal a set that protects anything.
"""

import base64
import hashlib
import json
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field, replace
from typing import Any

from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.hashes import SHA256
from cryptography.hazmat.primitives.kdf.hkdf import HKDF

NOTICE = "Keep this file apart from the other shares. Whoever holds enough of them holds the secret."
HEADER = ("kind", "version", "set", "epoch", "custodian", "field", "paths", "secret_commitment", "encrypted_file")
REST = ("label", "rule", "notice", "record")

Rule = dict[str, Any]


def b64(data: bytes) -> str:
    """Encode as base64url without padding (RFC 4648 section 5)."""
    return base64.urlsafe_b64encode(data).decode().rstrip("=")


def canonical(value: Any) -> bytes:
    """Give the RFC 8785 form; enough for the strings, integers, nulls and ASCII member names of version 1."""
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False).encode()


def pretty(document: dict[str, Any]) -> str:
    """Give the text that a program would write to a file."""
    return json.dumps(document, indent=2, ensure_ascii=False) + "\n"


def sha256(*parts: bytes) -> bytes:
    """Hash the parts, joined."""
    return hashlib.sha256(b"".join(parts)).digest()


def shake(length: int, *parts: bytes) -> bytes:
    """Give length bytes of SHAKE256 over the parts, joined."""
    return hashlib.shake_256(b"".join(parts)).digest(length)


def fingerprint(document: dict[str, Any]) -> str:
    """Give the fingerprint of section 1, of a record."""
    body = {name: value for name, value in document.items() if name not in ("fingerprint", "signatures")}
    text = base64.b32encode(sha256(b"shares/v1/fingerprint", b"record", canonical(body))[:20]).decode()
    return "-".join(text[i : i + 4] for i in range(0, 32, 4))


class Tables:
    """GF(2)[x]/(m) by logarithms to the smallest generator: not the way of the recovery script, nor of the package."""

    def __init__(self, modulus: int) -> None:
        self.modulus = modulus
        for generator in range(2, 256):
            self.exp = [1]
            while len(self.exp) < 255:
                self.exp.append(self._slow(self.exp[-1], generator))
            if len(set(self.exp)) == 255:
                break
        else:
            raise ValueError("no generator: the modulus is reducible")
        self.log = {value: i for i, value in enumerate(self.exp)}

    def _slow(self, a: int, b: int) -> int:
        total = 0
        while b:
            if b & 1:
                total ^= a
            a, b = a << 1, b >> 1
            if a > 255:
                a ^= self.modulus
        return total

    def times(self, a: int, b: int) -> int:
        """Multiply."""
        return self.exp[(self.log[a] + self.log[b]) % 255] if a and b else 0

    def evaluate(self, coefficients: list[bytes], x: int) -> bytes:
        """Give the row f(x) = f_0 + f_1 x + ... for rows f_0, f_1, ..., by Horner's rule."""
        row = bytes(len(coefficients[0]))
        for coefficient in reversed(coefficients):
            row = bytes(self.times(value, x) ^ c for value, c in zip(row, coefficient, strict=True))
        return row

    def check(self, matrix: bytes, row: bytes) -> bytes:
        """Give check(row) of section 6: R times all but the last 16 bytes, plus the last 16."""
        width = len(row) - 16
        out = bytearray(row[width:])
        for i in range(16):
            for r, value in zip(matrix[i * width : (i + 1) * width], row, strict=False):
                out[i] ^= self.times(r, value)
        return bytes(out)


@dataclass(frozen=True)
class Plan:
    """What a set is dealt from: every choice of the dealer, and the name that seeds what would be random."""

    name: str
    rule: Rule
    secret: bytes
    label: str
    polynomial: str = "0x11b"
    pad: int = 16
    epoch: int = 1
    created: str = "2026-01-05T09:00:00Z"
    encrypted_file: str | None = None
    policy: str | None = None
    previous: str | None = None
    notice: str | None = NOTICE
    # A later epoch keeps the set's identifier, the message and the blind.
    set_id: bytes | None = None
    blind: bytes | None = None
    # The hooks below make a dealer who errs, or cheats; an honest one leaves them alone.
    message: bytes | None = None
    raise_degree: int = 0
    spoil_rows: Callable[[dict[str, list[bytes]]], None] = lambda rows: None
    spoil_header: Callable[[dict[str, Any]], None] = lambda header: None
    spoil_record: Callable[[dict[str, Any]], None] = lambda record: None

    @property
    def seed(self) -> str:
        return f"harbour sample {self.name}"


@dataclass(frozen=True)
class Node:
    """One node of the rule, as dealt."""

    prefix: list[list[int]]
    need: int
    coefficients: list[bytes]


@dataclass
class Dealing:
    """A dealt set: the documents, and every value on the way to them."""

    plan: Plan
    set_id: bytes
    message: bytes
    blind: bytes
    mask: bytes
    draws: list[dict[str, str]]
    nodes: list[Node]
    paths: dict[str, list[list[list[int]]]]
    rows: dict[str, list[bytes]]
    matrix: bytes = b""
    secret_commitment: bytes = b""
    cores: dict[str, bytes] = field(default_factory=dict)
    attestation_seeds: dict[str, bytes] = field(default_factory=dict)
    record: dict[str, Any] = field(default_factory=dict)
    shares: dict[str, dict[str, Any]] = field(default_factory=dict)

    @property
    def payload(self) -> bytes:
        return self.message + self.blind + self.mask


def words(node: Rule) -> str:
    """Put a rule into words."""
    return f"{node['need']} of ({', '.join(c if isinstance(c, str) else words(c) for c in node['from'])})"


def leaves(node: Rule) -> Iterator[str]:
    """List the names of a rule, from left to right, depth first, each as often as it stands there."""
    for child in node["from"]:
        if isinstance(child, str):
            yield child
        else:
            yield from leaves(child)


def satisfied(node: Rule, names: Iterable[str]) -> bool:
    """Tell whether these custodians are a quorum."""
    met = set(names)
    return sum(c in met if isinstance(c, str) else satisfied(c, met) for c in node["from"]) >= node["need"]


def deal(plan: Plan) -> Dealing:
    """Deal a set: sections 2 to 6 in their order."""
    table = Tables(int(plan.polynomial, 16))
    draws: list[dict[str, str]] = []

    def draw(purpose: str, length: int, what: bytes) -> bytes:
        """Draw as section 3 ends: the operating system's bytes, here from the seed, XOR the hedge."""
        entropy = shake(length, f"{plan.seed}/{purpose}/entropy".encode())
        nonce = shake(32, f"{plan.seed}/{purpose}/nonce".encode())
        hedge = shake(length, b"shares/v1/hedge", nonce, what)
        draws.append({"purpose": purpose, "entropy": entropy.hex(), "nonce": nonce.hex()})
        return bytes(e ^ h for e, h in zip(entropy, hedge, strict=True))

    message = plan.message
    if message is None:
        message = len(plan.secret).to_bytes(4, "big") + plan.secret
        message += bytes(-len(message) % plan.pad)
    hidden = draw("blind and mask", 48, message)
    dealing = Dealing(
        plan,
        plan.set_id or shake(16, f"{plan.seed}/set".encode()),
        message,
        plan.blind or hidden[:32],
        hidden[32:],
        draws,
        [],
        {name: [] for name in leaves(plan.rule)},
        {name: [] for name in leaves(plan.rule)},
    )

    def descend(node: Rule, f_0: bytes, prefix: list[list[int]]) -> None:
        k, length = node["need"], len(f_0)
        wanted = (k - 1 + plan.raise_degree) * length
        steps = bytes(number for step in prefix for number in step)
        drawn = draw(f"node {len(dealing.nodes)}", wanted, steps + f_0) if wanted else b""
        coefficients = [f_0] + [drawn[i : i + length] for i in range(0, len(drawn), length)]
        dealing.nodes.append(Node(prefix, k, coefficients))
        for x, child in enumerate(node["from"], 1):
            row, path = table.evaluate(coefficients, x), [*prefix, [k, x]]
            if isinstance(child, str):
                dealing.paths[child].append(path)
                dealing.rows[child].append(row)
            else:
                descend(child, row, path)

    descend(plan.rule, dealing.payload, [])
    plan.spoil_rows(dealing.rows)
    _commit(dealing, table)
    return dealing


def _commit(dealing: Dealing, table: Tables) -> None:
    """Fill in the public values and the documents: sections 4 to 6."""
    plan = dealing.plan
    dealing.secret_commitment = sha256(b"shares/v1/secret", dealing.set_id, dealing.message, dealing.blind)
    common = {
        "set": dealing.set_id.hex(),
        "epoch": plan.epoch,
        "field": plan.polynomial,
        "secret_commitment": dealing.secret_commitment.hex(),
        "encrypted_file": plan.encrypted_file,
    }
    headers, custodians, commitments = {}, [], []
    for name, paths in dealing.paths.items():
        headers[name] = {"kind": "share", "version": 1, **common, "custodian": name, "paths": paths}
        plan.spoil_header(headers[name])
        core = canonical(headers[name]) + b"".join(dealing.rows[name])
        seed = HKDF(SHA256(), 32, salt=None, info=b"shares/v1/attest").derive(core)
        public = Ed25519PrivateKey.from_private_bytes(seed).public_key().public_bytes_raw()
        dealing.cores[name], dealing.attestation_seeds[name] = core, seed
        commitments.append(sha256(b"shares/v1/share", core))
        custodians.append({"name": name, "share_commitment": commitments[-1].hex(), "attestation_key": b64(public)})

    length = len(dealing.payload)
    dealing.matrix = shake(
        16 * (length - 16),
        b"shares/v1/check",
        dealing.set_id,
        plan.epoch.to_bytes(4, "big"),
        int(plan.polynomial, 16).to_bytes(2, "big"),
        *commitments,
    )
    checks = [[b64(table.check(dealing.matrix, f)) for f in n.coefficients[: n.need]] for n in dealing.nodes]
    record = {
        "kind": "record",
        "version": 1,
        **common,
        "label": plan.label,
        "created": plan.created,
        "row_length": length,
        "rule": plan.rule,
        "custodians": custodians,
        "checks": checks,
        "policy": plan.policy,
        "previous": plan.previous,
    }
    plan.spoil_record(record)
    dealing.record = seal_record(record)
    for name, header in headers.items():
        dealing.shares[name] = seal_share(
            {
                **{member: header[member] for member in HEADER},
                "rows": [b64(row) for row in dealing.rows[name]],
                "label": plan.label,
                "rule": words(plan.rule),
                "notice": plan.notice,
                "record": dealing.record["fingerprint"],
            }
        )


def seal_record(record: dict[str, Any]) -> dict[str, Any]:
    """Give a record with its own fingerprint set anew, and no signatures."""
    return {**record, "fingerprint": fingerprint(record), "signatures": []}


def seal_share(share: dict[str, Any]) -> dict[str, Any]:
    """Give a share with its digest set anew: what an honest program does, and what anyone who alters a share can do."""
    rows = b"".join(base64.urlsafe_b64decode(row + "=" * (-len(row) % 4)) for row in share["rows"])
    commitment = sha256(b"shares/v1/share", canonical({name: share[name] for name in HEADER}), rows)
    rest = canonical({name: share[name] for name in REST})
    return {**share, "digest": sha256(b"shares/v1/digest", commitment, rest).hex()}


def renew(dealing: Dealing) -> Dealing:
    """Deal the next epoch of a set: the same secret and blind, all else drawn anew."""
    plan = dealing.plan
    return deal(
        replace(
            plan,
            name=f"{plan.name}, next epoch",
            epoch=plan.epoch + 1,
            previous=dealing.record["fingerprint"],
            set_id=dealing.set_id,
            blind=dealing.blind,
        )
    )
