"""Whole commands against the bare import of what they rest on: wall time, paired run by run, medians and ratios."""

from __future__ import annotations

import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

PYTHON = sys.executable
SHARES = str(Path(PYTHON).parent / "shares")
CUSTODIANS = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock")
RUNS = 15
LIBRARIES = (
    "import click; from pydantic import BaseModel; from cryptography.hazmat.primitives.asymmetric import ed25519"
)


def seconds(command: list[str], **options: object) -> float:
    start = time.perf_counter()
    subprocess.run(command, check=True, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, **options)  # type: ignore[call-overload]
    return time.perf_counter() - start


def split_seconds(secret: Path) -> float:
    """Time one 3-of-5 split of a 32-byte secret into folders of its own."""
    with tempfile.TemporaryDirectory() as work:
        (Path(work) / "handover").mkdir(mode=0o700)
        custodians = [word for custodian in CUSTODIANS for word in ("--custodian", custodian)]
        options = ["--label", "benchmark", "--set", "set", "--deliver", "handover", "--plain"]
        return seconds([SHARES, "split", str(secret), "--need", "3", *custodians, *options], cwd=work)


def main() -> None:
    """Print both comparisons."""
    with tempfile.TemporaryDirectory() as folder:
        secret = Path(folder) / "secret"
        secret.write_bytes(bytes(range(32)))
        pairs = {
            "shares --version / import click": (
                lambda: seconds([SHARES, "--version"]),
                lambda: seconds([PYTHON, "-c", "import click"]),
            ),
            "shares split 3-of-5, 32 bytes / import click, pydantic, cryptography": (
                lambda: split_seconds(secret),
                lambda: seconds([PYTHON, "-c", LIBRARIES]),
            ),
        }
        print(f"whole commands, wall time, {RUNS} pairs after a warm-up")
        for about, (measured, yardstick) in pairs.items():
            measured(), yardstick()
            runs = [(measured(), yardstick()) for _ in range(RUNS)]
            ratio = statistics.median(a / b for a, b in runs)
            ours, bare = (1000 * statistics.median(run[i] for run in runs) for i in (0, 1))
            print(f"  {ours:6.0f} ms / {bare:6.0f} ms = {ratio:4.2f}   {about}")


if __name__ == "__main__":
    main()
