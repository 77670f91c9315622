"""The page of a plan in a real browser: it tells what the plan tells, keeps nobody out, and loads nothing.

Source: axe-core (rules of WCAG 2.0 to 2.2, levels A and AA, and its best practices); WCAG 2.2, 1.4.1 (colour is not the
only means) and 1.4.10 (reflow at 320 CSS pixels); ISO 216 (A4) and ANSI Y14.1 (Letter).
"""

from __future__ import annotations

import re
import subprocess
import sys
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy
import pytest
from browser import Pages, started, sticking_out, violations

from shares.documents.policy import Policy
from shares.planning import numbers
from shares.planning.advice import outlook
from shares.planning.assumed import assumptions
from shares.planning.examine import examine
from shares.planning.model import model_of
from shares.planning.page import CAUTIONS, Drawn, drawn, plan_page
from shares.planning.simulate import INSTALL

EXAMPLES = {
    path.stem: path.read_bytes() for path in (Path(__file__).parents[2] / "examples" / "policies").glob("*.toml")
}
MILLIMETRE = 96 / 25.4
SIZES = ((1200, "screen"), (320, "screen"), (int(180 * MILLIMETRE), "print"))
SCRIPT = "<script>alert(1)</script>"
IMAGE = '"><img src=x onerror=alert(2)>'


def page_of(data: bytes, years: float = 10, *, full: bool = False) -> bytes:
    policy = Policy.parse(data)
    model = model_of(policy)
    view = outlook(model, years, full=full)
    return plan_page(
        examine(policy),
        model,
        view,
        drawn(model, years),
        assumptions(policy),
        digest=policy.digest(),
        program="shares 1.0",
    )


def hostile() -> bytes:
    """Text that is code or endless wherever a policy may have some."""
    text = EXAMPLES["first-draft"].decode()
    text = text.replace('label = "Signing key of the tide tables"', f"label = {SCRIPT + IMAGE!r}")
    text = text.replace('site = "harbour office"', f"site = {'W' * 64!r}")
    return text.replace('reports_to = "board of the trust"', f"reports_to = {SCRIPT!r}").encode()


def harmless() -> bytes:
    """A policy in which nothing is ever lost, leaked or away."""
    rates = '[rates]\nloss = "0 %/y"\nleak = "0 %/y"\ndeparture = "0 %/y"\nhanded_on = "100 %"\nabsent = "0 %"\n'
    text = EXAMPLES["break-glass"].decode() + rates
    for site in ("north pier", "south pier", "light-house", "dry dock", "harbour office"):
        text += f'[[site]]\nname = "{site}"\nloss = "0 %/y"\nleak = "0 %/y"\nabsent = "0 %"\n'
    for line in ("harbour master", "chief of lights", "chief of works", "board of the trust"):
        text += f'[[line]]\nname = "{line}"\nloss = "0 %/y"\nleak = "0 %/y"\nabsent = "0 %"\n'
    return text.encode()


def entangled() -> bytes:
    """Twenty-four custodians whose sites, lines and media cross in every way, in groups that overlap."""
    text = 'label = "Tide archive"\nkey_type = "other"\n'
    for i in range(24):
        text += f'[[custodian]]\nname = "pier {i}"\nperson = "keeper {i}"\nsite = "site {i % 7}"\n'
        text += f'reports_to = "chief {i % 5}"\nmedium = "{("paper", "stick", "card")[i % 3]}"\n'
    for i in range(6):
        members = sorted({(i * 5 + j * j) % 24 for j in range(14)} | set(range(i, 24, 6)))
        text += f"[group.g{i}]\nneed = 4\nfrom = {[f'pier {j}' for j in members]}\n"
    return (text + "[rule]\nneed = 3\nfrom = ['g0', 'g1', 'g2', 'g3', 'g4', 'g5']\n").encode()


PAGES: dict[str, Callable[[], bytes]] = {
    **{name: (lambda data=data: page_of(data)) for name, data in EXAMPLES.items()},
    "hostile": lambda: page_of(hostile()),
    "harmless": lambda: page_of(harmless()),
    "entangled": lambda: page_of(entangled()),
    "a day": lambda: page_of(EXAMPLES["break-glass"], 1 / 365),
    "a hundred years": lambda: page_of(EXAMPLES["tide-archive"], 100),
}


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    yield from started()


@pytest.fixture
def pages(browser: Any, tmp_path: Path) -> Iterator[Pages]:
    opened = Pages(browser, tmp_path)
    yield opened
    opened.close()


@pytest.mark.parametrize("name", PAGES)
def test_it_keeps_nobody_out_and_fits(pages: Pages, name: str) -> None:
    page = pages.show(PAGES[name]())
    for width, media in SIZES:
        page.set_viewport_size({"width": width, "height": 900})
        page.emulate_media(media=media)
        assert violations(page) == {}, (width, media)
        assert sticking_out(page, width) == [], (width, media)
    assert page.said == []


@pytest.mark.parametrize(
    ("rule", "planted"),
    [
        ("svg-img-alt", "for (const e of document.querySelectorAll('svg[role]')) e.removeAttribute('aria-labelledby'),"
                        " e.querySelector('title').remove()"),
        ("color-contrast", "document.styleSheets[0].insertRule('p { color: #999 !important }')"),
        ("scrollable-region-focusable",
         "for (const e of document.querySelectorAll('.scroll')) e.removeAttribute('tabindex')"),
    ],
)  # fmt: skip
def test_what_would_keep_people_out_is_found(pages: Pages, rule: str, planted: str) -> None:
    page = pages.show(PAGES["tide-gate"](), width=320)
    page.evaluate(planted)
    assert rule in violations(page)


def test_names_and_labels_stay_text(pages: Pages) -> None:
    page = pages.show(PAGES["hostile"]())
    assert page.locator("script, img").count() == 0
    assert page.locator("h1").inner_text() == SCRIPT + IMAGE
    assert page.locator("body").inner_text().count(SCRIPT) > 2


def test_it_tells_what_the_plan_tells(pages: Pages) -> None:
    policy = Policy.parse(EXAMPLES["tide-gate"])
    plan, view = examine(policy), outlook(model_of(policy), 10)
    assert view.odds is not None
    assert view.causes
    assert view.changes
    page = pages.show(page_of(EXAMPLES["tide-gate"]))
    text = " ".join(page.locator("body").inner_text().split())
    for words in (
        f"To recover: {plan.rule.words()}. Attested never, refreshed never.",
        "Confidential, like the policy itself",
        *view.advice,
        *(finding.what for finding in plan.findings),
        *assumptions(policy),
        *CAUTIONS,
        policy.digest().hex(),
        f"Loss: no quorum is left {numbers.chance(view.odds.loss)}",
    ):
        assert " ".join(words.split()) in text
    rows = page.locator("section", has=page.locator("#changes")).locator("tbody tr").all_inner_texts()
    assert rows[0] == f"(as it is)\t{numbers.chance(view.odds.loss)}\t{numbers.chance(view.odds.exposure)}"
    assert rows[1] == "attest every year\t3.3 %\t0.96 %"
    assert page.get_by_role("heading", level=2).all_inner_texts() == [
        "In short", "What to change first", "Loss against exposure: all rules up to 12 custodians",
        "How often to attest, and to refresh", "Where the danger comes from", "The structure",
        "What the odds rest on", "What these odds do not tell", "Decided",
    ]  # fmt: skip


def test_what_a_board_must_know_comes_first(pages: Pages) -> None:
    plan = examine(Policy.parse(EXAMPLES["first-draft"]))
    short = pages.show(PAGES["first-draft"]()).locator("section", has_text="In short")
    assert short.locator(".verdict").inner_text() == plan.verdict
    assert short.locator("li").all_inner_texts() == [finding.what for finding in plan.serious]
    strict = EXAMPLES["first-draft"].replace(b"pad = 64", b"pad = 64\nstrict = true")
    text = pages.show(page_of(strict)).locator(".verdict").inner_text()
    assert text.startswith("The policy is strict: `shares split` refuses it")


def test_all_rates_that_the_odds_rest_on_are_there(pages: Pages) -> None:
    page = pages.show(
        page_of(EXAMPLES["break-glass"].replace(b'name = "dry-dock"', b'name = "dry-dock"\nloss = "7 %/y"'))
    )
    rows = page.locator("table.rates tbody tr").all_inner_texts()
    assert rows[0] == "Single shares: north-pier, south-pier, light-house, registrar\t4 %\tnone\tnone"
    assert rows[1] == "Single shares: dry-dock\t7 %\tnone\tnone"
    assert [row.split(":")[0] for row in rows[2:]] == [
        "People, with all shares that they hold", "Sites, with all shares there",
        "Reporting lines, with all shares in them",
    ]  # fmt: skip
    assert "made good after 14 days; refreshed every 2 years" in page.locator("body").inner_text()


def test_what_is_drawn_is_also_told(pages: Pages) -> None:
    page = pages.show(PAGES["break-glass"]())
    picture = page.get_by_role("img", name=re.compile("Loss against exposure of all rules"))
    assert "this policy: loss 0.52 %, exposure 0.74 %. Both are lower than" in picture.locator("desc").text_content()
    page.evaluate("for (const e of document.querySelectorAll('details')) e.open = true")
    rows = page.locator("details", has_text="All 78 rules").locator("tbody tr").all_inner_texts()
    assert len(rows) == picture.locator("circle, path.none").count() == 78
    assert picture.locator("path.none").count() == sum(row.endswith("no choice") for row in rows) >= 23
    assert next(row for row in rows if row.startswith("3 of 5")) == "3 of 5\t0.52 %\t0.74 %\tnone\t"
    assert sum(row.endswith("not bettered") for row in rows) == picture.locator("circle.best").count() > 5
    along = page.locator("details", has_text="The same in numbers").locator("tbody tr").all_inner_texts()
    assert along[-1].startswith("never\t35 %")
    bars = page.locator("table.causes tbody tr").first
    widths = [float(bar.get_attribute("width")) for bar in bars.locator("rect").all()]
    assert len(widths) == 3
    assert max(widths) == 100


def test_it_is_legible_without_colour(pages: Pages) -> None:
    """What colour marks is marked by its shape too, and nothing that has the colour has the shape of anything else."""
    page = pages.show(PAGES["break-glass"]())
    fills = page.evaluate(
        """[...document.querySelectorAll('svg *')].filter(e => e.tagName !== 'title' && e.tagName !== 'desc').map(e => {
            const [r, g, b] = getComputedStyle(e).fill.match(/[0-9]+/g) || [0, 0, 0];
            return [e.tagName, e.classList[0] || '', Math.max(r, g, b) - Math.min(r, g, b)];
        })"""
    )
    coloured = {(tag, kind) for tag, kind, spread in fills if spread > 20}
    assert coloured == {("path", "policy"), ("path", "now")}
    diamonds = {
        (tag, kind)
        for tag, kind, _ in fills
        if tag == "path" and kind not in ("total", "frontier", "line0", "line1", "none")
    }
    assert diamonds == coloured


def test_it_prints_in_black_on_white_on_both_papers(pages: Pages, tmp_path: Path) -> None:
    page = pages.show(PAGES["tide-gate"](), media="print")
    for paper in ("A4", "Letter"):
        file = tmp_path / f"{paper}.pdf"
        page.pdf(path=file, format=paper, prefer_css_page_size=True)
        sheets = subprocess.run(["pdftotext", "-layout", file, "-"], capture_output=True, text=True, check=True).stdout
        printed = sheets.strip("\f").split("\f")
        assert 3 <= len(printed) <= 6
        for number, sheet in enumerate(printed, 1):
            assert "Confidential: it tells whom to coerce, and where." in sheet
            assert f"{number} of {len(printed)}" in sheet
    colours = page.evaluate(
        """[...document.querySelectorAll('body *')].filter(e => [...e.childNodes].some(
            n => n.nodeType === 3 && n.textContent.trim())).map(e => getComputedStyle(e).color)"""
    )
    assert set(colours) == {"rgb(17, 17, 17)"}


def test_what_could_not_be_worked_out_is_left_out_and_said(pages: Pages) -> None:
    page = pages.show(PAGES["entangled"]())
    text = " ".join(page.locator("body").inner_text().split())
    assert "Over 10 years Chance, simulated (95 % interval)" in text
    assert f"Simulated from 100,000 histories, drawn by numpy {numpy.__version__} with seed 1, the same ones at" in text
    assert page.locator("svg.plane path.policy").count() == 1
    assert "The diamond is this policy, as simulated, and its cross the 95 % intervals. Intervals are" in text
    headings = page.get_by_role("heading", level=2).all_inner_texts()
    assert not {"What to change first", "Where the danger comes from"} & set(headings)
    assert "In short" in headings
    policy = Policy.parse(EXAMPLES["break-glass"])
    model = model_of(policy)
    data = plan_page(
        examine(policy), model, outlook(model, 10), Drawn((), ()), (), digest=policy.digest(), program="shares 1.0"
    )
    assert pages.show(data).locator("svg[role=img]").count() == 0


def test_exact_odds_that_were_simulated_as_a_check_come_with_it(pages: Pages) -> None:
    policy = Policy.parse(EXAMPLES["break-glass"])
    model = model_of(policy)
    view = outlook(model, 10, histories=2000, seed=7)
    data = plan_page(examine(policy), model, view, Drawn((), ()), (), digest=policy.digest(), program="shares 1.0")
    text = " ".join(pages.show(data).locator("body").inner_text().split())
    assert "As a check, the odds were simulated: loss: no quorum is left, " in text
    assert "The exact odds lie within all three intervals. Simulated from 2,000 histories, drawn by" in text


def test_what_no_history_showed_is_drawn_at_the_most_that_it_can_be(pages: Pages) -> None:
    policy = Policy.parse(entangled())
    model = model_of(policy)
    rare = replace(model, causes=tuple(replace(one, loss=one.loss / 1e6) for one in model.causes))
    view = outlook(rare, 10, histories=1000)
    assert view.simulated is not None
    assert view.simulated.loss.seen == 0
    data = plan_page(
        examine(policy),
        rare,
        view,
        drawn(model, 10),
        assumptions(policy),
        digest=policy.digest(),
        program="shares 1.0",
    )
    said = pages.show(data).locator("svg.plane path.policy title").text_content()
    assert said.startswith("this policy: loss 0 of 1,000: below 0.37 %, exposure ")
    picture = pages.show(data).locator("svg.plane")
    assert picture.locator("path.spread").count() == 1
    assert "Whether any such rule has less of both than this policy, so many histories do not tell." in (
        picture.locator("desc").text_content()
    )


def test_effects_that_chance_hides_are_counted_where_they_are_missed(pages: Pages) -> None:
    policy = Policy.parse(entangled())
    model = model_of(policy)
    view = outlook(model, 10, full=True, histories=500)
    assert view.causes_left_out > 0
    data = plan_page(examine(policy), model, view, Drawn((), ()), (), digest=policy.digest(), program="shares 1.0")
    text = " ".join(pages.show(data).locator("body").inner_text().split())
    assert f"Left out are {view.causes_left_out} causes and {view.changes_left_out} changes: what they do" in text


def test_what_is_drawn_at_the_edge_is_said_to_be_less(pages: Pages) -> None:
    said = "What is less likely than 1 in a trillion is drawn as that."
    assert said in pages.show(PAGES["harmless"]()).locator("figcaption").first.inner_text()
    assert said not in pages.show(PAGES["tide-gate"]()).locator("figcaption").first.inner_text()


def test_without_numpy_it_says_what_to_install(pages: Pages, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "numpy", None)
    monkeypatch.delitem(sys.modules, "shares.planning.histories", raising=False)
    page = pages.show(page_of(entangled()))
    assert INSTALL in page.locator("body").inner_text()
    assert "Chance" not in page.locator("body").inner_text()
    assert (
        "The odds of the policy itself are not known, so it is not on the plane." in page.locator("body").inner_text()
    )
    assert page.locator("svg.plane path.policy").count() == 0


def test_the_same_policy_makes_the_same_page_and_another_one_another() -> None:
    assert page_of(EXAMPLES["break-glass"]) == page_of(EXAMPLES["break-glass"])
    policy = Policy.parse(EXAMPLES["break-glass"])
    model = replace(model_of(policy), attest_every=30)
    other = plan_page(
        examine(policy),
        model,
        outlook(model, 10),
        drawn(model, 10),
        assumptions(policy),
        digest=policy.digest(),
        program="shares 1.0",
    )
    assert other != page_of(EXAMPLES["break-glass"])
