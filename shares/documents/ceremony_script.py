"""The ceremony script: who does what in which order when a secret is split, written down before anybody begins.

Source: CA/Browser Forum TLS Baseline Requirements, sec. 6.1.1.1 (a script is prepared and followed; a witness); ETSI EN
319 411-1, sec. 6.5.1 (roles and steps, from a summary); FORMAT_EVIDENCE.md, sec. 19.
May import: shares.errors, shares.clock, shares.documents.base, .members, .party, .signing.
Secret: nothing. Confidential: persons, and how shares travel. Public: the rest.
Does not: know which steps a ceremony needs (``evidence.script`` does), or what was done; the journal says that.
"""

from __future__ import annotations

import hashlib
from datetime import datetime
from typing import Annotated, Any, ClassVar, Literal, Self

from pydantic import Field as Member
from pydantic import PrivateAttr, model_validator
from pydantic_core import PydanticCustomError

from shares import clock
from shares.documents.base import Document, read_aloud, write_text
from shares.documents.members import Digest, LongText, Signature, Text, Time, Version
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.signing import is_signed
from shares.errors import ParameterError

MAX_STEPS = 5000
MAX_ROLES = 1100
MAX_SCRIPT_SIGNATURES = 8


class Software(Document):
    """The program by which the script was made; the machine of the ceremony must have the same.

    Attributes:
        version: of this program.
        digest: over its files, as ``custody.software`` computes it.
    """

    version: Text
    digest: Digest


class CeremonyRole(Document):
    """A role at the ceremony, what whoever has it does, and who that is, where it is known beforehand."""

    role: Text
    duty: Text
    person: Text | None


class CeremonyStep(Document):
    """One step. Its number is its place, counted from 1.

    Attributes:
        part: the part of the ceremony that it belongs to.
        role: whose step it is: one of the script's roles, or ``everyone``.
        what: what to do.
        command: what is typed, word for word, where the step is done at the machine.
        expected: what is to be seen before anybody goes on.
        note: what is written down by hand beside it, like the serial number of a pack.
    """

    part: Text
    role: Text
    what: LongText
    command: LongText | None
    expected: LongText
    note: Text | None


class ScriptSignature(Document):
    """A party's signature on a script: that this is what was agreed on."""

    time: Time
    card: PartyCard
    signature: Signature


class CeremonyScript(Document):
    """A script, as it is laid on the table. ``CeremonyScript.parse`` refuses one with a signature that does not fit."""

    KIND: ClassVar[str] = "ceremony-script"

    kind: Literal["ceremony-script"]
    version: Version
    created: Time
    label: Text
    policy: Digest
    rule: LongText
    software: Software
    dual_control: bool
    planned: Text | None
    standby: Text | None
    roles: Annotated[tuple[CeremonyRole, ...], Member(min_length=1, max_length=MAX_ROLES)]
    steps: Annotated[tuple[CeremonyStep, ...], Member(min_length=1, max_length=MAX_STEPS)]
    signatures: Annotated[tuple[ScriptSignature, ...], Member(max_length=MAX_SCRIPT_SIGNATURES)]
    _text: bytes = PrivateAttr(default=b"")

    @classmethod
    def parse(cls, data: bytes, *, where: str | None = None) -> Self:
        """Read a script; ``text`` holds the bytes as they were given.

        Raises:
            DocumentError: as for every document.
        """
        script = super().parse(data, where=where)
        script._text = bytes(data)
        return script

    @property
    def text(self) -> bytes:
        """The bytes of its file."""
        return self._text or self.to_file()

    def digest(self) -> bytes:
        """Return the SHA-256 of its file, 32 bytes: what log entries are bound to, and any machine can compute."""
        return hashlib.sha256(self.text).digest()

    def spoken(self) -> str:
        """Return the first 160 bits of the digest as they are read aloud: 8 groups of 4 characters."""
        return read_aloud(self.digest())

    @model_validator(mode="after")
    def _is_signed_well(self) -> Self:
        for one in self.signatures:
            if not is_signed(one.card.ed25519, one.signature, self.KIND, self._signed_members(one)):
                reason = f"the signature by {one.card.name} does not fit its content"
                raise PydanticCustomError("shares_script", "{reason}", {"reason": reason})
        if len({one.card.fingerprint for one in self.signatures}) != len(self.signatures):
            raise PydanticCustomError("shares_script", "one party signed it twice")
        return self

    def _signed_members(self, signature: ScriptSignature) -> dict[str, Any]:
        """Return what a signature is over: its time and signer, and the whole script but its signatures."""
        signer = {"time": clock.to_text(signature.time), "card": signature.card.fingerprint}
        return signer | {"script": self.public(*(set(type(self).model_fields) - {"signatures"}))}

    def signed(self, key: OpenPartyKey, *, time: datetime | None = None) -> Self:
        """Return this script with one more signature. Its digest is another one then: sign before it is used.

        Args:
            key: the signer's.
            time: of signing; now by default.

        Raises:
            ParameterError: this party has signed already, or there are too many signatures.
        """
        if any(one.card.fingerprint == key.card.fingerprint for one in self.signatures):
            raise ParameterError(f"{key.card.name} has signed this script already", hint="one signature a party")
        if len(self.signatures) == MAX_SCRIPT_SIGNATURES:
            raise ParameterError(f"a script holds at most {MAX_SCRIPT_SIGNATURES} signatures")
        unsigned = ScriptSignature(time=clock.now() if time is None else time, card=key.card, signature=bytes(64))
        own = unsigned.model_copy(update={"signature": key.sign(self.KIND, self._signed_members(unsigned))})
        members = {name: getattr(self, name) for name in type(self).model_fields}
        return type(self).model_validate({**members, "signatures": (*self.signatures, own)})

    def to_file(self) -> bytes:
        """Return the bytes of a file of this script. Confidential."""
        return write_text(self.model_dump(mode="json"))
