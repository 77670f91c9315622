"""The share: one custodian's private document.

Source: FORMAT.md, sec. 4; RFC 5869 (HKDF), RFC 8032 (Ed25519).
May import: shares.errors, shares.memory, shares.field, shares.sharing.rule, shares.documents.base,
.members, .signing.
Secret: the rows, hence the core and the attestation key. Public: the header, the commitment, the digest.
Does not: judge a share against a record; ``custody.verify`` does.
"""

from __future__ import annotations

import hashlib
import hmac
import itertools
from typing import Annotated, Any, ClassVar, Literal, Self

from cryptography.hazmat.primitives import hashes, serialization
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.kdf.hkdf import HKDF
from pydantic import Field as Member
from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares.documents.base import Document, canonical, sha256, write_text
from shares.documents.members import (
    Byte,
    Digest,
    Epoch,
    FieldName,
    Fingerprint,
    LongText,
    Name,
    SecretRow,
    SetId,
    Text,
    Version,
)
from shares.documents.signing import signed_bytes
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.rule import MAX_DEPTH, MAX_POINTS, Point

HEADER = ("kind", "version", "set", "epoch", "custodian", "field", "paths", "secret_commitment", "encrypted_file")
NOTES = ("label", "rule", "notice", "record")
SHARE_ATTESTS = "attestation-share"
"""The purpose of signatures by a share's attestation key (FORMAT_EVIDENCE.md, sec. 17): no party signs for it."""
MIN_ROW, MAX_ROW = 53, 131_072
NOTICE = (
    "This is one custodian's secret share. Keep it private and whole; "
    "never bring it together with other shares except to recover."
)

_Path = Annotated[tuple[tuple[Byte, Byte], ...], Member(min_length=1, max_length=MAX_DEPTH)]


class ShareFacts(Document):
    """What a share says in the open, wrapped or not: what it belongs to, and notes for people."""

    kind: str
    version: Version
    set: SetId
    epoch: Epoch
    custodian: Name
    field: FieldName
    paths: Annotated[tuple[_Path, ...], Member(min_length=1, max_length=MAX_POINTS)]
    secret_commitment: Digest
    encrypted_file: Digest | None
    label: Text | None
    rule: LongText | None
    notice: Text | None
    record: Fingerprint | None

    @model_validator(mode="after")
    def _paths_differ(self) -> Self:
        ordered = sorted(self.paths)
        if any(later[: len(path)] == path for path, later in itertools.pairwise(ordered)):
            raise PydanticCustomError("shares_points", "no path twice, and none the beginning of another")
        return self


class Share(ShareFacts):
    """One custodian's points, with the public facts that say what they belong to.

    ``Share.parse`` reads one; it does not check the share's own digest, so that a damaged share can still be described:
    ``is_whole`` does. ``Share.of`` makes one.
    """

    KIND: ClassVar[str] = "share"

    kind: Literal["share"]
    rows: Annotated[tuple[SecretRow, ...], Member(min_length=1, max_length=MAX_POINTS)]
    digest: Digest

    @model_validator(mode="after")
    def _points_fit(self) -> Self:
        if len(self.rows) != len(self.paths):
            raise PydanticCustomError("shares_points", "as many rows as paths")
        if len({len(row) for row in self.rows}) != 1 or not MIN_ROW <= self.row_length <= MAX_ROW:
            raise PydanticCustomError("shares_points", "rows of one length, from 53 to 131,072 bytes")
        return self

    @classmethod
    def of(
        cls,
        *,
        set_id: bytes,
        epoch: int,
        custodian: str,
        points: list[Point],
        field: Field,
        secret_commitment: bytes,
        encrypted_file: bytes | None = None,
    ) -> Self:
        """Return a share that has its core and nothing else yet: notes empty, digest zero. ``noted`` completes it."""
        return cls(
            kind="share",
            version=1,
            set=set_id,
            epoch=epoch,
            custodian=custodian,
            field=field,
            paths=tuple(point.path for point in points),
            secret_commitment=secret_commitment,
            encrypted_file=encrypted_file,
            rows=tuple(point.row for point in points),
            label=None,
            rule=None,
            notice=None,
            record=None,
            digest=bytes(32),
        )

    def noted(self, *, label: str, rule: str, record: str) -> Self:
        """Return this share with its notes for people, and its own digest."""
        return self.with_notes(label=label, rule=rule, notice=NOTICE, record=record)

    def with_notes(self, **notes: str | None) -> Self:
        """Return this share with these notes, any of which may be missing, and its own digest."""
        noted = self.model_copy(update=notes)
        return noted.model_copy(update={"digest": noted._digest()})

    @property
    def row_length(self) -> int:
        """L, in bytes."""
        return len(self.rows[0])

    def points(self) -> list[Point]:
        """The points this custodian holds."""
        return [Point(path, row) for path, row in zip(self.paths, self.rows, strict=True)]

    def set_key(self) -> tuple[bytes, int, int, bytes, bytes | None, int]:
        """What shares must have in common to be recovered together."""
        common = (self.set, self.epoch, self.field.modulus, self.secret_commitment, self.encrypted_file)
        return (*common, self.row_length)

    def commitment(self) -> bytes:
        """Return the share commitment: SHA-256 over label and core, 32 bytes, public."""
        digest = hashlib.sha256(b"shares/v1/share" + canonical(self.public(*HEADER)))
        for row in self.rows:
            with row.view() as view:
                digest.update(view)
        return digest.digest()

    def is_whole(self) -> bool:
        """Say whether the share's own digest fits: a guard against accidents, not against people."""
        return hmac.compare_digest(self.digest, self._digest())

    def _digest(self) -> bytes:
        return sha256(b"shares/v1/digest", self.commitment(), canonical(self.public(*NOTES)))

    def attestation_key(self) -> bytes:
        """Return the public half of the share's attestation key: 32 bytes, Ed25519."""
        public = self._attestation_private_key().public_key()
        return public.public_bytes(serialization.Encoding.Raw, serialization.PublicFormat.Raw)

    def attest(self, members: dict[str, Any]) -> bytes:
        """Return the signature of this share's attestation key over an answer's members, 64 bytes.

        Args:
            members: public JSON members, those that an attestation signs.
        """
        return self._attestation_private_key().sign(signed_bytes(SHARE_ATTESTS, members))

    def _attestation_private_key(self) -> Ed25519PrivateKey:
        # The core and the seed become Python bytes here, and the library keeps its own copy: listed in SECURITY.md.
        kdf = HKDF(algorithm=hashes.SHA256(), length=32, salt=None, info=b"shares/v1/attest")
        header = canonical(self.public(*HEADER))
        with Secret(len(header) + len(self.rows) * self.row_length) as core, core.view() as view:
            view[: len(header)] = header
            for i, row in enumerate(self.rows):
                start = len(header) + i * self.row_length
                view[start : start + self.row_length] = row.view()
            return Ed25519PrivateKey.from_private_bytes(kdf.derive(view))

    def to_file(self) -> bytes:
        """Return the bytes of the share's file. Secret."""
        return write_text(self.model_dump(mode="json"))

    def close(self) -> None:
        """Wipe the rows."""
        for row in self.rows:
            row.close()
