"""The journal's file under attack and accident: many writers, killed writers, full and read-only media, other kinds of
files in its place. Nothing is lost, doubled or interleaved, and nothing half written is taken for an entry.

Source: flock(2), setrlimit(2) (RLIMIT_FSIZE: a write takes what fits, and the next one ends the process by SIGXFSZ).
"""

from __future__ import annotations

import fcntl
import hashlib
import os
import signal
import stat
import subprocess
import sys
import threading
from pathlib import Path

import pytest
from history.making import key, lines_of, note, set_folder, text_of

from shares.documents.event import SetAside
from shares.errors import StorageError
from shares.history import lines as file
from shares.history.journal import append, load_journal
from shares.history.lines import MAX_LINE, writing

WRITERS, EACH = 8, 12

WRITER = """
import sys
from pathlib import Path
from shares.documents.event import make_event
from shares.history.journal import append
for i in range(int(sys.argv[3])):
    append(Path(sys.argv[1]), make_event("noted", remark=f"writer {sys.argv[2]}, {i}, " + "x" * 400))
"""

# A write takes what fits below the limit. Ignored, the signal leaves an error; else it ends the process in the middle.
STOPPED_WRITER = """
import os, resource, signal, sys
from pathlib import Path
from shares.documents.event import make_event
from shares.history.journal import append
folder, room, ends = Path(sys.argv[1]), int(sys.argv[2]), sys.argv[3] == "ends"
event = make_event("noted", remark="the one that is stopped, " + "x" * 200)
signal.signal(signal.SIGXFSZ, signal.SIG_DFL if ends else signal.SIG_IGN)
resource.setrlimit(resource.RLIMIT_FSIZE, ((folder / "journal.jsonl").stat().st_size + room,) * 2)
resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
try:
    append(folder, event)
except Exception as error:
    print(error)
    sys.exit(5)
"""


def python(code: str, *arguments: object) -> subprocess.Popen[str]:
    command = [sys.executable, "-P", "-c", code, *map(str, arguments)]
    return subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)


def stopped(folder: Path, room: int, how: str) -> tuple[int, str]:
    process = python(STOPPED_WRITER, folder, room, how)
    out, err = process.communicate(timeout=60)
    return process.returncode, out + err


def test_eight_processes_at_once_lose_and_mix_nothing(tmp_path: Path) -> None:
    set_folder(tmp_path)
    running = [python(WRITER, tmp_path, i, EACH) for i in range(WRITERS)]
    for process in running:
        _, err = process.communicate(timeout=120)
        assert (process.returncode, err) == (0, "")
    journal = load_journal(tmp_path)
    assert journal.problems == ()
    said = [entry.event.remark.split(", x")[0] for entry in journal.entries if entry.event.what == "noted"]  # type: ignore[union-attr]
    assert sorted(said) == sorted(f"writer {i}, {j}" for i in range(WRITERS) for j in range(EACH))
    # Each writer's own entries stand in the order in which it was told that they are there.
    for i in range(WRITERS):
        assert [one for one in said if one.startswith(f"writer {i},")] == [f"writer {i}, {j}" for j in range(EACH)]


def test_threads_wait_for_each_other_as_processes_do(tmp_path: Path) -> None:
    threads = [threading.Thread(target=append, args=(tmp_path, note(str(i)))) for i in range(8)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    journal = load_journal(tmp_path)
    assert (journal.problems, len(journal.entries)) == ((), 8)


@pytest.mark.parametrize("room", [1, 100, 300])
def test_a_writer_that_is_killed_in_the_middle_leaves_a_torn_line_that_is_kept(room: int, tmp_path: Path) -> None:
    set_folder(tmp_path, "harbour-office")
    path = tmp_path / "journal.jsonl"
    before = path.read_bytes()
    assert stopped(tmp_path, room, "ends") == (-signal.SIGXFSZ, "")
    torn = path.read_bytes()[len(before) :]
    assert len(torn) == room
    (problem,) = load_journal(tmp_path).problems
    assert (problem.line, problem.kind, problem.breaks) == (2, "torn", False)

    append(tmp_path, note("afterwards"), keys=[key()])
    journal = load_journal(tmp_path)
    assert journal.problems == ()
    assert path.read_bytes().startswith(before)
    _, aside, after = journal.entries
    assert isinstance(aside.event, SetAside)
    assert aside.event.remark.startswith(f"{room:,} bytes")
    assert [card.name for card in journal.signers(aside)] == ["harbour-office"]
    assert after.event == note("afterwards")
    (document,) = aside.documents
    kept = tmp_path / document.path
    assert kept.read_bytes() == torn
    assert document.digest == hashlib.sha256(torn).digest()
    assert stat.S_IMODE(kept.stat().st_mode) == 0o600


def test_a_writer_that_is_killed_before_the_line_end_has_written_no_entry(tmp_path: Path) -> None:
    """A whole entry without its line end was never reported as done; it is kept like any other torn line."""
    set_folder(tmp_path)
    whole = append(tmp_path, note("nearly")).line()
    path = tmp_path / "journal.jsonl"
    path.write_bytes(path.read_bytes()[:-1])
    assert len(load_journal(tmp_path).entries) == 1
    append(tmp_path, note("afterwards"))
    journal = load_journal(tmp_path)
    assert [entry.event.what for entry in journal.entries] == ["dealt", "set-aside", "noted"]
    assert (tmp_path / journal.entries[1].documents[0].path).read_bytes() == whole


@pytest.mark.parametrize("step", ["written", "cut"])
def test_a_run_that_is_killed_while_it_sets_aside_loses_nothing(
    step: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Killed after the piece has its file, or after it is cut from the journal: the next run names it."""
    set_folder(tmp_path)
    path = tmp_path / "journal.jsonl"
    path.write_bytes(path.read_bytes() + b'{"torn')

    def killed(*_: object) -> None:
        raise KeyboardInterrupt

    with monkeypatch.context() as patched:
        patched.setattr(file.Lines, "cut" if step == "written" else "add", killed)
        with pytest.raises(KeyboardInterrupt):
            append(tmp_path, note("stopped"))
    assert path.read_bytes().endswith(b'{"torn') == (step == "written")
    append(tmp_path, note("afterwards"))
    journal = load_journal(tmp_path)
    assert (journal.problems, [entry.event.what for entry in journal.entries]) == ((), ["dealt", "set-aside", "noted"])
    assert (tmp_path / journal.entries[1].documents[0].path).read_bytes() == b'{"torn'
    # And once it is named, it is not named again.
    append(tmp_path, note("later"))
    assert [entry.event.what for entry in load_journal(tmp_path).entries[3:]] == ["noted"]


def test_a_like_piece_torn_a_second_time_is_kept_and_told_again(tmp_path: Path) -> None:
    set_folder(tmp_path)
    path = tmp_path / "journal.jsonl"
    for _ in range(2):
        path.write_bytes(path.read_bytes() + b'{"torn')
        append(tmp_path, note("afterwards"))
    journal = load_journal(tmp_path)
    assert journal.problems == ()
    assert [entry.event.what for entry in journal.entries[1:]] == ["set-aside", "noted", "set-aside", "noted"]


def test_another_file_of_a_pieces_name_stops_the_run_and_loses_nothing(tmp_path: Path) -> None:
    set_folder(tmp_path)
    path = tmp_path / "journal.jsonl"
    path.write_bytes(path.read_bytes() + b'{"torn')
    before = path.read_bytes()
    digest = hashlib.sha256(before[-6:]).hexdigest()
    (tmp_path / f"journal.torn-{len(before) - 6}-{digest[:16]}").write_bytes(b"something else")
    with pytest.raises(StorageError, match="exists already"):
        append(tmp_path, note("afterwards"))
    assert path.read_bytes() == before


@pytest.mark.parametrize("room", [0, 1, 100, 300])
def test_a_full_medium_leaves_the_journal_as_it_was(room: int, tmp_path: Path) -> None:
    set_folder(tmp_path)
    before = (tmp_path / "journal.jsonl").read_bytes()
    code, said = stopped(tmp_path, room, "goes on")
    assert code == 5
    assert "would be larger than is allowed here" in said
    assert (tmp_path / "journal.jsonl").read_bytes() == before
    append(tmp_path, note("afterwards"))
    assert [entry.event.what for entry in load_journal(tmp_path).entries] == ["dealt", "noted"]


def test_a_line_that_does_not_reach_the_medium_is_taken_back(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    set_folder(tmp_path)
    before = (tmp_path / "journal.jsonl").read_bytes()

    def broken(_: int) -> None:
        raise OSError(5, "EIO")

    with monkeypatch.context() as patched:
        patched.setattr(file.os, "fsync", broken)
        with pytest.raises(StorageError, match="reports an error"):
            append(tmp_path, note("lost"))
    assert (tmp_path / "journal.jsonl").read_bytes() == before


def test_a_new_journal_is_private(tmp_path: Path) -> None:
    before = os.umask(0)
    try:
        set_folder(tmp_path)
    finally:
        os.umask(before)
    assert stat.S_IMODE((tmp_path / "journal.jsonl").stat().st_mode) == 0o600


def in_its_place(path: Path, what: str) -> None:
    if what == "link":
        path.symlink_to(path.with_name("elsewhere"))
    elif what == "pipe":
        os.mkfifo(path)
    elif what == "folder":
        path.mkdir()
    else:
        path.symlink_to("/dev/null")


@pytest.mark.parametrize("what", ["link", "pipe", "folder", "link to a device"])
def test_anything_but_a_file_is_refused_without_waiting(what: str, tmp_path: Path) -> None:
    (tmp_path / "elsewhere").write_bytes(text_of(lines_of([note("not here")])))
    in_its_place(tmp_path / "journal.jsonl", what)
    words = {"pipe": "is a pipe", "folder": "is a folder"}.get(what, "is a symbolic link")
    with pytest.raises(StorageError, match=words):
        append(tmp_path, note("here"))
    with pytest.raises(StorageError, match=words):
        load_journal(tmp_path)
    assert (tmp_path / "elsewhere").read_bytes() == text_of(lines_of([note("not here")]))


def test_a_missing_folder_is_told(tmp_path: Path) -> None:
    with pytest.raises(StorageError, match="does not exist"):
        append(tmp_path / "nowhere", note("here"))


def test_whoever_holds_the_journal_too_long_is_not_waited_for(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(file, "PATIENCE", 0.1)
    set_folder(tmp_path)
    path = tmp_path / "journal.jsonl"
    path.write_bytes(path.read_bytes() + b'{"half')
    with path.open("rb") as held:
        fcntl.flock(held, fcntl.LOCK_EX)
        with pytest.raises(StorageError, match="another command"):
            append(tmp_path, note("late"))
        # A reader waits only where it finds a line half written.
        with pytest.raises(StorageError, match="another command"):
            load_journal(tmp_path)
        path.write_bytes(path.read_bytes()[:-6])
        assert len(load_journal(tmp_path).entries) == 1


def test_a_line_that_is_being_written_is_waited_for(tmp_path: Path) -> None:
    set_folder(tmp_path)
    path = tmp_path / "journal.jsonl"
    whole = path.read_bytes()
    path.write_bytes(whole[:-20])
    with path.open("rb+") as held:
        fcntl.flock(held, fcntl.LOCK_EX)

        def finish() -> None:
            os.pwrite(held.fileno(), whole[-20:], len(whole) - 20)
            fcntl.flock(held, fcntl.LOCK_UN)

        timer = threading.Timer(0.3, finish)
        timer.start()
        journal = load_journal(tmp_path)
        timer.join()
    assert (journal.problems, len(journal.entries)) == ((), 1)


def test_a_journal_that_is_exchanged_while_it_is_waited_for_is_the_one_written_to(tmp_path: Path) -> None:
    set_folder(tmp_path)
    path = tmp_path / "journal.jsonl"
    with path.open("rb") as held:
        fcntl.flock(held, fcntl.LOCK_EX)

        def exchange() -> None:
            other = path.with_name("other")
            other.write_bytes(path.read_bytes())
            other.rename(path)
            fcntl.flock(held, fcntl.LOCK_UN)

        timer = threading.Timer(0.3, exchange)
        timer.start()
        append(tmp_path, note("not lost"))
        timer.join()
    assert [entry.event.what for entry in load_journal(tmp_path).entries] == ["dealt", "noted"]


@pytest.mark.parametrize("line", [b"", b"a\nb", b"x" * (MAX_LINE + 1)])
def test_only_whole_lines_are_added(line: bytes, tmp_path: Path) -> None:
    with writing(tmp_path / "lines") as lines, pytest.raises(ValueError, match="a line has"):
        lines.add(line)
    assert (tmp_path / "lines").read_bytes() == b""


def test_a_text_is_found_wherever_it_stands(tmp_path: Path) -> None:
    """Pieces of 1 MiB are searched: whatever lies across their borders is found as well."""
    path, text = tmp_path / "lines", b'"path":"here"'
    for at in (0, 1 << 20, (1 << 20) - 5, (2 << 20) - 1, (3 << 20) - len(text) - 1):
        room = bytearray(b"x" * (3 << 20))
        for end in range(99_999, 3 << 20, 100_000):
            room[end] = 10
        room[-1] = 10
        room[at : at + len(text)] = text
        path.write_bytes(bytes(room))
        with writing(path) as lines:
            assert lines.holds(text)
            assert not lines.holds(b'"path":"there"')


def test_what_is_torn_is_not_searched(tmp_path: Path) -> None:
    (tmp_path / "lines").write_bytes(b"one\ntwo")
    with writing(tmp_path / "lines") as lines:
        assert (lines.last, lines.torn, lines.end) == (b"one", b"two", 4)
        assert lines.holds(b"one")
        assert not lines.holds(b"two")


def test_appending_takes_little_memory_however_long_the_journal(tmp_path: Path) -> None:
    """A journal of 256 MiB is added to with less than 32 MiB."""
    path = tmp_path / "journal.jsonl"
    line = lines_of([note("x" * 400)])[0]
    block = text_of([line] * 1000)
    with path.open("wb") as made:
        for _ in range((256 << 20) // len(block)):
            made.write(block)
    code = "import resource, sys; from pathlib import Path; from shares.documents.event import make_event\n"
    code += "from shares.history.journal import append, read_journal\n"
    code += "read_journal(sys.argv[2].encode() + b'\\n')\n"
    code += "before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss\n"
    code += "append(Path(sys.argv[1]), make_event('noted', remark='more'))\n"
    code += "print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before)"
    process = python(code, tmp_path, line.decode())
    out, err = process.communicate(timeout=120)
    assert (process.returncode, err) == (0, "")
    assert int(out) < 32 << 10  # KiB
