"""The mathematics of a key that several parties generate together, so that it is in no one place ever.

Source: R. Gennaro, S. Jarecki, H. Krawczyk, T. Rabin, "Secure Distributed Key Generation for Discrete-Log Based
    Cryptosystems", J. Cryptology 20, 2007, fig. 2; its numbers (4) and (5) are the two equations below; C. Komlo, I.
    Goldberg, "FROST", SAC 2020, fig. 1 (the proof of possession).
May import: shares.errors, shares.memory, shares.group, shares.sharing.verifiable.
Secret: a contribution, and what of it is dealt to each. Public: both kinds of commitments, proofs, indices.
Does not: know parties, rounds or messages; ``joint`` does.

Party i draws f_i(z) = a_i0 + a_i1 z + ... and a second polynomial f'_i of blinds, both of degree k - 1.

    (4)  f_i(x) B + f'_i(x) H = sum of x^j C_ij,  C_ij = a_ij B + b_ij H   Pedersen: binds, and shows nothing
    (5)  f_i(x) B             = sum of x^j A_ij,  A_ij = a_ij B            Feldman: shown when all are bound

The key is the sum of all f_i(0), party x's share of it the sum of all f_i(x), and the commitments of its record are the
sums of all A_ij. Whoever is bound by (4) before anything of (5) is shown cannot choose a contribution to suit the
others': with Feldman's commitments alone, the last to speak can give bits of the key a bias (sec. 3 of the paper).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Self

from shares.errors import VerificationError
from shares.group.edwards25519 import SIZE, Point, Scalar
from shares.group.proofs import Proof, check_possession, prove_possession
from shares.memory import Secret
from shares.sharing.verifiable import (
    Commitments,
    check_feldman,
    check_pedersen,
    evaluate,
    feldman,
    pedersen,
    polynomial,
    summed,
)


@dataclass(frozen=True, slots=True, eq=False)
class Dealt:
    """What one party deals to another: f(x) and f'(x)."""

    share: Scalar
    blind: Scalar

    def encode(self) -> Secret:
        """Return both numbers, 64 bytes."""
        return _joined((self.share, self.blind))

    @classmethod
    def decode(cls, content: Secret) -> Self:
        """Return what ``encode`` gave.

        Raises:
            VerificationError: it is not 64 bytes, or no two numbers below the order.
        """
        if len(content) != 2 * SIZE:
            raise VerificationError("what is dealt to a party has 64 bytes")
        return cls(*_parted(content))

    def fits(self, commitments: Commitments, x: int, need: int) -> bool:
        """Say whether equation (4) holds at index x, for k commitments.

        Source: Gennaro et al. 2007, fig. 2, step 1 (b).
        """
        try:
            check_pedersen(self.share, self.blind, x, commitments, need)
        except VerificationError:
            return False
        return True


@dataclass(frozen=True, slots=True, eq=False)
class Contribution:
    """What one party adds to the key: the coefficients of f and of f', k each."""

    coefficients: tuple[Scalar, ...]
    blinds: tuple[Scalar, ...]

    @classmethod
    def drawn(cls, need: int) -> Self:
        """Draw both polynomials, uniform over all of degree below k.

        Args:
            need: k, at least 1.

        Raises:
            ParameterError: need is below 1.

        Source: Gennaro et al. 2007, fig. 2, step 1 (a).
        """
        return cls(tuple(polynomial(Scalar.drawn(), need)), tuple(polynomial(Scalar.drawn(), need)))

    def commitments(self) -> Commitments:
        """Return C_0, ..., C_(k-1), which show nothing of f: for every f there is one f' that gives the same ones."""
        return pedersen(self.coefficients, self.blinds)

    def dealt_to(self, x: int) -> Dealt:
        """Return what the party at index x gets."""
        return Dealt(evaluate(self.coefficients, x), evaluate(self.blinds, x))

    def revealed(self) -> Commitments:
        """Return A_0, ..., A_(k-1), once all are bound.

        Source: Gennaro et al. 2007, fig. 2, step 4 (a).
        """
        return feldman(self.coefficients)

    def possession(self, x: int, context: bytes) -> Proof:
        """Prove that the party at index x knows a_0, so that nobody can contribute what takes others' part away."""
        return prove_possession(self.coefficients[0], x, context)

    def encode(self) -> Secret:
        """Return the coefficients of f, then those of f': 64 k bytes."""
        return _joined((*self.coefficients, *self.blinds))

    @classmethod
    def decode(cls, content: Secret) -> Self:
        """Return what ``encode`` gave.

        Raises:
            VerificationError: it is not that.
        """
        numbers = _parted(content)
        half = len(numbers) // 2
        return cls(numbers[:half], numbers[half:])


def is_possessed(public: Point, proof: bytes, x: int, context: bytes) -> bool:
    """Say whether the party at index x has proved that it knows the logarithm of ``public``.

    Source: Komlo, Goldberg 2020, fig. 1, round 1, step 5.
    """
    try:
        check_possession(public, Proof.decode(proof), x, context)
    except VerificationError:
        return False
    return True


def is_revealed(share: Scalar, revealed: Commitments, x: int, need: int) -> bool:
    """Say whether equation (5) holds at index x, for k commitments.

    Source: Gennaro et al. 2007, fig. 2, step 4 (b).
    """
    try:
        check_feldman(share, x, revealed, need)
    except VerificationError:
        return False
    return True


def misrevealed(shares: Mapping[str, Scalar], revealed: Mapping[str, Commitments], x: int, need: int) -> str | None:
    """Return who has revealed commitments that are not to what they have dealt to index x; None where all add up.

    The sums are looked at first: the key is made of nothing else, so that where they agree all is well.

    Args:
        shares: f_i(x) of every party i, by its name; equation (4) holds for each.
        revealed: A_i0, ..., A_i(k-1) of every party, by its name.
        x: the index of whoever asks.
        need: k.

    Raises:
        VerificationError: each fits, and yet the sums do not: they come to the identity on the way, which happens once
            in 2^252 unless parties have agreed on it.
    """
    try:
        check_feldman(sum_of(shares.values()), x, summed(list(revealed.values()), need), need)
    except VerificationError:
        pass
    else:
        return None
    for name, share in shares.items():
        if not is_revealed(share, revealed[name], x, need):
            return name
    raise VerificationError(
        "what the parties have contributed cancels out, which chance does not do",
        hint="begin a new task, and ask why with whom this happened",
    )


def sum_of(scalars: Iterable[Scalar]) -> Scalar:
    """Return the sum of scalars."""
    added = Scalar.of(0)
    for scalar in scalars:
        added = added + scalar
    return added


def _joined(scalars: Iterable[Scalar]) -> Secret:
    return Secret.of(b"".join(scalar.encode() for scalar in scalars))


def _parted(content: Secret) -> tuple[Scalar, ...]:
    with content.view() as view:
        return tuple(Scalar.decode(view[start : start + SIZE]) for start in range(0, len(content), SIZE))
