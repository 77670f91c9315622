"""The sheet as a file: what is on it, what it may load (nothing), and that a stranger reads its code.

Source: ISO/IEC 18004 by way of two libraries that share no code, segno (makes the code) and zxing-cpp (reads it); W3C,
"Content Security Policy Level 3", section 4.4 (hashes of inline styles). How it prints is seen in ``test_browser``.
"""

from __future__ import annotations

import base64
import hashlib
import re
from html.parser import HTMLParser

import pytest
import zxingcpp
from paper.conftest import CARD, identity
from PIL import Image
from strategies import crooked_split, flat, resealed

from shares.documents.acknowledgement import DUTIES
from shares.errors import ParameterError, VerificationError
from shares.paper import sheet
from shares.paper.paperform import LETTERS, from_paper, to_paper, to_text
from shares.paper.sheet import MIN_MODULE, make_form, make_sheet, new_serial
from shares.paper.transcription import gather
from shares.paper.typedline import to_lines


class Page(HTMLParser):
    """The text of a page, the rows of its first table, and every tag with its attributes."""

    def __init__(self, page: bytes) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.text = ""
        self.rows: list[list[str]] = []
        self.feed(page.decode("utf-8"))

    def handle_starttag(self, tag, attributes):
        self.tags.append((tag, dict(attributes)))
        if tag == "tr":
            self.rows.append([])

    def handle_data(self, data):
        self.text += data
        if data.strip() and self.rows and self.tags[-1][0] == "td":
            self.rows[-1].append(data)

    @property
    def lines(self) -> list[str]:
        return [" ".join(row) for row in self.rows if len(row) == 8]


def page_of(share, **options) -> Page:
    return Page(make_sheet(share, **options).page)


def test_what_stands_on_it(share):
    made = make_sheet(share, serial="Harbour 0017")
    page = Page(made.page)
    for fact in (
        "north-pier",
        "Tide archive backup root",
        share.rule,
        share.set.hex(),
        "epoch 1",
        share.record,
        "Harbour 0017",
        "Nothing seals this page.",
        "shares transcribe --to share.json",
        "Acknowledgement and receipt",
        "I acknowledge my duties",
        "Sheet Harbour 0017, page 1 of 2",
        "Sheet Harbour 0017, page 2 of 2",
        *DUTIES,
        "Signature",
    ):
        assert fact in page.text
    assert (made.serial, made.lines, made.level) == ("Harbour 0017", 13, "H")
    assert page.text.count("Harbour 0017") == 3  # title, sheet, receipt


def test_the_receipt_ticks_what_the_sheet_asks_for(share, sealed, for_card):
    """Who signs that the share was checked is told on page 1 how, before the signature."""
    for document in (share, sealed, for_card):
        steps, receipt = page_of(document).text.split("Acknowledgement and receipt")
        [on_receipt] = re.findall(r"On receipt:(.*?)Sign the receipt", steps, flags=re.DOTALL)
        for step in ("compare the record fingerprint", "Read the page back", "shares verify share.json --record"):
            assert step in on_receipt
        assert ("--key your.key.json" in on_receipt) == (document is for_card)
        assert "I compared the record fingerprint" in receipt
        assert "read back from page 1 and checked against the record (shares verify)" in receipt


def test_the_lines_are_the_share(share, two_points, sealed):
    for document in (share, two_points, sealed):
        made = make_sheet(document)
        page = Page(made.page)
        assert len(page.lines) == made.lines > 0
        assert to_paper(from_paper(gather("\n".join(page.lines)).data)) == to_paper(document)


def test_a_share_wrapped_by_passphrase_has_lines_and_code(sealed):
    page = page_of(sealed)
    assert len(page.lines) in (17, 18)
    assert "Sealed with a passphrase" in page.text
    assert "Nothing seals this page." not in page.text


def test_a_share_wrapped_for_a_card_has_its_code_alone(for_card):
    made = make_sheet(for_card)
    page = Page(made.page)
    assert (made.lines, page.lines) == (0, [])
    assert "There are no lines to type" in page.text
    assert f"Sealed for the party card {CARD}" in page.text
    assert "type the lines" not in page.text


def test_a_share_too_long_to_type_says_so():
    for length, lines in ((332, 32), (333, 0)):
        (long, *_) = crooked_split(bytes(length), flat(2, 3)).shares
        made = make_sheet(long)
        assert made.lines == lines
        assert ("There are no lines to type" in Page(made.page).text) == (lines == 0)


def test_a_share_without_notes(share):
    page = page_of(from_paper(to_paper(share)))
    assert page.text.count("not stated") == 3
    bare = share.with_notes(record=None, label=None, rule=None)
    assert page_of(bare).text.count("not stated") == 5
    assert "None" not in page.text


def test_it_loads_nothing_and_runs_nothing(share, for_card):
    for document in (share, for_card):
        text = make_sheet(document).page.decode()
        page = Page(text.encode())
        [style] = re.findall(r"<style>(.*?)</style>", text, flags=re.DOTALL)
        digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
        [policy] = [
            attributes["content"]
            for tag, attributes in page.tags
            if "content-security-policy" in str(attributes).lower()
        ]
        assert policy.split("; ") == [
            "default-src 'none'", f"style-src 'sha256-{digest}'", "base-uri 'none'", "form-action 'none'"
        ]  # fmt: skip
        assert {tag for tag, _ in page.tags} & {"script", "link", "img", "iframe", "object", "form", "a"} == set()
        names = {name for _, attributes in page.tags for name in attributes}
        assert not {name for name in names if name.startswith("on")} | names & {"src", "href", "style"}
        assert "url(" not in style
        assert "@import" not in style


def test_names_stay_text():
    dealt = crooked_split(b"made up", flat(2, 3), facts={"label": "</style><script>alert(2)</script>&amp;"})
    share = dealt.shares[0]
    for name in ("<script>alert(1)", "<b onclick=x>", "{{ 7 * 7 }}", 'a & b &lt; "c"'):
        named = resealed(share, custodian=name)
        page = page_of(named, serial="<i>1</i>")
        assert name in page.text
        assert "</style><script>alert(2)</script>&amp;" in page.text
        assert "<i>1</i>" in page.text
        assert {tag for tag, _ in page.tags} & {"script", "i"} == set()


def test_serial_numbers_are_random_and_typeable():
    serials = {new_serial() for _ in range(200)}
    assert len(serials) == 200
    assert all(re.fullmatch(f"[{LETTERS}]{{4}}-[{LETTERS}]{{4}}", serial) for serial in serials)
    assert set("".join(serials)) == {*LETTERS, "-"}


@pytest.mark.parametrize("serial", ["x" * 41, "a\nb", ""])
def test_serial_numbers_that_are_none(share, serial):
    with pytest.raises(ParameterError):
        make_sheet(share, serial=serial)


def test_a_damaged_share_is_not_printed(share, sealed):
    for document in (share, sealed):
        with pytest.raises(VerificationError, match="damaged or edited"):
            make_sheet(document.model_copy(update={"epoch": 2}), where="x.json")


def test_what_does_not_read_back_is_not_printed(share, two_points, monkeypatch):
    monkeypatch.setattr(sheet, "to_lines", lambda form: to_lines(to_paper(two_points)))
    with pytest.raises(VerificationError, match="does not give the share back"):
        make_sheet(share)


def test_too_large_for_a_code_is_refused_with_a_hint():
    (large, *_) = crooked_split(bytes(2600), flat(2, 3)).shares
    with pytest.raises(ParameterError, match="too large for a code") as caught:
        make_sheet(large)
    assert "encrypt" in str(caught.value.hint)


def picture(code) -> Image.Image:
    """The code as dots, four to a square."""
    rows = [list(row) for row in code.matrix_iter(scale=4, border=4)]
    image = Image.new("L", (len(rows[0]), len(rows)), 255)
    image.putdata([0 if dark else 255 for row in rows for dark in row])
    return image


@pytest.mark.parametrize("kind", ["share", "two_points", "sealed", "for_card"])
def test_a_stranger_reads_the_code(kind, request):
    document = request.getfixturevalue(kind)
    text = to_text(to_paper(document))
    code = sheet._code(text, 110 if kind == "for_card" else 66, None)
    [found] = zxingcpp.read_barcodes(picture(code), formats=zxingcpp.BarcodeFormat.QRCode)
    assert found.text == text
    assert identity(from_paper(gather(found.text).data)) == identity(from_paper(to_paper(document)))
    assert code.mode == "alphanumeric"


def test_the_strongest_correction_that_can_be_printed_is_taken():
    levels = {}
    for blocks in range(1, 33):
        code = sheet._code("A7" * 12 * blocks, 66, None)
        squares = code.symbol_size(border=4)[0]
        assert 66 / squares >= MIN_MODULE
        levels[blocks] = code.error
        stronger = "HQML"["HQML".index(code.error) - 1] if code.error != "H" else None
        if stronger:
            larger = sheet.segno.make_qr("A7" * 12 * blocks, error=stronger, boost_error=False)
            assert 66 / larger.symbol_size(border=4)[0] < MIN_MODULE
    assert levels[13] == "H"
    assert sorted(levels.values(), key="HQML".index) == list(levels.values())


def test_damage_within_the_promise_of_the_code_does_no_harm(share):
    """Level H restores about 30 % of a code's bytes (ISO/IEC 18004, table 12); 9 % of its area is blank here."""
    text = to_text(to_paper(share))
    image = picture(sheet._code(text, 66, None))
    side = image.size[0]
    image.paste(255, (side * 4 // 10, side * 4 // 10, side * 7 // 10, side * 7 // 10))
    [found] = zxingcpp.read_barcodes(image, formats=zxingcpp.BarcodeFormat.QRCode)
    assert found.text == text


def test_the_form_to_accept_duties_by_hand():
    page = Page(make_form("<b>north-pier", "Tide <archive>"))
    assert all(duty in page.text for duty in DUTIES)
    assert "<b>north-pier" in page.text
    assert "Tide <archive>" in page.text
    assert not {tag for tag, _ in page.tags} & {"b", "archive", "script", "img", "link"}
    policy = next(attributes["content"] for tag, attributes in page.tags if attributes.get("http-equiv"))
    assert policy.startswith("default-src 'none'; style-src 'sha256-")
    with pytest.raises(ParameterError):
        make_form("", "Tide archive")
