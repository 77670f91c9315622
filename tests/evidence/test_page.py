"""The page of an audit in a real browser: it says what was found, keeps nobody out, and loads nothing.

Source: axe-core (rules of WCAG 2.0 to 2.2, levels A and AA, and its best practices), from a package that carries it;
WCAG 2.2, 1.4.10 (reflow at 320 CSS pixels); ISO 216 (A4) and ANSI Y14.1 (Letter).
"""

from __future__ import annotations

import re
import time
from dataclasses import replace
from datetime import timedelta

import pytest
from browser import Pages, started, sticking_out, violations
from evidence.samples import AT, a_year, custodian, good, of_verdict, on, proof, unreadable
from parties import card

from shares.evidence.audited import ExceptionRow, MarginSince, Verdict
from shares.evidence.calendar import LEGEND
from shares.evidence.page import CAUTIONS, MEANS, audit_page
from shares.history.heads import heads_in

SCRIPT = "<script>alert(1)</script>"
IMAGE = '"><img src=x onerror=alert(2)>'
MILLIMETRE = 96 / 25.4
NARROWEST = 180 * MILLIMETRE
"""What A4, the narrower of the two papers, leaves between the margins."""


def hostile():
    """Text that is code, endless, or written from right to left, wherever a stranger may have put some."""
    year = a_year()
    wide, right = "W" * 500, "\u05e0\u05de\u05dc " * 50
    return replace(
        year,
        label=SCRIPT + IMAGE,
        where="/sets/" + SCRIPT + "\x1b[31m\n",
        rule="any 3 of " + "W" * 3000,
        notes=(SCRIPT, wide),
        reasons=tuple(replace(one, what=SCRIPT + wide, next=IMAGE + right) for one in year.reasons),
        custodians=tuple(
            replace(one, name=f"{IMAGE[:20]}{'W' * 43}{i}", person=SCRIPT, site=wide, why=right)
            for i, one in enumerate(year.custodians)
        ),
        exposure=tuple(replace(one, who=wide, how=(SCRIPT, wide), shares=("W" * 64,) * 40) for one in year.exposure),
        drills=tuple(
            replace(one, scope=SCRIPT, outcomes=(IMAGE,), findings=(wide,), actions=(right,)) for one in year.drills
        ),
        tasks=tuple(replace(one, what=SCRIPT, advice=wide, about=(wide,)) for one in year.tasks),
        exceptions=(ExceptionRow(2**32 - 1, AT, wide, SCRIPT),),
        signers=tuple(replace(one, name="W" * 64) for one in year.signers),
    )


def ten_years():
    """As many custodians and rounds as ten years may bring."""
    start = AT - timedelta(days=3650)
    times = [start + timedelta(days=90 * i) for i in range(40)]
    rows = tuple(
        custodian(f"pier-{i}", f"Person {i}", "confirmed", "", *(proof(time, 7 * i) for time in times))
        for i in range(30)
    )
    margins = tuple(MarginSince(time, i % 7 - 1, i % 7) for i, time in enumerate(times))
    return replace(a_year(), created=start, custodians=rows, margins=margins)


PAGES = {
    "a year": [a_year()],
    "all well": [good()],
    "nothing to read": [unreadable()],
    "many": [a_year(), good(), unreadable(), *map(of_verdict, Verdict)],
    "hostile": [hostile()],
    "hostile among others": [hostile(), good(), hostile()],
    "ten years": [ten_years()],
    "fresh": [replace(good(), margins=(MarginSince(AT, -1, -1),), created=AT, drills=(), custodians=(), signers=())],
    "retired": [replace(good(), retired=on(11), keep_until=on(11, year=2028), head=None, intervals=None)],
}


@pytest.fixture(scope="module")
def browser():
    yield from started()


@pytest.fixture
def show(browser, tmp_path):
    """Open the page of some audits from a file."""
    pages = Pages(browser, tmp_path)
    yield lambda audits, width=1200, media="screen": pages.show(
        audit_page(audits, program="shares 1.0"), width=width, media=media
    )
    pages.close()


SIZES = ((1200, "screen"), (320, "screen"), (int(NARROWEST), "print"))


@pytest.mark.parametrize("name", PAGES)
def test_it_keeps_nobody_out_and_fits(show, name):
    page = show(PAGES[name])
    for width, media in SIZES:
        page.set_viewport_size({"width": width, "height": 900})
        page.emulate_media(media=media)
        assert violations(page) == {}, (width, media)
        # Nothing is lost at the side: of the page on paper, or of the screen, where wide tables move by themselves.
        assert sticking_out(page, width) == [], (width, media)
    assert page.said == []


@pytest.mark.parametrize(
    ("rule", "planted"),
    [
        ("image-alt", "document.querySelector('main').insertAdjacentHTML('beforeend', '<img>')"),
        ("svg-img-alt", "for (const e of document.querySelectorAll('svg')) e.removeAttribute('aria-labelledby'),"
                        " e.querySelector('title').remove()"),
        ("color-contrast", "document.styleSheets[0].insertRule('p { color: #999 !important }')"),
        ("heading-order", "document.querySelector('h2').outerHTML = '<h4>Why</h4>'"),
        ("html-has-lang", "document.documentElement.removeAttribute('lang')"),
        ("document-title", "document.title = ''"),
        ("landmark-one-main", "document.querySelector('main').outerHTML = '<div>nothing</div>'"),
        ("region", "document.body.insertAdjacentHTML('beforeend', '<p>outside</p>')"),
        ("scrollable-region-focusable",
         "for (const e of document.querySelectorAll('.scroll')) e.removeAttribute('tabindex')"),
    ],
)  # fmt: skip
def test_what_would_keep_people_out_is_found(show, rule, planted):
    page = show(PAGES["a year"], 320)
    page.evaluate(planted)
    assert rule in violations(page)


def test_names_and_labels_stay_text(show):
    page = show([hostile()])
    assert page.locator("script, img").count() == 0
    assert page.locator("h1").inner_text() == SCRIPT + IMAGE
    assert SCRIPT in page.locator("dl.facts dd").last.inner_text()
    assert page.locator("body").inner_text().count(SCRIPT) > 10
    assert page.said == []
    data = audit_page([hostile()], program="shares 1.0").decode()
    assert re.findall(r"[\x00-\x08\x0b-\x1f\x7f]", data) == []


@pytest.mark.parametrize(
    ("element", "attributes"),
    [
        ("img", {"src": "https://harbour.invalid/x.png"}),
        ("script", {"text": "document.title = 'run'"}),
        ("style", {"textContent": "body { display: none }"}),
        ("iframe", {"src": "https://harbour.invalid/"}),
    ],
)
def test_its_policy_lets_nothing_be_loaded_or_run(show, element, attributes):
    page = show([a_year()])
    title = page.title()
    violated = page.evaluate(
        """([element, attributes]) => new Promise((resolve, reject) => {
            document.addEventListener('securitypolicyviolation', event => resolve(event.effectiveDirective));
            setTimeout(() => reject('nothing was held back'), 5000);
            document.body.append(Object.assign(document.createElement(element), attributes));
        })""",
        [element, attributes],
    )
    assert violated.startswith({"iframe": "frame"}.get(element, element))
    assert page.title() == title


def test_the_verdict_comes_first_with_reasons_and_what_to_do(show):
    page = show([a_year()])
    text = page.locator("body").inner_text()
    before = (
        "Tide archive backup root",
        "At risk: recovery",
        "Why, and what to do",
        "Next: Have at least 1 more",
        "What is due",
    )
    places = [text.index(words) for words in before]
    assert places == sorted(places)
    assert page.get_by_role("heading", level=2).all_inner_texts() == [
        "Why, and what to do", "What is due", "Margin", "Calendar", "Custodians",
        "Exposure: who has known which shares", "Drills", "Exceptions", "What was checked", "What this does not prove",
    ]  # fmt: skip
    assert page.get_by_role("heading", level=1).all_inner_texts() == ["Tide archive backup root"]
    for words in (*CAUTIONS, a_year().head, a_year().record, "2 after the time of this audit were not looked at"):
        assert words in text


def test_of_many_the_worst_comes_first_and_links_lead_to_each(show):
    audits = PAGES["many"]
    page = show(audits)
    rows = page.locator("main > section").first.locator("tbody tr")
    verdicts = rows.locator("td:nth-child(2)").all_inner_texts()
    assert verdicts == sorted((one.verdict.value for one in audits), key=lambda v: -Verdict(v).rank)
    assert page.locator(".counts li").all_inner_texts() == ["2 broken", "2 at risk", "1 due", "1 unsigned", "2 good"]
    targets = [link.get_attribute("href") for link in rows.get_by_role("link").all()]
    assert len(set(targets)) == len(audits)
    for link, target in zip(rows.get_by_role("link").all(), targets, strict=True):
        assert page.locator(target).inner_text() == link.inner_text()
    page.keyboard.press("Tab")
    page.keyboard.press("Tab")
    page.keyboard.press("Enter")
    assert page.url.endswith(targets[0])


def test_of_very_many_the_worst_are_told_in_full(show, monkeypatch):
    monkeypatch.setattr("shares.evidence.page.MOST_DETAILED", 3)
    page = show(PAGES["many"])
    rows = page.locator("main > section").first.locator("tbody tr")
    assert (rows.count(), rows.get_by_role("link").count(), page.locator("article").count()) == (8, 3, 3)
    assert "The first 3 follow in full" in page.locator("main > section").first.inner_text()
    assert page.locator("article .verdict").all_inner_texts()[0].startswith("Broken")


def test_every_verdict_is_told_in_words_and_by_its_border(show):
    borders = set()
    for verdict in Verdict:
        page = show([of_verdict(verdict)])
        box = page.locator("header .verdict")
        assert box.inner_text() == f"{verdict.value.capitalize()}: {MEANS[verdict]}."
        borders.add(box.evaluate("e => { const s = getComputedStyle(e); return s.borderStyle + s.borderWidth }"))
    assert len(borders) == len(Verdict)


def test_what_is_drawn_is_also_told(show):
    page = show([a_year()])
    chart = page.get_by_role("img", name=re.compile("The margin in custodians over time"))
    assert "On 2026-12-01 the margin is no quorum, since 2026-09-09." in chart.locator("desc").text_content()
    table = page.get_by_role("table", name="The same in numbers")
    assert table.get_by_role("row").all_inner_texts()[1] == "2025-12-03\tno quorum"
    calendar = page.locator("table.calendar")
    assert calendar.get_by_role("rowheader").all_inner_texts()[:2] == ["The set", "north-pier"]
    # The marks themselves are silent, and each has words that are read aloud in its stead.
    assert calendar.locator(".mark").count() == calendar.locator(".mark[aria-hidden=true]").count()
    assert calendar.locator(".mark").count() == calendar.locator(".aloud").count() > 15
    explained = page.locator(".legend dt").all_inner_texts()
    assert set(calendar.locator(".mark").all_inner_texts()) == set(explained) == set(LEGEND)


def test_silence_is_told_by_its_word_and_explained(show):
    page = show([a_year()])
    row = page.locator("table.wide tr", has=page.get_by_role("rowheader", name="registrar", exact=True))
    assert "silent: asked, no answer by 2026-09-15" in row.first.inner_text()
    assert LEGEND["?"] in page.locator(".legend").inner_text()


def test_it_says_how_to_come_to_the_same_result():
    plain = audit_page([a_year()], program="shares 1.0").decode()
    assert "<code>shares audit SET --at 2026-12-01T07:00:00Z</code>." in plain
    head = heads_in(a_year().head)
    page = audit_page([a_year()], program="shares 1.0", trusted=[card("harbour-office"), card("registrar")], heads=head)
    told = re.sub(r"\s+", " ", page.decode())
    assert "--at 2026-12-01T07:00:00Z --trust CARD1 --trust CARD2 --head &#34;57 QFZA-" in told
    assert f"CARD1 is the card of harbour-office, <code>{card('harbour-office').fingerprint}</code>" in told
    assert f"CARD2 is the card of registrar, <code>{card('registrar').fingerprint}</code>" in told
    assert "head below" not in told


def test_it_prints_in_black_on_white_on_both_papers(show):
    page = show([a_year()], media="print")
    for paper in ("A4", "Letter"):
        pages = len(re.findall(rb"/Type\s*/Page\b", page.pdf(format=paper)))
        assert 3 <= pages <= 5
    # Printers leave backgrounds out: no text may need one.
    colours = page.evaluate(
        """[...document.querySelectorAll('body *')].filter(e => [...e.childNodes].some(
            n => n.nodeType === 3 && n.textContent.trim())).map(e => getComputedStyle(e).color)"""
    )
    assert set(colours) <= {"rgb(17, 17, 17)", "rgb(10, 61, 143)"}
    many = show(PAGES["many"], media="print")
    assert len(re.findall(rb"/Type\s*/Page\b", many.pdf(format="A4"))) > len(PAGES["many"])


def test_whoever_uses_the_keyboard_sees_where_they_are(show):
    page = show(PAGES["many"], 320)
    for _ in range(6):
        page.keyboard.press("Tab")
        width = page.evaluate("getComputedStyle(document.activeElement).outlineWidth")
        assert width == "3px"
    page.locator(".scroll").first.focus()
    page.keyboard.press("ArrowRight")
    # Asked again from here: a page that waits for a function would have to evaluate text, which its policy forbids.
    limit = time.monotonic() + 30
    while page.evaluate("document.querySelector('.scroll').scrollLeft") == 0:
        assert time.monotonic() < limit
        page.wait_for_timeout(50)


def test_it_is_the_same_for_the_same_audits():
    assert audit_page(PAGES["many"], program="shares 1.0") == audit_page(PAGES["many"], program="shares 1.0")
