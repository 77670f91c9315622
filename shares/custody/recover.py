"""Recover a secret from shares, never wrongly: the commitment is the judge, and bad shares are named.

Source: Shamir 1979; Bellare, Dai, Rogaway 2020 (the one explanation or an explicit refusal); FORMAT.md, sec. 8.
May import: shares.errors, shares.memory, shares.field, shares.sharing, shares.documents, shares.custody.payload,
.presented, .verify.
Secret: rows, payloads, the recovered secret. Public: who was used, who was found bad.
Does not: deliver the secret anywhere; ``custody.deliver`` does.
"""

from __future__ import annotations

import hmac
from collections.abc import Iterable, Sequence
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
from shares.sharing.robust import MAX_SECONDS, MAX_TRIES, Agreement, agreeing, count_quorums, search
from shares.sharing.rule import Path, Point


@dataclass(frozen=True, slots=True, eq=False)
class Recovery:
    """A recovered secret and how it was had.

    Attributes:
        secret: checked against the commitment; wipe it with ``close()``.
        payload: what the shares share: the secret framed, blinded and masked; wipe it likewise.
        share: one of the shares used: says set, epoch, field; its label is not proved by anything.
        label: what the secret is: as the record says, else as that share does.
        used: custodians whose shares gave the secret.
        findings: one for each share given, in order; those not intact say why.
    """

    secret: Secret
    payload: Secret
    share: Share
    label: str | None
    used: tuple[str, ...]
    findings: tuple[Finding, ...]


class _Group:
    """Different shares that claim to be of one dealing; keys are places in what was presented."""

    def __init__(self, shares: dict[int, Share]) -> None:
        self.shares = shares
        held = [(i, point) for i, share in shares.items() for point in share.points()]
        self.owners = [i for i, _ in held]
        self.points: list[Point] = [point for _, point in held]
        self.paths: list[Path] = [point.path for point in self.points]
        self.quorums = count_quorums(self.paths)

    @property
    def first(self) -> Share:
        """The share given first; what makes a group, all of its shares say alike."""
        return next(iter(self.shares.values()))

    def recover(self, record: Record | None) -> tuple[Secret, list[tuple[int, Path]]] | None:
        """Return the payload that the commitment names and the points used, by place and path, or None."""
        if not self.quorums:
            return None
        first = self.first
        matrix = record.check_matrix() if record else b""

        def judge(payload: Secret) -> bool:
            if not is_committed(first.set, payload, first.secret_commitment):
                return False
            # public: with the mask in it, the check of the payload tells nothing; the record holds what it must be.
            return record is None or check(first.field, matrix, payload) == record.checks[0][0]

        found = search(first.field, self.points, judge, owners=self.owners)
        if found is None:
            return None
        payload, quorum = found
        return payload, [(self.owners[i], self.paths[i]) for i in quorum]

    def agreement(self, payload: Secret, used: list[tuple[int, Path]]) -> Agreement:
        """Say the places of shares that lie on the recovered dealing wholly, do not, or contradict one another."""
        held = zip(self.owners, self.paths, strict=True)
        said = agreeing(self.first.field, self.points, payload, tuple(i for i, one in enumerate(held) if one in used))
        good, bad, torn = ({self.owners[i] for i in points} for points in said)
        return Agreement(good - bad - torn, bad, torn - bad)

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
        SetMismatchError, EpochMismatchError: the shares are of several sets or epochs, and the one that most belong to
            has no quorum.
        VerificationError: there is a quorum, yet no combination tried gives what the commitment names.
        AmbiguousError: a set recovers, but so does another, or equally many shares of another were given.

    Source: FORMAT.md, sec. 8.
    """
    findings = examine(presented, record) if record else examine_alone(presented)
    usable = {
        i: one.share for i, one in enumerate(presented) if one.share is not None and _may_be_used(one.share, record)
    }
    whole = {i: share for i, share in usable.items() if findings[i].status is not Status.DAMAGED}
    # Only the set that most shares belong to may be recovered: a forged share that claims to be a quorum by itself must
    # not win over two true ones that are one short. Nor may it win over a quorum of them by bringing many files.
    groups = _groups(usable)
    for group in _rivals(groups):
        had = _recovered(group, whole, record)
        if had is None:
            continue
        payload, used = had
        try:
            _refuse_other_explanations(groups, group, whole)
            places = tuple(dict.fromkeys(i for i, _ in used))
            if record is None:
                findings = _found_alone(presented, group.first, payload, used)
            else:
                findings = _with_rows_said_right(presented, findings, places)
            names = tuple(group.shares[i].custodian for i in places)
            share = group.shares[places[0]]
            label = record.label if record else share.label
            return Recovery(open_payload(payload), payload, share, label, names, tuple(findings))
        except BaseException:
            payload.close()
            raise
    # Damaged shares were tried as well, without success: they count no longer.
    raise _refusal(presented, findings, _groups(whole), record)


def _recovered(
    group: _Group, whole: dict[int, Share], record: Record | None
) -> tuple[Secret, list[tuple[int, Path]]] | None:
    """Recover a group. A share whose digest fails may still hold a right row: it is tried when the others do not do."""
    had = _Group({i: share for i, share in group.shares.items() if i in whole}).recover(record)
    return had or group.recover(record)


def _refuse_other_explanations(groups: list[_Group], chosen: _Group, whole: dict[int, Share]) -> None:
    """Raise AmbiguousError where another group is as large as the one chosen, or recovers a secret of its own."""
    others = [group for group in groups if group is not chosen]
    if any(len(group.shares) == len(chosen.shares) for group in others):
        raise AmbiguousError(
            "equally many shares of different dealings were given, and which of them is meant cannot be told",
            hint="give the shares of one set and epoch, or the record",
        )
    for group in others:
        had = _recovered(group, whole, None)
        if had is not None:
            had[0].close()
            raise AmbiguousError(
                "shares of more than one dealing were given, and each recovers a secret of its own",
                hint="give the shares of one set and epoch, or the record",
            )


def _may_be_used(share: Share, record: Record | None) -> bool:
    """With a record, only shares are used that it commits to and that name the secret which it names."""
    if record is None:
        return True
    named = record.custodian(share.custodian)
    return (
        named is not None
        and hmac.compare_digest(share.commitment(), named.share_commitment)
        and share.set_key() == record.set_key()
    )


def _groups(candidates: dict[int, Share]) -> list[_Group]:
    """Group different shares by set, epoch, field and commitment, the largest group first; equal shares count once."""
    groups: dict[tuple[object, ...], dict[bytes, int]] = {}
    for i, share in candidates.items():
        groups.setdefault(share.set_key(), {}).setdefault(share.commitment(), i)
    different = sorted(groups.values(), key=len, reverse=True)
    return [_Group({i: candidates[i] for i in places.values()}) for places in different]


def _rivals(groups: list[_Group]) -> list[_Group]:
    """Return the groups that most shares belong to: one, unless there is a tie."""
    return [group for group in groups if len(group.shares) == len(groups[0].shares)]


def _found_alone(
    presented: Sequence[Presented], like: Share, payload: Secret, used: list[tuple[int, Path]]
) -> list[Finding]:
    """Return the findings where there is no record, now that it is known which dealing recovers."""
    key = like.set_key()
    same = {i: one.share for i, one in enumerate(presented) if one.share is not None and one.share.set_key() == key}
    good, bad, torn = _Group(same).agreement(payload, used)
    findings = examine_alone(presented, like=like, apart_from=bad)
    for i in bad:
        reason = "its row does not lie on the dealing that the others recover"
        findings[i] = presented[i].finding(Status.DAMAGED, reason)
    for i in torn:
        if findings[i].status is Status.INTACT:
            findings[i] = presented[i].finding(
                Status.INCONSISTENT, "it contradicts other shares given; which is wrong, only the record tells"
            )
    return _with_rows_said_right(presented, findings, good)


def _with_rows_said_right(
    presented: Sequence[Presented], findings: Sequence[Finding], right: Iterable[int]
) -> list[Finding]:
    """Return the findings, with it said of damaged shares whose rows proved right that only the file is at fault."""
    said = list(findings)
    for i in right:
        if said[i].status is Status.DAMAGED:
            said[i] = presented[i].finding(
                Status.DAMAGED, "its own digest does not fit, though its row is right: replace the file"
            )
    return said


def _refusal(
    presented: Sequence[Presented], findings: Sequence[Finding], groups: list[_Group], record: Record | None
) -> SharesError:
    """Say why nothing was recovered, with what was found of each share."""
    error = _reason_for_refusal(presented, findings, groups, record)
    error.findings = tuple(
        {"file": one.source, "custodian": one.custodian, "status": one.status.value, "reason": one.reason}
        for one in findings
    )
    return error


def _reason_for_refusal(
    presented: Sequence[Presented], findings: Sequence[Finding], groups: list[_Group], record: Record | None
) -> SharesError:
    if record is not None and {finding.status for finding in findings} == {Status.FOREIGN}:
        return SetMismatchError(
            f"none of the {len(findings)} shares given is of the record's set, {record.set.hex()}",
            hint="`shares show FILE` says which set a share or record is of: give those of one set",
        )
    # What is wrong with several files alike is said once.
    alike: dict[tuple[Status, str], list[str]] = {}
    for finding in findings:
        if finding.status is not Status.INTACT:
            alike.setdefault((finding.status, finding.reason), []).append(finding.source)
    aside = "".join(
        f"; {', '.join(sources)} {'was' if len(sources) == 1 else 'were'} set aside ({status}: {reason})"
        for (status, reason), sources in alike.items()
    )
    if not groups:
        return NotEnoughSharesError(f"none of the {len(presented)} shares given can be used{aside}")
    most = max(group.quorums for group in _rivals(groups))
    if most and record is not None:
        return VerificationError(
            f"no secret was recovered, although the shares that fit the record make a quorum{aside}",
            hint="whoever dealt this set used faulty or hostile software; keep the shares and ask for help",
        )
    if most:
        return VerificationError(
            f"no secret was recovered: of {most:,} possible quorums as many were tried as {MAX_TRIES:,} tries and "
            f"{MAX_SECONDS:.0f} seconds allow, and none gives what the commitment names, "
            f"so too many shares are wrong{aside}",
            hint="give more shares, or the record, which tells bad shares apart",
        )
    sets = len({group.first.set for group in groups})
    epochs = len({group.first.epoch for group in groups})
    if sets > 1:
        return SetMismatchError(
            f"shares of {sets} sets were given, and the one that most belong to has no quorum{aside}",
            hint="`shares show FILE` says which set a share is of; give those of one set",
        )
    if epochs > 1:
        return EpochMismatchError(
            f"shares of {epochs} epochs were given, and the one that most belong to has no quorum{aside}",
            hint="shares of different epochs never combine; give those of one epoch",
        )
    if any(len(path) > 1 for path in groups[0].paths):
        rule = record.rule.to_rule().words() if record else groups[0].first.rule
        return NotEnoughSharesError(
            f"the shares of {', '.join(share.custodian for share in groups[0].shares.values())} make no quorum; "
            f"to recover: {rule or 'not stated in these shares'}{aside}",
            hint="bring the shares that are missing",
        )
    needed, given = groups[0].shortfall()
    return NotEnoughSharesError(
        f"{needed} different shares are needed, {given} given can be used{aside}", hint="bring more shares of this set"
    )
