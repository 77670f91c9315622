"""Recover a secret from shares, never wrongly: the commitment is the judge, and bad shares are named.

Source: Shamir 1979; Bellare, Dai, Rogaway 2020 (the one explanation or an explicit refusal); FORMAT.md, sec. 8.
May import: shares.errors, shares.memory, shares.field, shares.sharing, shares.documents, shares.custody.payload,
shares.custody.verify.
Secret: rows, payloads, the recovered secret. Public: who was used, who was found bad.
Does not: deliver the secret anywhere; ``custody.deliver`` does.
"""

from __future__ import annotations

import hmac
from collections.abc import Sequence
from dataclasses import dataclass

from shares.custody.payload import is_committed, open_payload
from shares.custody.presented import Finding, Presented, Status
from shares.custody.verify import examine, examine_alone
from shares.documents.record import Record
from shares.documents.share import Share
from shares.errors import (
    AmbiguousError,
    EpochMismatchError,
    NotEnoughSharesError,
    SetMismatchError,
    SharesError,
    VerificationError,
)
from shares.memory import Secret
from shares.sharing.consistency import check
from shares.sharing.robust import MAX_TRIES, agreeing, count_quorums, search
from shares.sharing.rule import Path, Point


@dataclass(frozen=True, slots=True, eq=False)
class Recovery:
    """A recovered secret and how it was had.

    Attributes:
        secret: checked against the commitment; wipe it with ``close()``.
        share: one of the shares used: says set, epoch, field, label.
        used: custodians whose shares gave the secret.
        findings: one for each share given, in order; those not intact say why.
    """

    secret: Secret
    share: Share
    used: tuple[str, ...]
    findings: tuple[Finding, ...]


class _Group:
    """Different shares that claim to be of one dealing; keys are places in what was presented."""

    def __init__(self, shares: dict[int, Share]) -> None:
        self.shares = shares
        self.first = next(iter(shares.values()))
        held = [(i, point) for i, share in shares.items() for point in share.points()]
        self.owners = [i for i, _ in held]
        self.points: list[Point] = [point for _, point in held]
        self.paths: list[Path] = [point.path for point in self.points]
        self.quorums = count_quorums(self.paths)

    def recover(self, record: Record | None) -> tuple[Secret, tuple[int, ...]] | None:
        """Return the payload that the commitment names and the places used, or None."""
        first = self.first
        matrix = record.check_matrix() if record else b""

        def judge(payload: Secret) -> bool:
            if not is_committed(first.set, payload, first.secret_commitment):
                return False
            # public: with the mask in it, the check of the payload tells nothing; the record holds what it must be.
            return record is None or check(first.field, matrix, payload) == record.checks[0][0]

        found = search(first.field, self.points, judge) if self.quorums else None
        if found is None:
            return None
        payload, quorum = found
        return payload, tuple(dict.fromkeys(self.owners[i] for i in quorum))

    def disagreements(self, payload: Secret) -> tuple[set[int], set[int]]:
        """Return the places of shares that lie on the recovered dealing wholly, and of those that do not."""
        good, bad = agreeing(self.first.field, self.points, payload)
        off = {self.owners[i] for i in bad}
        return {self.owners[i] for i in good} - off, off

    def shortfall(self) -> tuple[int, int]:
        """Return (needed, given) at the top of the rule."""
        below: dict[int, list[Path]] = {}
        for path in self.paths:
            below.setdefault(path[0][1], []).append(path[1:])
        met = [x for x, rest in below.items() if () in rest or count_quorums(rest)]
        return max(path[0][0] for path in self.paths), len(met)


def recover(presented: Sequence[Presented], record: Record | None = None) -> Recovery:
    """Return the one secret that the shares give, checked against the commitment, or refuse.

    Args:
        presented: shares as given; unreadable, damaged and foreign ones are set aside and named.
        record: the public record, where there is one. It tells bad shares apart beforehand.

    Returns:
        The secret, who was used, and a finding for each share given.

    Raises:
        NotEnoughSharesError: no quorum among the usable shares.
        SetMismatchError, EpochMismatchError: the shares are of several sets or epochs and none has a quorum.
        VerificationError: there is a quorum, yet no combination tried gives what the commitment names.
        AmbiguousError: shares of several sets each recover.

    Source: FORMAT.md, sec. 8.
    """
    findings = examine(presented, record) if record else examine_alone(presented)
    usable = {
        i: one.share for i, one in enumerate(presented) if one.share is not None and _may_be_used(one.share, record)
    }
    whole = {i: share for i, share in usable.items() if findings[i].status is not Status.DAMAGED}
    # A share whose digest fails may still hold a right row; it is tried when the others do not suffice.
    for candidates in (whole, usable):
        found = [(group, *had) for group in _groups(candidates) if (had := group.recover(record))]
        if len(found) > 1:
            for _, payload, _ in found:
                payload.close()
            raise AmbiguousError(
                "shares of more than one set were given, and each set recovers a secret of its own",
                hint="give the shares of one set and epoch",
            )
        if found:
            group, payload, used = found[0]
            with payload:
                final = _final_findings(presented, findings, usable, group, payload)
                names = tuple(group.shares[i].custodian for i in used)
                return Recovery(open_payload(payload), group.first, names, tuple(final))
    # Damaged shares were tried as well, without success: they count no longer.
    raise _refusal(presented, findings, _groups(whole))


def _may_be_used(share: Share, record: Record | None) -> bool:
    """With a record, only shares that it commits to are used."""
    if record is None:
        return True
    named = record.custodian(share.custodian)
    return named is not None and hmac.compare_digest(share.commitment(), named.share_commitment)


def _groups(candidates: dict[int, Share]) -> list[_Group]:
    """Group different shares by set, epoch, field and commitment, the largest group first; equal shares count once."""
    groups: dict[tuple[object, ...], dict[bytes, int]] = {}
    for i, share in candidates.items():
        groups.setdefault(share.set_key(), {}).setdefault(share.commitment(), i)
    different = sorted(groups.values(), key=len, reverse=True)
    return [_Group({i: candidates[i] for i in places.values()}) for places in different]


def _final_findings(
    presented: Sequence[Presented],
    findings: Sequence[Finding],
    usable: dict[int, Share],
    group: _Group,
    payload: Secret,
) -> list[Finding]:
    """Return the findings, with shares of the recovered set that do not lie on its dealing named as damaged."""
    key = group.first.set_key()
    good, off = _Group({i: share for i, share in usable.items() if share.set_key() == key}).disagreements(payload)
    final = list(findings)
    for i in off:
        final[i] = presented[i].finding(Status.DAMAGED, "its row does not lie on the dealing that the others recover")
    for i in good:
        if findings[i].status is Status.INCONSISTENT:
            final[i] = presented[i].finding(Status.INTACT, "it lies on the dealing that was recovered")
        elif findings[i].status is Status.DAMAGED:
            final[i] = presented[i].finding(
                Status.DAMAGED, "its own digest does not fit, though its row is right: replace the file"
            )
    return final


def _refusal(presented: Sequence[Presented], findings: Sequence[Finding], groups: list[_Group]) -> SharesError:
    """Say why nothing was recovered."""
    aside = "".join(
        f"; {finding.source} was set aside ({finding.status})"
        for finding in findings
        if finding.status is not Status.INTACT
    )
    if not groups:
        return NotEnoughSharesError(f"none of the {len(presented)} shares given can be used{aside}")
    most = max(group.quorums for group in groups)
    if most:
        tried = f"all {most:,} quorums" if most <= MAX_TRIES else f"{MAX_TRIES:,} of {most:,} quorums, taken at random,"
        return VerificationError(
            f"no secret was recovered: {tried} were tried and none gives what the commitment names, "
            f"so too many shares are wrong{aside}",
            hint="give more shares, or the record, which tells bad shares apart",
        )
    sets = len({group.first.set for group in groups})
    epochs = len({group.first.epoch for group in groups})
    if sets > 1:
        return SetMismatchError(
            f"shares of {sets} sets were given, and none has a quorum{aside}",
            hint="`shares show FILE` says which set a share is of; give those of one set",
        )
    if epochs > 1:
        return EpochMismatchError(
            f"shares of {epochs} epochs were given, and none has a quorum{aside}",
            hint="shares of different epochs never combine; give those of one epoch",
        )
    needed, given = groups[0].shortfall()
    return NotEnoughSharesError(
        f"{needed} different shares are needed, {given} given can be used{aside}", hint="bring more shares of this set"
    )
