"""examples/recover_by_hand.py recovers from the golden samples, refuses the rest, and is what its docstring claims.

Sources: shares/documents/FORMAT.md; the samples of tests/vectors/make, whose dealer shares no code with the script. The
script runs as a person would run it, but for `-I -S`, under which no installed package can be imported; its functions
are held against general-purpose libraries in test_recover_by_hand_functions.py.
"""

import ast
import importlib.util
import itertools
import json
import os
import resource
import subprocess
import sys
from pathlib import Path
from typing import NamedTuple

import pytest

ROOT = Path(__file__).parents[2]
SCRIPT = ROOT / "examples" / "recover_by_hand.py"
VECTORS = ROOT / "tests" / "vectors"
GOLDEN = VECTORS / "golden" / "v1"


class Outcome(NamedTuple):
    code: int
    out: str
    err: str
    secret: bytes | None


def load(name):
    return json.loads((VECTORS / name).read_text())["testGroups"]


def dealing(name):
    return load(f"set_v1_{name}.json")[0]["tests"][0]


SETS = {path.stem: dealing(path.stem.removeprefix("set_v1_")) for path in VECTORS.glob("set_v1_[!r]*.json")}
FLAT, TREE = SETS["set_v1_flat_3_of_5"], SETS["set_v1_tree"]
RECOVERIES = load("set_v1_recover.json")


@pytest.fixture
def recover(tmp_path):
    """Run the script on texts or paths; every refusal is one line, leaves no file, and shows no traceback."""

    def run(*given, check=False):
        paths = []
        for i, text in enumerate(given):
            path = tmp_path / f"given {i}" if isinstance(text, str | bytes) else text
            if isinstance(text, str | bytes):
                path.write_bytes(text.encode() if isinstance(text, str) else text)
            paths.append(path)
        target = tmp_path / "secret"
        target.unlink(missing_ok=True)
        return call(paths, *(["--check"] if check else ["--to", target]), target=target)

    return run


def call(paths, *options, target=None):
    """Run the script, and check what holds for every run."""
    command = [sys.executable, "-I", "-S", "-W", "error", SCRIPT, *paths, *options]
    done = subprocess.run(command, capture_output=True, text=True, stdin=subprocess.DEVNULL, timeout=100, check=False)
    secret = target.read_bytes() if target is not None and target.is_file() else None
    assert "Traceback" not in done.stderr
    if done.returncode == 0:
        assert done.stderr == ""
        assert done.stdout.count("\n") >= 3
    else:
        assert done.returncode in (2, 3, 4, 5)
        assert done.stdout == ""
        assert done.stderr.startswith("recover_by_hand: ")
        assert done.stderr.count("\n") == 1
    return Outcome(done.returncode, done.stdout, done.stderr, secret)


@pytest.fixture(scope="module")
def script():
    """Load the script's functions, for what would take too many processes."""
    spec = importlib.util.spec_from_file_location("recover_by_hand", SCRIPT)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def share_text(test, name):
    (text,) = (c["document"] for c in test["custodians"] if c["name"] == name)
    return text


def names(test):
    return [c["name"] for c in test["custodians"]]


def test_it_is_short_and_stands_alone():
    """Under 120 lines with its docstring, and it imports the standard library alone."""
    text = SCRIPT.read_text()
    assert len(text.splitlines()) < 120
    assert max(map(len, text.splitlines())) <= 120
    tree = ast.parse(text)
    imported = {
        name.split(".")[0]
        for node in ast.walk(tree)
        if isinstance(node, ast.Import | ast.ImportFrom)
        for name in ([a.name for a in node.names] if isinstance(node, ast.Import) else [node.module])
    }
    assert imported
    assert imported <= sys.stdlib_module_names
    assert not {"importlib", "random", "ctypes", "subprocess"} & imported
    assert not [
        n for n in ast.walk(tree) if isinstance(n, ast.Name) and n.id in ("__import__", "eval", "exec", "compile")
    ]
    for word in ("without tables", "NOT constant time", "offline", "replace it", "FORMAT.md", "Exit codes"):
        assert word in ast.get_docstring(tree)


@pytest.mark.parametrize("chosen", [c for r in range(1, 6) for c in itertools.combinations(range(5), r)])
def test_every_selection_of_a_flat_set(recover, chosen):
    """Three or more of five recover, fewer are too few."""
    paths = [GOLDEN / "flat" / f"{names(FLAT)[i]}.share.json" for i in chosen]
    outcome = recover(*paths)
    if len(chosen) >= 3:
        assert (outcome.code, outcome.secret.hex()) == (0, FLAT["secret"])
        assert FLAT["secret_commitment"] in outcome.out
        assert FLAT["set"] in outcome.out
        assert FLAT["secret"] not in outcome.out
    else:
        assert (outcome.code, outcome.secret) == (3, None)


@pytest.mark.parametrize("name", names(TREE))
def test_every_selection_of_a_tree(recover, name):
    """All 63 selections, by their quorums as the rule gives them: those whose first member is this custodian."""
    others = names(TREE)[names(TREE).index(name) + 1 :]
    for size in range(len(others) + 1):
        for more in itertools.combinations(others, size):
            chosen = {name, *more}
            outcome = recover(*(GOLDEN / "tree" / f"{n}.share.json" for n in chosen))
            if any(set(quorum) <= chosen for quorum in TREE["smallest_quorums"]):
                assert (outcome.code, outcome.secret.hex()) == (0, TREE["secret"]), chosen
            else:
                assert (outcome.code, outcome.secret) == (3, None), chosen


@pytest.mark.parametrize("name", SETS)
def test_every_smallest_quorum_of_every_set(recover, name):
    """And no selection that the rule calls too small."""
    test = SETS[name]
    for quorum in test["smallest_quorums"]:
        outcome = recover(*(share_text(test, n) for n in quorum))
        assert (outcome.code, outcome.secret.hex()) == (0, test["secret"])
    for short in filter(None, test["largest_insufficient"]):
        assert recover(*(share_text(test, n) for n in short))[::3] == (3, None)


@pytest.mark.parametrize("group", RECOVERIES, ids=lambda group: group["about"])
def test_selections_with_damage_forgery_and_strangers(recover, group):
    """The cases of set_v1_recover.json: the secret, or the exit code of the refusal."""
    codes = {"too few": 3, "damaged": 4, "never mix": 4, "wrong share": 4, "faulty dealer": 4}
    for test in group["tests"]:
        outcome = recover(*(group["documents"][name] for name in test["given"]))
        if test["result"] == "valid":
            assert (outcome.code, outcome.secret) == (0, bytes.fromhex(group["secret"])), test["comment"]
        elif test["given"]:
            assert (outcome.code, outcome.secret) == (codes[test["refusal"]], None), test["comment"]
            assert ("never mix" in outcome.err) == (test["refusal"] == "never mix"), test["comment"]
        else:
            assert outcome.code == 2


def test_bad_shares_are_named(recover):
    """Damaged and contradicting ones both, by file; the good ones are not."""
    texts = RECOVERIES[0]["documents"]
    given = ["north-pier, damaged", "south-pier, forged", "light-house", "registrar", "harbour-office"]
    outcome = recover(*(texts[name] for name in given))
    left = [line for line in outcome.out.splitlines() if line.startswith("left out")]
    assert len(left) == 2
    assert "given 0" in left[0]
    assert "damaged" in left[0]
    assert "given 1" in left[1]
    assert "contradicts" in left[1]


# What the secret does not depend on, the script carries along unread, so that a last resort is not lost to a label.
UNREAD = {"Name", "Text"}
OF_KNOWN_SETS = [group for group in load("share_v1.json") if not group["about"].startswith("faulty dealer")]
OF_FAULTY_DEALERS = [group for group in load("share_v1.json") if group["about"].startswith("faulty dealer")]
HELPERS = {
    "set_v1_flat_3_of_5": ["south-pier", "light-house"],
    "set_v1_tree": ["registrar"],
    "set_v1_one_byte": ["registrar"],
}


def about(group):
    return group["about"]


@pytest.fixture
def recover_here(script, tmp_path, capsys):
    """Run the script's main function in this process, where hundreds of runs take seconds; as strict as `recover`."""

    def run(*given):
        paths = [tmp_path / f"given {i}" for i in range(len(given))]
        for path, text in zip(paths, given, strict=True):
            path.write_bytes(text.encode() if isinstance(text, str) else text)
        target = tmp_path / "secret"
        target.unlink(missing_ok=True)
        try:
            code = script.main([*map(str, paths), "--to", str(target)]) or 0
        except SystemExit as stop:
            code = stop.code
        out, err = capsys.readouterr()
        assert (err == "") == (code == 0)
        assert err.count("\n") == (code != 0)
        return Outcome(code, out, err, target.read_bytes() if target.exists() else None)

    return run


def bytes_of(case):
    data = case["document"].encode() if "document" in case else bytes.fromhex(case["document_hex"])
    return data.ljust(case.get("pad_to", 0))


@pytest.mark.parametrize("group", OF_KNOWN_SETS, ids=about)
def test_share_documents(recover_here, group):
    """The cases of share_v1.json, each with as many good shares as make a quorum with it.

    The script has no record. So where only a record tells, it may recover; but never another secret.
    """
    (name,) = (name for name, test in SETS.items() if test["set"] == json.loads(group["record"])["set"])
    helpers = [share_text(SETS[name], helper) for helper in HELPERS[name]]
    secret = bytes.fromhex(SETS[name]["secret"])
    for case in group["tests"]:
        outcome = recover_here(bytes_of(case), *helpers)
        what = (case["comment"], outcome)
        if case["result"] == "valid":
            assert (outcome.code, outcome.secret) == (0, secret), what
        elif outcome.code == 0:
            assert outcome.secret == secret, what
            assert {*UNREAD, "Forgery"} & set(case["flags"]), what
        else:
            assert outcome.secret is None, what
            assert outcome.code == 4 or "Forgery" in case["flags"], what


@pytest.mark.parametrize("group", OF_FAULTY_DEALERS, ids=about)
def test_all_shares_of_faulty_dealers(recover_here, group):
    """Given all five: the secret that was meant, where three shares still agree and none is foreign; else none."""
    outcome = recover_here(*(bytes_of(case) for case in group["tests"]))
    if "of a degree too high" in group["about"] or "custodian's field" in group["about"]:
        assert (outcome.code, outcome.secret) == (4, None)
    elif "custodian's secret" in group["about"] or "custodian's encrypted" in group["about"]:
        assert (outcome.code, outcome.secret) == (4, None)
        assert "never mix" in outcome.err
        assert "given 1'" in outcome.err
    else:
        assert (outcome.code, outcome.secret) == (0, bytes.fromhex(FLAT["secret"]))


@pytest.mark.parametrize(
    "arguments",
    [
        [],
        ["--check"],
        ["--to"],
        ["--to", "{target}"],
        ["{share}"],
        ["{share}", "--to"],
        ["--to", "{target}", "{share}"],
        ["{share}", "--check", "{share}"],
        ["{share}", "--to", "{target}", "--check"],
        ["{share}", "--help", "--check"],
        ["-h"],
        ["--version"],
        ["{share}", "--too", "{target}"],
        ["{share}", "-", "--check"],
        ["{share}\n", "--unknown\nline"],
    ],
    ids=" ".join,
)
def test_usage(tmp_path, arguments):
    """Any other form of call is refused with the right one, and no file is made."""
    target = tmp_path / "secret"
    share = GOLDEN / "flat" / "registrar.share.json"
    outcome = call([], *(a.format(share=share, target=target) for a in arguments), target=target)
    assert outcome.code == 2
    assert "usage: python3 recover_by_hand.py SHARE... --to FILE" in outcome.err
    assert list(tmp_path.iterdir()) == []


FLAT_FILES = [GOLDEN / "flat" / f"{name}.share.json" for name in ("north-pier", "south-pier", "light-house")]


def test_the_secret_goes_to_a_new_file_of_mode_0600(tmp_path):
    """Whatever the umask."""
    target = tmp_path / "secret"
    before = os.umask(0)
    try:
        outcome = call(FLAT_FILES, "--to", target, target=target)
    finally:
        os.umask(before)
    assert (outcome.code, outcome.secret.hex()) == (0, FLAT["secret"])
    assert target.stat().st_mode & 0o7777 == 0o600
    assert list(tmp_path.iterdir()) == [target]
    assert str(target) in outcome.out


def test_check_writes_nothing(tmp_path):
    """And the secret is shown in no form."""
    outcome = subprocess.run(
        [sys.executable, "-I", "-S", SCRIPT, *FLAT_FILES, "--check"], cwd=tmp_path, capture_output=True, check=True
    )
    assert list(tmp_path.iterdir()) == []
    assert b"Nothing written" in outcome.stdout
    secret = bytes.fromhex(FLAT["secret"])
    assert secret not in outcome.stdout
    assert secret.hex().encode() not in outcome.stdout


@pytest.mark.parametrize("kind", ["file", "link", "dangling link", "folder", "fifo"])
def test_what_exists_is_never_overwritten(tmp_path, kind):
    """Exit 5, and what was there stays."""
    target, other = tmp_path / "secret", tmp_path / "other"
    other.write_text("precious")
    if kind == "file":
        target.write_text("precious")
    elif kind == "link":
        target.symlink_to(other)
    elif kind == "dangling link":
        target.symlink_to(tmp_path / "nowhere")
    elif kind == "folder":
        target.mkdir()
    else:
        os.mkfifo(target)
    before = sorted((path.name, path.lstat().st_mode, path.lstat().st_size) for path in tmp_path.iterdir())
    outcome = call(FLAT_FILES, "--to", target)
    assert outcome.code == 5
    assert "File exists" in outcome.err
    assert sorted((path.name, path.lstat().st_mode, path.lstat().st_size) for path in tmp_path.iterdir()) == before
    assert other.read_text() == "precious"


def test_files_that_cannot_be_opened(tmp_path):
    """Missing, a folder, a target in no folder: exit 5, with the path."""
    for paths, options in (
        ([*FLAT_FILES, tmp_path / "missing"], ["--check"]),
        ([*FLAT_FILES, tmp_path], ["--check"]),
        (FLAT_FILES, ["--to", tmp_path / "no folder" / "secret"]),
    ):
        outcome = call(paths, *options)
        assert outcome.code == 5
        assert str(tmp_path) in outcome.err


def test_a_full_disk_leaves_no_part_of_the_secret(tmp_path):
    """A write that the system cuts short, here by its limit on file sizes (setrlimit(2)): exit 5, and no file."""
    target = tmp_path / "secret"
    done = subprocess.run(
        [sys.executable, "-I", "-S", SCRIPT, *FLAT_FILES, "--to", target],
        preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (10, 10)),
        capture_output=True,
        text=True,
        check=False,
    )
    assert (done.returncode, done.stdout) == (5, "")
    assert "no room" in done.stderr
    assert list(tmp_path.iterdir()) == []


def test_odd_file_names_and_contents_do_not_reach_the_terminal(recover, tmp_path):
    """Escape sequences in a file's name are shown as escapes; what a wrong file holds is not shown at all."""
    odd = tmp_path / "share\x1b[2J\n\u202e"
    odd.write_text('{"kind": 3.14159265358979}')
    good = [path.read_text() for path in FLAT_FILES]
    for outcome in (recover(*good, odd), recover(*good[:2], odd)):
        text = outcome.out + outcome.err
        assert "\x1b" not in text
        assert "\u202e" not in text
        assert "3.14159" not in text
        assert "\\x1b[2J\\n\\u202e" in text
