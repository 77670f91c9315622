"""Where a task stands, as anybody with its folder can see: who has spoken, who is awaited, and what has failed.

Source: FORMAT_KEYS.md, sec. 24; Y. Ishai, R. Ostrovsky, V. Zikas, "Secure multi-party computation with identifiable
abort", CRYPTO 2014 (a task that fails says by whom, as far as that can be told); G. Bracha, "Asynchronous Byzantine
agreement protocols", Information and Computation 75, 1987 (what everybody has answered, nobody was told otherwise).
May import: shares.documents, .exchange, .rounds.
Secret: nothing. Public: messages, who is awaited, who has failed.
Does not: know any purpose; a course, which ``keys`` makes, does. Look at what a party keeps; ``next`` does.
"""

from __future__ import annotations

import dataclasses
import itertools
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Final, TypeAlias

from shares.documents.task import Task
from shares.documents.task_box import is_box_key
from shares.documents.task_message import OpeningKey, TaskMessage
from shares.history.exchange import Problem, Reading
from shares.history.rounds import Course, Failure, Inbox, seen_of

_MOST_CHOICES: Final = 4_096
"""How many ways to choose among messages that contradict each other are looked at, in one round."""
_Said: TypeAlias = Mapping[str, Sequence[TaskMessage]]
"""Everything that each party has signed in one round."""


@dataclass(frozen=True, slots=True, eq=False)
class Standing:
    """Where a task stands, as anybody with its folder can see.

    Attributes:
        round: the first round that is not complete; the number of rounds where all are.
        names: what is said in each round.
        inbox: the messages of complete rounds, and those that were said so far in ``round``.
        spoken: who has spoken in ``round``.
        awaited: who has not.
        failure: why the task cannot be finished, whoever waits for whom; None while it can.
        problems: what is wrong with single messages or files.
        doubled: of whoever has said several things in the last round that could each count, all of them.
        ending: whether anybody has said something in the last round, be it that it does not count: where the task has
            failed here, others may have seen it complete.
    """

    round: int
    names: Sequence[str]
    inbox: Inbox
    spoken: Sequence[str]
    awaited: Sequence[str]
    failure: Failure | None
    problems: Sequence[Problem]
    doubled: _Said
    ending: bool

    @property
    def complete(self) -> bool:
        """Whether everything has been said."""
        return self.round == len(self.names) and self.failure is None

    def before(self, round: int) -> Inbox:
        """Return what had been said before a round, which no later message belongs to."""
        return Inbox(self.inbox.task, self.inbox.rounds[:round], self.inbox.content)


def standing(course: Course, reading: Reading) -> Standing:
    """Say where a task stands.

    Where a party has said several things in a round before the last one, others may have answered either, and the task
    ends; unless it is complete, everybody having answered the same. In the last round, which nobody answers, what holds
    counts, and what does not stops nothing that can do without it.

    Args:
        course: of the task.
        reading: what its folder holds.
    """
    found = _Walk(course, reading).to_the_end()
    if found.failure is not None and any(problem.kind == "conflict" for problem in reading.problems):
        for answered in _answered(course, reading):
            settled = _Walk(course, reading, answered).to_the_end()
            if settled.complete:
                return settled
    return found


class _Walk:
    """One way through the rounds of a task, as far as its messages go.

    Args:
        course: of the task.
        reading: what its folder holds.
        answered: what counts before the last round of those who have said several things there; nothing by default.
    """

    def __init__(self, course: Course, reading: Reading, answered: Inbox | None = None) -> None:
        self.course, self.reading, self.answered = course, reading, answered
        self.task = reading.inbox.task
        self.signed = _signed(reading)
        self.last = len(course.rounds) - 1
        self.done = Inbox(self.task, (), reading.inbox.content)
        self.problems = list(reading.problems)
        self.failure: Failure | None = None
        self.awaited: list[str] = []
        self.doubled: dict[str, Sequence[TaskMessage]] = {}

    def to_the_end(self) -> Standing:
        course, round = self.course, 0
        self.failure = _without_content(self.problems) or course.failure(self.done)
        while self.failure is None and round <= self.last:
            self._enter(round)
            if self.awaited or self.failure:
                break
            self.failure = _bad_key(course, self.done, round) or course.failure(self.done)
            round += 1
        if self.failure is None:
            self.failure = self._ahead(round + 1)
        for late in range(self.last + 1, 1 + max((one.round for one in self.signed), default=0)):
            self.problems += [_out_of_turn(late, name) for name in _said(self.task, self.signed, late)]
        spoken = tuple(self.done.of(round)) if self.awaited else ()
        names, awaited = tuple(course.rounds), tuple(self.awaited)
        problems = tuple(
            dataclasses.replace(problem, stops=problem.stops and self.failure is not None) for problem in self.problems
        )
        ending = any(one.round == self.last for one in self.signed)
        return Standing(round, names, self.done, spoken, awaited, self.failure, problems, self.doubled, ending)

    def _enter(self, round: int) -> None:
        """Take the messages of a round that count; say who is awaited in it, and what is wrong."""
        said, seen = _said(self.task, self.signed, round), self.done.seen(round)
        speakers = self.course.speakers(round, self.done)
        self.problems += [_out_of_turn(round, name) for name in said if name not in speakers]
        fitting = {
            name: [one for one in said[name] if one.seen == seen and not self.task.is_late(one.created)]
            for name in speakers
            if name in said
        }
        before, counted = self.done, dict(self._chosen(round, said, fitting))
        stopped = [name for name in fitting if name not in counted]
        for name in stopped:
            if len(said[name]) == 1 and said[name][0].seen != seen:
                self.problems.append(_other_view(round, name))
        for name in counted:
            if len(said[name]) > 1:
                self._name_settled(round, name)
        self.done = Inbox(self.task, (*self.done.rounds, counted), self.done.content)
        self.awaited = [name for name in speakers if name not in said]
        if stopped and not (round == self.last and self.course.spares(stopped)):
            proved = next(self._proved(round, stopped, said, before), None)
            self.failure = proved or self._stop(round, stopped[0])

    def _chosen(self, round: int, said: _Said, fitting: _Said) -> Iterator[tuple[str, TaskMessage]]:
        """Yield what counts of each party in a round, where anything does."""
        several = {name: ones for name, ones in fitting.items() if len(said[name]) > 1 and ones}
        yield from ((name, ones[0]) for name, ones in fitting.items() if ones and name not in several)
        if round == self.last:
            for name, ones in several.items():
                good = [one for one in ones if self.course.holds(one, self.done)]
                if good:
                    self.doubled[name] = good
                    yield name, good[0]
        elif self.answered is not None:
            yield from ((name, self.answered.of(round)[name]) for name in several)

    def _ahead(self, round: int) -> Failure | None:
        """Say what stops in rounds that the walk has not come to, the last one apart, which is judged by the course."""
        found = next((one for one in self.problems if one.stops and round <= (one.round or 0) < self.last), None)
        return None if found is None else _because(found)

    def _proved(self, round: int, stopped: Sequence[str], said: _Said, before: Inbox) -> Iterator[Failure]:
        """Yield whose doing single messages of a round prove its end to be, whatever was said beside them."""
        for message in (one for name in stopped for one in said[name]):
            fault = self.course.fault(message, before) if round == self.last else None
            if round == 0 and message.seen != before.seen(0):
                yield Failure(message.sender, _other_view(0, message.sender).what)
            elif fault is not None and fault.by is not None:
                yield fault

    def _stop(self, round: int, name: str) -> Failure:
        return next(_because(one) for one in self.problems if one.stops and (one.round, one.sender) == (round, name))

    def _name_settled(self, round: int, name: str) -> None:
        what = (
            f"two different messages of {name} in round {round}: conflict: misbehaviour or restored state; "
            "what holds of them counts, and the task is not stopped by it"
        )
        self.problems = [
            one if (one.round, one.sender) != (round, name) else dataclasses.replace(one, what=what, stops=False)
            for one in self.problems
        ]


def _signed(reading: Reading) -> Sequence[TaskMessage]:
    """Return all that was signed, in one order for everybody: of several messages that hold all take the same."""
    return sorted(reading.signed, key=TaskMessage.digest)


def _said(task: Task, signed: Sequence[TaskMessage], round: int) -> _Said:
    """Return everything that was signed in a round, by who has, in the order of the task's parties."""
    found: dict[str, list[TaskMessage]] = {}
    for message in signed:
        if message.round == round:
            found.setdefault(message.sender, []).append(message)
    return {name: found[name] for name in task.names if name in found}


def _answered(course: Course, reading: Reading) -> Iterator[Inbox]:
    """Yield the ways through all rounds but the last on which each is answered; what most have answered comes first.

    A complete task has one such way: every party has answered it, and one that is honest answers once. What cheats have
    answered among themselves leads on until an honest party has to speak, who has answered something else. What the
    messages hold is not looked at: a walk along each way does that.
    """
    task, signed = reading.inbox.task, [(one.digest(), one) for one in _signed(reading)]
    answers: dict[bytes, set[str]] = {}
    for _, message in signed:
        answers.setdefault(message.seen, set()).add(message.sender)

    def further(done: Inbox, digests: Sequence[bytes]) -> Iterator[Inbox]:
        round, seen = len(done.rounds), seen_of(task, digests)
        if round == len(course.rounds) - 1:
            yield done
            return
        speakers = course.speakers(round, done)
        names = [name for name in task.names if name in speakers]
        said = [(digest, one) for digest, one in signed if (one.round, one.seen) == (round, seen)]
        options = [
            [pair for pair in said if pair[1].sender == name and not task.is_late(pair[1].created)] for name in names
        ]
        choices = []
        for choice in itertools.islice(itertools.product(*options), _MOST_CHOICES):
            after = (*digests, *(digest for digest, _ in choice))
            choices.append((len(answers.get(seen_of(task, after), ())), after, [one for _, one in choice]))
        for count, after, messages in sorted(choices, key=lambda one: -one[0]):
            if count:
                counted = dict(zip(names, messages, strict=True))
                yield from further(Inbox(task, (*done.rounds, counted), done.content), after)

    return further(Inbox(task, (), reading.inbox.content), ())


def _because(problem: Problem) -> Failure:
    return Failure(problem.sender if problem.kind == "late" else None, problem.what)


def _without_content(problems: Sequence[Problem]) -> Failure | None:
    return next((Failure(None, problem.what) for problem in problems if problem.kind == "content"), None)


def _bad_key(course: Course, inbox: Inbox, round: int) -> Failure | None:
    """Say who has shown no key that anything can be sealed to, where round 0 is about that."""
    for name, message in inbox.of(0).items() if course.private and round == 0 else ():
        if not isinstance(message.body, OpeningKey) or not is_box_key(message.body.x25519):
            return Failure(name, "its message of round 0 shows no key that anything can be sealed to")
    return None


def _out_of_turn(round: int, sender: str) -> Problem:
    return Problem("out-of-turn", f"{sender} has no turn in round {round}: its message there does not count", sender)


def _other_view(round: int, sender: str) -> Problem:
    what = (
        f"{sender} answered in round {round} to other messages than are here: somebody has sent different messages to "
        "different people, or one was exchanged"
    )
    if round == 0:  # Nobody can have sent it anything.
        what = f"{sender} says in round 0 that it answers messages, and none come before it"
    return Problem("other-view", what, sender, stops=True, round=round)
