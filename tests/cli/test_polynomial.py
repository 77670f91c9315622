"""``shares polynomial``: what it accepts, and that what it says is so.

Irreducibility, factors and primitivity over GF(2) are checked against galois and python-flint, over other primes by
python-flint: its factorisation of every monic polynomial, and the order of x counted step by step.
"""

from __future__ import annotations

import itertools
import re

import flint
import galois
import pytest
from cli.harness import assert_refused, run

AES = "x^8 + x^4 + x^3 + x + 1"


@pytest.mark.parametrize("form", [AES, "x^8+x^4+x^3+x+1", "0x11b", "283", " 283 ", "1 + x + x^3 + x^4 + x^8"])
def test_each_form_of_one_polynomial(form: str) -> None:
    result = run("polynomial", "check", form)
    assert (result.code, result.err) == (0, "")
    assert f"{AES} (0x11b) is irreducible over GF(2), and not primitive." in result.out
    assert "accepts it" in result.out
    told = run("polynomial", "check", form, "--json").json
    assert told == {
        "done": True,
        "exit": 0,
        "polynomial": AES,
        "number": 283,
        "degree": 8,
        "prime": 2,
        "irreducible": True,
        "primitive": False,
        "factors": f"({AES})",
        "suits_split": True,
    }


def test_all_polynomials_of_degree_8_against_other_libraries() -> None:
    for number in range(256, 512):
        told = run("polynomial", "check", hex(number), "--json")
        ours = told.json
        assert told.code == (0 if ours["irreducible"] else 4)
        theirs = galois.Poly.Int(number)
        assert ours["irreducible"] is ours["suits_split"] is theirs.is_irreducible()
        assert ours["primitive"] is theirs.is_primitive()
        _, factors = flint.nmod_poly([number >> i & 1 for i in range(9)], 2).factor()
        assert ours["factors"].count("x^") + ours["factors"].count("x") >= len(factors)
        assert len(ours["factors"].split(" * ")) == len(factors)


@pytest.mark.parametrize(("prime", "degree"), [(2, 1), (2, 4), (2, 8), (3, 2), (3, 4), (5, 3), (7, 2), (257, 1)])
def test_lists_against_another_library(prime: int, degree: int) -> None:
    expected = {}
    for low in itertools.product(range(prime), repeat=degree):
        poly = flint.nmod_poly([*low, 1], prime)
        if poly.factor() == (1, [(poly, 1)]):
            number = sum(int(poly[i]) * prime**i for i in range(degree + 1))
            expected[number] = order_of_x(poly, prime) == prime**degree - 1
    arguments = ["polynomial", "list", "--prime", str(prime), "--degree", str(degree)]
    told = run(*arguments, "--json").json
    assert {entry["number"]: entry["primitive"] for entry in told["polynomials"]} == expected
    assert [entry["number"] for entry in told["polynomials"]] == sorted(expected)
    assert told["count"] == len(expected)
    lines = run(*arguments).out.splitlines()
    assert len(lines) == len(expected) + 1
    assert f"Gauss's formula counts {len(expected)}" in lines[-1]


def order_of_x(poly: flint.nmod_poly, prime: int) -> int:
    """How often x must be multiplied by itself to give 1 modulo poly; 0 where it never does."""
    x, one = flint.nmod_poly([0, 1], prime) % poly, flint.nmod_poly([1], prime)
    power = x
    for steps in range(1, prime ** poly.degree()):
        if power == one:
            return steps
        power = power * x % poly
    return 0


def test_the_list_without_options_is_what_split_accepts() -> None:
    result = run("polynomial", "list")
    lines = result.out.splitlines()
    assert result.code == 0
    assert len(lines) == 31
    assert [line for line in lines if line.endswith("(default)")] == [f"   0x11b  {AES}  (default)"]


def test_over_another_prime() -> None:
    result = run("polynomial", "check", "x^2 + 2x + 2", "--prime", "3")
    assert result.code == 0
    assert "x^2 + 2x + 2 (17) is irreducible over GF(3), and primitive." in result.out
    assert "refuses it" in result.out
    assert run("polynomial", "check", "17", "--prime", "3").out == result.out


@pytest.mark.parametrize(
    ("form", "factors"),
    [
        ("0x11c", r"x^2 * (x + 1) * (x^5 + x^4 + x^3 + x^2 + 1)"),
        ("x^8 + 1", r"(x + 1)^8"),
        ("0x100", r"x^8"),
        ("x^32 + 1", r"(x + 1)^32"),
    ],
)
def test_reducible_ones_are_told_with_their_factors(form: str, factors: str) -> None:
    result = run("polynomial", "check", form)
    assert (result.code, result.err) == (4, "")
    assert f"is not irreducible over GF(2): it is {factors}." in result.out
    told = run("polynomial", "check", form, "--json")
    assert (told.code, told.json["irreducible"], told.json["factors"]) == (4, False, factors)


@pytest.mark.parametrize("form", ["0", "1", "2", "3"])
def test_constants_and_lines(form: str) -> None:
    assert run("polynomial", "check", form).code == (0 if form in "23" else 4)


@pytest.mark.parametrize(
    "form",
    [
        "",
        " ",
        "banana",
        "x^",
        "^8",
        "x^8 +",
        "x^8 + + 1",
        "x^8 x",
        "x ^ 8 + y",
        "X^8 + 1",
        "x^-1",
        "x^1.5",
        "x**8",
        "0b100011011",
        "0X11B",
        "0x11g",
        "1_000",
        "1e3",
        "\uff11",
        "x\u00b2",
        "x^\uff18",
        "\u0967",
        "x^8 - -1",
        "x^8 + x^8",
        "2x + 1",
        "x^8 + x\n+ 1\x1b",
        "x^33",
        "x^999999999999999999",
        "0x1" + "0" * 9,
        "1" * 501,
        "9" * 400,
        "x + " * 4000 + "1",
    ],
    ids=lambda form: ascii(form)[:20],
)
def test_what_is_no_polynomial(form: str) -> None:
    assert_refused(["polynomial", "check", "--", form] if form.startswith("-") else ["polynomial", "check", form], 2)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--prime", "0"], "prime"),
        (["--prime", "1"], "prime"),
        (["--prime", "4"], "prime"),
        (["--prime", "-3"], "prime"),
        (["--prime", "263"], "257"),
        (["--prime", "1000000007"], "257"),
        (["--prime", "two"], "--prime"),
        (["--degree", "0"], "degree"),
        (["--degree", "-1"], "degree"),
        (["--degree", "13"], "4096"),
        (["--degree", "1000000"], "degree 32"),
        (["--prime", "3", "--degree", "8"], "4096"),
        (["--degree", "8.0"], "--degree"),
    ],
    ids=lambda value: " ".join(value) if isinstance(value, list) else value,
)
def test_lists_that_are_not_made(arguments: list[str], words: str) -> None:
    assert_refused(["polynomial", "list", *arguments], 2, words)


@pytest.mark.parametrize(("form", "prime"), [("x + 3", "3"), ("x^2 + 9x", "7"), ("x", "6"), ("x", "-2")])
def test_forms_that_do_not_fit_their_prime(form: str, prime: str) -> None:
    assert_refused(["polynomial", "check", form, "--prime", prime], 2)


def test_the_largest_accepted_answer_within_seconds() -> None:
    """Degree 32 over GF(257) is the largest; python-flint factors it for comparison."""
    coefficients = [3, 1] + [0] * 30 + [1]
    _, factors = flint.nmod_poly(coefficients, 257).factor()
    told = run("polynomial", "check", "x^32 + x + 3", "--prime", "257", "--json").json
    assert len(re.findall(r" \* ", told["factors"])) + 1 == len(factors)
