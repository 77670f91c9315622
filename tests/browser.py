"""A real browser for the tests of pages, without a window; what is not there skips with its name, or fails where asked.

Source: Chromium, driven by playwright; axe-core (rules of WCAG 2.0 to 2.2, levels A and AA, and its best practices),
from a package that carries it. ``SHARES_REQUIRE_BROWSER=1`` makes a missing browser a failure.
"""

from __future__ import annotations

import importlib.resources
import os
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import axe_playwright_python
import pytest

AXE = (importlib.resources.files(axe_playwright_python) / "axe.min.js").read_text("utf-8")
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


class Pages:
    """Pages opened from files in a folder; each notes what it asks for (``asked``) and complains about (``said``).

    A CSS pixel is as many ``dots`` wide and high.
    """

    def __init__(self, browser: Any, folder: Path, *, dots: int = 1) -> None:
        self._browser, self._folder, self._dots, self._open = browser, folder, dots, list[Any]()

    def show(self, data: bytes, *, width: int = 1200, media: str = "screen") -> Any:
        """Open a page, which must ask for nothing but itself."""
        file = self._folder / f"page{len(self._open)}.html"
        file.write_bytes(data)
        page = self._browser.new_page(viewport={"width": width, "height": 900}, device_scale_factor=self._dots)
        self._open.append(page)
        page.asked, page.said = [], []
        page.on("request", lambda request: page.asked.append(request.url))
        page.on("console", lambda message: page.said.append(message.text))
        page.on("pageerror", lambda error: page.said.append(str(error)))
        page.on("dialog", lambda dialog: (page.said.append(dialog.message), dialog.dismiss()))
        page.emulate_media(media=media)
        page.goto(file.as_uri())
        assert (page.asked, page.said) == ([file.as_uri()], [])
        return page

    def close(self) -> None:
        """Close all of them."""
        for page in self._open:
            page.close()


def violations(page: Any) -> dict[str, list[str]]:
    """Return what axe finds wrong, rule by rule; it must have looked at something."""
    page.evaluate(AXE)
    found = page.evaluate("axe.run(document, {resultTypes: ['violations', 'passes']})")
    assert len(found["passes"]) > 15
    return {rule["id"]: [node["html"][:100] for node in rule["nodes"]] for rule in found["violations"]}


def sticking_out(page: Any, width: int) -> list[str]:
    """Return what is cut off at the side of a page of some width; what moves sideways by itself is not."""
    if (wide := page.evaluate("document.documentElement.scrollWidth")) > width:
        return [f"the page is {wide} wide"]
    found: list[str] = page.evaluate(
        """width => [...document.querySelectorAll('body *')].filter(e => {
            const box = e.getBoundingClientRect();
            return box.width > 1 && (box.right > width + 1 || box.left < -1);
        }).filter(e => getComputedStyle(e.closest('.scroll') || document.body).overflowX !== 'auto')
        .map(e => e.outerHTML.slice(0, 80))""",
        width,
    )
    return found
