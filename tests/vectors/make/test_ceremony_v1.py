"""The golden ceremony script is what its maker makes."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

HERE = Path(__file__).parent


def test_a_second_run_writes_the_same_bytes(tmp_path: Path) -> None:
    subprocess.run([sys.executable, "-W", "error", HERE / "ceremony_v1.py", tmp_path], check=True)
    name = "ceremony_script.json"
    assert (tmp_path / name).read_bytes() == (HERE.parent / "golden/v1/evidence" / name).read_bytes()
