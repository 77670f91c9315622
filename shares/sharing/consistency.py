"""The public check by which each custodian alone sees that the dealing is consistent.

For a row v of L bytes, check(v) = R v[:L-16] + v[L-16:], with R public and fixed only after all shares are committed
to.
The check is linear, so the check of f(x) is the polynomial of the checks of f's coefficients, taken at x. The last
16 bytes of every row are
a mask, shared along and uniform, so the checks tell nothing about what it masks.

Source: shares/documents/FORMAT.md, sec. 6. A random public linear map, masked by one random row, is the usual way to
check a
batch of linear sharings (common practice, no source); the bound 2^-128 is derived in SECURITY.md.
May import: shares.errors, shares.memory, shares.field, shares.sharing.rule.
Secret: rows and coefficients. Public: R, and every check (masked, hence declassified where ``check`` returns it).
Does not: tell which custodian's row is wrong when the dealer lied, or prove anything to those who hold no share.
"""

from __future__ import annotations

import hashlib
from collections.abc import Sequence

from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.rule import Path, Rule

CHECK_LABEL = b"shares/v1/check"
CHECK_LENGTH = 16


def check_matrix(set_id: bytes, epoch: int, field: Field, commitments: Sequence[bytes], row_length: int) -> bytes:
    """Return R, 16 rows of ``row_length`` - 16 field elements, row by row.

    Args:
        set_id: 16 bytes.
        epoch: 1 to 2^32 - 1.
        field: the field of the set; its polynomial goes into the hash.
        commitments: the share commitments of all custodians, 32 bytes each, in the record's order.
        row_length: L, bytes.

    Source: FIPS 202 (SHAKE256); FORMAT.md, sec. 6.
    """
    stream = hashlib.shake_256(CHECK_LABEL + set_id + epoch.to_bytes(4, "big") + field.modulus.to_bytes(2, "big"))
    for commitment in commitments:
        stream.update(commitment)
    return stream.digest(CHECK_LENGTH * (row_length - CHECK_LENGTH))


def check(field: Field, matrix: bytes, row: Secret) -> bytes:
    """Return check(v) = R v[:L-16] + v[L-16:], 16 bytes, public.

    The result is declassified here: for rows of an honest dealing it is masked by the row's own uniform last 16 bytes.
    """
    split = len(row) - CHECK_LENGTH
    masked = bytearray(CHECK_LENGTH)
    with Secret(CHECK_LENGTH) as projected, row.view() as whole:
        field.project(matrix, whole[:split], projected.view())
        field.combine([b"\x01\x01"], [projected.view(), whole[split:]], [memoryview(masked)])
    return bytes(masked)


def checks_of(field: Field, matrix: bytes, polynomial: Sequence[Secret]) -> tuple[bytes, ...]:
    """Return c_j = check(f_j) for each coefficient of a node."""
    return tuple(check(field, matrix, coefficient) for coefficient in polynomial)


def expected(field: Field, checks: Sequence[bytes], x: int) -> bytes:
    """Return c_0 + c_1 x + ... + c_(k-1) x^(k-1): what the row at x must check to. Public throughout."""
    value = bytearray(CHECK_LENGTH)
    field.combine([field.powers(x, len(checks))], list(checks), [memoryview(value)])
    return bytes(value)


def inconsistent_nodes(field: Field, rule: Rule, checks: Sequence[Sequence[bytes]]) -> list[Path]:
    """Return the paths of the nodes whose checks contradict the rule or their parent's checks; empty if all agree.

    Args:
        checks: one entry for each node, in the order of ``Rule.nodes``.
    """
    of_node = dict(zip((path for path, _ in rule.nodes()), checks, strict=True))
    wrong = []
    for path, node in rule.nodes():
        parent_says = expected(field, of_node[path[:-1]], path[-1][1]) if path else of_node[path][0]
        if len(of_node[path]) != node.need or of_node[path][0] != parent_says:
            wrong.append(path)
    return wrong
