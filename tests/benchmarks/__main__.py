"""Print every table: ``python tests/benchmarks``. Each module here also runs by itself, with options of its own."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

for module in sorted(Path(__file__).parent.glob("[a-z]*.py")):
    print(f"\n=== {module.name}", flush=True)
    subprocess.run([sys.executable, str(module)], check=True)
