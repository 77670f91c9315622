"""Heads of a journal as options give them: written out, or a file that quotes some.

Source: FORMAT_EVIDENCE.md, sec. 16.
May import: shares.errors, shares.storage, shares.documents, shares.history.heads.
Secret: nothing. Public: heads.
Does not: compare them with a journal.
"""

from __future__ import annotations

import os
from collections.abc import Sequence

from shares.documents.base import MAX_FILE
from shares.documents.entry import Head
from shares.errors import ParameterError
from shares.history.heads import heads_in
from shares.storage import read_file


def heads_given(given: Sequence[str]) -> list[Head]:
    """Read the heads that options give, or files that they name.

    Args:
        given: each like ``57 ABCD-...``, or the path of a file.

    Raises:
        ParameterError: one holds no head.
        StorageError: a file cannot be read.
    """
    return [head for one in given for head in _heads(one)]


def _heads(given: str) -> list[Head]:
    if os.path.lexists(given):
        text, where = read_file(given, limit=MAX_FILE).decode("utf-8", "replace"), given
    else:
        text, where = given, "--head"
    try:
        return heads_in(text)
    except ParameterError as error:
        problem = error
    raise ParameterError(problem.what, where=where, hint=problem.hint)
