"""A real browser for the tests of pages, without a window; what is not there skips with its name, or fails where asked.

Source: Chromium, driven by playwright. ``SHARES_REQUIRE_BROWSER=1`` makes a missing browser a failure.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

PROGRAM = Path("/usr/bin/chromium")
QUIET = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
]


def started() -> Iterator[Any]:
    """Yield a running browser; made for a fixture."""
    if not PROGRAM.exists():
        if os.environ.get("SHARES_REQUIRE_BROWSER") == "1":
            pytest.fail(f"SHARES_REQUIRE_BROWSER=1, and {PROGRAM} is not installed")
        pytest.skip(f"{PROGRAM} is not installed")
    from playwright.sync_api import sync_playwright

    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=PROGRAM, args=QUIET)
        yield browser
        browser.close()
