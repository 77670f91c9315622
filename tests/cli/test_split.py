"""``shares split``: what it writes, what it says, and every input that it must refuse without writing anything.

The words that are looked for are this project's own. Reducible polynomials and their factors are checked against
python-flint's factorisation over GF(2).
"""

from __future__ import annotations

import json
import os
import pty
import re
import shutil
import stat
import subprocess
import tempfile
import unicodedata
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import flint
import pytest
from cli.harness import (
    LABEL,
    NAMES,
    PROGRAM,
    PURPOSE,
    SECRET,
    Place,
    assert_one_line,
    assert_refused,
    files_in,
    run,
    run_unprivileged,
    spawn,
)

# What it does.


def recovered(place: Place, shares: list[Path], target: str = "out") -> bytes:
    done = run("recover", *shares, "--to", place.folder / target)
    assert done.code == 0
    return (place.folder / target).read_bytes()


def files_of(name: str) -> list[str]:
    """What a custodian is brought: the share, and a practice share."""
    return [f"{name}.practice.json", f"{name}.share.json"]


def test_a_set_is_written_private_and_complete(place: Place) -> None:
    done = place.split(need=2)
    assert sorted(files_in(place.drop)) == sorted(file for name in NAMES[:3] for file in files_of(name))
    assert sorted(files_in(place.set)) == ["journal.jsonl", "practice.json", "record.json"]
    assert {stat.S_IMODE(path.stat().st_mode) for path in place.shares} == {0o600}
    assert stat.S_IMODE(place.record.stat().st_mode) == 0o644
    assert stat.S_IMODE(place.set.stat().st_mode) == 0o700
    fingerprint = json.loads(place.record.read_text())["fingerprint"]
    for told in (*map(os.fspath, place.shares), os.fspath(place.record), fingerprint, "all 3 quorums", LABEL):
        assert told in done.out
    assert done.err.startswith("Caution: the shares are written bare: all of them in one folder are the secret.")
    assert done.err.count("\n") == 1
    for pair in ((0, 1), (0, 2), (1, 2)):
        assert recovered(place, [place.shares[i] for i in pair], f"out{pair}") == SECRET


@pytest.mark.parametrize("secret", [b"\x00", b"\n", b"x", bytes(65536), bytes(range(256)) * 3], ids=len)
def test_any_bytes_from_one_to_64_kib(tmp_path: Path, secret: bytes) -> None:
    place = Place.make(tmp_path / "place", secret)
    place.split(need=2)
    assert recovered(place, place.shares[1:]) == secret


def test_the_secret_may_come_through_standard_input(place: Place) -> None:
    done = run(*place.split_arguments(source="-"), stdin=b"no newline is added")
    assert done.code == 0
    assert recovered(place, place.shares[:2]) == b"no newline is added"


def test_the_secret_may_come_from_a_process_substitution(place: Place) -> None:
    arguments = place.split_arguments(source="SOURCE")
    words = " ".join('<(printf "piped\\n")' if word == "SOURCE" else f"'{word}'" for word in arguments)
    done = subprocess.run(
        ["bash", "-c", f'"$PROGRAM" {words}'],
        env={**os.environ, "PROGRAM": os.fspath(PROGRAM)},
        stdin=subprocess.DEVNULL,
        capture_output=True,
        timeout=60,
        check=False,
    )
    assert done.returncode == 0
    assert recovered(place, place.shares[:2]) == b"piped\n"


def test_a_file_named_like_standard_input_is_reached_by_its_path(place: Place, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(place.folder)
    Path("-").write_bytes(b"in a file")
    assert run(*place.split_arguments(source="./-"), stdin=b"on standard input").code == 0
    assert recovered(place, place.shares[:2]) == b"in a file"


def test_json_says_the_same_and_nothing_else(place: Place) -> None:
    done = run(*place.split_arguments(more=["--plain", "--json"]))
    told = done.json
    record = json.loads(place.record.read_text())
    assert (done.code, done.err, told["done"]) == (0, "", True)
    assert (told["fingerprint"], told["set"], told["label"]) == (record["fingerprint"], record["set"], LABEL)
    assert told["shares"] == {name: os.fspath(place.share(name)) for name in NAMES[:3]}
    assert (told["quorums_tried"], told["quorums"]) == (3, 3)
    assert len(told["cautions"]) == 1
    assert told["rule"] == "any 2 of north-pier, south-pier, light-house"


def test_a_threshold_of_one_is_allowed_with_a_clear_warning(place: Place) -> None:
    done = place.split(need=1)
    assert "no secrecy under this rule" in done.err
    assert recovered(place, place.shares[:1]) == SECRET


def test_json_warns_of_a_threshold_of_one(place: Place) -> None:
    told = run(*place.split_arguments(need=1, more=["--plain", "--json"])).json
    assert [caution for caution in told["cautions"] if "no secrecy" in caution]


def test_255_custodians_are_the_most(tmp_path: Path) -> None:
    place = Place.make(tmp_path / "place")
    names = [f"pier-{i}" for i in range(255)]
    done = place.split(need=255, names=names)
    assert "all 1 quorums" in done.out
    assert len(place.shares) == 255
    assert run("recover", *place.shares, "--record", place.record, *PURPOSE, "--to", place.folder / "out").code == 0
    assert (place.folder / "out").read_bytes() == SECRET


def test_a_sample_of_quorums_is_tried_where_there_are_many(place: Place) -> None:
    names = [f"pier-{i}" for i in range(20)]
    told = run(*place.split_arguments(need=10, names=names, more=["--plain", "--json"])).json
    assert told["quorums"] == 184_756  # 20 choose 10
    assert 2 <= told["quorums_tried"] <= 20


@pytest.mark.parametrize("polynomial", ["x^8 + x^4 + x^3 + x^2 + 1", "0x11d", "285", "x^8+x^4+x^3+x^2+1"])
def test_another_polynomial_in_each_of_its_forms(place: Place, polynomial: str) -> None:
    place.split(more=["--plain", "--polynomial", polynomial])
    assert json.loads(place.record.read_text())["field"] == "0x11d"
    assert recovered(place, place.shares[:2]) == SECRET


def test_each_custodian_may_have_a_folder_of_their_own(place: Place) -> None:
    folders = {name: place.folder / f"stick = {name}" for name in NAMES[:3]}
    for folder in folders.values():
        folder.mkdir()
    place.split(deliver=[f"{name}={folder}" for name, folder in folders.items()])
    assert [list(files_in(folder)) for folder in folders.values()] == [files_of(name) for name in NAMES[:3]]


def test_one_folder_for_one_and_another_for_the_rest(place: Place) -> None:
    (place.folder / "stick").mkdir()
    place.split(deliver=[place.drop, f"registrar={place.folder / 'stick'}"], names=["north-pier", "registrar"])
    assert list(files_in(place.drop)) == files_of("north-pier")
    assert list(files_in(place.folder / "stick")) == files_of("registrar")


def test_a_name_with_a_sign_of_equality_has_a_folder_of_its_own(place: Place) -> None:
    (place.folder / "stick").mkdir()
    place.split(deliver=[f"a=b={place.folder / 'stick'}", place.drop], names=["a", "a=b"])
    assert list(files_in(place.folder / "stick")) == files_of("a=b")


def test_the_folders_above_the_set_are_made_and_are_private(place: Place) -> None:
    folder = place.folder / "sets" / "2026" / "tide"
    place.split(folder=folder)
    assert (folder / "record.json").exists()
    assert {stat.S_IMODE(path.stat().st_mode) for path in (folder, *folder.parents[:2])} == {0o700}


def test_labels_and_names_may_be_of_any_script(place: Place) -> None:
    done = place.split(names=["Łódź quay", "埠頭", "phare-ñ"], label="Gezeiten-Archiv ⚓ \U0001d538")
    assert "埠頭" in done.out
    assert recovered(place, place.shares[:2]) == SECRET


# What it refuses. Each of these leaves the folder exactly as it was.

NFD = unicodedata.normalize("NFD", "quai-é")
BAD: dict[str, tuple[dict[str, Any], int, tuple[str, ...]]] = {
    "threshold 0": ({"need": 0}, 2, ("threshold of 0", "1 to 3")),
    "threshold below 0": ({"need": -1}, 2, ("threshold of -1",)),
    "threshold above n": ({"need": 4}, 2, ("threshold of 4", "3 shares", "1 to 3")),
    "threshold far above n": ({"need": 10**40}, 2, ("threshold",)),
    "threshold no number": ({"need": "two"}, 2, ("--need", "not a valid integer", "--help")),
    "threshold a fraction": ({"need": "2.0"}, 2, ("--need", "not a valid integer")),
    "threshold empty": ({"need": ""}, 2, ("--need",)),
    "no custodian": ({"names": []}, 2, ("--custodian",)),
    "256 custodians": ({"names": [f"pier-{i}" for i in range(256)]}, 2, ("255", "256")),
    "the same name twice": ({"names": ["pier", "light-house", "pier"]}, 2, ("same name",)),
    "names that differ in case": ({"names": ["pier", "Pier"]}, 2, ("same name", "case")),
    "names that fold together": ({"names": ["straße", "STRASSE"]}, 2, ("same name", "case")),
    "an empty name": ({"names": ["pier", ""]}, 2, ("name", "empty")),
    "a name with a slash": ({"names": ["pier", "../pier"]}, 2, ("name",)),
    "a name with a slash inside": ({"names": ["pier", "a/b"]}, 2, ("path separator",)),
    "a name with a backslash": ({"names": ["pier", "a\\b"]}, 2, ("path separator",)),
    "a name that is the folder above": ({"names": ["pier", ".."]}, 2, ("dot",)),
    "a hidden name": ({"names": ["pier", ".pier-2"]}, 2, ("dot",)),
    "a name like an option": ({"names": ["pier", "-rf"]}, 2, ("hyphen",)),
    "a name with a line end": ({"names": ["pier", "a\nb"]}, 2, ("control",)),
    "a name with a zero byte": ({"names": ["pier", "a\0b"]}, 2, ("control",)),
    "a name that steers a terminal": ({"names": ["pier", "a\x1b[2J"]}, 2, ("control",)),
    "a name with a C1 control": ({"names": ["pier", "a\x9b2J"]}, 2, ("control",)),
    "a name that turns the writing round": ({"names": ["pier", "a\u202eb"]}, 2, ("invisible",)),
    "a name with a hidden space": ({"names": ["pier", "a\u200bb"]}, 2, ("invisible",)),
    "a name with spaces around": ({"names": ["pier", " a "]}, 2, ("white space",)),
    "a name of other spaces": ({"names": ["pier", "a\u2003b"]}, 2, ("white space",)),
    "a name of 65 characters": ({"names": ["pier", "a" * 65]}, 2, ("64 characters",)),
    "a name too long for a file": ({"names": ["pier", "埠" * 64 + "頭"]}, 2, ("64 characters",)),
    "a name in normal form D": ({"names": ["pier", NFD]}, 2, ("normal form C",)),
    "a name that is not UTF-8": ({"names": ["pier", "a\udcff"]}, 2, ("control or invisible",)),
    "an empty label": ({"label": ""}, 2, ("label", "1 to 500")),
    "a long label": ({"label": "x" * 501}, 2, ("label", "1 to 500")),
    "a label of two lines": ({"label": "a\nb"}, 2, ("label", "control")),
    "a label that is not UTF-8": ({"label": "a\udcff"}, 2, ("label", "control")),
    "a polynomial that is none": ({"more": ["--plain", "--polynomial=banana"]}, 2, ("not a polynomial", "0x11b")),
    "no polynomial": ({"more": ["--plain", "--polynomial="]}, 2, ("--polynomial", "empty")),
    "a polynomial of degree 7": ({"more": ["--plain", "--polynomial=x^7 + x + 1"]}, 2, ("x^7 + x + 1", "degree 8")),
    "a polynomial of degree 9": ({"more": ["--plain", "--polynomial=0x211"]}, 2, ("degree 8",)),
    "a polynomial of huge degree": ({"more": ["--plain", "--polynomial=x^999999999999"]}, 2, ("degree",)),
    "no passphrase": ({"more": []}, 2, ("no passphrase is given for north-pier", "--passphrase-file north-pier=FILE")),
    "an unknown option": ({"more": ["--plain", "--threshold=2"]}, 2, ("--threshold", "--help")),
    "one file too many": ({"more": ["--plain", "another"]}, 2, ("another",)),
    "no delivery folder": ({"deliver": []}, 2, ("--deliver",)),
    "an empty delivery folder": ({"deliver": [""]}, 2, ("--deliver", "empty", "variable")),
    "an empty folder for one": ({"deliver": ["north-pier=", "."]}, 2, ("--deliver", "north-pier", "empty")),
    "folders for some": ({"deliver": ["north-pier=."]}, 2, ("south-pier, light-house",)),
    "two folders for one": ({"deliver": [".", "north-pier=.", "north-pier=."]}, 2, ("two", "north-pier")),
    "two folders for all": ({"deliver": [".", ".."]}, 2, ("more than one", "NAME=DIR")),
    "a folder for nobody": ({"deliver": ["nort-pier=.", "."]}, 2, ("nort-pier=.", "no custodian", "NAME=DIR")),
    "no folder for the set": ({"folder": ""}, 2, ("--set", "empty")),
    "an empty source": ({"source": ""}, 2, ("FILE", "empty")),
    "a source that is missing": ({"source": "nothing/here"}, 5, ("nothing/here", "does not exist")),
    "a source that is a folder": ({"source": "."}, 5, ("is a folder",)),
    "a source without end": ({"source": "/dev/zero"}, 5, ("/dev/zero", "larger than 65,536 bytes")),
    "a source of nothing": ({"source": "/dev/null"}, 2, ("secret is empty",)),
    "a source with a zero byte": ({"source": "a\0b"}, 5, ("not a possible path",)),
    "a delivery folder that is missing": ({"deliver": ["nowhere"]}, 5, ("nowhere", "north-pier", "not there")),
    "a set below a file": ({"folder": "/dev/null/set"}, 5, ("/dev/null/set", "not a folder")),
    "a set that is a file": ({"folder": "/dev/null"}, 5, ("/dev/null", "not a folder")),
    "a set with too long a name": ({"folder": "x" * 300}, 5, ("long", "shorter")),
}


@pytest.mark.parametrize("case", BAD, ids=lambda case: case.replace(" ", "-"))
def test_bad_input_is_refused_and_nothing_is_written(case: str, place: Place, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(place.folder)
    changes, code, words = BAD[case]
    assert_refused(place.split_arguments(**changes), code, *words, watched=place.folder)


def test_an_option_without_its_value(place: Place) -> None:
    result = run(*place.split_arguments(more=["--plain", "--polynomial"]))
    assert "--polynomial" in assert_one_line(result)
    assert result.code == 2


@pytest.mark.parametrize("left_out", ["--need", "--custodian", "--label", "--set", "--deliver"])
def test_what_is_needed_must_be_given(place: Place, left_out: str) -> None:
    arguments = [word for word in place.split_arguments() if not word.startswith(left_out)]
    assert_refused(arguments, 2, left_out, "--help", watched=place.folder)


def test_the_source_must_be_given(place: Place) -> None:
    arguments = place.split_arguments()
    assert_refused([arguments[0], *arguments[2:]], 2, "FILE", watched=place.folder)


@pytest.mark.parametrize(
    ("secret", "code", "word"),
    [(b"", 2, "is empty")],
    ids=["0"],
)
@pytest.mark.parametrize("source", ["file", "standard input"])
def test_empty_secrets(tmp_path: Path, secret: bytes, code: int, word: str, source: str) -> None:
    place = Place.make(tmp_path / "place", secret)
    given = None if source == "file" else "-"
    stdin = b"" if source == "file" else secret
    assert_refused(place.split_arguments(source=given), code, word, watched=place.folder, stdin=stdin)


def test_a_pipe_that_gives_more_than_64_kib_is_told_of_encrypt(place: Place) -> None:
    """A pipe does not say its size beforehand, so it is not encrypted without being asked for."""
    result = spawn(*place.split_arguments(source="-"), stdin=bytes(65537))
    assert (result.code, "--encrypt" in assert_one_line(result)) == (5, True)
    assert spawn(*place.split_arguments(source="-", more=["--plain", "--encrypt"]), stdin=bytes(65537)).code == 0


def test_every_reducible_polynomial_of_degree_8_is_refused_with_its_factors(place: Place) -> None:
    """python-flint factors over GF(2): all 256 polynomials of degree 8, those with a factor refused."""
    irreducible = 0
    for number in range(0x100, 0x200):
        _, factors = flint.nmod_poly([number >> i & 1 for i in range(9)], 2).factor()
        if factors == [(factors[0][0], 1)]:
            irreducible += 1
            continue
        done = run(*place.split_arguments(more=["--plain", "--polynomial", hex(number)]))
        line = assert_one_line(done)
        assert done.code == 2
        named = re.search(r"over GF\(2\) it is (.*)$", line)
        assert named is not None
        expected = {(sum(int(factor[i]) << i for i in range(factor.degree() + 1)), many) for factor, many in factors}
        assert factors_in(named[1]) == expected
    assert irreducible == 30
    assert files_in(place.folder).keys() == {"key", "drop"}


def factors_in(words: str) -> set[tuple[int, int]]:
    """Read ``x^2 * (x + 1)^3 * ...`` as {(polynomial as a number, how often)}."""
    found = set()
    for part in words.split(" * "):
        factor, _, often = part.partition(")^") if part.startswith("(") else (part, "", "")
        if not part.startswith("("):
            base, _, often = part.partition("^")
            factor = base
        powers = [
            {"1": 0, "x": 1}.get(term, int(term.removeprefix("x^")) if term.startswith("x^") else -1)
            for term in factor.strip("()").split(" + ")
        ]
        found.add((sum(1 << power for power in powers), int(often or 1)))
    return found


# What is there already.


def occupied_by_file(path: Path) -> None:
    path.write_text("older")


def occupied_by_folder(path: Path) -> None:
    path.mkdir()


def occupied_by_dangling_link(path: Path) -> None:
    path.symlink_to("nowhere")


def occupied_by_pipe(path: Path) -> None:
    os.mkfifo(path)


@pytest.mark.parametrize(
    "occupy",
    [occupied_by_file, occupied_by_folder, occupied_by_dangling_link, occupied_by_pipe],
    ids=lambda f: f.__name__,
)
@pytest.mark.parametrize("target", ["drop/south-pier.share.json", "set/record.json"])
def test_whatever_has_a_target_name_stays(place: Place, occupy: Callable[[Path], None], target: str) -> None:
    path = place.folder / target
    path.parent.mkdir(exist_ok=True)
    occupy(path)
    assert_refused(place.split_arguments(), 5, os.fspath(path), watched=place.folder)


def test_a_second_split_into_the_same_folders_is_refused(place: Place) -> None:
    place.split()
    assert_refused(place.split_arguments(), 5, os.fspath(place.record), "has its record", watched=place.folder)
    line = assert_refused(
        place.split_arguments(folder=place.folder / "other"), 5, "choose another folder", watched=place.folder
    )
    assert all(os.fspath(path) in line for path in place.shares)


def test_every_leftover_is_named(place: Place) -> None:
    names = [".north-pier.share.json.00112233aabbccdd.partial", "light-house.share.json"]
    place.set.mkdir()
    left = [place.drop / name for name in names] + [place.set / ".record.json.0123456789abcdef.partial"]
    for path in left:
        path.write_text("left over")
    line = assert_refused(place.split_arguments(), 5, "found 3 file", watched=place.folder)
    assert all(os.fspath(path) in line for path in left)
    assert "destroy" in line
    # What is named may hold shares, and enough shares are the secret: nothing may call it harmless.
    assert "open nothing" not in line


# Who may not write, and what cannot be read.


@pytest.fixture
def open_place() -> Iterator[Place]:
    """A place that another user can reach: the folders of pytest are closed to others."""
    folder = Path(tempfile.mkdtemp())
    folder.chmod(0o755)
    place = Place.make(folder / "place")
    place.drop.chmod(0o755)
    place.key.chmod(0o644)
    yield place
    for closed in (place.folder, place.drop):
        closed.chmod(0o700)
    shutil.rmtree(folder)


@pytest.mark.parametrize("closed", ["drop", "place"])
def test_without_permission_to_write(open_place: Place, closed: str) -> None:
    place = open_place
    for folder in (place.folder, place.drop):
        folder.chmod(0o777)
    (place.drop if closed == "drop" else place.folder).chmod(0o555)
    result = run_unprivileged(*place.split_arguments())
    line = assert_one_line(result)
    assert result.code == 5
    assert "permission denied" in line
    assert not [path for path in place.folder.rglob("*") if path.is_file() and path != place.key]


def test_without_permission_to_read(open_place: Place) -> None:
    open_place.drop.chmod(0o777)
    open_place.folder.chmod(0o777)
    open_place.key.chmod(0o000)
    result = run_unprivileged(*open_place.split_arguments())
    assert "permission denied" in assert_one_line(result)
    assert result.code == 5


def test_a_folder_that_may_not_be_searched(open_place: Place) -> None:
    open_place.folder.chmod(0o777)
    open_place.drop.chmod(0o000)
    result = run_unprivileged(*open_place.split_arguments())
    assert_one_line(result)
    assert result.code == 5


def test_a_terminal_as_source_is_refused_and_nothing_is_asked(place: Place) -> None:
    master, terminal = pty.openpty()
    try:
        done = subprocess.run(
            [PROGRAM, *place.split_arguments(source="-")],
            stdin=terminal,
            capture_output=True,
            text=True,
            timeout=60,
            check=False,
        )
    finally:
        os.close(terminal)
        os.close(master)
    assert (done.returncode, done.stdout, done.stderr.count("\n")) == (5, "", 1)
    assert "is a terminal, which shows what is typed" in done.stderr
    assert not place.shares


def test_a_closed_standard_input_is_refused(place: Place) -> None:
    done = subprocess.run(
        ["bash", "-c", 'exec <&-; "$@"', "bash", PROGRAM, *place.split_arguments(source="-")],
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )
    assert (done.returncode, done.stdout, done.stderr.count("\n")) == (5, "", 1)
    assert "standard input: is closed" in done.stderr
