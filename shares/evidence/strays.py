"""What lies beside a journal: challenges, answers and drill reports, whether or not an entry tells of them.

A journal that was cut or taken away says nothing of what it lost; these documents do. They quote where the journal
stood, and each was filed because an entry was to name it.

Source: S. Haber, W. S. Stornetta 1991 (what others hold of a chain shows that it was changed); FORMAT_EVIDENCE.md,
sec. 16 to 18.
May import: shares.errors, shares.documents, shares.history.
Secret: nothing. Confidential: the documents. Public: nothing.
Does not: say what a document proves, or know of one that was taken away together with its entry.
"""

from __future__ import annotations

import hashlib
from collections.abc import Collection, Iterator
from dataclasses import dataclass
from typing import Final

from shares.documents.attestation import Attestation
from shares.documents.base import MAX_FILE, parse_object
from shares.documents.challenge import Challenge
from shares.documents.drill_report import DrillReport
from shares.documents.entry import Head
from shares.errors import SharesError
from shares.history.files import Files
from shares.history.journal import Journal

_FOLDERS: Final = ("attestations/", "drills/")
_KINDS: Final = (Challenge.KIND, Attestation.KIND, DrillReport.KIND)


@dataclass(frozen=True, slots=True)
class Strays:
    """What was found.

    Attributes:
        names: files of documents that no entry names, by path or by content, sorted.
        heads: where the set's journal stood by the documents that were read, each once.
    """

    names: tuple[str, ...] = ()
    heads: tuple[Head, ...] = ()


def find_strays(
    files: Files,
    names: Collection[str],
    journal: Journal,
    *,
    set_id: bytes | None = None,
    read: Collection[str] = (),
) -> Strays:
    """Return the documents of rounds and drills that no entry names, and the heads that any of them quotes.

    Args:
        files: of the set.
        names: of the files that are there.
        journal: as it was read; an empty one where there is none.
        set_id: of the set, where it is known: documents of another one quote no head of its journal.
        read: files whose heads are known already.
    """
    named = {document.path for entry in journal.entries for document in entry.documents}
    digests = {document.digest for entry in journal.entries for document in entry.documents}
    strays, heads = list[str](), dict[Head, None]()
    for name in sorted(names):
        if not name.startswith(_FOLDERS) or not name.endswith(".json") or name in read:
            continue
        try:
            data = files.read(name, limit=MAX_FILE)
            kind = parse_object(data).get("kind")
        except SharesError:
            continue  # What an entry names and cannot be read, ``history.verify`` tells of.
        if kind in _KINDS:
            heads.update(dict.fromkeys(_heads(data, kind, set_id)))
            if name not in named and hashlib.sha256(data).digest() not in digests:
                strays.append(name)
    return Strays(tuple(strays), tuple(heads))


def _heads(data: bytes, kind: object, set_id: bytes | None) -> Iterator[Head]:
    """Yield the head that a document quotes; one whose signature does not fit quotes none."""
    document: Challenge | DrillReport
    try:
        if kind == Challenge.KIND:
            document = Challenge.parse(data)
        elif kind == DrillReport.KIND:
            document = DrillReport.parse(data)
        else:
            return
    except SharesError:
        return
    if document.journal is not None and set_id in (None, document.set):
        yield document.journal
