"""The sheet in a real browser: it prints on the pages it should, loads nothing, and what is on it gives the share back.

Source: Chromium, headless, driven by playwright; zxing-cpp reads the code from a picture of the page; ISO 216 (A4) and
ANSI Y14.1 (Letter) for the sizes of paper; W3C, "Accessible Rich Internet Applications" (roles and names).
"""

from __future__ import annotations

import io
import itertools
import re

import pytest
import zxingcpp
from browser import Pages, started
from paper.conftest import CARD, identity
from PIL import Image
from strategies import revealed

from shares.custody.presented import Presented
from shares.custody.recover import recover
from shares.custody.split import flat_rule, split
from shares.custody.verify import verify_share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import Cost, passphrase_sealer
from shares.memory import Secret
from shares.paper.paperform import from_paper, to_paper
from shares.paper.sheet import MIN_MODULE, make_form, make_sheet
from shares.paper.transcription import Transcription, gather

MILLIMETRE = 96 / 25.4  # CSS pixels
# Letter is the shorter paper and A4 the narrower one; less the margins of the style.
ROOM = (180 * MILLIMETRE, (11 * 25.4 - 24) * MILLIMETRE)
KEY = b"Kj4qVz9Lm2Xw7RtB-made-up-8hPd-32"
NAMES = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock")
WIDE = tuple("W" * 62 + f"-{i}" for i in range(5))
FAR_EAST = tuple("\u6e2f\u6e7e" * 20 + "W" * 23 + str(i) for i in range(5))
HOSTILE = ("<script>alert(1)", "<img src=x onerror=alert(2)>", *NAMES[:3])


@pytest.fixture(scope="module")
def browser():
    yield from started()


@pytest.fixture
def show(browser, tmp_path):
    """Open a share's sheet from a file, as it is printed, in dots small enough for its code to be read."""
    pages = Pages(browser, tmp_path, dots=3)
    yield lambda document, **options: pages.show(make_sheet(document, **options).page, width=900, media="print")
    pages.close()


def dealt(names=NAMES, label="Tide archive backup root", secret=KEY):
    return split(Secret.of(secret), flat_rule(3, names), label=label)


def wrapped(share):
    return WrappedShare.wrap(share, passphrase_sealer(Secret.of(b"made up"), Cost(65_536, 1, 1)))


def code_on(page):
    """Take a picture of the code and have it read, as a QR code: in so many squares a reader sees bars at times."""
    image = Image.open(io.BytesIO(page.locator("figure.code").screenshot()))
    [found] = zxingcpp.read_barcodes(image, formats=zxingcpp.BarcodeFormat.QRCode)
    return found.text


def lines_on(page):
    """The typed lines as they stand in the table, group by group."""
    return page.evaluate(
        """[...document.querySelectorAll('table.lines tbody tr')].map(
            row => [...row.cells].map(cell => cell.innerText).join(' '))"""
    )


def cases(for_card):
    """Short and long, narrow and wide, few lines and as many as there may be."""
    (most, *_) = dealt(FAR_EAST, "W" * 500, bytes(182)).shares
    return {
        "bare": dealt().shares[0],
        "sealed": wrapped(dealt().shares[0]),
        "for a card": for_card,
        "wide names": dealt(WIDE, "W" * 500).shares[0],
        "wide names, sealed": wrapped(dealt(WIDE, "\u6e2f" * 500).shares[0]),
        "as many lines as there may be": most,
        "long and without lines": dealt(WIDE, "W" * 500, bytes(1200)).shares[4],
        "names that are code": dealt(HOSTILE, "</title><script>alert(3)</script>").shares[0],
        "an endless rule": dealt().shares[0].with_notes(rule="any 3 of " + "W" * 60_000, label="x" * 500),
        "without notes": from_paper(to_paper(dealt().shares[0])),
    }


def test_it_prints_on_one_page_and_one_to_sign(show, for_card):
    lines = set()
    for name, document in cases(for_card).items():
        page = show(document)
        lines.add(len(lines_on(page)))
        for paper in ("A4", "Letter"):
            printed = page.pdf(format=paper)
            assert len(re.findall(rb"/Type\s*/Page\b", printed)) == 2, (name, paper)
        sizes = page.evaluate(
            "[...document.querySelectorAll('.page')].map(e => [e.scrollWidth, e.getBoundingClientRect().height])"
        )
        assert len(sizes) == 2
        assert all(width <= ROOM[0] + 1 and height <= ROOM[1] for width, height in sizes), (name, sizes)
        # Nothing sticks out of the page or of the box that it is in; only label and rule are cut, on purpose.
        out = page.evaluate(
            """[...document.querySelectorAll('body *')].filter(e => {
                const box = e.getBoundingClientRect(), page = document.body.getBoundingClientRect();
                return box.right > page.right + 1 || box.left < page.left - 1
                    || (e.clientWidth && e.scrollWidth > e.clientWidth + 1)
                    || (e.clientHeight && e.scrollHeight > e.clientHeight + 1 && !e.matches('.label, .rule'));
            }).map(e => e.outerHTML.slice(0, 60))"""
        )
        assert out == [], name
        assert page.said == []
    assert {0, 13, 32} <= lines


def test_the_room_of_a_page_is_used_and_nothing_sticks_together(show, for_card):
    for name, document in cases(for_card).items():
        page = show(document)
        rows = page.evaluate(
            """[...document.querySelectorAll('table.lines tbody tr')].map(row => {
                const range = document.createRange();
                range.selectNodeContents(row.cells[1]);
                return range.getBoundingClientRect().top;
            })"""
        )
        steps = [(below - above) / MILLIMETRE for above, below in itertools.pairwise(rows)]
        within, between = [step for i, step in enumerate(steps) if (i + 1) % 4], steps[3::4]
        # Letters of 11.5 points are 4.06 millimetres high; a typist's eye is led by the larger step after every four.
        assert all(step > 4.1 for step in within), name
        assert all(step > max(within) + 1.2 for step in between), name
        tops = page.evaluate(
            """[...document.querySelectorAll('.page')].map(e => {
                const foot = e.querySelector('footer').getBoundingClientRect(), box = e.getBoundingClientRect();
                const above = [...e.querySelectorAll('.columns, .form')].map(x => x.getBoundingClientRect().bottom);
                return [box.bottom - foot.bottom, foot.top - Math.max(...above)];
            })"""
        )
        assert all(abs(left) < 1 and gap >= 2 * MILLIMETRE - 1 for left, gap in tops), (name, tops)
        if rows:
            caption, head = page.evaluate(
                """['.lines caption', '.lines thead th'].map(at => {
                    const range = document.createRange();
                    range.selectNodeContents(document.querySelector(at));
                    return range.getBoundingClientRect();
                })"""
            )
            assert head["top"] - caption["bottom"] > 1 * MILLIMETRE, name
    short = show(dealt().shares[0])
    height = short.evaluate("document.querySelector('.page').getBoundingClientRect().height")
    assert ROOM[1] - height < 5 * MILLIMETRE


@pytest.mark.parametrize("name", [NAMES[0], WIDE[0], HOSTILE[0]])
def test_the_form_to_sign_beforehand_prints_on_one_page(browser, tmp_path, name):
    file = tmp_path / "form.html"
    file.write_bytes(make_form(name, "W" * 500))
    page = browser.new_page()
    page.goto(file.as_uri())
    for paper in ("A4", "Letter"):
        assert len(re.findall(rb"/Type\s*/Page\b", page.pdf(format=paper))) == 1
    assert page.locator("strong").inner_text() == name
    page.close()


def test_a_page_too_long_would_be_seen(show):
    page = show(dealt().shares[0])
    page.evaluate("document.querySelector('ol').innerHTML += '<li>more</li>'.repeat(60)")
    assert len(re.findall(rb"/Type\s*/Page\b", page.pdf(format="A4"))) > 2


def test_the_code_gives_the_share_back(show, for_card):
    bare = dealt().shares[0]
    for document in (bare, wrapped(bare), for_card, dealt(WIDE).shares[1]):
        page = show(document)
        assert identity(from_paper(gather(code_on(page)).data)) == identity(from_paper(to_paper(document)))
        width, squares = page.evaluate(
            """(svg => [svg.getBoundingClientRect().width, svg.viewBox.baseVal.width])(
                document.querySelector('figure.code svg'))"""
        )
        assert width / MILLIMETRE / squares >= MIN_MODULE - 0.001


def test_the_typed_lines_of_three_sheets_recover_the_secret(show):
    made = dealt()
    typed = []
    for share in made.shares[1:4]:
        lines = lines_on(show(share))
        assert len(lines) == 13
        transcription = Transcription()
        for number, line in enumerate(lines, start=1):
            assert line.startswith(f"{number} ")
            transcription.accept(transcription.read(line))
        typed.append(from_paper(transcription.data()))
    for share in typed:
        verify_share(share, made.record)
    recovery = recover([Presented(share.custodian, share) for share in typed], made.record)
    assert revealed(recovery.secret) == KEY


def test_names_stay_text(show):
    for share in dealt(HOSTILE, "</title><script>alert(3)</script>").shares[:2]:
        page = show(share)
        assert page.locator("dd strong").first.inner_text() == share.custodian
        assert page.locator("script, img").count() == 0
        assert page.said == []


@pytest.mark.parametrize(
    ("element", "attributes"),
    [
        ("img", {"src": "https://harbour.invalid/x.png"}),
        ("img", {"src": "data:image/gif;base64,R0lGODlhAQABAAAAACw="}),
        ("script", {"text": "document.title = 'run'"}),
        ("iframe", {"src": "https://harbour.invalid/"}),
        ("style", {"textContent": "body { display: none }"}),
        ("link", {"rel": "stylesheet", "href": "https://harbour.invalid/x.css"}),
    ],
)
def test_its_policy_lets_nothing_be_loaded_or_run(show, element, attributes):
    page = show(dealt().shares[0])
    title, refused = page.title(), []
    page.on("requestfailed", lambda request: refused.append((request.url, request.failure)))
    violated = page.evaluate(
        """([element, attributes]) => new Promise((resolve, reject) => {
            document.addEventListener('securitypolicyviolation', event => resolve(event.effectiveDirective));
            setTimeout(() => reject('nothing was held back'), 5000);
            document.body.append(Object.assign(document.createElement(element), attributes));
        })""",
        [element, attributes],
    )
    assert violated.startswith({"link": "style", "iframe": "frame"}.get(element, element))
    assert page.title() == title
    # What the page asks for is told here even where the policy holds it back before it leaves.
    assert {url for url in page.asked if "harbour.invalid" in url} <= {url for url, why in refused if why == "csp"}


def test_its_own_style_is_let_through(show):
    page = show(dealt().shares[0])
    cell = page.locator("table.lines td").first
    style = cell.evaluate("e => (({fontFamily, fontSize}) => [fontFamily, parseFloat(fontSize)])(getComputedStyle(e))")
    assert style[0] == "monospace"
    assert 11 <= style[1] * 0.75 <= 12  # points


def test_all_text_is_large_enough_and_black_on_white(show, for_card):
    for document in (dealt().shares[0], dealt(FAR_EAST, secret=bytes(182)).shares[0], for_card):
        page = show(document)
        styles = page.evaluate(
            """[...document.querySelectorAll('body *')].filter(e => [...e.childNodes].some(
                n => n.nodeType === 3 && n.textContent.trim())).map(e => getComputedStyle(e)).map(
                s => [parseFloat(s.fontSize) * .75, s.color, s.backgroundColor])"""
        )
        assert min(size for size, _, _ in styles) >= 9
        assert {(colour, ground) for _, colour, ground in styles} == {("rgb(0, 0, 0)", "rgba(0, 0, 0, 0)")}


def test_a_reader_of_screens_finds_its_way(show, for_card):
    page = show(dealt().shares[0])
    assert page.locator("html").get_attribute("lang") == "en"
    assert page.title().startswith("Share of north-pier, epoch 1, sheet ")
    assert page.get_by_role("heading", level=1).all_inner_texts() == [
        "Secret share on paper",
        "Acknowledgement and receipt",
    ]
    table = page.get_by_role("table", name=re.compile("Share, to be typed: 13 lines of 31 characters"))
    assert table.get_by_role("columnheader").all_inner_texts()[:3] == ["Line", "1\u20134", "5\u20138"]
    assert table.get_by_role("rowheader").all_inner_texts() == [str(number) for number in range(1, 14)]
    assert page.get_by_role("img", name="QR code of the share of north-pier: the same as the typed lines").count() == 1
    alone = show(for_card)
    assert alone.get_by_role("img", name="QR code of the share of north-pier").count() == 1
    assert CARD in alone.locator(".caution").inner_text()
