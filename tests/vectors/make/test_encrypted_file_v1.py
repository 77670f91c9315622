"""The golden encrypted files are what their maker makes, and open by hand, in the standard library alone."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

from vectors.make.encrypted_file_v1 import samples

HERE = Path(__file__).parent


def test_a_second_run_writes_the_same_bytes(tmp_path: Path) -> None:
    subprocess.run([sys.executable, "-W", "error", HERE / "encrypted_file_v1.py", tmp_path], check=True)
    name = "aes_256_gcm_chunks.json"
    assert (tmp_path / name).read_bytes() == (HERE.parent / name).read_bytes()


def test_the_count_is_right() -> None:
    made = json.loads(json.dumps(samples()))
    assert made["numberOfTests"] == sum(len(group["tests"]) for group in made["testGroups"]) == 6
