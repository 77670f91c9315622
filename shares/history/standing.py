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
    """

    round: int
    names: Sequence[str]
    inbox: Inbox
    spoken: Sequence[str]
    awaited: Sequence[str]
    failure: Failure | None
    problems: Sequence[Problem]
    doubled: _Said

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
    found = _Walk(course, reading, settles=False).to_the_end()
    if found.failure is not None and any(problem.kind == "conflict" for problem in reading.problems):
        settled = _Walk(course, reading, settles=True).to_the_end()
        if settled.complete:
            return settled
    return found


class _Walk:
    """One way through the rounds of a task, as far as its messages go.

    Args:
        course: of the task.
        reading: what its folder holds.
        settles: whether to choose, where a party has said several things before the last round, what was answered.
    """

    def __init__(self, course: Course, reading: Reading, *, settles: bool) -> None:
        self.course, self.reading, self.settles = course, reading, settles
        self.task = reading.inbox.task
        # In an order that is the same for everybody, so that of several messages that hold all take the same.
        self.signed = sorted(reading.signed, key=TaskMessage.digest)
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
            self.problems += [_out_of_turn(late, name) for name in self._said(late)]
        spoken = tuple(self.done.of(round)) if self.awaited else ()
        names, awaited = tuple(course.rounds), tuple(self.awaited)
        problems = tuple(
            dataclasses.replace(problem, stops=problem.stops and self.failure is not None) for problem in self.problems
        )
        return Standing(round, names, self.done, spoken, awaited, self.failure, problems, self.doubled)

    def _enter(self, round: int) -> None:
        """Take the messages of a round that count; say who is awaited in it, and what is wrong."""
        said, seen = self._said(round), self.done.seen(round)
        speakers = self.course.speakers(round, self.done)
        self.problems += [_out_of_turn(round, name) for name in said if name not in speakers]
        fitting = {
            name: [one for one in said[name] if one.seen == seen and not self.task.is_late(one.created)]
            for name in speakers
            if name in said
        }
        counted = dict(self._chosen(round, said, fitting))
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
            self.failure = self._stop(round, stopped[0])

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
        elif self.settles and several:
            yield from self._answered(round, fitting, several)

    def _answered(self, round: int, fitting: _Said, several: _Said) -> Iterator[tuple[str, TaskMessage]]:
        """Yield, of those who have said several things, what most parties have answered; nothing where nobody has.

        A complete task has one such choice: every party has answered it, and one that is honest answers once.
        """
        answers: dict[bytes, set[str]] = {}
        for message in self.signed:
            if message.round > round:
                answers.setdefault(message.seen, set()).add(message.sender)
        before = [one.digest() for earlier in range(round) for one in self.done.of(earlier).values()]
        names = [name for name in self.task.names if fitting.get(name)]
        options = [[(one, one.digest()) for one in fitting[name]] for name in names]
        found: tuple[int, tuple[tuple[TaskMessage, bytes], ...]] = (0, ())
        for choice in itertools.islice(itertools.product(*options), _MOST_CHOICES):
            seen = seen_of(self.task, [*before, *(digest for _, digest in choice)])
            found = max(found, (len(answers.get(seen, ())), choice), key=lambda one: one[0])
        yield from ((name, one) for name, (one, _) in zip(names, found[1], strict=False) if name in several)

    def _said(self, round: int) -> _Said:
        """Return everything that was signed in a round, by who has, in the order of the task's parties."""
        found: dict[str, list[TaskMessage]] = {}
        for message in self.signed:
            if message.round == round:
                found.setdefault(message.sender, []).append(message)
        return {name: found[name] for name in self.task.names if name in found}

    def _ahead(self, round: int) -> Failure | None:
        """Say what stops in rounds that the walk has not come to, the last one apart, which is judged by the course."""
        found = next((one for one in self.problems if one.stops and round <= (one.round or 0) < self.last), None)
        return None if found is None else _because(found)

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
    return Problem(
        "other-view",
        f"{sender} answered in round {round} to other messages than are here: somebody has sent different messages to "
        "different people, or one was exchanged",
        sender,
        stops=True,
        round=round,
    )
