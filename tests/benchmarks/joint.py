"""What one party's part in a joint generation costs: calls to the library, and time beside those calls alone.

One of five parties (3 needed), and one of twenty (10 needed), from the first round to the files, with messages in
memory: they are read and judged after each round, as they are when each round is a command, and nothing is encrypted or
stored but the key share. The library's calls are counted by name, each is timed alone in the same run, and their sum is
the yardstick: the least that the protocol costs. The rest is reading and hashing of messages. Times are medians.
"""

from __future__ import annotations

import platform
import statistics
import sys
import time
from collections import Counter
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

import nacl.bindings as library
from keys.joining import joint

from shares.documents.task_message import TaskMessage
from shares.group.edwards25519 import BASE, Scalar

RUNS = 5
CALLS = {
    "base multiplication": "crypto_scalarmult_ed25519_base_noclamp",
    "variable multiplication": "crypto_scalarmult_ed25519_noclamp",
    "addition": "crypto_core_ed25519_add",
    "subtraction": "crypto_core_ed25519_sub",
    "point check": "crypto_core_ed25519_is_valid_point",
}


def seconds_each() -> dict[str, float]:
    """Time each call alone."""
    scalar, point = Scalar.drawn().encode(), (Scalar.drawn() * BASE).encode()
    given = {
        "base multiplication": (scalar,),
        "variable multiplication": (scalar, point),
        "addition": (point, BASE.encode()),
        "subtraction": (point, BASE.encode()),
        "point check": (point,),
    }
    found = {}
    for what, name in CALLS.items():
        call, arguments, rounds = getattr(library, name), given[what], []
        for _ in range(200):
            start = time.perf_counter()
            call(*arguments)
            rounds.append(time.perf_counter() - start)
        found[what] = statistics.median(rounds)
    return found


class Watched:
    """One party, whose part is timed and whose calls are counted, while all others speak unwatched."""

    def __init__(self, need: int, count: int) -> None:
        self.exchange = joint(need, count)
        self.me = self.exchange.task.names[-1]
        self.part = self.exchange.parts[self.me]
        self.exchange.parts = {**self.exchange.parts, self.me: self}  # type: ignore[dict-item]
        self.seconds = 0.0

    def _timed(self, act):  # type: ignore[no-untyped-def]
        start = time.perf_counter()
        found = act()
        self.seconds += time.perf_counter() - start
        return found

    def speak(self, *given):  # type: ignore[no-untyped-def]
        return self._timed(lambda: self.part.speak(*given))

    def run(self) -> float:
        """Return the party's seconds."""
        exchange, me = self.exchange, self.me
        for round in range(6):
            exchange.speak(round)
            files = [one.to_file() for name, one in exchange.told[me][round].items() if name != me]
            self._timed(lambda files=files: [TaskMessage.parse(one) for one in files])
            inbox = exchange.inbox(me, round + 1)
            if self._timed(lambda inbox=inbox: exchange.course.failure(inbox)):
                raise SystemExit("the generation has failed")
        exchange.parts = {**exchange.parts, me: self.part}
        self._timed(lambda: exchange.outcome(me))
        return self.seconds


def counted(need: int, count: int) -> Counter[str]:
    """Count the party's calls, as they are made while it is its turn."""
    found: Counter[str] = Counter()
    watched = Watched(need, count)
    real = {what: getattr(library, name) for what, name in CALLS.items()}
    timed = watched._timed

    def counting(act):  # type: ignore[no-untyped-def]
        for what, name in CALLS.items():

            def call(*given, what=what):  # type: ignore[no-untyped-def]
                found[what] += 1
                return real[what](*given)

            setattr(library, name, call)
        try:
            return timed(act)
        finally:
            for what, name in CALLS.items():
                setattr(library, name, real[what])

    watched._timed = counting  # type: ignore[method-assign]
    watched.run()
    return found


def main() -> None:
    """Print the table."""
    each = seconds_each()
    print(f"{platform.machine()}, Python {platform.python_version()}, libsodium as PyNaCl brings it")
    print("  one call alone, us: " + ", ".join(f"{what} {1e6 * took:.0f}" for what, took in each.items()))
    for need, count in ((3, 5), (10, 20)):
        joint(need, count)  # The parties' own keys are made once, and are not part of it.
        calls = counted(need, count)
        whole = statistics.median(Watched(need, count).run() for _ in range(RUNS))
        alone = sum(each[what] * number for what, number in calls.items())
        multiplications = calls["base multiplication"] + calls["variable multiplication"]
        print(f"{need} of {count}: {multiplications} multiplications a party{'   aim: under 60' if count == 5 else ''}")
        print("  " + ", ".join(f"{number} x {what}" for what, number in calls.items()))
        print(f"  calls alone {1e3 * alone:7.2f} ms, all of it {1e3 * whole:7.2f} ms   {whole / alone:.2f} of them")


if __name__ == "__main__":
    main()
