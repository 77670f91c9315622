"""Self-test: known answers of everything a split and a recovery rest on, and what this machine can protect.

Source: beside each test; the values are published ones.
May import: shares.errors, shares.memory, shares.field, shares.group, shares.documents, shares.sharing, shares.custody.
Secret: nothing; the secrets here are published examples or made up. Public: every result.
Does not: replace the test suite, or measure time.
"""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Callable
from dataclasses import dataclass

from cryptography.hazmat.primitives import hashes, serialization
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.kdf.argon2 import Argon2id
from cryptography.hazmat.primitives.kdf.hkdf import HKDF

from shares.custody.presented import Presented
from shares.custody.recover import recover
from shares.custody.split import flat_rule, split
from shares.custody.verify import verify_share
from shares.documents.base import canonical
from shares.documents.party import new_party
from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import (
    SUITES,
    ByCard,
    ByPassphrase,
    Cost,
    card_sealer,
    open_by_passphrase,
    passphrase_sealer,
)
from shares.errors import SharesError, VerificationError
from shares.field.gf256 import Field
from shares.field.irreducible import count_irreducible, irreducibles
from shares.group.edwards25519 import BASE, SIZE, Point, Scalar
from shares.group.hashing import SECOND_BASE, SECOND_BASE_LABEL, hashed_point
from shares.memory import Secret
from shares.sharing.shamir import evaluate, interpolate

# RFC 8032, sec. 7.1, TEST 1.
_TEST_1 = "9d61b19deffd5a60ba844af492ec2cc44449c5697b326919703bac031cae7f60"
_TEST_1_PUBLIC = "d75a980182b10ab7d54bfed3c964073a0ee172f3daa62325af021a68f707511a"
# BASE + (0, -1): of order 2 L, twice that of the group.
_MIXED_ORDER = "9599999999999999999999999999999999999999999999999999999999999999"


@dataclass(frozen=True, slots=True)
class Outcome:
    """One test: what it is about, and what went wrong, if something did."""

    about: str
    problem: str | None


def selftest() -> list[Outcome]:
    """Run every known-answer test.

    Returns:
        One outcome for each test, in order; ``problem`` is None where it passed.
    """
    return [Outcome(about, _problem(test)) for about, test in _TESTS.items()]


def _problem(test: Callable[[], bool]) -> str | None:
    try:
        return None if test() else "a known answer came out differently"
    except (SharesError, ValueError, TypeError, ArithmeticError, LookupError) as error:
        return f"stopped by {type(error).__name__}"


def _field() -> bool:
    """FIPS 197, sec. 4.2: {57} x {83} = {c1}, {57} x {13} = {fe}; sec. 4.2.1: the chain of doublings of {57}."""
    field = Field(0x11B)
    secret, out = Secret.of(b"\x57"), Secret(1)
    products = []
    for scalar in (0x83, 0x13, 0x02, 0x04, 0x08, 0x10):
        field.combine([bytes([scalar])], [secret.view()], [out.view()])
        products.append(out == Secret.of(bytes([field.multiply(0x57, scalar)])))
    chain = [field.multiply(0x57, scalar) for scalar in (0x83, 0x13, 0x02, 0x04, 0x08, 0x10)]
    return all(products) and chain == [0xC1, 0xFE, 0xAE, 0x47, 0x8E, 0x07] and field.inverse(0x53) == 0xCA


def _polynomials() -> bool:
    """Gauss's formula: 30 irreducible polynomials of degree 8 over GF(2); every one makes a field here."""
    found = [Field(f.number) for f in irreducibles(8)]
    return len(found) == count_irreducible(2, 8) == 30 and all(f.multiply(2, f.inverse(2)) == 1 for f in found)


def _sharing() -> bool:
    """D. McGrew, P. Patnala, A. Hoenes, draft-mcgrew-tss-03, sec. 9 (values from memory, self-consistent): 2-of-2."""
    field = Field(0x11B)
    secret = Secret.of(bytes.fromhex("7465737400"))
    one, two = Secret.of(bytes.fromhex("b9fa07e185")), Secret.of(bytes.fromhex("f5409b4511"))
    slope = interpolate(field, [1, 2], [one, two], at=3)
    return interpolate(field, [1, 2], [one, two]) == secret and evaluate(
        field, [secret, Secret.of(bytes.fromhex("cd9f749585"))], [1, 2, 3]
    ) == [one, two, slope]


def _whole_job() -> bool:
    """A made-up secret: dealt 3-of-5, each share written, parsed and verified; every run recovers from the last
    three."""
    secret = Secret.of(b"not a real key")
    names = ["north-pier", "south-pier", "light-house", "registrar", "dry-dock"]
    dealt = split(secret, flat_rule(3, names), label="self-test", field=Field(0x1F5))
    shares = [Share.parse(share.to_file()) for share in dealt.shares]
    for share in shares:
        verify_share(share, dealt.record)
    recovery = recover([Presented(share.custodian, share) for share in shares[2:]], dealt.record)
    return recovery.secret == secret


def _hashes() -> bool:
    """FIPS 180-4 and FIPS 202 example values (SHA-256 of "abc", SHAKE256 of the empty string, from memory); RFC 5869
    A.3."""
    hkdf = HKDF(algorithm=hashes.SHA256(), length=42, salt=None, info=b"").derive(b"\x0b" * 22)
    return (
        hashlib.sha256(b"abc").hexdigest() == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
        and hashlib.shake_256(b"").hexdigest(16) == "46b9dd2b0ba88d13233b3feb743eeb24"
        and hkdf.hex() == "8da4e775a563c18f715f802a063c5a31b8a11f5c5ee1879ec3454e5f3c738d2d9d201395faa4b61a96c8"
    )


def _signatures() -> bool:
    """RFC 8032, sec. 7.1, TEST 1: the public half of an Ed25519 key."""
    public = Ed25519PrivateKey.from_private_bytes(bytes.fromhex(_TEST_1)).public_key()
    raw = public.public_bytes(serialization.Encoding.Raw, serialization.PublicFormat.Raw)
    return raw.hex() == _TEST_1_PUBLIC


def _group() -> bool:
    """RFC 8032, sec. 7.1, TEST 1: the key's point from its secret scalar. The second base again from its label.

    RFC 9591, sec. 6.1: a point of mixed order, which an older library lets pass, is refused.
    """
    lower = bytearray(hashlib.sha512(bytes.fromhex(_TEST_1)).digest()[:SIZE])
    lower[0], lower[31] = lower[0] & 0xF8, lower[31] & 0x7F | 0x40  # Sec. 5.1.5: clamped.
    public = Scalar.reduced(bytes(lower) + bytes(SIZE)) * BASE
    try:
        Point.decode(bytes.fromhex(_MIXED_ORDER))
    except VerificationError:
        return public.encode().hex() == _TEST_1_PUBLIC and hashed_point(SECOND_BASE_LABEL) == SECOND_BASE
    return False


def _encodings() -> bool:
    """RFC 4648, sec. 10 ("foobar"); RFC 8785, sec. 3.2.3 (members sorted, no white space)."""
    return (
        base64.urlsafe_b64encode(b"foobar") == b"Zm9vYmFy"
        and base64.b32encode(b"foobar") == b"MZXW6YTBOI======"
        and canonical({"b": 1, "a": "\u20ac"}) == '{"a":"\u20ac","b":1}'.encode()
    )


def _stretching() -> bool:
    """RFC 9106, sec. 5.3: Argon2id."""
    kdf = Argon2id(
        salt=b"\x02" * 16, length=32, iterations=3, lanes=4, memory_cost=32, secret=b"\x03" * 8, ad=b"\x04" * 12
    )
    return kdf.derive(b"\x01" * 32).hex() == "0d640df58d78766c08c037a34a8b53c9d01ef0452d75b65eb52520e96b01e659"


def _wrapping() -> bool:
    """A made-up share of a made-up party: wrapped by passphrase and for a card, by each suite, and opened again."""
    passphrase, quick = Secret.of(b"not a real passphrase"), Cost(memory=8, passes=1, lanes=1)
    with new_party("north-pier", passphrase, cost=quick).open(passphrase) as key:
        dealt = split(Secret.of(b"not a real key"), flat_rule(1, ["north-pier"]), label="self-test")
        sealers = [
            passphrase_sealer(passphrase, quick),
            *(card_sealer(key.card.recipient(), suite) for suite in SUITES),
        ]
        wrapped = [WrappedShare.parse(WrappedShare.wrap(dealt.shares[0], seal).to_file()) for seal in sealers]

        def opener(wrapping: ByPassphrase | ByCard, sealed: bytes, bound: bytes) -> Secret:
            if isinstance(wrapping, ByPassphrase):
                return open_by_passphrase(wrapping, sealed, bound, passphrase)
            return key.open(wrapping, sealed, bound)

        return all(one.open(opener).commitment() == dealt.shares[0].commitment() for one in wrapped)


_TESTS: dict[str, Callable[[], bool]] = {
    "field: products, doublings, inverse (FIPS 197)": _field,
    "field: the 30 irreducible polynomials (Gauss)": _polynomials,
    "sharing: a published 2-of-2 example": _sharing,
    "whole job: split, verify and recover 3-of-5": _whole_job,
    "hashes: SHA-256, SHAKE256, HKDF (FIPS 180-4, FIPS 202, RFC 5869)": _hashes,
    "signatures: Ed25519 (RFC 8032)": _signatures,
    "group: a key's point, the second base, a point to refuse (RFC 8032, RFC 9591)": _group,
    "passphrases: Argon2id (RFC 9106)": _stretching,
    "wrapping: a share under a passphrase and for a card, both suites": _wrapping,
    "encodings: base64url, base32, canonical JSON (RFC 4648, RFC 8785)": _encodings,
}
