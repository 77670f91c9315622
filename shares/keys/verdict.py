"""What is wrong in a joint generation, and whose doing it is, as everybody can see who holds no secret.

Source: R. Gennaro, S. Jarecki, H. Krawczyk, T. Rabin, "Secure Distributed Key Generation for Discrete-Log Based
    Cryptosystems", J. Cryptology 20, 2007, fig. 2, steps 1 and 4 (complaints, and what settles them); FORMAT_KEYS.md,
    sec. 27.
May import: shares.errors, shares.group, shares.sharing, shares.documents, shares.history.rounds, .generation.
Secret: nothing. Public: everything, numbers that were shown because they were disputed included.
Does not: look at what only one party can see: that party complains of it or accuses, and this judges what it says.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from typing import Final, TypeVar

from shares.documents.base import Document
from shares.documents.key_event import MAX_HOLDERS
from shares.documents.key_record import Holder, KeyRecord
from shares.documents.party import PartyCard
from shares.documents.task import Joining, Task
from shares.documents.task_message import (
    Accusation,
    Answer,
    Confirmation,
    Dealing,
    OpeningKey,
    Reveal,
    Review,
    ShownShare,
    TaskMessage,
)
from shares.errors import ParameterError, VerificationError
from shares.history.rounds import Failure, Inbox
from shares.keys.generation import Dealt, is_possessed, is_revealed
from shares.sharing.verifiable import Commitments, check_degree, summed

FRESH_KEYS, DEALINGS, REVIEWS, ANSWERS, REVEALS, CONFIRMATIONS = range(6)
"""The rounds."""
Kind = TypeVar("Kind", bound=Document)
_SAID: Final[tuple[tuple[type[Document], ...], ...]] = (
    (OpeningKey,),
    (Dealing,),
    (Review,),
    (Answer,),
    (Reveal,),
    (Confirmation, Accusation),
)


def joining(task: Task) -> Joining:
    """Return what a task of joint generation asks for.

    Raises:
        ParameterError: it is a task of another purpose.
        VerificationError: no key can come of it.
    """
    if not isinstance(task.work, Joining):
        raise ParameterError("this task is not one to generate a key")
    if task.epoch != 1 or len(task.parties) > MAX_HOLDERS:
        raise VerificationError(
            f"no key can come of this task: a key begins with epoch 1 and has at most {MAX_HOLDERS} custodians",
            hint="ask its author for another",
        )
    return task.work


def index_of(task: Task, name: str) -> int:
    """Return where a party's key share stands: 1, 2, ... in the order of the task's parties."""
    return task.names.index(name) + 1


def proof_context(task: Task, name: str) -> bytes:
    """Return what binds a proof of possession to this task and party, the index apart."""
    return b"shares/v1/join" + task.digest() + name.encode()


def said(inbox: Inbox, round: int, kind: type[Kind]) -> dict[str, Kind]:
    """Return what the parties said in a round, by name, so far as it is of one kind."""
    return {name: message.body for name, message in inbox.of(round).items() if isinstance(message.body, kind)}


def commitments_of(bodies: Mapping[str, Dealing | Reveal]) -> dict[str, Commitments]:
    """Return each party's commitments, Pedersen's or Feldman's, by its name."""
    return {name: body.commitments for name, body in bodies.items()}


def complaints(inbox: Inbox) -> dict[str, list[str]]:
    """Return who complains of whom: names by the name complained of, all in the order of the task's parties."""
    reviews = said(inbox, REVIEWS, Review)
    found = {
        name: [by for by, review in reviews.items() if name in {one.against for one in review.complaints}]
        for name in inbox.task.names
    }
    return {name: by for name, by in found.items() if by}


def shown_to(inbox: Inbox, name: str) -> dict[str, Dealt]:
    """Return what was shown of the numbers dealt to a party, by who dealt them."""
    answers = said(inbox, ANSWERS, Answer)
    return {dealer: _dealt(one) for dealer, answer in answers.items() for one in answer.shares if one.to == name}


def sums_of(inbox: Inbox) -> Commitments:
    """Return the commitments to the key's polynomial: the sums of what each party has revealed.

    Raises:
        VerificationError: one of them is the identity.
    """
    return summed(list(commitments_of(said(inbox, REVEALS, Reveal)).values()), joining(inbox.task).need)


def record_of(inbox: Inbox) -> KeyRecord:
    """Return the record of the key that comes of what was said before the confirmations, unsigned.

    All who have seen the same messages make the same record: it holds the digest of them all, and their latest time.

    Args:
        inbox: with every party's commitments in the open.

    Raises:
        VerificationError: the commitments add up to the identity.
    """
    task = inbox.task
    times = [message.created for round in range(CONFIRMATIONS) for message in inbox.of(round).values()]
    return KeyRecord.of(
        key=task.key,
        label=task.label,
        created=max(times),
        origin="joint",
        custodians=[Holder(name=one.name, index=index_of(task, one.name), card=one.card) for one in task.parties],
        commitments=sums_of(inbox),
        generation=inbox.seen(CONFIRMATIONS),
    )


def round_failure(round: int, inbox: Inbox) -> Failure | None:
    """Say what ends the generation in a round in which all have spoken who had to; None if nothing does.

    Where several parties broke the rules in one round, the first in the task's order is named.
    """
    seen = inbox.seen(round)
    for name, message in inbox.of(round).items():
        if message.seen != seen:
            # Told apart from everything else first: whoever was shown other messages is not to blame for what they say.
            return Failure(None, f"{name} has seen other messages of earlier rounds than lie here")
        if not isinstance(message.body, _SAID[round]):
            return _misplaced(name, round)
    judge = _JUDGES.get(round)
    return next(judge(inbox), None) if judge else None


def _misplaced(name: str, round: int) -> Failure:
    return Failure(name, f"{name} says something that does not belong into round {round}")


def _lengths(bodies: Mapping[str, Dealing | Reveal], need: int) -> Iterator[Failure]:
    for name, body in bodies.items():
        try:
            check_degree(body.commitments, need)
        except VerificationError as error:
            yield Failure(name, f"{name} breaks the threshold: {error.what}")


def _of_dealings(inbox: Inbox) -> Iterator[Failure]:
    yield from _lengths(said(inbox, DEALINGS, Dealing), joining(inbox.task).need)


def _of_reviews(inbox: Inbox) -> Iterator[Failure]:
    for name, review in said(inbox, REVIEWS, Review).items():
        against = [one.against for one in review.complaints]
        if len(set(against)) != len(against) or not set(against) <= set(inbox.task.names) - {name}:
            yield Failure(name, f"{name} complains of one party twice, of itself or of somebody who takes no part")
    need = joining(inbox.task).need
    for name, by in complaints(inbox).items():
        # To answer them all would show as many numbers as open the contribution.
        if len(by) >= need:
            yield Failure(
                None,
                f"{', '.join(by)} complain of what {name} has dealt: as many as the key will need, and so it must not "
                "be shown; which side broke the rules, nothing proves",
            )


def _of_answers(inbox: Inbox) -> Iterator[Failure]:
    task, need = inbox.task, joining(inbox.task).need
    committed = commitments_of(said(inbox, DEALINGS, Dealing))
    answers = said(inbox, ANSWERS, Answer)
    for name, by in complaints(inbox).items():
        shown = answers[name].shares
        if sorted(one.to for one in shown) != sorted(by):
            yield Failure(name, f"{name} does not show what it has dealt to {', '.join(by)}, and nothing else")
        for one in shown:
            if not _dealt(one).fits(committed[name], index_of(task, one.to), need):
                yield Failure(name, f"what {name} shows that it has dealt to {one.to} does not fit its commitments")


def _dealt(shown: ShownShare) -> Dealt:
    return Dealt(shown.share, shown.blind)


def _of_reveals(inbox: Inbox) -> Iterator[Failure]:
    yield from _lengths(said(inbox, REVEALS, Reveal), joining(inbox.task).need)
    try:
        sums_of(inbox)
    except VerificationError:
        yield Failure(None, "the contributions cancel out, which chance does not do: some parties have agreed on it")


def _of_confirmations(inbox: Inbox) -> Iterator[Failure]:
    record = record_of(inbox)
    for name, accusation in said(inbox, CONFIRMATIONS, Accusation).items():
        yield _judged(inbox, name, accusation)
    for name, confirmation in said(inbox, CONFIRMATIONS, Confirmation).items():
        if not _signs(confirmation, record, record.holder(name).card):
            yield _signs_otherwise(name)


def confirms(message: TaskMessage, inbox: Inbox) -> bool:
    """Say whether a message of the last round signs the record that comes of what was said before it.

    Args:
        message: by a party of the task.
        inbox: with every party's commitments in the open, which are fine.
    """
    record = record_of(inbox)
    body = message.body
    return isinstance(body, Confirmation) and _signs(body, record, record.holder(message.sender).card)


def fault(message: TaskMessage, inbox: Inbox) -> Failure | None:
    """Say whom a message of the last round proves to have broken the rules, whatever its sender says besides.

    Of one that answers other messages that is so where it is wrong whatever these are.

    Args:
        message: by a party of the task.
        inbox: with every party's commitments in the open, which are fine.
    """
    name, body = message.sender, message.body
    if not isinstance(body, _SAID[CONFIRMATIONS]):
        return _misplaced(name, CONFIRMATIONS)
    if isinstance(body, Accusation) and body.against not in set(inbox.task.names) - {name}:
        return _accuses_nobody(name)
    if isinstance(body, Confirmation) and body.signature.card != record_of(inbox).holder(name).card:
        return _signs_otherwise(name)
    if message.seen != inbox.seen(CONFIRMATIONS):
        return None
    return round_failure(CONFIRMATIONS, Inbox(inbox.task, (*inbox.rounds, {name: message}), inbox.content))


def _signs(confirmation: Confirmation, record: KeyRecord, card: PartyCard) -> bool:
    try:
        record.signed([confirmation.signature])
    except ParameterError:
        return False
    return confirmation.signature.card == card


def _judged(inbox: Inbox, by: str, accusation: Accusation) -> Failure:
    """Say who is to blame when one party accuses another: one of the two is."""
    task, against = inbox.task, accusation.against
    share, blind = accusation.share, accusation.blind
    reveal = said(inbox, REVEALS, Reveal).get(against)
    if reveal is None or against == by:
        return _accuses_nobody(by)
    if share is None or blind is None:
        if not is_possessed(reveal.commitments[0], reveal.proof, index_of(task, against), proof_context(task, against)):
            return Failure(against, f"{against} has not proved that it knows what it contributes")
    else:
        x, need = index_of(task, by), joining(task).need
        dealing = said(inbox, DEALINGS, Dealing)[against]
        dealt = Dealt(share, blind).fits(dealing.commitments, x, need)
        if dealt and not is_revealed(share, reveal.commitments, x, need):
            return Failure(against, f"{against} has revealed other commitments than those it has dealt by to {by}")
    return Failure(by, f"{by} accuses {against}, and what it shows proves nothing")


def _accuses_nobody(name: str) -> Failure:
    return Failure(name, f"{name} accuses itself, or somebody who takes no part")


def _signs_otherwise(name: str) -> Failure:
    return Failure(name, f"{name} has not signed the record that comes of these messages")


_JUDGES: Final[Mapping[int, Callable[[Inbox], Iterator[Failure]]]] = {
    DEALINGS: _of_dealings,
    REVIEWS: _of_reviews,
    ANSWERS: _of_answers,
    REVEALS: _of_reveals,
    CONFIRMATIONS: _of_confirmations,
}
