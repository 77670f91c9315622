"""Our share files recovered by a general-purpose library, and by nothing of this package.

Source: python-flint, finite fields and their arithmetic; ``hashlib`` and ``json`` of the standard library; FORMAT.md,
sections 2, 3 and 8.
"""

from __future__ import annotations

import base64
import hashlib
import json
from typing import Any

import flint
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from strategies import MODULI, flat, octets, rules

from shares.custody.split import split
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.robust import quorums


class Reference:
    """GF(2)[z]/(m) by python-flint, elements to and from bytes."""

    def __init__(self, name: str) -> None:
        modulus = flint.fmpz_mod_poly_ctx(2)([int(name, 16) >> i & 1 for i in range(9)])
        self.context = flint.fq_default_ctx(modulus=modulus, var="z")
        self.elements = [self.context([octet >> i & 1 for i in range(8)]) for octet in range(256)]

    def number(self, element: Any) -> int:
        return sum(int(bit) << i for i, bit in enumerate(element.to_list()))

    def at_zero(self, points: list[tuple[int, bytes]]) -> bytes:
        """Lagrange's formula at 0, a byte at a time."""
        weights = []
        for x, _ in points:
            weight = self.context(1)
            for other, _ in points:
                if other != x:
                    weight *= self.elements[other] / (self.elements[other] - self.elements[x])
            weights.append(weight)
        return bytes(
            self.number(
                sum((w * self.elements[row[t]] for w, (_, row) in zip(weights, points, strict=True)), self.context(0))
            )
            for t in range(len(points[0][1]))
        )


def points_of(files: list[bytes]) -> list[tuple[list[list[int]], bytes]]:
    found = []
    for file in files:
        share = json.loads(file)
        for path, row in zip(share["paths"], share["rows"], strict=True):
            found.append((path, base64.urlsafe_b64decode(row + "=" * (-len(row) % 4))))
    return found


def payload_of(reference: Reference, points: list[tuple[list[list[int]], bytes]]) -> bytes:
    """The payload of the node above points, each path shortened by what leads to the node."""
    below: dict[int, list[tuple[list[list[int]], bytes]]] = {}
    need = points[0][0][0][0]
    for path, row in points:
        below.setdefault(path[0][1], []).append((path[1:], row))
    rows = [(x, inner[0][1] if not inner[0][0] else payload_of(reference, inner)) for x, inner in below.items()]
    assert len(rows) == need
    return reference.at_zero(rows)


def secret_of(file: bytes, payload: bytes) -> bytes:
    share = json.loads(file)
    message, blind = payload[:-48], payload[-48:-16]
    committed = hashlib.sha256(b"shares/v1/secret" + bytes.fromhex(share["set"]) + message + blind).hexdigest()
    assert committed == share["secret_commitment"]
    length = int.from_bytes(message[:4], "big")
    assert set(message[4 + length :]) <= {0}
    return message[4 : 4 + length]


@pytest.mark.parametrize("modulus", MODULI)
@given(secret=octets(1, 33), rule=rules(most=6) | st.just(flat(3, 5)), data=st.data())
@settings(max_examples=20)
def test_a_quorum_of_files_recovers_by_the_reference_alone(modulus, secret, rule, data) -> None:
    dealt = split(Secret.of(secret), rule, label="Tide archive", field=Field(modulus))
    files = [share.to_file() for share in dealt.shares]
    points = points_of(files)
    paths = [tuple(tuple(step) for step in path) for path, _ in points]
    quorum = data.draw(st.sampled_from(list(quorums(paths, most=50))))
    reference = Reference(json.loads(files[0])["field"])
    assert secret_of(files[0], payload_of(reference, [points[i] for i in quorum])) == secret
