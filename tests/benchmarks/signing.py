"""Measure signing by a quorum: ``python tests/benchmarks/signing.py``.

Prints medians and ratios; nothing is asserted. The yardstick is the sum of the library calls that RFC 9591 requires of
a signer (sec. 5.2, with the checks of 4.3 and 6.1) and of whoever aggregates (sec. 5.3, with one verification): each is
counted below, timed by itself in the same run, and multiplied by its count. What is measured starts from the encoded
commitments of all signers. Of nonces the yardstick is what each pair needs: two multiplications of the base point, two
hashes, sealing for the signer's card, and one of as many new files on the medium. Aims: 1.3 times the yardstick; 10,000
nonces a minute.
"""

from __future__ import annotations

import argparse
import hashlib
import os
import platform
import statistics
import sys
import tempfile
import time
from pathlib import Path

import nacl.bindings as sodium
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey

sys.path.insert(0, str(Path(__file__).parents[1]))

from keys.quorum import a_task, committed, dealt, part, said
from parties import card, unlocked

from shares.documents.wrapping import card_sealer
from shares.group.edwards25519 import ORDER, Point, Scalar
from shares.history.rounds import Inbox
from shares.keys import frost
from shares.keys.nonces import NonceStore
from shares.memory import Secret
from shares.sharing import verifiable
from shares.storage import write_many_new

MESSAGE = bytes(1024)
ME = "north-pier"


def timed(act, times=1, clock=time.perf_counter):
    """Return the microseconds that an act takes, on the average of several times."""
    start = clock()
    for _ in range(times):
        act()
    return (clock() - start) / times * 1e6


def worked(act, times=1):
    """Return the microseconds of the processor that an act takes: what else runs on the machine counts less."""
    return timed(act, times, time.thread_time)


def calls(signature, public):
    """Return the library calls that are counted, by name."""
    a, b = (sodium.crypto_core_ed25519_scalar_reduce(os.urandom(64)) for _ in range(2))
    p, q = (sodium.crypto_scalarmult_ed25519_base_noclamp(one) for one in (a, b))
    wide, number = os.urandom(64), int.from_bytes(a, "little")
    return {
        "base mult": lambda: sodium.crypto_scalarmult_ed25519_base_noclamp(a),
        "var mult": lambda: sodium.crypto_scalarmult_ed25519_noclamp(a, p),
        "add": lambda: sodium.crypto_core_ed25519_add(p, q),
        "check": lambda: sodium.crypto_core_ed25519_is_valid_point(p),
        "scalar mult": lambda: sodium.crypto_core_ed25519_scalar_mul(a, b),
        "scalar add": lambda: sodium.crypto_core_ed25519_scalar_add(a, b),
        "reduce": lambda: sodium.crypto_core_ed25519_scalar_reduce(wide),
        "hash": lambda: hashlib.sha512(wide).digest(),
        "hash message": lambda: hashlib.sha512(MESSAGE).digest(),
        "invert": lambda: pow(number, -1, ORDER),
        "verify": lambda: Ed25519PublicKey.from_public_bytes(public).verify(signature, MESSAGE),
    }


def required(k):
    """Return how many of each call RFC 9591 requires of a signer, and of whoever aggregates, with k signers."""
    # Both read 2 k points, hash message and list, k binding factors, and add up D_i + rho_i E_i.
    both = {"check": 2 * k, "hash message": 1, "hash": k + 1, "reduce": k, "var mult": k, "add": 2 * k - 1}
    # Challenge, Lagrange's weight, and the share itself.
    signer = {**both, "hash message": 2, "reduce": k + 1, "invert": 1, "scalar mult": 3, "scalar add": 2}
    # A share is read by reducing it.
    aggregator = {**both, "reduce": 2 * k, "scalar add": k - 1, "verify": 1}
    return signer, aggregator


def dealt_signers(k):
    """Return a key that k of k + 2 signers use: its public half, the shares, nonces and encoded commitments."""
    coefficients = verifiable.polynomial(Scalar.drawn(), k)
    public = verifiable.feldman(coefficients)[0]
    shares = {x: verifiable.evaluate(coefficients, x) for x in range(1, k + 1)}
    nonces = {x: frost.commit(share) for x, share in shares.items()}
    encoded = [(x, one.hiding_commitment.encode(), one.binding_commitment.encode()) for x, one in nonces.items()]
    return public, shares, nonces, encoded


def agreed(public, encoded):
    return frost.Agreed(public, MESSAGE, [frost.Commitment(x, *map(Point.decode, pair)) for x, *pair in encoded])


def one_round(k):
    """Time a signer, an aggregator, and every library call, once each in turn; return the two ratios to the sums."""
    public, shares, nonces, encoded = dealt_signers(k)
    sign = worked(lambda: frost.sign(1, shares[1], nonces[1], agreed(public, encoded)))
    known = agreed(public, encoded)
    _, *others = shares
    again = frost.Nonces(*(Scalar.drawn() for _ in range(2)))  # Of signer 1, whose own were used up above.
    encoded[0] = (1, again.hiding_commitment.encode(), again.binding_commitment.encode())
    known = agreed(public, encoded)
    answers = {1: frost.sign(1, shares[1], again, known).encode()}
    answers |= {x: frost.sign(x, shares[x], nonces[x], known).encode() for x in others}

    def aggregate():
        there = agreed(public, encoded)
        signature = frost.aggregate({x: Scalar.decode(octets) for x, octets in answers.items()}, there)
        assert frost.verify(public, MESSAGE, signature)
        return signature

    put_together = worked(aggregate)
    costs = {name: worked(act, 5) for name, act in calls(aggregate(), public.encode()).items()}
    sums = [sum(costs[name] * count for name, count in counts.items()) for counts in required(k)]
    return costs, (sign, put_together), sums


def signing(rounds):
    print(f"signing {len(MESSAGE)} bytes; medians of {rounds} rounds after a warm-up, in microseconds of the processor")
    shown = False
    for k in (2, 3, 5, 10):
        one_round(k)
        measured = [one_round(k) for _ in range(rounds)]
        if not shown:
            for name in measured[0][0]:
                print(f"  {name:<14}{statistics.median(costs[name] for costs, *_ in measured):8.1f}")
            shown = True
        for place, (about, counts) in enumerate(zip(("signer", "aggregator"), required(k), strict=True)):
            took = statistics.median(times[place] for _, times, _ in measured)
            ratio = statistics.median(times[place] / sums[place] for _, times, sums in measured)
            needs = ", ".join(f"{count} {name}" for name, count in counts.items())
            print(f"  k = {k:<3} {about:<11}{took:9.0f}   {ratio:5.2f} of the yardstick   aim 1.3   ({needs})")


def nonces(count, rounds):
    key = dealt()
    seal = card_sealer(card(ME).recipient())
    with tempfile.TemporaryDirectory() as name, unlocked(ME) as own, Secret.of(bytes(64)) as pair:
        folder = Path(name)
        made, ratios = [], []
        for number in range(rounds + 1):
            store = NonceStore(folder / f"store{number}", key.record, ME, own)
            took = timed(lambda: store.make(key.scalars[ME], count)) / count  # noqa: B023
            size = next(store.folder.glob("pair-*")).stat().st_size
            costs = {name: timed(act, count) for name, act in calls(*known_signature()).items()}
            (folder / f"plain{number}").mkdir()
            files = {str(name): bytes(size) for name in range(count)}
            parts = 2 * (costs["base mult"] + costs["hash"] + costs["reduce"]) + timed(lambda: seal(pair, b""), count)
            parts += timed(lambda: write_many_new(folder / f"plain{number}", files)) / count  # noqa: B023
            made.append(took)
            ratios.append(took / parts)
        took, ratio = statistics.median(made[1:]), statistics.median(ratios[1:])
        print(f"nonces in {folder.parent}, batches of {count}; medians of {rounds} after a warm-up")
        print(
            f"  {took:.0f} microseconds each, {60e6 / took:,.0f} a minute (aim 10,000)   {ratio:.2f} of the yardstick"
        )


def known_signature():
    public, shares, made, encoded = dealt_signers(2)
    known = agreed(public, encoded)
    signature = frost.aggregate({x: frost.sign(x, shares[x], made[x], known) for x in shares}, known)
    return signature, public.encode()


def whole_step(rounds):
    """A signer's whole last round, as a task has it: content, key share and nonces from the medium, and checks."""
    key, names = dealt(), tuple(dealt().shares)[:3]
    with tempfile.TemporaryDirectory() as name, unlocked(ME) as own:
        took = []
        for number in range(rounds):
            folder = Path(name, str(number))
            task = a_task(key, names, commitments=committed(folder, key, names))
            signer, inbox = part(task, ME, key, own, folder), Inbox(task, (), b"release 7 of the tide tables\n")
            answers = []
            took.append(timed(lambda: answers.append(signer.speak(0, inbox, Secret(0), ()))))  # noqa: B023
            assert said(task, ME, 0, answers[0].body).round == 0
    print(f"a signer's whole share round, 3 of 5, from the medium: {statistics.median(took) / 1000:.1f} ms")


def main():
    parser = argparse.ArgumentParser(description="Measure signing by a quorum.")
    parser.add_argument("--rounds", type=int, default=40, help="how often each signature is made (default 40)")
    parser.add_argument("--nonces", type=int, default=200, help="pairs of nonces in a batch (default 200)")
    options = parser.parse_args()
    print(f"{platform.machine()}, {os.cpu_count()} processors, Python {platform.python_version()}")
    signing(options.rounds)
    nonces(options.nonces, 5)
    whole_step(10)


if __name__ == "__main__":
    main()
