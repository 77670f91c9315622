"""Give a task up for one party: what it has said stays, and what it kept to go on with is erased.

Source: RFC 9591, sec. 5.1 (nonces are deleted); FORMAT_KEYS.md, sec. 25 and 29.
May import: shares.documents, shares.history, .finishing, .folder, .nonces, .signing, .verdict.
Secret: nothing is opened; sealed states and nonces are erased. The party key, passed through. Public: messages.
Does not: tell the others, or erase media, which may keep old blocks.
"""

from __future__ import annotations

from shares.documents.event import Event
from shares.documents.key_event import KeyBorn, TaskFailed, TaskFinished
from shares.documents.key_record import KeyRecord
from shares.documents.party import OpenPartyKey
from shares.documents.task import Joining, Signing
from shares.documents.task_message import Commitment, Confirmation, SignatureShare
from shares.history.files import RECORD_NAME
from shares.history.journal import load_journal
from shares.history.next import drop
from shares.history.rounds import Failure
from shares.history.steps import OwnSteps
from shares.keys.finishing import failed
from shares.keys.folder import load_key_record
from shares.keys.nonces import NonceStore
from shares.keys.signing import NONCES
from shares.keys.verdict import CONFIRMATIONS


def costs(own: OwnSteps) -> str | None:
    """Say what may be lost by giving a task up, beyond the task; None where nothing is.

    Args:
        own: the party's steps.

    Raises:
        StorageError, VerificationError: they cannot be read, or are not this party's.
    """
    if own.done() is not None or _has_ended(own):
        return None
    if any(isinstance(one.body, Confirmation) for one in own.messages().values()):
        return (
            "You have signed the record of the key that was to be born. Where the others have everybody's "
            "confirmation it is born, and they count on your key share, which is erased now. Ask them first; if it is, "
            "have them send the whole folder of the task, and run `shares task next` instead."
        )
    return None


def spared(own: OwnSteps) -> str | None:
    """Say which nonces are not erased by giving a task up; None where there are none that it names.

    An author names whatever commitments it likes, those of another task too, which needs the nonces still.

    Args:
        own: the party's steps.

    Raises:
        StorageError, VerificationError: they cannot be read, or are not this party's.
    """
    if own.done() is not None and not _given_up(own):
        return None
    if isinstance(own.task.work, Signing) and own.task.work.commitments and not _has_shared(own):
        return (
            "Nonces made beforehand, to which this task names your commitments, stay: you have given no share made "
            "with them here, and another task may name them too. They are still used once at most."
        )
    return None


def give_up(own: OwnSteps, key: OpenPartyKey, record: KeyRecord | None, failure: Failure | None) -> bool:
    """End a task for a party, whatever has become of it. It may be repeated, and then does what is missing.

    Nonces that it has used are erased too; those that it only names stay, see ``spared``.

    Args:
        own: the party's steps.
        key: its party key.
        record: of the key that the task uses; None where it is being born.
        failure: why the task has failed; None where it has not, or that cannot be told.

    Returns:
        Whether it was given up; False where it had come to its end, and only what was left there is erased.

    Raises:
        ParameterError: it had come to its end for this party, and nothing is left.
        StorageError: something cannot be written or erased.
        VerificationError: the steps are not this party's.
    """

    def told() -> TaskFailed | None:
        if own.done() is None and _has_ended(own):
            return None
        return _told(own) or failed(own.task, failure or Failure(None, f"given up by {own.name}"))

    return drop(own, told, key, lambda: _erase_nonces(own, key, record))


def _told(own: OwnSteps) -> TaskFailed | None:
    """Return what the journal says already of a task that was given up: what has failed since is no second entry."""
    if own.done() is None:
        return None
    return next((one for one in _entered(own) if isinstance(one, TaskFailed) and one.task == own.task.digest()), None)


def _has_ended(own: OwnSteps) -> bool:
    """Say whether the journal tells that the task came to its end, as a run does that was stopped right after that.

    A key's birth names its record, and the record, by the messages that its custodians have answered, the task.
    """
    confirmed = own.messages().get(CONFIRMATIONS) if isinstance(own.task.work, Joining) else None
    for event in _entered(own):
        if isinstance(event, TaskFinished) and event.task == own.task.digest():
            return True
        if isinstance(event, KeyBorn) and confirmed is not None:
            record = load_key_record(own.mine / RECORD_NAME)
            if (record.fingerprint, record.generation) == (event.record, confirmed.seen):
                return True
    return False


def _entered(own: OwnSteps) -> list[Event]:
    return [entry.event for entry in load_journal(own.mine).entries]


def _given_up(own: OwnSteps) -> bool:
    done = own.done()
    return done is not None and done.given_up


def _has_shared(own: OwnSteps) -> bool:
    return any(isinstance(one.body, SignatureShare) for one in own.messages().values())


def _erase_nonces(own: OwnSteps, key: OpenPartyKey, record: KeyRecord | None) -> None:
    if record is None or not isinstance(own.task.work, Signing):
        return
    named = own.task.work.commitments if _has_shared(own) else ()
    pairs = [(one.hiding, one.binding) for one in named if one.signer == own.name]
    said = [one.body for one in own.messages().values()]
    pairs += [(body.hiding, body.binding) for body in said if isinstance(body, Commitment)]
    store = NonceStore(own.mine / NONCES, record, own.name, key)
    for pair in pairs:
        store.erase(*pair)
