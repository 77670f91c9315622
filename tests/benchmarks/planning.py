"""How many ten-year histories a second one core draws: ``python tests/benchmarks/planning.py``.

The yardstick is the drawing of 100 exponential times a history by numpy, about as many as seven custodians take, in the
same run and by turns. Times are those of one processor, medians of rounds after a warm-up; the ratio is
what to quote. Nothing is asserted. Aim: 100,000 histories a second for seven custodians.
"""

from __future__ import annotations

import argparse
import os
import platform
import statistics
import time
from dataclasses import replace

import numpy as np

from shares.planning.model import Cause, Model
from shares.planning.simulate import simulate
from shares.sharing.rule import Rule

TIMES = 100


def harbour(total: int) -> Model:
    """Return a model of so many custodians at three sites, in two lines, who need a little more than half."""
    names = tuple(f"pier {i}" for i in range(total))
    causes = (
        *(Cause("share", name, frozenset({name}), loss=0.04) for name in names),
        *(Cause("person", name, frozenset({name}), loss=0.01, leak=0.02, absent=0.1) for name in names),
        *(Cause("site", f"quay {i}", frozenset(names[i::3]), 0.002, 0.002, 0.005) for i in range(3)),
        *(Cause("line", f"board {i}", frozenset(names[i::2]), 0.001, 0.002) for i in range(2)),
    )
    return Model(Rule(total // 2 + 1, names), causes, attest_every=90, refresh_every=365)


def branched(total: int) -> Model:
    """Return a model in which everyone stands in two of three branches."""
    model = harbour(total)
    names, third = model.custodians, total // 3
    parts = names[:third], names[third : 2 * third], names[2 * third :]
    groups = [parts[i] + parts[(i + 1) % 3] for i in range(3)]
    return replace(model, rule=Rule(2, tuple(Rule(len(group) // 2 + 1, group) for group in groups)))


def seconds(act) -> float:
    """Return the processor time of an act."""
    start = time.process_time()
    act()
    return time.process_time() - start


def draw(histories: int) -> None:
    """Draw what the yardstick draws."""
    lot = np.random.Generator(np.random.PCG64(1))
    for _ in range(0, histories, 10_000):
        lot.standard_exponential((TIMES, 10_000))


def main() -> None:
    parser = argparse.ArgumentParser(description="Measure simulated histories.")
    parser.add_argument("--histories", type=int, default=100_000, help="for seven custodians (default 100000)")
    parser.add_argument("--rounds", type=int, default=5, help="how often all of it is done (default 5)")
    options = parser.parse_args()
    print(
        f"{platform.machine()}, {os.cpu_count()} processors, Python {platform.python_version()}, numpy {np.__version__}"
    )
    print(f"ten years; processor time, medians of {options.rounds} after a warm-up")
    cases = {
        "7 custodians": (harbour(7), options.histories),
        "7, never attested": (replace(harbour(7), attest_every=None, refresh_every=None), options.histories),
        "7, attested daily": (replace(harbour(7), attest_every=1, refresh_every=30), options.histories),
        "24 custodians": (harbour(24), options.histories // 10),
        "200 custodians": (harbour(200), options.histories // 100),
        "200 in 2 of 3 groups": (branched(200), options.histories // 100),
    }
    simulate(harbour(7), 10, histories=10_000, seed=1)
    rounds = []
    for seed in range(options.rounds):
        least = seconds(lambda: draw(options.histories)) / options.histories
        for name, (model, count) in cases.items():
            taken = seconds(lambda: simulate(model, 10, histories=count, seed=seed)) / count  # noqa: B023
            rounds.append((name, taken, taken / least))
    print(f"  yardstick: {TIMES * 1e-6 / least:.0f} million exponential times a second, {TIMES} a history")
    for name in cases:
        taken, ratio = (statistics.median(row[i] for row in rounds if row[0] == name) for i in (1, 2))
        print(f"  {name:<22}{1 / taken:10,.0f} histories/s   {ratio:8.1f} of the yardstick")


if __name__ == "__main__":
    main()
