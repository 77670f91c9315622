"""Joint generation: the custodians' machines make a key together, round by round, with no dealer.

Source: R. Gennaro, S. Jarecki, H. Krawczyk, T. Rabin, "Secure Distributed Key Generation for Discrete-Log Based
    Cryptosystems", J. Cryptology 20, 2007, fig. 2, with an end wherever it goes on without somebody; C. Komlo, I.
    Goldberg, "FROST", SAC 2020, fig. 1 (proofs of possession); FORMAT_KEYS.md, sec. 27.
May import: shares.errors, shares.memory, shares.group, shares.documents, shares.history.rounds, .generation, .verdict.
Secret: the contribution, what is dealt, the key share; kept in a sealed state only. Public: all that is said openly.
Does not: encrypt, sign or store messages; ``history`` does. ``verdict`` says what is wrong with them.

    0  fresh keys       what is sent to single parties will be encrypted to these; the engine's own
    1  dealings         commitments that show nothing; to each other party, sealed, its two numbers
    2  reviews          complaints of dealings that do not hold, or none
    3  answers          whoever is complained of shows what they have dealt to those who complain; mostly nobody
    4  commitments      in the open, to the same polynomials, and a proof that the constant is known
    5  confirmations    each signs the one record, or shows who has revealed other commitments than they have dealt by

A key that cannot be born as agreed is not born: whoever broke the rules is named, and the others begin anew. Where the
paper leaves a party out, or has the others rebuild its contribution, this stops: machines that wait for each other's
files lose little by it, and no contribution is ever known to anybody else. So any one party can stop a birth, in the
open, by breaking a rule or by its silence. The last to speak in round 4 can do so having seen which public key it would
be: it can throw keys away, and cannot choose one, as it was bound in round 1. Komlo and Goldberg prove signing secure
even where the last party may steer the key.

Fewer than k parties learn nothing of the key, whatever they do. That nobody can steer the public key takes k honest
parties, whose shares fix every polynomial; with fewer, the proofs of possession still keep anybody from contributing
what takes the others' part away.
"""

from __future__ import annotations

from collections.abc import Collection, Sequence

from shares.documents.key_event import Approved, KeyBorn
from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.party import OpenPartyKey
from shares.documents.task import Task
from shares.documents.task_message import (
    Accusation,
    Answer,
    Complaint,
    Confirmation,
    Dealing,
    Reveal,
    Review,
    ShownShare,
    TaskMessage,
)
from shares.documents.wrapping import card_sealer
from shares.errors import ParameterError, VerificationError
from shares.group.edwards25519 import Scalar
from shares.history.rounds import Failure, Inbox, NewFile, Outcome, Received, Said
from shares.keys.generation import Contribution, Dealt, is_possessed, is_revealed, misrevealed, sum_of
from shares.keys.verdict import (
    ANSWERS,
    CONFIRMATIONS,
    DEALINGS,
    FRESH_KEYS,
    REVEALS,
    REVIEWS,
    commitments_of,
    complaints,
    confirms,
    fault,
    index_of,
    joining,
    proof_context,
    record_of,
    round_failure,
    said,
    shown_to,
)
from shares.memory import Secret

ROUNDS = ("fresh keys", "dealings", "reviews", "answers", "commitments in the open", "confirmations")


class JointCourse:
    """Joint generation as everybody can follow it.

    Args:
        task: of joint generation.

    Raises:
        ParameterError: it has another purpose.
        VerificationError: no key can come of it.
    """

    rounds: Sequence[str] = ROUNDS
    private: bool = True

    def __init__(self, task: Task) -> None:
        joining(task)

    def speakers(self, round: int, inbox: Inbox) -> Sequence[str]:
        """Return who speaks: all; of answers, only those who are complained of."""
        return tuple(complaints(inbox)) if round == ANSWERS else inbox.task.names

    def failure(self, inbox: Inbox) -> Failure | None:
        """Say what the first complete round that something is wrong in shows; None while nothing is."""
        for round in range(len(self.rounds)):
            if not set(self.speakers(round, inbox)) <= set(inbox.of(round)):
                return None
            found = round_failure(round, inbox)
            if found:
                return found
        return None

    def holds(self, message: TaskMessage, inbox: Inbox) -> bool:
        """Say whether a party that has said several things at the end has signed the record with this one.

        Who has signed it holds a share, or says so; what else it told somebody takes the key from nobody.
        """
        return confirms(message, inbox)

    def fault(self, message: TaskMessage, inbox: Inbox) -> Failure | None:
        """Say whom an accusation or a confirmation proves to have broken the rules."""
        return fault(message, inbox)

    def spares(self, names: Collection[str]) -> bool:
        """Say that everybody has to confirm."""
        return not names


class JointPart:
    """What one custodian does in a joint generation.

    Args:
        task: of joint generation.
        me: the custodian's name in it.
        key: their party key.

    Raises:
        ParameterError: the task has another purpose, or gives this name to another party key or to nobody.
        VerificationError: no key can come of it.
    """

    def __init__(self, task: Task, me: str, key: OpenPartyKey) -> None:
        party = task.party(me)
        if party is None or party.card != key.card:
            raise ParameterError(f"this party key is not that of {me} in the task")
        self._task, self._me, self._key = task, me, key
        self._need = joining(task).need
        self._index = index_of(task, me)

    def __repr__(self) -> str:
        return f"JointPart({self._me!r})"

    def prospect(self, round: int, inbox: Inbox) -> Sequence[str]:
        """Return what this custodian is about to do in a round, cautions included."""
        if round == FRESH_KEYS:
            return (
                f"You join in generating the key {self._task.label!r}, of which {self._need} of"
                f" {len(self._task.parties)} custodians will be needed for any use.",
                "Each of you will keep a key share. No machine will ever hold the key, yours included.",
                *(f"  {one.name}: card {one.card.fingerprint}" for one in self._task.parties),
                "Compare each card's fingerprint with its party by voice or from paper: whoever has put a card of their"
                " own here would take that custodian's place.",
            )
        if round == DEALINGS:
            return (
                "Your machine draws your contribution to the key, publishes commitments that show nothing of it, and"
                " deals to each other custodian two numbers that only they can open.",
            )
        if round == REVIEWS:
            return ("Your machine checks what each custodian has dealt to you, and complains of what does not hold.",)
        if round == ANSWERS:
            return (
                f"{_listed(complaints(inbox)[self._me])} complain of what you have dealt to them: your machine shows"
                " these numbers to all, so that everybody can check them. Your contribution stays hidden.",
            )
        if round == REVEALS:
            return (
                *_settled(inbox),
                "All are bound to what they contribute: your machine shows its commitments in the open and proves that"
                " it knows your contribution. The public key then follows for all.",
            )
        record = record_of(inbox)
        return (
            "Your machine checks your key share against what all have shown. If it holds, you sign the key's record:"
            " that you have a share, and that you have seen the same messages as all who sign. If not, your machine"
            " shows whose contribution does not hold, and this key is not born.",
            *_of_record(record),
        )

    def asks(self, round: int) -> bool:
        """Say whether the custodian must agree: to take part, and to sign the record."""
        return round in (FRESH_KEYS, CONFIRMATIONS)

    def event(self, round: int, inbox: Inbox) -> Approved | None:
        """Return the custodian's agreement: to take part, and to sign the record."""
        if not self.asks(round):
            return None
        summary = f"to generate a key of which {self._need} of {len(self._task.parties)} are needed"
        if round == CONFIRMATIONS:
            summary = (
                f"to check a share of the key that is generated, and to sign its record {record_of(inbox).fingerprint}"
            )
        return Approved(
            what="approved",
            task=self._task.digest(),
            work="join",
            custodian=self._me,
            content=None,
            summary=summary,
        )

    def speak(self, round: int, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Said:
        """Say what this custodian says in rounds 1 to 5.

        Raises:
            ParameterError: a round in which nothing is to be said.
            VerificationError: what all have contributed cancels out.
        """
        if round == DEALINGS:
            return self._deal()
        if round == REVIEWS:
            return self._review(inbox, state, received)
        if round == ANSWERS:
            return self._answer(inbox, state)
        if round == REVEALS:
            return self._reveal(state)
        if round == CONFIRMATIONS:
            return self._confirm(inbox, state, received)
        raise ParameterError(f"nothing is said in round {round} of a joint generation")

    def kept(self, round: int, inbox: Inbox) -> None:
        """Nothing has to be erased before a message is released."""

    def finish(self, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Outcome:
        """Return the key share and, last, the record that all have signed.

        Raises:
            VerificationError: the share, as it was kept, does not fit the record.
        """
        signatures = [one.signature for one in said(inbox, CONFIRMATIONS, Confirmation).values()]
        record = record_of(inbox).signed(signatures)
        with state.view() as view:
            value = Scalar.decode(view)
        if not record.is_confirmed() or not is_revealed(value, record.commitments, self._index, self._need):
            raise VerificationError(
                "the key share that was kept does not fit the record that all have signed",
                hint="your own steps were changed since: do not use this key, and begin a new task",
            )
        share = KeyShare.wrap(value, record, self._me, card_sealer(self._key.card.recipient()))
        born = KeyBorn(what="key-born", key=record.key, epoch=record.epoch, record=record.fingerprint, origin="joint")
        files = (
            NewFile("share.json", share.to_file(), secret=True),
            NewFile("record.json", record.to_file(), secret=False),
        )
        return Outcome(files, born, self._words(inbox, record))

    def _deal(self) -> Said:
        contribution = Contribution.drawn(self._need)
        sealed = {name: contribution.dealt_to(index_of(self._task, name)).encode() for name in self._others()}
        return Said(
            Dealing(what="dealing", commitments=contribution.commitments()), contribution.encode(), sealed=sealed
        )

    def _review(self, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Said:
        committed = commitments_of(said(inbox, DEALINGS, Dealing))
        found = []
        for name in self._others():
            dealt = _opened(received, name)
            if dealt is None:
                found.append(Complaint(against=name, reason="nothing that opens was dealt to me, or no two numbers"))
            elif not dealt.fits(committed[name], self._index, self._need):
                found.append(Complaint(against=name, reason="what was dealt to me does not fit the commitments"))
        return Said(Review(what="review", complaints=tuple(found)), _kept(state))

    def _answer(self, inbox: Inbox, state: Secret) -> Said:
        contribution = Contribution.decode(state)
        shown = []
        for name in complaints(inbox)[self._me]:
            dealt = contribution.dealt_to(index_of(self._task, name))
            shown.append(ShownShare(to=name, share=dealt.share, blind=dealt.blind))
        return Said(Answer(what="answer", shares=tuple(shown)), _kept(state))

    def _reveal(self, state: Secret) -> Said:
        contribution = Contribution.decode(state)
        proof = contribution.possession(self._index, proof_context(self._task, self._me))
        body = Reveal(what="reveal", commitments=contribution.revealed(), proof=proof.encode())
        # Of its own contribution the machine needs no more than its own share: the rest is forgotten here.
        return Said(body, Secret.of(contribution.dealt_to(self._index).share.encode()))

    def _confirm(self, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Said:
        revealed = said(inbox, REVEALS, Reveal)
        for name in self._others():
            point, proof = revealed[name].commitments[0], revealed[name].proof
            if not is_possessed(point, proof, index_of(self._task, name), proof_context(self._task, name)):
                return _accusing(name, "its proof of possession does not hold", None)
        dealt = self._dealt(inbox, received)
        with state.view() as view:
            shares = {name: one.share for name, one in dealt.items()} | {self._me: Scalar.decode(view)}
        culprit = misrevealed(shares, commitments_of(revealed), self._index, self._need)
        if culprit == self._me:
            raise VerificationError("the state of this task does not fit what this party has said")
        if culprit:
            return _accusing(culprit, "what it revealed does not fit what it dealt to me", dealt[culprit])
        body = Confirmation(what="confirmation", signature=record_of(inbox).signature_by(self._key))
        return Said(body, Secret.of(sum_of(shares.values()).encode()))

    def _dealt(self, inbox: Inbox, received: Sequence[Received]) -> dict[str, Dealt]:
        """Return what each other party dealt to this one: as shown to all where it was disputed."""
        shown = shown_to(inbox, self._me)
        found = {}
        for name in self._others():
            dealt = shown.get(name) or _opened(received, name)
            if dealt is None:
                raise VerificationError(
                    f"what {name} dealt to {self._me} no longer opens, and did when it was reviewed",
                    hint="the messages or your own steps were changed since: begin a new task",
                )
            found[name] = dealt
        return found

    def _others(self) -> list[str]:
        return [name for name in self._task.names if name != self._me]

    def _words(self, inbox: Inbox, record: KeyRecord) -> Sequence[str]:
        return (
            f"The key {record.label!r} is born: {record.need} of {len(record.custodians)} custodians use it.",
            *_of_record(record),
            *_settled(inbox),
            "It proves: every custodian has checked their key share against this record, and all have signed it having"
            " seen the same messages. No machine has ever held the key.",
            "Next: read the record's fingerprint aloud among all custodians. It must be the same for each; where it is"
            " not, do not use the key.",
            f"Keep share.json where only you reach it: with fewer than {record.need} key shares left, the key is lost.",
        )


def _opened(received: Sequence[Received], dealer: str) -> Dealt | None:
    content = received[DEALINGS].get(dealer)
    if content is None:
        return None
    try:
        return Dealt.decode(content)
    except VerificationError:
        return None


def _kept(state: Secret) -> Secret:
    with state.view() as view:
        return Secret.of(view)


def _accusing(name: str, reason: str, dealt: Dealt | None) -> Said:
    share, blind = (dealt.share, dealt.blind) if dealt else (None, None)
    return Said(Accusation(what="accusation", against=name, reason=reason, share=share, blind=blind), Secret(0))


def _settled(inbox: Inbox) -> Sequence[str]:
    return tuple(
        f"{_listed(by)} complained of {name}, who then showed numbers that hold: one side broke the rules, and nothing"
        " proves which. The key is not touched by it."
        for name, by in complaints(inbox).items()
    )


def _of_record(record: KeyRecord) -> Sequence[str]:
    return (f"record      {record.fingerprint}", f"public key  {record.public_key.encode().hex()}")


def _listed(names: Sequence[str]) -> str:
    return " and ".join(filter(None, (", ".join(names[:-1]), names[-1])))
