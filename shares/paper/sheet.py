"""The sheet: a share as one page to print, with a second page on which the custodian signs for it; and the form on
which the duties are accepted beforehand.

Source: ISO/IEC 18004 (QR code), by way of a library; PCI PIN by way of trade practice (numbered packs, receipts);
FORMAT.md, sec. 11.
May import: shares.errors, shares.documents.acknowledgement, shares.documents.members, shares.documents.share,
shares.documents.wrapping, shares.paper.page, shares.paper.paperform, shares.paper.transcription,
shares.paper.typedline.
Secret: the whole page, where the share is bare. It is Python text, which cannot be wiped.
Public: its serial number, how many lines it has, the size of its code.
Does not: print. A browser does, with no network: the page loads nothing.
"""

from __future__ import annotations

import secrets
from dataclasses import dataclass
from pathlib import Path
from typing import Final

import segno

from shares.documents.acknowledgement import DUTIES
from shares.documents.members import check_name, check_text
from shares.documents.share import Share
from shares.documents.wrapping import ByPassphrase
from shares.errors import ParameterError, VerificationError
from shares.paper.page import SHEET, render
from shares.paper.paperform import BLOCK, LETTERS, PaperShare, from_paper, to_paper, to_text
from shares.paper.transcription import gather
from shares.paper.typedline import MAX_LINES, grouped, to_lines

MIN_MODULE: Final = 0.6
"""The smallest square of a code that is printed, in millimetres: seven dots of a printer of 300 dots an inch."""
_BESIDE_LINES: Final = 66
_ALONE: Final = 110
_QUIET: Final = 4  # Blank squares on each side (ISO/IEC 18004, sec. 6.3.8).
_LEVELS: Final = "HQML"
_MAX_SERIAL: Final = 40
_HERE: Final = Path(__file__).parent


@dataclass(frozen=True, slots=True, repr=False)
class Sheet:
    """A page for a browser to print, and what may be said of it.

    Args:
        page: HTML, UTF-8. As secret as the share.
        serial: the number on the page and on its receipt.
        lines: how many typed lines it has; 0 where the share is too long to type, or wrapped for a card.
        version: size of the code, 1 to 40.
        level: error correction of the code, H (strongest), Q, M or L.
    """

    page: bytes
    serial: str
    lines: int
    version: int
    level: str


def make_sheet(share: PaperShare, *, serial: str | None = None, where: str | None = None) -> Sheet:
    """Return the sheet of a share, after reading its lines back.

    Args:
        share: whole. One wrapped by passphrase is printed as lines and as a code, one for a card as a code alone.
        serial: the number of the sheet, 1 to 40 characters; drawn at random by default.
        where: what to call the share in an error, normally its path.

    Raises:
        VerificationError: the share's own digest does not fit.
        ParameterError: the share is too large for paper, or the serial number too long.
    """
    if not share.is_whole():
        raise VerificationError(
            "its own digest does not fit: the file was damaged or edited",
            where=where,
            hint="print another copy, and keep this one",
        )
    number = new_serial() if serial is None else check_text(serial)
    if len(number) > _MAX_SERIAL:
        raise ParameterError(f"a serial number has at most {_MAX_SERIAL} characters", where="--serial")
    form = to_paper(share, where=where)
    by_card = not isinstance(share, Share) and not isinstance(share.wrapping, ByPassphrase)
    lines = [] if by_card or len(form) > MAX_LINES * BLOCK else to_lines(form)
    # What is printed is what a person will have: it is read back before anybody relies on it.
    read = from_paper(gather("\n".join(lines) if lines else to_text(form)).data)
    if _identity(read) != _identity(share):
        raise VerificationError(
            "the sheet does not give the share back", where=where, hint="a fault in this program: please report it"
        )
    code = _code(to_text(form), _BESIDE_LINES if lines else _ALONE, where)
    page = _render(
        "sheet.html",
        share=share,
        serial=number,
        lines=[grouped(line).split() for line in lines],
        heads=[f"{first}\N{EN DASH}{min(first + 3, 31)}" for first in range(1, 32, 4)],
        sealed=None if isinstance(share, Share) else share.wrapping,
        code=code.svg_inline(border=_QUIET, omitsize=True, svgclass=None, lineclass=None),
    )
    return Sheet(page, number, len(lines), int(code.version), str(code.error))


def make_form(custodian: str, label: str) -> bytes:
    """Return a page on which a custodian accepts the duties by hand, before a share is handed over. It is public.

    Args:
        custodian: the name that the policy has.
        label: what the set protects.

    Raises:
        ParameterError: a name or label that may not be.
    """
    return _render("form.html", custodian=check_name(custodian), label=check_text(label))


def new_serial() -> str:
    """Return a random serial number: eight of the 32 characters of base32, in two groups."""
    letters = "".join(secrets.choice(LETTERS) for _ in range(8))
    return f"{letters[:4]}-{letters[4:]}"


def _identity(share: PaperShare) -> bytes:
    """Return what makes a share this one: its commitment, or all that paper carries of a wrapped one."""
    return (
        share.commitment() if isinstance(share, Share) else share.bound() + share.sealed + repr(share.wrapping).encode()
    )


def _code(text: str, millimetres: int, where: str | None) -> segno.QRCode:
    """Return the code with the strongest correction whose squares are still large enough to print."""
    for level in _LEVELS:
        try:
            code = segno.make_qr(text, error=level, boost_error=False)
        except segno.DataOverflowError:
            continue
        if millimetres / (code.symbol_size(border=_QUIET)[0]) >= MIN_MODULE:
            return code
    raise ParameterError(
        "the share is too large for a code that can be printed",
        where=where,
        hint="encrypt the secret with a fresh key and split that key; print its shares",
    )


def _render(template: str, **facts: object) -> bytes:
    return render(_HERE / template, SHEET, duties=DUTIES, **facts)
