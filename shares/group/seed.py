"""The scalar within an ordinary Ed25519 private key, so that such a key can be shared and its public half stays.

Source: RFC 8032, sec. 5.1.5 (from seed to scalar: hash, prune, multiply the base point).
May import: shares.errors, .edwards25519.
Secret: the seed, the scalar. Public: the key's public half.
Does not: keep the second half of the hash, from which RFC 8032 draws its nonces: whoever signs with the scalar alone
draws them otherwise. And no seed comes back from a scalar.
"""

from __future__ import annotations

import nacl.bindings as sodium

from shares.errors import ParameterError, VerificationError
from shares.group.edwards25519 import BASE, SIZE, Point, Scalar


def scalar_of_seed(seed: bytes) -> tuple[Scalar, Point]:
    """Return the scalar of an Ed25519 seed, modulo the group's order, and the public key that belongs to it.

    The public key is worked out twice, by the library from the seed and by us from the scalar, and compared.

    Args:
        seed: 32 bytes, secret.

    Raises:
        ParameterError: it is not 32 bytes.
        VerificationError: the two disagree, which a whole machine never shows.

    Source: RFC 8032, sec. 5.1.5, steps 1 to 4.

    >>> scalar, public = scalar_of_seed(bytes(32))  # a seed that everybody knows
    >>> public.encode().hex()[:16]
    '3b6a27bcceb6a42d'
    """
    if len(seed) != SIZE:
        raise ParameterError("the seed of an Ed25519 key is 32 bytes")
    encoded, private = sodium.crypto_sign_seed_keypair(seed)
    # The library hashes the seed and prunes the first half of the hash; the result may lie above the order.
    pruned = sodium.crypto_sign_ed25519_sk_to_curve25519(private)
    scalar, public = Scalar.reduced(pruned + bytes(SIZE)), Point.decode(encoded)
    if scalar * BASE != public:
        raise VerificationError("the scalar of this key does not give its public half", hint="this machine is faulty")
    return scalar, public
