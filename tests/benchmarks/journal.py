"""How long it takes to read a journal, beside the cost of its signatures alone, and to add to it.

The signatures are checked as the package's own reader does, with the key at hand and the bytes already made: that is
the least that any reader of the journal has to do. Times are medians; the ratio is what to quote.
"""

import argparse
import os
import platform
import resource
import statistics
import sys
import tempfile
import time
from datetime import UTC, datetime, timedelta
from pathlib import Path

from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey

from shares.documents.entry import Entry, NamedDigest, line_digest
from shares.documents.event import make_event
from shares.documents.party import new_party
from shares.documents.signing import signed_bytes
from shares.documents.wrapping import Cost
from shares.history.journal import append, read_journal
from shares.memory import Secret

START = datetime(2026, 1, 5, 9, 0, tzinfo=UTC)
EVENT = make_event(
    "attested",
    challenge=bytes(32),
    custodian="north-pier",
    grade="content",
    result="intact",
    attributed=True,
    late=False,
    opened=False,
    place="the pier house",
    serial="HT-0001",
)


def timed(act):
    """Return seconds, and what came of it."""
    start = time.perf_counter()
    found = act()
    return time.perf_counter() - start, found


def made_journal(count, key):
    """Return the journal's bytes, and what is signed in each entry with its signature."""
    lines, signed = [], []
    for i in range(count):
        entry = Entry(
            kind="journal-entry",
            version=1,
            sequence=i + 1,
            time=START + timedelta(minutes=i),
            previous=line_digest(lines[-1]) if lines else None,
            event=EVENT,
            documents=(NamedDigest(path=f"attestations/{i}/north-pier.json", digest=bytes(32)),),
            cards=() if i else (key.card,),
            signatures=(),
        ).signed(key)
        text = signed_bytes(entry.KIND, entry.signed_members(key.card.fingerprint))
        signed.append((entry.signatures[0].signature, text))
        lines.append(entry.line())
    return b"".join(line + b"\n" for line in lines), signed


def main():
    parser = argparse.ArgumentParser(description="Measure the journal.")
    parser.add_argument("--entries", type=int, default=20_000, help="how many (default 20000; the aim is for 100000)")
    parser.add_argument("--rounds", type=int, default=3, help="how often (default 3)")
    options = parser.parse_args()
    with Secret.of(b"made up") as passphrase:
        key = new_party("harbour-office", passphrase, cost=Cost(8, 1, 1)).open(passphrase)
    data, signed = made_journal(options.entries, key)
    public = Ed25519PublicKey.from_public_bytes(key.card.ed25519)

    def signatures():
        for signature, text in signed:
            public.verify(signature, text)

    read_journal(data[: data.index(b"\n") + 1])
    rounds = []
    for _ in range(options.rounds):
        alone, _ = timed(signatures)
        whole, journal = timed(lambda: read_journal(data))
        assert (len(journal.entries), journal.problems) == (options.entries, ())
        rounds.append((alone, whole, whole / alone))
        del journal
    alone, whole, ratio = (statistics.median(column) for column in zip(*rounds, strict=True))
    each = 1e6 / options.entries
    print(f"{platform.machine()}, {os.cpu_count()} processors, Python {platform.python_version()}")
    print(f"{options.entries:,} entries, {len(data) / 2**20:.1f} MiB, each signed once; medians of {options.rounds}")
    print(f"  signatures alone    {alone:6.2f} s   {alone * each:6.1f} us an entry")
    print(f"  reading it          {whole:6.2f} s   {whole * each:6.1f} us an entry   {ratio:.2f} of them   aim 3")
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        bare = statistics.median(timed(lambda: append(folder, EVENT, keys=[key]))[0] for _ in range(20))
        (folder / "journal.jsonl").write_bytes(data)
        long = statistics.median(timed(lambda: append(folder, EVENT, keys=[key]))[0] for _ in range(20))
    print(f"  adding to a new one {1000 * bare:6.2f} ms; to this one {1000 * long:.2f} ms")
    print(f"  peak memory         {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:6.0f} MiB")
    key.close()


if __name__ == "__main__":
    sys.exit(main())
