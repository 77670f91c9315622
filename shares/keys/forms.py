"""What becomes of a signature: for each form the bytes that the key signs, what signers are told, and the file at last.

A certificate is checked against its issuer's, and a revocation list against the list before, by whoever asks and by
every signer alike: so both lie beside the task, which names their digests.

Source: FORMAT_KEYS.md, sec. 23; RFC 5280, sec. 5.2.3 and 6.1.
May import: shares.errors, shares.clock, shares.documents, .certificate_parts, .certificates, .content,
.description, .public_key, .revocation, .ssh_signature.
Secret: nothing. Confidential: what is signed. Public: the rest.
Does not: sign, or know who does.
"""

from __future__ import annotations

import hashlib
from dataclasses import dataclass

from cryptography.hazmat.primitives.serialization import Encoding

from shares import clock
from shares.documents.key_event import Content, Form
from shares.documents.task import Signing, Task
from shares.errors import ParameterError, VerificationError
from shares.keys import certificate_parts as parts
from shares.keys import certificates, revocation, ssh_signature
from shares.keys.content import described, refuse_as_plain
from shares.keys.description import Description, in_groups, shown
from shares.keys.public_key import check_signature


@dataclass(frozen=True, slots=True)
class Signable:
    """What is to be signed, and all that it is checked by.

    Attributes:
        content: the file; of a certificate or revocation list the body.
        form: what becomes of it.
        namespace: of an OpenSSH signature.
        issuer: the certificate above, PEM or DER: for a revocation list, and for any certificate but a root.
        earlier: the revocation list before, PEM or DER, where there is one.
    """

    content: bytes
    form: Form
    namespace: str | None = None
    issuer: bytes | None = None
    earlier: bytes | None = None

    def message(self, public_key: bytes) -> bytes:
        """Return the bytes that the key signs, once they are known to be what the form promises and no more.

        Args:
            public_key: the threshold key's Edwards point, 32 bytes.

        Raises:
            ParameterError: plain bytes are what other programs act on; or see ``certificates.check``,
                ``revocation.check`` and ``ssh_signature.to_be_signed``; or a list comes without its issuer.
            DocumentError, VerificationError: see the same.
        """
        match self.form:
            case "plain":
                refuse_as_plain(self.content, public_key)
            case "openssh":
                return ssh_signature.to_be_signed(hashlib.sha512(self.content).digest(), self.namespace or "")
            case "certificate":
                certificates.check(self.content, public_key, self.issuer)
            case "revocation-list":
                revocation.check(self.content, public_key, self._issuer(), earlier=self.earlier)
        return self.content

    def described(self, public_key: bytes) -> Description:
        """Say what is to be signed, found in the bytes, and what it was checked by.

        Of an SSH signature the file is looked at, whose digest is what the key signs.

        Args:
            public_key: as for ``message``, which has been called.
        """
        told = described(self.content, public_key)
        lines, cautions = list(told.lines), list(told.cautions)
        if self.form == "openssh":
            lines.append(f"as an SSH signature for the namespace {shown(self.namespace or '')}")
        if self.issuer is not None:
            above = parts.read_certificate(self.issuer)
            digest = hashlib.sha256(above.public_bytes(Encoding.DER)).digest()
            lines.append(f"checked by the certificate of its issuer, SHA-256 {in_groups(digest)}")
            if above.subject != above.issuer:
                name = shown(above.issuer.rfc4514_string())
                cautions.append(
                    f"The certificate of its issuer is by {name}, whose key is not at hand: compare its SHA-256 with"
                    " the one in use."
                )
        if self.form == "revocation-list":
            cautions.append(self._continued(lines))
        return Description(told.kind, tuple(lines), tuple(cautions))

    def finished(self, public_key: bytes, signature: bytes) -> tuple[bytes, str]:
        """Check the quorum's signature and return the file, and the ending that its name usually has.

        Args:
            public_key: as for ``message``.
            signature: 64 bytes.

        Returns:
            64 bytes of a plain signature, an armoured SSH signature, a certificate or revocation list in PEM.

        Raises:
            SharesError: as for ``message``; or the signature is not by this key of this content.
        """
        message = self.message(public_key)
        match self.form:
            case "plain":
                check_signature(public_key, message, signature)
                return signature, ".sig"
            case "openssh":
                digest = hashlib.sha512(self.content).digest()
                return ssh_signature.armoured(public_key, digest, self.namespace or "", signature), ".sig"
            case "certificate":
                return certificates.finished(message, signature, public_key, self.issuer), ".pem"
            case "revocation-list":
                return revocation.finished(message, signature, public_key, self._issuer(), earlier=self.earlier), ".pem"

    def _issuer(self) -> bytes:
        if self.issuer is None:
            raise ParameterError(
                "a revocation list belongs to a certificate of this key", hint="give that certificate as the issuer"
            )
        return self.issuer

    def _continued(self, lines: list[str]) -> str:
        """Add a line about the list before; return what is still to be thought of."""
        if self.earlier is None:
            return (
                "It continues no earlier list. If there is one, do not sign: what that revoked would be in force again."
            )
        before = parts.read_list(self.earlier)
        number, date = revocation.number_of(before), clock.to_text(before.last_update_utc)
        lines.append(f"checked by the list before, number {number} of {date}: nothing that it revokes is left out")
        return f"See that no list after number {number} has been issued."


def work_of(task: Task) -> Signing:
    """Return the task's work.

    Raises:
        ParameterError: it is not to sign.
    """
    if not isinstance(task.work, Signing):
        raise ParameterError("the task is not to sign")
    return task.work


def signable(task: Task, content: bytes | None, issuer: bytes | None, earlier: bytes | None) -> Signable:
    """Return what a task is to sign, once it is known to be what the task names.

    Args:
        task: to sign.
        content: what lies beside it; for a certificate or a revocation list its body.
        issuer, earlier: the certificate above and the revocation list before, where the task names them.

    Raises:
        VerificationError: one of them is missing, or not what the task names.
    """
    work = work_of(task)
    for wanted, found, what in (
        (work.content, content, "what is to be signed"),
        (work.issuer, issuer, "the certificate of its issuer"),
        (work.earlier, earlier, "the earlier revocation list"),
    ):
        if wanted is not None and found is None:
            raise VerificationError(f"{what} is not beside the task", hint="have it sent again")
        if (None if found is None else Content(size=len(found), digest=hashlib.sha256(found).digest())) != wanted:
            raise VerificationError(f"{what} is not what the task names", hint="have it sent again")
    return Signable(content or b"", work.form, work.namespace, issuer, earlier)
