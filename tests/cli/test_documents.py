"""Bad documents in place of shares and records, as every command that reads one meets them.

What JSON leaves open and this program refuses: RFC 8259, sections 4 (repeated names), 6 (numbers) and 9 (limits).
"""

from __future__ import annotations

import base64
import json
import os
import re
import socket
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from cli.harness import NAMES, PURPOSE, Place, assert_one_line, assert_refused, run, run_unprivileged
from strategies import HARBOUR, crooked_split, flat

from shares.documents.base import fingerprint
from shares.documents.record import Record

Change = Callable[[dict[str, Any]], None]


def edited(change: Change) -> Callable[[bytes], bytes]:
    """An edit of the members of a document."""

    def edit(data: bytes) -> bytes:
        members = json.loads(data)
        change(members)
        return json.dumps(members).encode()

    return edit


def member(name: str, value: object) -> Callable[[bytes], bytes]:
    return edited(lambda members: members.update({name: value}))


def replaced(old: bytes, new: bytes) -> Callable[[bytes], bytes]:
    def replace(data: bytes) -> bytes:
        assert old in data
        return data.replace(old, new, 1)

    return replace


def two_points_at_one_place(members: dict[str, Any]) -> None:
    members["paths"] *= 2
    members["rows"] *= 2


def encoded(data: bytes) -> str:
    return base64.urlsafe_b64encode(data).decode().rstrip("=")


def row_without(members: dict[str, Any], characters: int) -> None:
    members["rows"][0] = members["rows"][0][:-characters]


# What both kinds of document are refused for: (the change, words of the refusal).
ANY: dict[str, tuple[Callable[[bytes], bytes], str]] = {
    "empty": (lambda _: b"", "not one JSON object: line 1, column 1"),
    "white space": (lambda _: b" \n", "not one JSON object"),
    "truncated by one byte": (lambda data: data.rstrip()[:-1], "not one JSON object"),
    "truncated in the middle": (lambda data: data[: len(data) // 2], "not one JSON object"),
    "truncated to one byte": (lambda data: data[:1], "not one JSON object"),
    "not UTF-8": (lambda data: data.replace(b"Tide", b"T\xffde"), "not UTF-8"),
    "UTF-16": (lambda data: data.decode().encode("utf-16"), "not UTF-8"),
    "a byte order mark": (lambda data: b"\xef\xbb\xbf" + data, "not one JSON object"),
    "random bytes": (lambda _: bytes(range(128, 256)), "not UTF-8"),
    "zeros": (lambda data: bytes(len(data)), "not one JSON object"),
    "lists nested deeply": (lambda _: b"[" * 500_000, "nested too deeply"),
    "objects nested deeply": (lambda _: b'{"kind":' * 100_000, "nested too deeply"),
    "nested deeply within": (member("kind", json.loads("[" * 900 + "]" * 900)), "does not say"),
    "something after the end": (lambda data: data + b"{}", "not one JSON object"),
    "two documents": (lambda data: data + data, "not one JSON object"),
    "a list": (lambda data: b"[" + data + b"]", "not an object"),
    "null": (lambda _: b"null", "not an object"),
    "a comment": (lambda data: b"// shares\n" + data, "not one JSON object"),
    "a later version": (member("version", 2), "version that this program does not know"),
    "version 0": (member("version", 0), "version that this program does not know"),
    "a version as text": (member("version", "1"), "version that this program does not know"),
    "a version as truth": (member("version", True), "version that this program does not know"),
    "a version as fraction": (replaced(b'"version": 1', b'"version": 1.0'), "not an integer"),
    "no version": (edited(lambda members: members.pop("version") and None), "version"),
    "no kind": (edited(lambda members: members.pop("kind") and None), "does not say"),
    "another kind": (member("kind", "policy"), "does not say"),
    "an empty object": (lambda _: b"{}", "does not say"),
    "a number as the kind": (member("kind", 7), "does not say"),
    "a member too many": (member("colour", "blue"), "has a member that this version does not know"),
    "a member twice": (replaced(b'"epoch": 1', b'"epoch": 1, "epoch": 1'), "stands twice"),
    "a set that is no text": (member("set", 5), "set"),
    "a set in capitals": (edited(lambda members: members.update(set=members["set"].upper())), "set"),
    "a short set": (edited(lambda members: members.update(set=members["set"][2:])), "set"),
    "epoch 0": (member("epoch", 0), "epoch"),
    "epoch 2^32": (member("epoch", 2**32), "epoch"),
    "an epoch of many digits": (member("epoch", 10**3000), "out of range"),
    "a negative epoch": (member("epoch", -1), "out of range"),
    "an epoch that is no number": (replaced(b'"epoch": 1', b'"epoch": NaN'), "not an integer"),
    "an epoch as power": (replaced(b'"epoch": 1', b'"epoch": 1e0'), "not an integer"),
    "a reducible field": (member("field", "0x11c"), "(x + 1)"),
    "a field of degree 7": (member("field", "0x0ff"), "field"),
    "a field in capitals": (member("field", "0x11B"), "field"),
    "a label of two lines": (member("label", "a\nb"), "control"),
    "half a character": (replaced(b'"Tide', b'"\\ud800'), "not as the format says"),
    "an empty label": (member("label", ""), "label"),
    "a secret commitment too short": (member("secret_commitment", "00"), "secret_commitment"),
    "a digest that is none": (member("secret_commitment", None), "secret_commitment"),
}

SHARE = ANY | {
    "no rows": (edited(lambda members: members.pop("rows") and None), "the member rows is missing"),
    "an empty list of rows": (member("rows", []), "rows"),
    "no paths": (member("paths", []), "paths"),
    "an empty path": (member("paths", [[]]), "paths"),
    "x = 0": (member("paths", [[[3, 0]]]), "paths[0][0][1]"),
    "x = 256": (member("paths", [[[3, 256]]]), "paths[0][0][1]"),
    "a threshold of 0": (member("paths", [[[0, 1]]]), "paths[0][0][0]"),
    "a point of three numbers": (member("paths", [[[3, 1, 1]]]), "paths[0][0]"),
    "a truth as x": (member("paths", [[[3, True]]]), "paths[0][0][1]"),
    "the same x twice": (edited(two_points_at_one_place), "no path twice"),
    "more rows than points": (edited(lambda members: members["rows"].append(members["rows"][0])), "as many rows"),
    "a path too deep": (member("paths", [[[2, 1]] * 9]), "paths"),
    "a row that is short": (edited(lambda members: row_without(members, 80)), "rows of one length"),
    "an empty row": (member("rows", [""]), "rows"),
    "a row of half a byte": (edited(lambda members: row_without(members, 3)), "base64url"),
    "a padded row": (edited(lambda members: members.update(rows=[members["rows"][0] + "="])), "base64url"),
    "a row in another alphabet": (member("rows", ["+/" * 60]), "base64url"),
    "a row with a line end": (edited(lambda members: members.update(rows=[members["rows"][0] + "\n"])), "base64url"),
    "a row not in its one form": (member("rows", [encoded(bytes(97))[:-1] + "B"]), "base64url"),
    "a row as number": (member("rows", [1]), "rows"),
    "a custodian that is a path": (member("custodian", "../north-pier"), "custodian"),
    "an own digest that is missing": (edited(lambda members: members.pop("digest") and None), "digest is missing"),
    "a record instead": (member("kind", "record"), "a share is wanted here, but it is a record"),
}


def sealed(change: Change) -> Callable[[bytes], bytes]:
    """An edit of a record by someone who fits its fingerprint again."""

    def edit(data: bytes) -> bytes:
        members = json.loads(data)
        change(members)
        members["fingerprint"] = fingerprint(
            "record", {name: members[name] for name in members if name not in ("fingerprint", "signatures")}
        )
        return json.dumps(members).encode()

    return edit


def swapped_custodians(members: dict[str, Any]) -> None:
    members["custodians"][0], members["custodians"][1] = members["custodians"][1], members["custodians"][0]


def renamed(members: dict[str, Any]) -> None:
    members["custodians"][0]["name"] = members["rule"]["from"][0] = "NORTH-PIER"
    members["custodians"][1]["name"] = members["rule"]["from"][1] = "north-pier"


RECORD = ANY | {
    "a threshold above n": (sealed(lambda members: members["rule"].update(need=6)), "a threshold of 6"),
    "a threshold of 0": (sealed(lambda members: members["rule"].update(need=0)), "rule.need"),
    "a threshold that the checks contradict": (
        sealed(lambda members: members["rule"].update(need=2)),
        "its checks contradict its rule",
    ),
    "a custodian whom the rule does not name": (
        sealed(lambda members: members["rule"]["from"].pop() and None),
        "custodians are not those of its rule",
    ),
    "a custodian missing": (
        sealed(lambda members: members["custodians"].pop() and None),
        "custodians are not those of its rule",
    ),
    "custodians in another order": (sealed(swapped_custodians), "custodians are not those of its rule"),
    "names that differ in case": (sealed(renamed), "case"),
    "checks for no node": (sealed(lambda members: members.update(checks=members["checks"] * 2)), "list of checks"),
    "a check too few": (sealed(lambda members: members["checks"][0].pop() and None), "its checks contradict its rule"),
    "no checks": (sealed(lambda members: members.update(checks=[])), "checks"),
    "a short check": (sealed(lambda members: members["checks"][0].__setitem__(0, "AA")), "checks[0][0]"),
    "a rule nested deeply": (
        edited(lambda members: members.update(rule=json.loads('{"need":1,"from":[' * 300 + '"a"' + "]}" * 300))),
        "not as the format says",
    ),
    "a rule of a rule without end": (
        edited(lambda members: members.update(rule=json.loads('{"need":1,"from":[' * 12 + '"a"' + "]}" * 12))),
        "rule",
    ),
    "a rule of nobody": (sealed(lambda members: members["rule"].update({"from": []})), "rule.from"),
    "an altered label": (member("label", "Tide archive toot"), "fingerprint does not fit"),
    "an altered time": (member("created", "2026-12-01T07:00:01Z"), "fingerprint does not fit"),
    "a time that is none": (member("created", "2026-13-01T07:00:00Z"), "created"),
    "a time of another zone": (member("created", "2026-12-01T07:00:00+01:00"), "created"),
    "a signature that nobody can check": (member("signatures", ["x"]), "signatures"),
    "a row length of 0": (member("row_length", 0), "row_length"),
    "a row length beyond all": (member("row_length", 10**9), "row_length"),
    "no attestation key": (
        edited(lambda members: members["custodians"][0].pop("attestation_key") and None),
        "attestation_key is missing",
    ),
    "a share instead": (member("kind", "share"), "a record is wanted here, but it is a share"),
}


@pytest.mark.parametrize("case", SHARE)
def test_a_bad_share_is_told_from_good_ones(case: str, dealt: Place) -> None:
    change, words = SHARE[case]
    bad, *good = dealt.shares
    bad.write_bytes(change(bad.read_bytes()))

    verified = run("verify", bad, good[0])
    lines = verified.out.splitlines()
    # A whole document of another kind is no damaged share: nobody is to look for another copy of it.
    word, code = ("unreadable", 5) if case == "a record instead" else ("damaged", 4)
    assert (verified.code, verified.err) == (code, "")
    assert lines[0].startswith(f"{bad}: {word} - ")
    assert words in lines[0]
    assert lines[1].startswith(f"{good[0]} ({NAMES[2]}): intact - ")
    assert lines[2] == "1 of 2 intact."
    by_script = run("verify", bad, good[0], "--json", "--record", dealt.record)
    assert (by_script.code, by_script.err) == (code, "")
    assert [(one["status"], one["custodian"]) for one in by_script.json["shares"]] == [
        (word, None),
        ("intact", NAMES[2]),
    ]
    assert words in by_script.json["shares"][0]["reason"]

    # Two good ones do not recover 3-of-5; three do, and the bad one is named.
    assert_refused(["recover", bad, *good[:2], "--check"], 3, "3 different shares are needed, 2", os.fspath(bad), words)
    recovered = run("recover", *good[:2], bad, good[2], "--check")
    assert recovered.code == 0
    assert f"Caution: {bad} is {word}: " in recovered.err
    assert recovered.err.count("\n") == 1
    assert run("recover", *dealt.shares, "--check", "--record", dealt.record, *PURPOSE).code == 0
    if case != "a record instead":
        assert_refused(["show", bad], 4, os.fspath(bad), words_of_show(words))


def words_of_show(words: str) -> str:
    """What ``show`` says of a document of no kind it knows: it has none in mind."""
    return "no document of this program" if words == "does not say" else words


@pytest.mark.parametrize("case", RECORD)
def test_a_bad_record_is_refused_before_any_share_is_judged(case: str, dealt: Place) -> None:
    change, words = RECORD[case]
    dealt.record.write_bytes(change(dealt.record.read_bytes()))
    for arguments in (
        ["verify", *dealt.shares, "--record", dealt.record],
        ["recover", *dealt.shares, "--record", dealt.record, *PURPOSE, "--to", dealt.folder / "out"],
        ["show", dealt.record],
    ):
        said = words_of_show(words) if arguments[0] == "show" else words
        if (case, arguments[0]) != ("a share instead", "show"):
            assert_refused(arguments, 4, os.fspath(dealt.record), said, watched=dealt.folder)


def contradicted(members: dict[str, Any]) -> None:
    members["row_length"] += 16


def other_field(members: dict[str, Any]) -> None:
    members["field"] = "0x11d"


def other_secret(members: dict[str, Any]) -> None:
    members["secret_commitment"] = "00" * 32


def other_checks(members: dict[str, Any]) -> None:
    members["checks"][0].reverse()


@pytest.mark.parametrize("change", [contradicted, other_field, other_secret, other_checks])
def test_a_record_whose_facts_the_shares_contradict(change: Change, dealt: Place) -> None:
    """Such a record agrees with itself; that it is not the one dealt shows in the shares."""
    dealt.record.write_bytes(sealed(change)(dealt.record.read_bytes()))
    verified = run("verify", *dealt.shares, "--record", dealt.record)
    assert verified.code == 4
    assert verified.out.count("inconsistent dealing - ") == 5
    refused = run("recover", *dealt.shares, "--record", dealt.record, *PURPOSE, "--to", dealt.folder / "out")
    assert_one_line(refused)
    assert refused.code in (3, 4)
    assert not (dealt.folder / "out").exists()


def test_a_record_with_two_commitments_exchanged(dealt: Place) -> None:
    def exchange(members: dict[str, Any]) -> None:
        one, two = members["custodians"][:2]
        one["share_commitment"], two["share_commitment"] = two["share_commitment"], one["share_commitment"]

    dealt.record.write_bytes(sealed(exchange)(dealt.record.read_bytes()))
    verified = run("verify", *dealt.shares, "--record", dealt.record, "--json")
    assert verified.code == 4
    found = {one["custodian"]: one["status"] for one in verified.json["shares"]}
    assert found[NAMES[0]] == found[NAMES[1]] == "damaged"
    assert set(found.values()) == {"damaged", "inconsistent dealing"}  # R is made of the commitments


# Files that are too large, and files that are none.


def test_an_enormous_document_is_not_read(dealt: Place) -> None:
    path = dealt.shares[0]
    path.write_bytes(path.read_bytes() + b" " * (1 << 20))
    verified = run("verify", path)
    assert verified.code == 5
    assert f"{path}: unreadable - is larger than 1,048,576 bytes" in verified.out
    assert_refused(["show", path], 5, "larger than 1,048,576 bytes")
    assert_refused(["verify", dealt.shares[1], "--record", path], 5, "larger than 1,048,576 bytes")


def test_a_document_of_one_mib_is_read(dealt: Place) -> None:
    path = dealt.shares[0]
    data = path.read_bytes()
    path.write_bytes(data + b" " * ((1 << 20) - len(data)))
    assert run("verify", path, "--record", dealt.record).code == 0


def as_link(path: Path, dealt: Place) -> None:
    path.symlink_to(dealt.shares[0])


def as_dangling_link(path: Path, dealt: Place) -> None:
    path.symlink_to("nothing")


def as_link_to_itself(path: Path, dealt: Place) -> None:
    path.symlink_to(path)


def as_pipe(path: Path, dealt: Place) -> None:
    os.mkfifo(path)


def as_folder(path: Path, dealt: Place) -> None:
    path.mkdir()


def as_socket(path: Path, dealt: Place) -> None:
    with socket.socket(socket.AF_UNIX) as made:
        os.chdir(path.parent)  # a socket's path may be no longer than 108 bytes
        made.bind(path.name)


def as_nothing(path: Path, dealt: Place) -> None:
    pass


@pytest.fixture
def here() -> Iterator[None]:
    before = os.getcwd()
    yield
    os.chdir(before)


@pytest.mark.usefixtures("here")
@pytest.mark.parametrize(
    ("occupy", "words"),
    [
        (as_link, "is a symbolic link"),
        (as_dangling_link, "is a symbolic link"),
        (as_link_to_itself, "is a symbolic link"),
        (as_pipe, "is a pipe, device or socket"),
        (as_folder, "is a folder"),
        (as_socket, "is a pipe, device or socket"),
        (as_nothing, "does not exist"),
    ],
)
def test_what_is_no_file_is_unreadable_and_nothing_waits(
    occupy: Callable[[Path, Place], None], words: str, dealt: Place
) -> None:
    path = dealt.folder / "odd"
    occupy(path, dealt)
    assert_unreadable(path, words, dealt)


@pytest.mark.parametrize(
    ("device", "words"),
    [
        ("/dev/null", "is a pipe, device or socket"),
        ("/dev/zero", "is a pipe, device or socket"),
        ("/dev/full/x", "not a folder"),
        ("/proc/self/fd/0", "is a symbolic link"),
        ("/dev/stdin", "is a symbolic link"),
        ("x" * 300, "too long a name"),
        ("a\0b", "not a possible path"),
        ("two\nlines", "does not exist"),
        ("\udcff", "does not exist"),
    ],
    ids=ascii,
)
def test_devices_and_impossible_paths(device: str, words: str, dealt: Place) -> None:
    assert_unreadable(device, words, dealt)


def assert_unreadable(path: str | Path, words: str, dealt: Place) -> None:
    good = dealt.shares[:3]
    verified = run("verify", good[0], path)
    assert verified.code == 5
    assert re.search(rf": unreadable - .*{words}", verified.out.splitlines()[1])
    told = run("verify", good[0], path, "--json").json["shares"][1]
    assert (told["file"], told["status"]) == (os.fspath(path), "unreadable")
    assert_refused(["show", path], 5, words)
    assert_refused(["verify", *good, "--record", path], 5, words)
    assert_refused(["recover", good[0], path, "--check"], 3, "3 different shares are needed, 1", words)
    assert_refused(["recover", path, "--check"], 3, "none of the 1", words)
    recovered = run("recover", path, *good, "--check")
    assert recovered.code == 0
    assert "is unreadable: " in recovered.err
    assert recovered.err.count("\n") == 1


def test_a_share_that_may_not_be_read(tmp_path: Path) -> None:
    import shutil
    import tempfile

    folder = Path(tempfile.mkdtemp())
    try:
        folder.chmod(0o755)
        place = Place.make(folder / "place")
        place.split()
        place.drop.chmod(0o755)
        # Root wrote them 0600, so that another user may not read them; the owner's own are closed for the same effect.
        for path in place.shares:
            path.chmod(0o000)
        verified = run_unprivileged("verify", *place.shares)
        assert verified.code == 5
        assert verified.out.count("unreadable - permission denied") == 3
        shown = run_unprivileged("show", place.shares[0])
        assert "permission denied" in assert_one_line(shown)
        assert shown.code == 5
    finally:
        shutil.rmtree(folder)


# Shares that do not belong together.


@pytest.fixture
def two_sets(tmp_path: Path) -> tuple[Place, Place]:
    """Two sets of the same shape, split 2-of-3."""
    places = Place.make(tmp_path / "one", b"first secret"), Place.make(tmp_path / "two", b"second secret")
    for place in places:
        place.split()
    return places


def test_shares_of_two_sets(two_sets: tuple[Place, Place]) -> None:
    one, two = two_sets
    verified = run("verify", *one.shares[:2], two.shares[2])
    assert verified.code == 4
    assert "foreign set - it is of set " in verified.out.splitlines()[2]
    verified = run("verify", *two.shares, "--record", one.record)
    assert verified.out.count("foreign set - ") == 3
    assert_refused(["recover", one.shares[0], two.shares[1], "--check"], 4, "2 sets", "shares show")
    assert_refused(["recover", one.shares[0], "--record", two.record, *PURPOSE, "--check"], 4, "the record's set")
    # Two quorums, and nothing says which is meant.
    line = assert_refused(["recover", *one.shares[:2], *two.shares[:2], "--check"], 4, "cannot be told", "record")
    assert "fault" not in line
    assert run("recover", *one.shares[:2], *two.shares[:2], "--check", "--record", one.record, *PURPOSE).code == 0
    mixed = run("recover", *one.shares[:2], two.shares[1], "--to", one.folder / "out")
    assert mixed.code == 0
    assert f"{two.shares[1]} is foreign set" in mixed.err
    assert (one.folder / "out").read_bytes() == b"first secret"


def test_shares_of_two_epochs(tmp_path: Path) -> None:
    set_id = bytes(range(16))
    paths: dict[int, list[Path]] = {}
    for epoch in (1, 2):
        made = crooked_split(b"made up", flat(2, 3), epoch=epoch, set_id=set_id)
        folder = tmp_path / str(epoch)
        folder.mkdir()
        (folder / "record.json").write_bytes(made.record.to_file())
        paths[epoch] = [folder / f"{share.custodian}.json" for share in made.shares]
        for path, share in zip(paths[epoch], made.shares, strict=True):
            path.write_bytes(share.to_file())
    old, new = paths[1], paths[2]
    record = new[0].parent / "record.json"
    verified = run("verify", *new, old[0])
    assert (verified.code, "other epoch - it is of epoch 1" in verified.out.splitlines()[3]) == (4, True)
    verified = run("verify", *old, "--record", record)
    assert verified.out.count("other epoch - it is of epoch 1, the record of epoch 2") == 3
    assert_refused(["recover", new[0], old[1], "--check"], 4, "2 epochs", "never combine")
    assert_refused(["recover", new[0], old[1], "--check", "--record", record], 3, "other epoch")
    assert run("recover", new[0], old[1], new[2], "--check").code == 0


def test_a_share_given_twice(dealt: Place, tmp_path: Path) -> None:
    copy = tmp_path / "copy.json"
    copy.write_bytes(dealt.shares[0].read_bytes())
    verified = run("verify", dealt.shares[0], copy, dealt.shares[0])
    assert verified.code == 0
    lines = verified.out.splitlines()[:3]
    assert ["given before" in line for line in lines] == [False, True, True]
    told = run("verify", dealt.shares[0], copy, "--json").json
    assert told["repeated"] == [os.fspath(copy)]
    assert_refused(
        ["recover", dealt.shares[0], copy, dealt.shares[1], "--check"], 3, "3 different shares are needed, 2 given"
    )
    assert run("recover", dealt.shares[0], copy, *dealt.shares[1:3], "--check").code == 0


def test_two_shares_at_one_place(dealt: Place) -> None:
    """A forger gives a share of one's own the place of another's: never a wrong secret, and both are doubted."""
    forged = json.loads(dealt.shares[0].read_bytes())
    forged["paths"] = json.loads(dealt.shares[1].read_bytes())["paths"]
    path = dealt.folder / "forged.json"
    path.write_text(json.dumps(forged))
    assert run("verify", path).code == 4
    assert_refused(["recover", dealt.shares[1], path, dealt.shares[2], "--check"], 3, "2 given", os.fspath(path))
    assert run("recover", path, *dealt.shares[1:], "--to", dealt.folder / "out").code == 0


def test_a_record_may_be_for_people_of_another_rule(tmp_path: Path) -> None:
    """The documents take rule trees from the first day; show and verify read them."""
    from shares.sharing.rule import Rule

    made = crooked_split(b"made up", Rule(2, (Rule(1, HARBOUR[:2]), HARBOUR[2], HARBOUR[2])))
    record = tmp_path / "record.json"
    record.write_bytes(made.record.to_file())
    paths = [tmp_path / f"{share.custodian}.json" for share in made.shares]
    for path, share in zip(paths, made.shares, strict=True):
        path.write_bytes(share.to_file())
    assert run("verify", *paths, "--record", record).code == 0
    shown = run("show", record)
    assert (shown.code, "any 2 of (any 1 of" in shown.out) == (0, True)
    assert Record.parse(record.read_bytes()).fingerprint in shown.out
    assert run("recover", paths[2], "--check").code == 0  # the light-house has weight 2
    assert_refused(["recover", paths[0], "--check"], 3, "the shares of north-pier make no quorum; to recover: any 2 of")
