"""How many sets a core audits in a second, beside the cost of their signatures and hashes alone.

A set is small: 3 of 5 custodians, a policy, one round of attestations. The signatures are checked with the keys at hand
and the bytes already made, and every file is hashed once from memory: the least that any audit has to do. Times are
medians; the ratio is what to quote.
"""

import argparse
import hashlib
import os
import platform
import shutil
import statistics
import sys
import tempfile
import time
from pathlib import Path
from unittest import mock

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from kept import Kept, day, policy_text

from shares.documents import signing
from shares.evidence.many import audit_many, find_sets

AT = day(30)


def timed(act):
    """Return seconds, and what came of it."""
    start = time.perf_counter()
    found = act()
    return time.perf_counter() - start, found


def checked_by(folder):
    """Return what one audit of a set verifies: (key, signature, bytes) of each signature, as the library gets them."""
    seen = []
    load = signing._loaded

    class Seen:
        def __init__(self, key):
            self.key = key

        def verify(self, signature, text):
            seen.append((self.key, signature, text))
            self.key.verify(signature, text)

    with mock.patch.object(signing, "_loaded", lambda public: Seen(load(public))):
        list(audit_many([folder], jobs=1, at=AT))
    return seen


def main():
    parser = argparse.ArgumentParser(description="Measure audits of many sets.")
    parser.add_argument("--sets", type=int, default=400, help="how many (default 400; the aim is for 10000)")
    parser.add_argument("--rounds", type=int, default=3, help="how often (default 3)")
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        kept = Kept.make(folder / "set", policy_text())
        kept.round(day(1))
        (folder / "sets").mkdir()
        for i in range(options.sets):
            shutil.copytree(kept.folder, folder / f"sets/{i:05}", copy_function=os.link)
        sets = find_sets([folder / "sets"]).sets
        signed = checked_by(sets[0])
        files = [path.read_bytes() for path in sorted(Path(sets[0]).rglob("*")) if path.is_file()]
        few = sets[: max(50, options.sets // 8)]

        def alone():
            for _ in few:
                for key, signature, text in signed:
                    key.verify(signature, text)
                for data in files:
                    hashlib.sha256(data).digest()

        def audited(paths, jobs):
            found = list(audit_many(paths, jobs=jobs, at=AT))
            assert {str(one.verdict) for one in found} == {"good"}

        cores = len(os.sched_getaffinity(0))
        audited(few[:5], 1)
        rounds = []
        for _ in range(options.rounds):
            least, _ = timed(alone)
            one, _ = timed(lambda: audited(few, 1))
            every, _ = timed(lambda: audited(sets, None))
            rounds.append((len(few) / least, len(few) / one, len(sets) / every, one / least))
        least, one, every, ratio = (statistics.median(column) for column in zip(*rounds, strict=True))
    print(f"{platform.machine()}, Python {platform.python_version()}, {cores} cores; {len(signed)} signatures and")
    print(f"{len(files)} files of {sum(map(len, files)):,} bytes a set, {options.sets:,} sets")
    print(f"one core            {one:8.0f} sets/s")
    print(f"signatures, hashes  {least:8.0f} sets/s   the audit takes {ratio:.1f} times as long")
    print(f"all cores           {every:8.0f} sets/s   {every / cores:.0f} a core, starting the processes included")


if __name__ == "__main__":
    main()
