"""Scripts, reports and affidavits on paper: in a real browser, whole, on the paper they are made for, and harmless.

Source: axe-core (rules of WCAG 2.0 to 2.2, levels A and AA, and its best practices), from a package that carries it;
ISO 216 (A4) and ANSI Y14.1 (Letter).
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from browser import Pages, started, sticking_out, violations
from evidence.harbour_set import NAMES, at, deal, enter, policy
from parties import unlocked
from strategies import CREATED

from shares.documents.ceremony_script import CeremonyScript, Software
from shares.documents.event import Copied, Delivered, Received
from shares.documents.policy import Policy
from shares.evidence.ceremony import log_exception, log_step
from shares.evidence.ceremony_report import ceremony_report
from shares.evidence.inventory import Copy
from shares.evidence.paperwork import affidavit_page, report_lines, report_page, script_page, script_text
from shares.evidence.script import make_script
from shares.history.files import FolderFiles

SOFTWARE = Software(version="0.1.0", digest=bytes(range(32)))
MILLIMETRE = 96 / 25.4  # CSS pixels
WIDTHS = {"A4": 186 * MILLIMETRE, "Letter": (8.5 * 25.4 - 24) * MILLIMETRE}
HOSTILE = "<script>alert(1)</script><img src=x onerror=alert(2)>"


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    yield from started()


@pytest.fixture
def show(browser: Any, tmp_path: Path) -> Iterator[Callable[[bytes], Any]]:
    """Open a page from a file, as it is printed."""
    pages = Pages(browser, tmp_path)
    yield lambda data: pages.show(data, width=900, media="print")
    pages.close()


def scripts() -> dict[str, CeremonyScript]:
    """Plain, signed, and with everything as long and as hostile as it may be."""
    plain = make_script(policy(), SOFTWARE, created=CREATED)
    with unlocked("registrar") as key:
        signed = plain.signed(key)
    text = policy("acknowledgement = true\ndual_control = true").text.decode()
    text = text.replace("Tide archive root", "W" * 500).replace("harbour boat", HOSTILE).replace("by hand", "w" * 500)
    people = {"dealer": HOSTILE, "administrator": "W" * 500}
    worst = make_script(Policy.parse(text.encode()), SOFTWARE, people=people, planned="x" * 500, created=CREATED)
    return {"plain": plain, "signed": signed, "worst": worst}


def beyond(page: Any, width: float) -> list[str]:
    """What sticks out where the page is as wide as some paper leaves room."""
    page.set_viewport_size({"width": round(width), "height": 1000})
    return sticking_out(page, round(width))


def levels(page: Any) -> list[int]:
    found: list[int] = page.evaluate("[...document.querySelectorAll('h1,h2,h3')].map(h => Number(h.tagName[1]))")
    return found


@pytest.mark.parametrize("name", ["plain", "signed", "worst"])
def test_a_script_has_every_step_on_any_paper(show: Callable[[bytes], Any], name: str) -> None:
    script = scripts()[name]
    page = show(script_page(script))
    assert [beyond(page, width) for width in WIDTHS.values()] == [[], []]
    rows = page.evaluate(
        """[...document.querySelectorAll('table.steps tbody tr:not(.part)')].map(row =>
            [row.cells[0].innerText, row.cells[2].innerText, row.cells[3].innerText, row.cells[4].innerText])"""
    )
    assert [row[0] for row in rows] == [str(number) for number in range(1, len(script.steps) + 1)]
    for row, step in zip(rows, script.steps, strict=True):
        for wanted in (step.what, step.command, step.expected, step.note):
            assert " ".join((wanted or "").split()) in " ".join(row[1].split())
        assert row[2:] == ["", ""]  # for initials and time
    assert script.spoken() in page.locator("th.running").inner_text()
    assert levels(page) == [1, 2, 2, 2, 2, 2]
    assert page.locator("html").get_attribute("lang") == "en"
    text = script_text(script)
    for step in script.steps:
        for wanted in (step.what, step.expected):
            assert "".join(wanted.split()) in "".join(text.split())


def test_a_script_prints_with_its_digest_on_every_page_of_steps(show: Callable[[bytes], Any]) -> None:
    page = show(script_page(scripts()["plain"]))
    pages = {paper: len(re.findall(rb"/Type\s*/Page\b", page.pdf(format=paper))) for paper in WIDTHS}
    assert all(5 <= count <= 12 for count in pages.values()), pages
    assert (
        page.evaluate("getComputedStyle(document.querySelector('table.steps thead')).display") == "table-header-group"
    )


def reported(folder: Path, label: str) -> tuple[str, bytes]:
    """A report with something of everything: as text, and as a page."""
    script = make_script(policy(), SOFTWARE, people={"dealer": label}, created=CREATED)
    folder.mkdir()
    log_step(folder, script, 2, initials=label, time=at(0))
    log_step(folder, script, 1, initials="A.K.", remark=label, time=at(1))
    log_exception(folder, script, 7, initials="A.K.", exception=label, remedy="it was set", time=at(2))
    of_set = deal(folder, minute=3)
    enter(of_set, Delivered, what="delivered", custodian="registrar", serial=label, channel=label)
    enter(of_set, Received, what="received", custodian="registrar", serial="P-1")
    enter(of_set, Copied, what="copied", custodian="registrar", copy="S-1")
    report = ceremony_report(FolderFiles(folder))
    return "\n".join(report_lines(report)), report_page(report)


@pytest.mark.parametrize("label", ["plain", HOSTILE, "W" * 500])
def test_a_report_tells_exceptions_first_and_all_else_after(
    show: Callable[[bytes], Any], tmp_path: Path, label: str
) -> None:
    text, data = reported(tmp_path / "set", label)
    page = show(data)
    assert [beyond(page, width) for width in WIDTHS.values()] == [[], []]
    told = page.locator("main").inner_text()
    headings = page.evaluate("[...document.querySelectorAll('h2')].map(h => h.innerText)")
    assert headings == ["Exceptions", "What it was about", "Roles", "Steps", "Shares, by serial", "Signatures"]
    for shown in (told, text):
        flat = "".join(shown.split())
        for wanted in (label, "it was set", "logged out of order", "arrived with P-1", "1 exception entered", *NAMES):
            assert "".join(wanted.split()) in flat
    assert page.locator("script, img").count() == 0


@pytest.mark.parametrize(
    "copy",
    [
        Copy("registrar", "original", 1),
        Copy("registrar", "S" * 500, 7, packed="card", sent="P" * 500, received="<b>P"),
        Copy("W" * 64, HOSTILE, 4_294_967_295),
    ],
    ids=["plain", "long", "hostile"],
)
def test_an_affidavit_is_one_page_with_room_for_both_to_sign(
    show: Callable[[bytes], Any], tmp_path: Path, copy: Copy
) -> None:
    page = show(affidavit_page(deal(tmp_path / "set").record, copy))
    for paper in WIDTHS:
        assert len(re.findall(rb"/Type\s*/Page\b", page.pdf(format=paper))) == 1, paper
    told = page.locator("main").inner_text()
    assert "".join(copy.name.split()) in "".join(told.split())
    assert page.locator("table.form th", has_text="Signature").count() == 2
    assert "I am not the custodian of this share" in told


def test_the_pages_keep_nobody_out(show: Callable[[bytes], Any], tmp_path: Path) -> None:
    pages = {
        "script": script_page(scripts()["signed"]),
        "report": reported(tmp_path / "set", "plain")[1],
        "affidavit": affidavit_page(deal(tmp_path / "other").record, Copy("registrar", "original", 1)),
    }
    for name, data in pages.items():
        page = show(data)
        page.emulate_media(media="screen")
        assert (name, violations(page)) == (name, {})
    page.evaluate("document.documentElement.removeAttribute('lang')")
    assert "html-has-lang" in violations(page)
