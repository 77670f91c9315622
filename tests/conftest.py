"""What every test run shares: how hard Hypothesis tries, what is left out, and a header that says so.

Shared strategies live in ``strategies.py`` beside this file; ``pythonpath`` in pyproject.toml makes
``from strategies import ...`` work. The environment variable ``HYPOTHESIS_PROFILE`` chooses a profile:

    quick       10 examples, while writing code
    dev         100, the default
    shares-ci   300, the same ones on every run, printed so that they can be repeated; the default where CI is set
    nightly     5,000, other ones on every run
"""

from __future__ import annotations

import json
import os
import signal
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any

import hypothesis
import pytest
from kernel_free import BUT, FREE, TESTS, Guard

import shares
from shares.errors import SharesError
from shares.field import kernel

hypothesis.settings.register_profile("quick", max_examples=10, deadline=None)
hypothesis.settings.register_profile("dev", max_examples=100, deadline=None)
hypothesis.settings.register_profile("shares-ci", hypothesis.settings.get_profile("ci"), max_examples=300)
hypothesis.settings.register_profile(
    "nightly", max_examples=5000, deadline=None, derandomize=False, print_blob=True, database=None
)

PROFILE = os.environ.get("HYPOTHESIS_PROFILE") or ("shares-ci" if os.environ.get("CI") else "dev")
hypothesis.settings.load_profile(PROFILE)

# Whoever started this run may have switched stop signals off for it, as nohup(1) and a shell's background do. Programs
# under test inherit what is ignored, and would be deaf to the signals that tests send them; what is caught they do not
# inherit. So this process catches such a signal and does nothing.
for number in (signal.SIGINT, signal.SIGHUP, signal.SIGQUIT):
    if signal.getsignal(number) is signal.SIG_IGN:
        signal.signal(number, lambda number, frame: None)


@pytest.fixture(scope="session")
def vectors() -> Callable[[str], Any]:
    """Load a file of published values by its name in ``vectors/``."""
    folder = Path(__file__).parent / "vectors"
    return cache(lambda name: json.loads((folder / f"{name}.json").read_text("utf-8")))


def pytest_configure(config: pytest.Config) -> None:
    """Refuse what would print the locals of frames that hold secrets; guard the files that never reach the kernel."""
    if config.getoption("showlocals"):
        raise pytest.UsageError("--showlocals prints secrets: these tests are never run with it")
    config.pluginmanager.register(Guard(FREE, BUT, TESTS))


def pytest_report_header(config: pytest.Config) -> list[str]:
    """Say which code runs, on which kernel, and which tests are left out."""
    try:
        name, path, *_ = kernel()
    except SharesError as error:
        raise pytest.UsageError(str(error)) from None
    asked = os.environ.get("SHARES_KERNEL") or "unset"
    marked = config.getoption("markexpr")
    return [
        f"shares: {shares.__version__} from {os.path.dirname(shares.__file__)}",
        f"kernel: {name}, path {path} (SHARES_KERNEL {asked}); hypothesis examples: {PROFILE}",
        f"markers: only tests that are '{marked}' run; choose others with -m" if marked else "markers: all tests run",
    ]
