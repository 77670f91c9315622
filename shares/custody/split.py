"""Split a secret along a rule into shares and their public record, in memory.

Source: Shamir 1979; FORMAT.md, sec. 2 to 6.
May import: shares.errors, shares.memory, shares.clock, shares.field, shares.sharing, shares.documents,
shares.custody.payload.
Secret: the secret, the payload, every row and coefficient. Public: the record.
Does not: write files; ``custody.handover`` does, and checks what it wrote.
"""

from __future__ import annotations

import secrets
from collections.abc import Collection, Sequence
from dataclasses import dataclass, replace
from datetime import datetime

from shares import clock
from shares.custody.payload import DEFAULT_PAD, commitment, make_payload
from shares.documents.base import MAX_FILE, write_text
from shares.documents.members import MAX_LONG_TEXT, MAX_TEXT, check_name, check_text
from shares.documents.party import OpenPartyKey
from shares.documents.record import Custodian, Record, Role
from shares.documents.share import Share
from shares.errors import ParameterError
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.consistency import check_matrix, checks_of
from shares.sharing.rule import Rule, deal

PRACTICE_LABEL = "Practice, worthless: "
_WORTHLESS = 32


@dataclass(frozen=True, slots=True, eq=False)
class Dealt:
    """One dealing: the public record, and the secret shares in the record's order."""

    record: Record
    shares: tuple[Share, ...]

    def signed(self, key: OpenPartyKey, role: Role, *, time: datetime | None = None) -> Dealt:
        """Return this dealing with its record signed; see ``Record.signed``."""
        return replace(self, record=self.record.signed(key, role, time=time))

    def close(self) -> None:
        """Wipe the shares."""
        for share in self.shares:
            share.close()


def flat_rule(need: int, custodians: Sequence[str]) -> Rule:
    """Return the rule 'any ``need`` of ``custodians``', after checking the names.

    Raises:
        ParameterError: a name that may not be, a name twice (case does not count), or a threshold out of range.
    """
    _check_names(custodians)
    return Rule(need, tuple(custodians))


def _check_names(names: Collection[str]) -> None:
    if len({name.casefold() for name in names}) != len(names):
        raise ParameterError(
            "two custodians have the same name (upper and lower case do not differ)",
            hint="give each a name of their own; one custodian has one --custodian",
        )
    for name in names:
        check_name(name)


def split(
    secret: Secret,
    rule: Rule,
    *,
    label: str,
    field: Field | None = None,
    pad: int = DEFAULT_PAD,
    created: datetime | None = None,
    set_id: bytes | None = None,
    encrypted_file: bytes | None = None,
    policy: bytes | None = None,
) -> Dealt:
    """Split ``secret`` so that exactly the quorums of ``rule`` recover it.

    Args:
        secret: 1 to 65,536 bytes. The caller keeps and wipes it.
        rule: who can recover.
        label: what the secret is, for people; public, 1 to 500 characters.
        field: GF(2^8) on a chosen polynomial; x^8 + x^4 + x^3 + x + 1 by default.
        pad: bytes to a multiple of which the secret is filled, 1 to 4,096.
        created: the time to write into the record, UTC to the second; now by default.
        set_id: 16 fresh random bytes, where a file was encrypted for this set before; drawn by default.
        encrypted_file: digest of the file whose key ``secret`` is, 32 bytes, where it is one.
        policy: digest of the policy that ``rule`` comes from, 32 bytes; it goes into the record.

    Returns:
        The record and one share for each custodian. Wipe it with ``close()``.

    Raises:
        ParameterError: secret, label, names, time or pad out of range, or a rule too large for documents of 1 MiB.

    Source: Shamir 1979, sec. 2; FORMAT.md.

    >>> rule = flat_rule(2, ["north-pier", "south-pier", "light-house"])
    >>> dealt = split(Secret.of(b"not a real key"), rule, label="Tide archive")
    >>> [share.custodian for share in dealt.shares]
    ['north-pier', 'south-pier', 'light-house']
    """
    check_text(label)
    field = Field() if field is None else field
    _check_names(rule.paths())
    created = clock.now() if created is None else created
    clock.to_text(created)
    if len(rule.words()) > MAX_LONG_TEXT:
        raise ParameterError(f"the rule in words would be longer than {MAX_LONG_TEXT:,} characters")
    with make_payload(field, secret, pad=pad) as payload:
        if _largest_share(rule, len(payload)) > MAX_FILE:
            raise ParameterError(
                "a custodian's share would be larger than 1 MiB",
                hint="encrypt the secret with a fresh key and split the key, or give custodians fewer places",
            )
        identity = secrets.token_bytes(16) if set_id is None else set_id
        dealt = _deal(payload, rule, label, field, created, identity, encrypted_file, policy)
    return dealt


def practice_for(record: Record) -> Dealt:
    """Deal a worthless secret under the rule of a record, for rehearsals in the open: a set of its own.

    Args:
        record: of the set that is rehearsed for; the practice set says in its label that it is one.

    Returns:
        A dealing of 32 random bytes that protect nothing.
    """
    with Secret.of(secrets.token_bytes(_WORTHLESS)) as nothing:
        label = f"{PRACTICE_LABEL}{record.label}"[:MAX_TEXT]
        return split(nothing, record.rule.to_rule(), label=label, field=record.field, created=record.created)


def _largest_share(rule: Rule, row_length: int) -> int:
    """Return a bound on the size of the largest share's file, in bytes: its paths, a line for each row, and the rest.

    The rest is the rule in words; label and notice of 500 characters and the name of 64, each character in 4 bytes at
    most; members of fixed length; and the wrapping.
    """
    row = 4 * row_length // 3 + 16
    points = max(len(write_text({"paths": paths})) + len(paths) * row for paths in rule.paths().values())
    return points + len(write_text({"rule": rule.words()})) + 8192


def _deal(
    payload: Secret,
    rule: Rule,
    label: str,
    field: Field,
    created: datetime,
    set_id: bytes,
    encrypted_file: bytes | None,
    policy: bytes | None,
) -> Dealt:
    secret_commitment = commitment(set_id, payload)
    dealing = deal(field, rule, payload)
    shares = [
        Share.of(
            set_id=set_id,
            epoch=1,
            custodian=name,
            points=points,
            field=field,
            secret_commitment=secret_commitment,
            encrypted_file=encrypted_file,
        )
        for name, points in dealing.points.items()
    ]
    commitments = [share.commitment() for share in shares]
    # Only now, with every share committed to, is R fixed: a dealer cannot fit rows to it (FORMAT.md, sec. 6).
    matrix = check_matrix(set_id, 1, field, commitments, len(payload))
    record = Record.of(
        set_id=set_id,
        epoch=1,
        label=label,
        created=created,
        field=field,
        row_length=len(payload),
        rule=rule,
        custodians=[
            Custodian(name=share.custodian, share_commitment=share_commitment, attestation_key=share.attestation_key())
            for share, share_commitment in zip(shares, commitments, strict=True)
        ],
        checks=[checks_of(field, matrix, polynomial) for polynomial in dealing.polynomials],
        secret_commitment=secret_commitment,
        encrypted_file=encrypted_file,
        policy=policy,
    )
    dealing.close_polynomials()
    if len(record.to_file()) > MAX_FILE:
        raise ParameterError("the rule is too large: its record would be larger than 1 MiB")
    notes = {"label": label, "rule": rule.words(), "record": record.fingerprint}
    return Dealt(record, tuple(share.noted(**notes) for share in shares))
