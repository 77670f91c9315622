"""A page for a browser to read or print: one file of HTML that loads nothing, runs nothing, and holds its own style.

Source: W3C, "Content Security Policy Level 3" (a style allowed by its hash alone), "CSS Paged Media".
May import: nothing of this package.
Secret: what is put on it, where that is secret: the page is Python text then, which cannot be wiped. Public: templates
and styles.
Does not: decide what stands on a page. Whatever is put there is escaped.
"""

from __future__ import annotations

import base64
import hashlib
from functools import cache
from pathlib import Path

import jinja2

SHEET = Path(__file__).with_name("sheet.css")
"""The style of forms that fill a sheet of paper."""
REPORT = Path(__file__).with_name("report.css")
"""The style of reports: for a screen of any width, and for paper."""


def render(template: Path, *styles: Path, **facts: object) -> bytes:
    """Return a page: the template, with ``style`` and ``style_hash`` for its head, and the facts that it shows.

    Args:
        template: of HTML, which sets its title and includes ``head.html``; what else it includes lies beside it.
        styles: style sheets, put together in this order.
        facts: what the template names.
    """
    style = "".join(_text(path) for path in styles)
    style_hash = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode("ascii")
    page = _templates(template.parent).get_template(template.name).render(style=style, style_hash=style_hash, **facts)
    return page.encode("utf-8")


@cache
def _text(path: Path) -> str:
    return path.read_text("utf-8")


@cache
def _templates(folder: Path) -> jinja2.Environment:
    return jinja2.Environment(
        loader=jinja2.FileSystemLoader([folder, Path(__file__).parent]),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
