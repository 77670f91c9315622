"""Verify shares one by one, without any secret: against the public record, or as far as shares alone allow.

Source: FORMAT.md, sec. 6 and 7.
May import: shares.errors, shares.field, shares.sharing.consistency, shares.documents, shares.custody.presented.
Secret: the rows that are looked at. Public: every finding.
Does not: recover anything, or prove anything about shares it has not been given.
"""

from __future__ import annotations

import hmac
from collections import Counter
from collections.abc import Collection, Sequence

from shares.custody.presented import Finding, Presented, Status
from shares.documents.record import Record
from shares.documents.share import NOTICE, Share
from shares.errors import EpochMismatchError, SetMismatchError, VerificationError
from shares.sharing.consistency import check, expected


def verify_share(share: Share, record: Record) -> None:
    """Check one share against the record: digest, identity, commitment, consistency.

    Raises:
        SetMismatchError, EpochMismatchError: it belongs to another set or epoch.
        VerificationError: it is damaged, not in the record, or the dealing is inconsistent.

    Source: FORMAT.md, sec. 7.
    """
    (finding,) = examine([Presented(share.custodian, share)], record)
    if finding.status is Status.INTACT:
        return
    kinds = {Status.FOREIGN: SetMismatchError, Status.OTHER_EPOCH: EpochMismatchError}
    raise kinds.get(finding.status, VerificationError)(f"{finding.status}: {finding.reason}", where=finding.source)


def examine(presented: Sequence[Presented], record: Record) -> list[Finding]:
    """Check each share against the record; one finding for each, in order. Never raises for what a share holds."""
    examiner = _Examiner(record)
    return [_examined(one, examiner) for one in presented]


def _examined(one: Presented, examiner: _Examiner) -> Finding:
    if one.share is None:
        return one.finding(one.status, one.problem)
    status, reason = examiner.examine(one.share)
    return one.finding(status, reason)


class _Examiner:
    """A record with what is worked out from it once: the check matrix and each custodian's paths."""

    def __init__(self, record: Record) -> None:
        self.record = record
        self.rule = record.rule.to_rule()
        self.paths = self.rule.paths()
        self.checks = dict(zip((path for path, _ in self.rule.nodes()), record.checks, strict=True))
        self.matrix: bytes | None = None

    def examine(self, share: Share) -> tuple[Status, str]:
        record = self.record
        if not share.is_whole():
            return Status.DAMAGED, "its own digest does not fit: the file was damaged or edited"
        if share.set != record.set:
            return Status.FOREIGN, f"it is of set {share.set.hex()}, the record of set {record.set.hex()}"
        if share.epoch != record.epoch:
            return Status.OTHER_EPOCH, f"it is of epoch {share.epoch}, the record of epoch {record.epoch}"
        named = record.custodian(share.custodian)
        if named is None:
            return Status.UNKNOWN, "the record names no such custodian"
        if share.commitment() != named.share_commitment:
            return Status.DAMAGED, "it does not match the record's commitment: it was altered after it was dealt"
        problem = self._inconsistency(share)
        if problem:
            return Status.INCONSISTENT, problem
        said = {"label": record.label, "rule": self.rule.words(), "notice": NOTICE}
        other = [name for name, mine in said.items() if getattr(share, name) not in (None, mine)]
        if other:
            return (
                Status.INTACT,
                f"commitment and consistency check fit the record, but not the {' and '.join(other)}: "
                "go by the record's, and by no other notice",
            )
        return Status.INTACT, "commitment and consistency check fit the record"

    def _inconsistency(self, share: Share) -> str | None:
        """Say what of a share that the record commits to contradicts the record: then the dealer is at fault."""
        record = self.record
        if share.field.modulus != record.field.modulus:
            return "it was dealt over another field than the record says"
        if share.secret_commitment != record.secret_commitment or share.encrypted_file != record.encrypted_file:
            return "it names another secret than the record"
        if share.paths != self.paths[share.custodian] or share.row_length != record.row_length:
            return "its points are not where the record's rule puts them"
        if share.record is not None and share.record != record.fingerprint:
            return f"it was dealt with another record, {share.record}"
        named = record.custodian(share.custodian)
        if named is None or share.attestation_key() != named.attestation_key:
            return "the record names another attestation key than the one this share makes"
        if self.matrix is None:
            self.matrix = record.check_matrix()
        for path, row in zip(share.paths, share.rows, strict=True):
            wanted = expected(record.field, self.checks[path[:-1]], path[-1][1])
            # public: the check of a row is masked, and what it must be stands in the record.
            if not hmac.compare_digest(check(record.field, self.matrix, row), wanted):
                return "its row lies on no polynomial that the record commits to: the dealer was faulty or dishonest"
        return None


def examine_alone(
    presented: Sequence[Presented], *, like: Share | None = None, apart_from: Collection[int] = ()
) -> list[Finding]:
    """Check shares without a record: each one's own digest, and that they agree with one another.

    Args:
        presented: shares as given.
        like: the share that the others are compared with. By default one of the largest group of shares of one set
            and epoch; where two groups are equally large, of the one given first.
        apart_from: places of shares that are known to be wrong: what they claim contradicts no other share.

    Returns:
        One finding for each share given, in order.
    """
    group = [
        one.share
        for i, one in enumerate(presented)
        if one.share is not None and one.share.is_whole() and i not in apart_from
    ]
    for fact in (_set, _epoch, Share.set_key):
        common = _most_frequent([fact(share) for share in ([like] if like else group)])
        group = [share for share in group if fact(share) == common]
    like = like or next(iter(group), None)
    # A share typed back from paper may not say its record: it then contradicts nobody about it.
    record = _most_frequent([share.record for share in group if share.record is not None])
    claims = _claims(group)
    return [_examined_alone(one, like, record, claims) for one in presented]


def _examined_alone(one: Presented, like: Share | None, record: object, claims: dict[object, set[object]]) -> Finding:
    share = one.share
    if share is None:
        return one.finding(one.status, one.problem)
    if like is None or not share.is_whole():
        return one.finding(Status.DAMAGED, "its own digest does not fit: the file was damaged or edited")
    if share.set != like.set:
        return one.finding(Status.FOREIGN, f"it is of set {share.set.hex()}, the others are not")
    if share.epoch != like.epoch:
        return one.finding(Status.OTHER_EPOCH, f"it is of epoch {share.epoch}, the others are not")
    if share.set_key() != like.set_key() or share.record not in (None, record):
        return one.finding(Status.INCONSISTENT, "it contradicts the others about field, secret or record")
    if _is_contradicted(share, claims):
        return one.finding(Status.INCONSISTENT, "another share claims the same place and holds something else")
    return one.finding(Status.INTACT, "its own digest fits, and it agrees with the others given")


def _set(share: Share) -> object:
    return share.set


def _epoch(share: Share) -> object:
    return share.epoch


def _most_frequent(values: Sequence[object]) -> object:
    """Return the value that stands most often, the first of several; None of none."""
    return max(Counter(values).items(), key=lambda found: found[1], default=(None, 0))[0]


def _claims(shares: Sequence[Share]) -> dict[object, set[object]]:
    """Map each place, node and custodian to what the shares say of it; honest shares of one dealing say one thing
    each."""
    claims: dict[object, set[object]] = {}
    for share in shares:
        commitment = share.commitment()
        for key in (share.custodian, *share.paths):
            claims.setdefault(key, set()).add(commitment)
        for path in share.paths:
            for depth, (need, _) in enumerate(path):
                claims.setdefault(("node", path[:depth]), set()).add(need)
    return claims


def _is_contradicted(share: Share, claims: dict[object, set[object]]) -> bool:
    nodes = [("node", path[:depth]) for path in share.paths for depth in range(len(path))]
    return any(len(claims.get(key, ())) > 1 for key in (share.custodian, *share.paths, *nodes))
