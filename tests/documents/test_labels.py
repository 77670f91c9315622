"""The labels that keep one use of a hash or signature apart from every other: all listed, and none begins another.

Checked against: the list in shares/documents/FORMAT.md, sec. 1, which a second implementation goes by.
"""

from __future__ import annotations

import ast
import itertools
import re
from collections.abc import Iterator
from pathlib import Path

PACKAGE = Path(__file__).resolve().parents[2] / "shares"
START = "shares/v1/"


def in_code() -> Iterator[str]:
    """Every label that the package writes, without what all begin with; the start by itself is none."""
    for path in PACKAGE.rglob("*.py"):
        for node in ast.walk(ast.parse(path.read_bytes())):
            if isinstance(node, ast.Constant) and isinstance(node.value, bytes):
                text = node.value.decode("latin-1")
                if text.startswith(START) and text != START:
                    yield text.removeprefix(START)


def listed() -> list[str]:
    page = (PACKAGE / "documents" / "FORMAT.md").read_text()
    (sentence,) = re.findall(r'The labels in use are "shares/v1/" followed by (.*?)\. None begins another', page, re.S)
    return re.findall(r"`([^`]+)`", sentence)


def test_every_label_is_listed_once_and_used_in_one_place() -> None:
    assert sorted(in_code()) == sorted(listed())


def test_none_begins_another() -> None:
    labels = listed()
    assert len(labels) > 20
    assert not [(a, b) for a, b in itertools.permutations(labels, 2) if b.startswith(a)]


def test_the_format_pages_use_no_other() -> None:
    pages = "".join(path.read_text() for path in (PACKAGE / "documents").glob("*.md"))
    used = set(re.findall(rf'"{START}([a-z/-]+)"', pages))
    # A proof's and a signature's label ends with a slash, and what follows is named beside it.
    assert used <= set(listed())
