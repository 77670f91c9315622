"""``shares polynomial list`` and ``shares polynomial check``."""

from __future__ import annotations

import click

from shares.cli.output import json_option, print_result
from shares.field.gf256 import DEFAULT_MODULUS
from shares.field.irreducible import (
    count_irreducible,
    factored,
    irreducibles,
    is_irreducible,
    is_primitive,
)
from shares.field.polynomial import Polynomial

prime_option = click.option(
    "--prime", type=int, default=2, show_default=True, metavar="P", help="The polynomial is over GF(P)."
)


@click.group(name="polynomial")
def command() -> None:
    """List and check the polynomials that make fields.

    \b
    Example:
      shares polynomial check "x^8 + x^4 + x^3 + x + 1"
    """


@command.command(name="list")
@click.option("--degree", type=int, default=8, show_default=True, metavar="M", help="Degree of the polynomials.")
@prime_option
@json_option
def list_(degree: int, prime: int, as_json: bool) -> None:
    """List the monic irreducible polynomials of degree M over GF(P).

    Without options: the 30 polynomials that `shares split --polynomial` accepts. An irreducible polynomial is primitive
    when x generates all non-zero elements of the field; sharing does not need that.

    \b
    Example:
      shares polynomial list --degree 2 --prime 3
    """
    found = list(irreducibles(degree, prime))
    entries = [{"polynomial": str(f), "number": f.number, "primitive": is_primitive(f)} for f in found]
    lines = [
        f"{_number(f):>8}  {f}{'  primitive' if entry['primitive'] else ''}"
        f"{'  (default)' if prime == 2 and f.number == DEFAULT_MODULUS else ''}"
        for f, entry in zip(found, entries, strict=True)
    ]
    counted = count_irreducible(prime, degree)
    lines.append(f"{len(found)} of degree {degree} over GF({prime}); Gauss's formula counts {counted}.")
    members = {"done": True, "prime": prime, "degree": degree, "count": counted, "polynomials": entries}
    print_result(members, lines, as_json=as_json)


@command.command(name="check")
@click.argument("polynomial", metavar="P")
@prime_option
@json_option
@click.pass_context
def check(ctx: click.Context, polynomial: str, prime: int, as_json: bool) -> None:
    """Say whether polynomial P is irreducible, else its factors; and whether it is primitive.

    P is written as x^8 + x^4 + x^3 + x + 1, or as a number, 0x11b or 283, whose digits to the base of the prime are the
    coefficients. Exit code 0 when it is irreducible, 4 when it is not.

    \b
    Example:
      shares polynomial check 0x11c
    """
    f = Polynomial.parse(polynomial, prime)
    irreducible = is_irreducible(f)
    primitive = irreducible and is_primitive(f)
    suits = irreducible and prime == 2 and f.degree == 8
    members = {
        "done": irreducible,
        "exit": 0 if irreducible else 4,
        "polynomial": str(f),
        "number": f.number,
        "degree": f.degree,
        "prime": prime,
        "irreducible": irreducible,
        "primitive": primitive,
        "factors": factored(f),
        "suits_split": suits,
    }
    if irreducible:
        lines = [f"{f} ({_number(f)}) is irreducible over GF({prime}), and {'' if primitive else 'not '}primitive."]
    else:
        lines = [f"{f} ({_number(f)}) is not irreducible over GF({prime}): it is {factored(f)}."]
    lines.append(f"`shares split --polynomial` {'accepts' if suits else 'refuses'} it.")
    print_result(members, lines, as_json=as_json)
    ctx.exit(0 if irreducible else 4)


def _number(f: Polynomial) -> str:
    return f"{f.number:#x}" if f.p == 2 else str(f.number)
