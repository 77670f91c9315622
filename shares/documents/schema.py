"""JSON Schemas of the documents, for other programs; ``python -m shares.documents.schema`` writes them.

Source: JSON Schema, draft 2020-12; FORMAT.md says what a schema cannot (digests, fingerprints, one encoding a value).
May import: shares.documents.
Secret: nothing. Public: everything.
Does not: read documents. What this package accepts is what its models accept, which is less than the schemas allow.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from shares.documents.acknowledgement import Acknowledgement
from shares.documents.attestation import Attestation
from shares.documents.base import VERSION, Document
from shares.documents.ceremony_script import CeremonyScript
from shares.documents.challenge import Challenge
from shares.documents.drill_report import DrillReport
from shares.documents.entry import Entry
from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.nonce_batch import BoundPair, NonceBatch, NonceMarks, NoncePair
from shares.documents.opened_message import OpenedMessage
from shares.documents.party import PartyCard, PartyKey
from shares.documents.record import Record
from shares.documents.sealed_secret import SealedSecret
from shares.documents.share import Share
from shares.documents.task import Task
from shares.documents.task_message import TaskMessage
from shares.documents.task_step import TaskDone, TaskStep
from shares.documents.wrapped_share import WrappedShare

KINDS: tuple[type[Document], ...] = (
    Share,
    WrappedShare,
    SealedSecret,
    Record,
    PartyKey,
    PartyCard,
    Acknowledgement,
    Challenge,
    Attestation,
    CeremonyScript,
    Entry,
    DrillReport,
    KeyRecord,
    KeyShare,
    Task,
    TaskMessage,
    TaskStep,
    TaskDone,
    NoncePair,
    BoundPair,
    NonceMarks,
    NonceBatch,
    OpenedMessage,
)
FOLDER = Path(__file__).with_name("schemas")


def schema(kind: type[Document]) -> dict[str, Any]:
    """Return the JSON Schema of one kind of document."""
    draft = "https://json-schema.org/draft/2020-12/schema"
    bare = json.loads(json.dumps(kind.model_json_schema(mode="serialization")), object_hook=_without_prose)
    return {"$schema": draft, "title": kind.KIND, **bare}


def schema_files() -> dict[Path, str]:
    """Return the text of each schema's file by its path."""
    return {
        FOLDER / f"{kind.KIND.replace('-', '_')}_v{VERSION}.json": json.dumps(schema(kind), indent=2) + "\n"
        for kind in KINDS
    }


def _without_prose(node: dict[str, object]) -> dict[str, object]:
    """Leave out titles and descriptions, which come from names and docstrings: they are about code, not documents."""
    prose = [name for name in ("title", "description") if isinstance(node.get(name), str)]
    return {name: inner for name, inner in node.items() if name not in prose}


if __name__ == "__main__":
    FOLDER.mkdir(exist_ok=True)
    for path, text in schema_files().items():
        path.write_text(text, encoding="ascii")
