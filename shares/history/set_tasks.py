"""The tasks that entries set, and which of them nobody has entered as done: what `resolved` may speak of.

Source: FORMAT_EVIDENCE.md, sec. 16.
May import: shares.errors, shares.documents, shares.history.
Secret: nothing. Confidential: what entries and reports tell. Public: nothing.
Does not: say when a task is due, or what is to be done; ``evidence.tasks`` does.
"""

from __future__ import annotations

from collections.abc import Iterator

from shares.documents.base import MAX_FILE
from shares.documents.drill_report import DrillReport
from shares.documents.entry import Entry
from shares.documents.event import Departed, DrillClosed, DrillOpened, Incident, Lost, Recovered, Remedy, Resolved
from shares.errors import ParameterError, SharesError
from shares.history.files import FolderFiles
from shares.history.folder import SetFolder
from shares.history.journal import Journal
from shares.history.words import words

_SHOWN = 5


def check_task(folder: SetFolder, number: int, action: int | None, how: Remedy | None) -> None:
    """Refuse a report of a task as done that no entry has set.

    Args:
        folder: the set's.
        number: of the entry that is said to have set it.
        action: which action of a drill's report, from 1.
        how: it was done.

    Raises:
        ParameterError: it set none, or is not done by that; says which tasks are open.
        StorageError, DocumentError: the drill's report cannot be read.
    """
    journal = folder.journal()
    found = next((entry for entry in journal.entries if entry.sequence == number), None)
    where, problem = "--entry", None
    if found is None:
        problem = f"the journal has no entry {number}"
    elif isinstance(found.event, DrillOpened | DrillClosed):
        where = "--action"
        drill = found.event.drill if isinstance(found.event, DrillClosed) else number
        closed = _closing(journal, drill)
        count = len(_report(folder, closed).actions) if closed else 0
        if closed is None:
            where, problem = "--entry", f"drill {drill} is not closed, and has no report whose actions could be done"
        elif action is None:
            problem = f"entry {number} is about drill {drill}, whose actions are done one by one"
        elif action > count:
            problem = f"the report of drill {drill} has {f'{count}' if count else 'no'} action{'s' * (count != 1)}"
    elif not _sets_one(found):
        problem = f"entry {number} sets no task: it is {found.event.what}"
    elif action is not None:
        where, problem = "--action", f"entry {number} is {found.event.what}, and no drill's report with actions"
    elif isinstance(found.event, Recovered) and how != "key replaced":
        where, problem = "--how", f"entry {number} asks for a new key: only `key replaced` ends that"
    if problem:
        raise ParameterError(problem, where=where, hint=_hint(list(open_tasks(folder, journal))))


def open_tasks(folder: SetFolder, journal: Journal) -> Iterator[tuple[int, int | None, str]]:
    """Return the tasks that nobody has entered as done: the entry, which action of a drill's report, and its words.

    Args:
        folder: the set's; a drill's report that cannot be read there is passed over.
        journal: the set's.
    """
    recovered = {entry.sequence for entry in journal.entries if isinstance(entry.event, Recovered)}
    # Nothing but a new key ends what a recovery asks for.
    done = {
        (event.entry, event.action)
        for event in (entry.event for entry in journal.entries)
        if isinstance(event, Resolved) and (event.entry not in recovered or event.how == "key replaced")
    }
    for entry in journal.entries:
        if _sets_one(entry) and (entry.sequence, None) not in done:
            yield entry.sequence, None, words(entry.event)
        elif isinstance(entry.event, DrillClosed):
            try:
                actions = _report(folder, entry).actions
            except SharesError:
                continue
            for number, action in enumerate(actions, start=1):
                # A report is known by the entry that closed the drill, and by the drill's own number.
                if not {(entry.sequence, number), (entry.event.drill, number)} & done:
                    yield entry.sequence, number, action.what


def _sets_one(entry: Entry) -> bool:
    event = entry.event
    return isinstance(event, Departed | Incident | Lost) or (
        isinstance(event, Recovered) and event.disposition == "replace"
    )


def _closing(journal: Journal, drill: int) -> Entry | None:
    closed = (e for e in journal.entries if isinstance(e.event, DrillClosed) and e.event.drill == drill)
    return next(closed, None)


def _report(folder: SetFolder, closed: Entry) -> DrillReport:
    files = FolderFiles(folder.path)
    names = [document.path for document in closed.documents if document.path.endswith(".json")]
    if not names:
        raise ParameterError(f"entry {closed.sequence} names no report", where="--entry")
    return DrillReport.parse(files.read(names[0], limit=MAX_FILE), where=f"{files.where}/{names[0]}")


def _hint(found: list[tuple[int, int | None, str]]) -> str:
    if not found:
        return "no task is open; `shares journal show` lists the entries"
    told = [f"--entry {number}{f' --action {action}' if action else ''} ({said})" for number, action, said in found]
    more = f"; and {len(told) - _SHOWN} more" if len(told) > _SHOWN else ""
    return f"open: {'; '.join(told[:_SHOWN])}{more}"
