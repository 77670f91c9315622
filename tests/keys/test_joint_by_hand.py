"""Joint generation followed by hand: with the published page, JSON, SHA-2 and integers, and nothing of the package.

Source: FORMAT_KEYS.md, sec. 27, read as a second implementation would; RFC 8032 (``curve``); RFC 9380, sec. 5.3.1, for
the second generator.
"""

from __future__ import annotations

import base64
import hashlib
import json

from curve import BASE, L, add, decode, encode, multiply, negative, order
from keys.joining import joint
from keys.rounds import Exchange


def b64(text: str) -> bytes:
    return base64.urlsafe_b64decode(text + "=" * (-len(text) % 4))


def little(octets: bytes) -> int:
    return int.from_bytes(octets, "little")


def second_generator() -> tuple[int, int]:
    for i in range(256):
        tag = b"shares/v1/second-base"
        tag += bytes([len(tag)])
        first = hashlib.sha256(bytes(64) + bytes([i]) + (32).to_bytes(2, "big") + b"\0" + tag).digest()
        point = decode(hashlib.sha256(first + b"\1" + tag).digest())
        if point is not None and order(point) == L:
            return point
    raise AssertionError("no string is a point")


def combined(points: list[tuple[int, int]], x: int) -> tuple[int, int]:
    return add(*(multiply(pow(x, j, L), point) for j, point in enumerate(points)))


def vector(message: dict) -> list[tuple[int, int]]:  # type: ignore[type-arg]
    return [decode(b64(text)) for text in message["body"]["commitments"]]  # type: ignore[misc]


def told(exchange: Exchange, round: int) -> dict[str, dict]:  # type: ignore[type-arg]
    messages = [json.loads(one.to_file()) for one in exchange.told["registrar"][round].values()]
    return {one["sender"]: one for one in messages}


def test_every_equation_of_the_page_holds() -> None:
    exchange = joint().run()
    names = exchange.task.names
    second = second_generator()
    dealings, reveals = told(exchange, 1), told(exchange, 4)
    for dealer in names:
        for x, name in enumerate(names, 1):
            if name == dealer:
                continue
            box = exchange.boxes[1][name][dealer]
            share, blind = little(box[:32]), little(box[32:])
            assert max(share, blind) < L
            fourth = add(multiply(share, BASE), multiply(blind, second))
            assert fourth == combined(vector(dealings[dealer]), x)
            assert multiply(share, BASE) == combined(vector(reveals[dealer]), x)


def test_the_proofs_are_those_of_the_page() -> None:
    exchange = joint().run()
    for x, (name, message) in enumerate(told(exchange, 4).items(), 1):
        proof, constant = b64(message["body"]["proof"]), vector(message)[0]
        c, z = little(proof[:32]), little(proof[32:])
        r = add(multiply(z, BASE), negative(multiply(c, constant)))
        context = x.to_bytes(32, "little") + b"shares/v1/join" + exchange.task.digest() + name.encode()
        statement = b"shares/v1/proof/possession" + len(context).to_bytes(8, "big") + context
        hashed = hashlib.sha512(statement + encode(constant) + encode(r)).digest()
        assert c == little(hashed) % L


def test_the_record_holds_the_sums() -> None:
    exchange = joint().run()
    record = json.loads(exchange.outcome("registrar").files[-1].data)
    columns = zip(*(vector(message) for message in told(exchange, 4).values()), strict=True)
    assert [b64(text) for text in record["commitments"]] == [encode(add(*column)) for column in columns]
    assert (record["need"], record["origin"], record["epoch"]) == (3, "joint", 1)
    assert [(one["name"], one["index"]) for one in record["custodians"]] == [
        (name, x) for x, name in enumerate(exchange.task.names, 1)
    ]
    times = [one["created"] for round in range(5) for one in told(exchange, round).values()]
    assert record["created"] == max(times)
    seen = {one["seen"] for one in told(exchange, 5).values()}
    assert seen == {record["generation"]}
    assert [one["card"]["name"] for one in record["signatures"]] == list(exchange.task.names)
