"""Measure large secrets, in and out: ``python tests/benchmarks/large.py``.

Prints medians and ratios; nothing is asserted. The yardstick is AES-256-GCM and SHA-256 by ``cryptography`` over as
many bytes, in memory and one after the other, plus one copy of the file that is put on the medium. All of it, and both
acts, take turns in the same run and the same folder. Memory is the peak of a process of its own that does the act, less
that of one that only imports the same. Aims: 1.5 times the yardstick, each way; 100 MiB.
"""

from __future__ import annotations

import argparse
import os
import platform
import shutil
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from cryptography.hazmat.primitives import hashes
from cryptography.hazmat.primitives.ciphers.aead import AESGCM

from shares.custody.encrypted_file import check_file, digest_of, encrypt_file, open_file
from shares.streams import new_file

PIECE = 1 << 20
SET = bytes(16)
IMPORTS = (
    "import sys; from pathlib import Path; from shares.streams import new_file; "
    "from shares.custody.encrypted_file import encrypt_file, open_file; folder = Path(sys.argv[1]); "
)
ENCRYPT = "key, digest = encrypt_file(folder / 'source', folder / 'file', bytes(16)); "
OPEN = "open_file(folder / 'file', key, digest, bytes(16), new_file(folder / 'opened', secret=True)); "
# What getrusage(2) tells would be no less than the peak of the process that started this one.
PEAK = "print(next(line.split()[1] for line in open('/proc/self/status') if line.startswith('VmHWM')))"


def timed(act, *arguments):
    start = time.perf_counter()
    answer = act(*arguments)
    return time.perf_counter() - start, answer


def encipher(pieces):
    cipher, plain, out = AESGCM(os.urandom(32)), bytearray(PIECE), bytearray(PIECE + 16)
    for number in range(pieces):
        cipher.encrypt_into(number.to_bytes(12, "big"), plain, b"", out)


def digest(pieces):
    hashed, plain = hashes.Hash(hashes.SHA256()), bytearray(PIECE)
    for _ in range(pieces):
        hashed.update(plain)
    hashed.finalize()


def copy(folder):
    """Copy the file once, piece by piece, and put it on the medium."""
    piece = bytearray(PIECE)
    with open(folder / "source", "rb", buffering=0) as source, open(folder / "copy", "xb", buffering=0) as target:
        while count := source.readinto(piece):
            target.write(memoryview(piece)[:count])
        os.fsync(target.fileno())


def one_round(folder, pieces):
    """Time each part once.

    There are two files at any time, so that each act finds the memory of what was just removed to be reused: what is
    opened becomes the source of the next round.
    """
    yardstick = [timed(encipher, pieces)[0], timed(digest, pieces)[0], timed(copy, folder)[0]]
    (folder / "copy").unlink()
    inward, (key, named) = timed(encrypt_file, folder / "source", folder / "file", SET)
    (folder / "source").unlink()
    sink = new_file(folder / "source", secret=True)
    outward, _ = timed(open_file, folder / "file", key, named, SET, sink)
    checked, _ = timed(check_file, folder / "file", key, named, SET)
    without_key, _ = timed(digest_of, folder / "file")
    (folder / "file").unlink()
    key.close()
    return [*yardstick, inward, outward, checked, without_key]


def peak(folder, *acts):
    """Return the peak memory of a process that does these acts, in MiB."""
    code = IMPORTS + "".join(acts) + PEAK
    done = subprocess.run([sys.executable, "-c", code, folder], capture_output=True, text=True, check=True)
    for name in ("file", "opened"):
        (folder / name).unlink(missing_ok=True)
    return int(done.stdout) / 1024


def main():
    parser = argparse.ArgumentParser(description="Measure large secrets, in and out.")
    parser.add_argument("--mebibytes", type=int, default=1024, help="size of the secret (default 1024)")
    parser.add_argument("--rounds", type=int, default=5, help="how often all of it is done (default 5)")
    parser.add_argument("--folder", type=Path, help="the medium to use (default: the system's temporary folder)")
    options = parser.parse_args()
    with tempfile.TemporaryDirectory(dir=options.folder) as name:
        folder = Path(name)
        # Source, file and opened file lie there at the same time while memory is measured.
        if shutil.disk_usage(folder).free < 4 * options.mebibytes << 20:
            raise SystemExit(f"{folder} has no room for 4 times {options.mebibytes} MiB: give --mebibytes or --folder")
        with open(folder / "source", "wb") as source:
            for _ in range(options.mebibytes):
                source.write(os.urandom(PIECE))
            os.fsync(source.fileno())
        print(f"{platform.machine()}, {os.cpu_count()} processors, Python {platform.python_version()}")
        print(f"{options.mebibytes} MiB in {folder.parent}; wall time, medians of {options.rounds} after a warm-up")
        one_round(folder, options.mebibytes)
        rounds = [one_round(folder, options.mebibytes) for _ in range(options.rounds)]
        cipher, hashed, copied, *ours = (statistics.median(times) for times in zip(*rounds, strict=True))
        print(f"  yardstick: AES-256-GCM {cipher:.2f} s, SHA-256 {hashed:.2f} s, synced copy {copied:.2f} s")
        for place, about in enumerate(("encrypt", "check and open", "check with key", "check without key"), 3):
            ratio = statistics.median(times[place] / sum(times[:3]) for times in rounds)
            print(f"  {about:<20}{ours[place - 3]:6.2f} s   {ratio:5.2f} of the yardstick   {'aim 1.5' * (place < 5)}")
        bare = peak(folder)
        for about, acts in {"encrypt": (ENCRYPT,), "encrypt, check and open": (ENCRYPT, OPEN)}.items():
            print(f"  peak memory, {about}: {peak(folder, *acts) - bare:.1f} MiB over {bare:.1f} MiB   aim 100")


if __name__ == "__main__":
    main()
