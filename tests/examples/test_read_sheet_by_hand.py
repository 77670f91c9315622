"""examples/read_sheet_by_hand.py reads what the package prints, refuses the rest, and is what its docstring claims.

Sources: shares/documents/FORMAT.md, sec. 11; tests/vectors/paper_v1.json, worked out by a program that shares no code
with the script or the package (tests/vectors/make/make_paper_v1.py), whose line maker is used here as well; RFC 4648
(base32, by Python's own). The script runs as a person would run it, but for `-I -S`, under which no installed package
can be imported; its functions run in this process where thousands of runs are needed.
"""

import ast
import base64
import contextlib
import hashlib
import importlib.util
import json
import os
import resource
import stat
import subprocess
import sys
from pathlib import Path
from typing import NamedTuple

import pytest
from cli.harness import run as run_shares
from hypothesis import example, given
from hypothesis import strategies as st
from paper.conftest import GOLDEN, document, published
from strategies import crooked_split, rules
from vectors.make.make_paper_v1 import form as made_form
from vectors.make.make_paper_v1 import line as made_line
from vectors.make.make_paper_v1 import parts as made_parts
from vectors.make.make_paper_v1 import product

from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import Cost, open_by_passphrase, passphrase_sealer
from shares.errors import DocumentError, ParameterError
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.paper.paperform import from_paper, to_paper
from shares.paper.typedline import to_lines

ROOT = Path(__file__).parents[2]
SCRIPT = ROOT / "examples" / "read_sheet_by_hand.py"
VALID, INVALID = published()
BARE, SEALED = VALID[0], VALID[3]
LINES = BARE["lines"]
DIGITS = "ABCDEFGHIJKLMNOPQRSTUVWXYZ234567"
AGAIN = "Compare with the sheet"


class Outcome(NamedTuple):
    code: int
    out: str
    err: str
    file: bytes | None

    @property
    def members(self):
        return json.loads(self.file)


def members_of(share):
    """A document of the package, as a file of it reads."""
    return json.loads(share.to_file())


def code_of(form):
    return base64.b32encode(form).decode()


def checked(form):
    """The form with its check made anew."""
    check = hashlib.sha256(b"shares/v1/paper" + form[:1] + form[5:]).digest()[:4]
    return form[:1] + check + form[5:]


def lines_of(form):
    code = code_of(form)
    return [made_line(n + 1, code[24 * n : 24 * n + 24]) for n in range(len(code) // 24)]


def altered(line, place, digit=None):
    """The line with another character at this place, counted from 1."""
    other = digit or DIGITS[(DIGITS.index(line[place - 1]) + 13) % 32]
    return line[: place - 1] + other + line[place:]


def pieces(lines, length=4):
    """What would give the share away on a screen: runs of characters that a sheet has, its groups among them."""
    return {line[i : i + length] for line in lines for i in range(len(line) - length + 1)}


SECRET_PIECES = pieces(LINES)


@pytest.fixture(scope="session")
def script():
    spec = importlib.util.spec_from_file_location("read_sheet_by_hand", SCRIPT)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def judged(outcome):
    """What holds for every run."""
    if outcome.code == 0:
        assert (outcome.err, outcome.out.count("\n")) == ("", 3)
    else:
        assert outcome.code in (2, 4, 5)
        assert (outcome.out, outcome.err.count("\n"), outcome.file) == ("", 1, None)
        assert outcome.err.startswith("read_sheet_by_hand: ")
    assert "Traceback" not in outcome.err
    # A record's fingerprint and words of the messages are no part of the share's secret: small letters never are.
    shown = outcome.err if outcome.code else outcome.out.replace(BARE["share"]["record"], "")
    assert [piece for piece in SECRET_PIECES if piece in shown] == []
    return outcome


def call(*arguments, target=None, **options):
    """Run the script as a program of its own."""
    command = [sys.executable, "-I", "-S", "-W", "error", SCRIPT, *arguments]
    done = subprocess.run(
        command, capture_output=True, text=True, stdin=subprocess.DEVNULL, timeout=60, check=False, **options
    )
    written = target.read_bytes() if target is not None and target.is_file() else None
    return judged(Outcome(done.returncode, done.stdout, done.stderr, written))


@pytest.fixture
def read(tmp_path):
    """Run the script on a text."""

    def run(text):
        typed, target = tmp_path / "typed", tmp_path / "share.json"
        typed.write_bytes(text if isinstance(text, bytes) else text.encode())
        target.unlink(missing_ok=True)
        return call(typed, "--to", target, target=target)

    return run


@pytest.fixture
def read_here(script, tmp_path, capsys):
    """The same in this process, where hundreds of runs take seconds."""

    def run(text):
        typed, target = tmp_path / "typed", tmp_path / "share.json"
        typed.write_bytes(text if isinstance(text, bytes) else text.encode())
        target.unlink(missing_ok=True)
        code = 0
        try:
            script.main([str(typed), "--to", str(target)])
        except SystemExit as stop:
            code = stop.code
        out, err = capsys.readouterr()
        return judged(Outcome(code, out, err, target.read_bytes() if target.exists() else None))

    return run


def test_it_is_short_and_stands_alone():
    """At most 150 lines with its docstring, and it imports the standard library alone."""
    text = SCRIPT.read_text()
    assert len(text.splitlines()) <= 150
    assert max(map(len, text.splitlines())) <= 120
    tree = ast.parse(text)
    imported = {alias.name for node in ast.walk(tree) if isinstance(node, ast.Import) for alias in node.names}
    assert imported == {"base64", "hashlib", "io", "json", "os", "re", "sys", "textwrap", "unicodedata"}
    assert not [node for node in ast.walk(tree) if isinstance(node, ast.ImportFrom)]
    for word in ("FORMAT.md", "as secret as the sheet", "offline", "Never give lines", "Destroy TYPED", "Exit codes"):
        assert word in ast.get_docstring(tree)


# What it reads.


@pytest.mark.parametrize("test", VALID, ids=lambda test: test["comment"])
def test_published_forms(read, test):
    """As lines where there are some, and as a code; the file is the one that the package would write."""
    code = code_of(bytes.fromhex(test["form"]))
    for text in ["\n".join(test["lines"] or []), code, "\n".join(code[i : i + 64] for i in range(0, len(code), 64))]:
        if not text:
            continue
        outcome = read(text)
        assert outcome.code == 0
        assert outcome.members == members_of(document(test["share"]))
        shown = json.loads(outcome.out.splitlines()[1].partition(": ")[2])
        assert shown == {name: test["share"][name] for name in ("custodian", "epoch", "set", "record")}
        assert ("sections 9 and 10" in outcome.out) == ("sealed" in test["share"])
        assert ("whoever reads it has the share" in outcome.out) == ("rows" in test["share"])


def test_lines_as_people_type_them(read_here):
    """Groups, small letters, blank lines, other ends of lines, a mark of the encoding, a space that does not break."""
    groups = [" ".join(line[i : i + 4] for i in range(0, 31, 4)) for line in LINES]
    expected = read_here("\n".join(LINES)).file
    assert expected is not None
    for text in (
        "\n".join(groups),
        "\r\n".join(groups) + "\r\n",
        "\n\n \n".join(group.lower() for group in groups),
        "\ufeff" + "\n".join(groups),
        "\n".join(groups).replace(" ", "\u00a0\t"),
        code_of(bytes.fromhex(BARE["form"])).lower() + "\n",
    ):
        assert read_here(text).file == expected


@given(rules(), st.integers(1, 2**32 - 1), st.integers(1, 40))
def test_what_the_package_prints(script, rule, epoch, length):
    """Shares of any rule: both read the same share, from lines and from the code."""
    dealt = crooked_split(bytes(length), rule, epoch=epoch, field=Field(0x1F5))
    for share in dealt.shares[:1]:
        with contextlib.suppress(ParameterError):  # Some are too long for paper, or for lines.
            form = to_paper(share)
            expected = members_of(from_paper(form))
            assert script.parse(script.gather(code_of(form))) == expected
            if form[0] <= 32:
                assert script.parse(script.gather("\n".join(to_lines(form)))) == expected


def test_from_sheets_to_the_secret_by_hand(tmp_path):
    """Law 3 in full: three sheets, both scripts, and nothing of the package."""
    shares = []
    for name in ("south-pier", "light-house", "registrar"):
        golden = Share.parse((GOLDEN / "flat" / f"{name}.share.json").read_bytes())
        (tmp_path / name).write_text("\n".join(to_lines(to_paper(golden))))
        shares.append(tmp_path / f"{name}.share.json")
        assert call(tmp_path / name, "--to", shares[-1]).code == 0
    by_hand = [sys.executable, "-I", "-S", ROOT / "examples" / "recover_by_hand.py"]
    subprocess.run([*by_hand, *shares, "--to", tmp_path / "secret"], check=True, capture_output=True)
    vectors = json.loads((GOLDEN.parents[1] / "set_v1_flat_3_of_5.json").read_text())["testGroups"][0]["tests"][0]
    assert (tmp_path / "secret").read_bytes() == bytes.fromhex(vectors["secret"])
    verified = run_shares("verify", *shares, "--record", GOLDEN / "flat" / "record.json")
    assert (verified.code, "3 of 3 intact" in verified.out) == (0, True)


def test_a_wrapped_share_stays_wrapped_and_opens(read_here):
    share = Share.parse((GOLDEN / "flat" / "north-pier.share.json").read_bytes())
    wrapped = WrappedShare.wrap(share, passphrase_sealer(Secret.of(b"made up"), Cost(64, 1, 1)))
    outcome = read_here("\n".join(to_lines(to_paper(wrapped))))

    def opener(wrapping, sealed, bound):
        return open_by_passphrase(wrapping, sealed, bound, Secret.of(b"made up"))

    back = WrappedShare.parse(outcome.file)
    assert back.is_whole()
    assert back.open(opener).commitment() == share.commitment()


# What it refuses: lines.


def test_every_single_wrong_character_of_every_line_is_found(script):
    """All 31 others at all 31 places of all 13 lines, by the rule of that line."""
    missed = [
        (n, place, digit)
        for n, line in enumerate(LINES, 1)
        for place in range(1, 32)
        for digit in DIGITS
        if digit != line[place - 1]
        and not script.wrong(altered(line, place, digit), n).startswith("at least one character is wrong")
    ]
    assert missed == []
    assert [script.wrong(line, n) for n, line in enumerate(LINES, 1)] == [""] * 13


def test_the_line_of_a_wrong_character_is_named(read_here):
    """Each place of each line; no other line is named."""
    for n, line in enumerate(LINES, 1):
        for place in range(1, 32):
            outcome = read_here("\n".join([*LINES[: n - 1], altered(line, place), *LINES[n:]]))
            assert outcome.code == 4
            assert outcome.err.startswith(f"read_sheet_by_hand: line {n}: at least one character is wrong (the rule: ")
            assert outcome.err.count(": at least") == 1
            assert AGAIN in outcome.err


@pytest.mark.parametrize("sign", ["0", "1", "8", "?", "-", "\u00e9", "\u0131", "\u017f", "\u212a", "\ufb01", "\x00"])
def test_what_is_no_digit_is_named_with_its_place(read_here, sign):
    """Some of these become letters when they are made capital, and are none."""
    outcome = read_here("\n".join([*LINES[:4], LINES[4][:9] + sign + LINES[4][10:], *LINES[5:]]))
    assert outcome.code == 4
    assert "line 5: character 10 is none of the letters" in outcome.err


def test_any_two_and_three_wrong_characters_are_found(script):
    """Lines differ in seven places or more, so up to six wrong characters are always seen."""
    line = LINES[6]
    for a in range(1, 32):
        for b in range(a + 1, 32):
            assert script.wrong(altered(altered(line, a), b), 7)
            assert script.wrong(altered(altered(altered(line, a), b), (a + b) % 31 + 1), 7)


@pytest.mark.parametrize("left_out", range(1, 7))
def test_each_of_the_six_rules_counts(script, left_out):
    """A line to which a word is added that all roots but a^j have: it breaks the rule for a^j alone."""
    word, root = [1], 1
    for j in range(1, 7):
        root = product(root, 2)
        if j != left_out:
            word = [a ^ product(root, b) for a, b in zip([*word, 0], [0, *word], strict=True)]
    line = LINES[6]
    bent = "".join(DIGITS[DIGITS.index(c) ^ w] for c, w in zip(line[-6:], word, strict=True))
    assert script.wrong(line[:-6] + bent, 7).startswith("at least one character is wrong")
    assert script.wrong(line, 7) == ""


def test_lengths_and_order(read_here):
    for text, words in (
        ([*LINES[:2], LINES[2][:-1], *LINES[3:]], "line 3: it has 30 characters, and should have 31"),
        ([*LINES[:2], LINES[2] + "A", *LINES[3:]], "line 3: it has 32 characters, and should have 31"),
        ([*LINES[:2], LINES[2] + LINES[3], *LINES[4:]], "line 3: it has 62 characters, and should have 31"),
        ([f"{n} {line}" for n, line in enumerate(LINES, 1)], "line 1: character 1 is none of the letters"),
        ([*LINES[:4], *LINES[5:]], "line 5: by its first character it is line 6; line 6: by its first"),
        ([*LINES[:4], LINES[5], LINES[4], *LINES[6:]], "line 5: by its first character it is line 6; line 6:"),
        ([*LINES, LINES[12]], "line 14: by its first character it is line 13"),
        (LINES[:12], "12 lines (in a code: of 24 characters) are here, and by the first one the sheet has 13"),
        ([*LINES, SEALED["lines"][13]], "14 lines (in a code: of 24 characters) are here, and by the first one"),
        ([*LINES, *LINES, *LINES], "line 33: by its first character it is line 7"),
        ([*LINES[:11], SEALED["lines"][11], LINES[12]], "see that every line is of this sheet"),
    ):
        outcome = read_here("\n".join(text))
        assert (outcome.code, words in outcome.err) == (4, True), (words, outcome.err)


def test_all_wrong_lines_are_named_at_once(read_here):
    outcome = read_here("\n".join(altered(line, 9) if n in (1, 4, 12) else line for n, line in enumerate(LINES)))
    assert [word for word in range(1, 14) if f"line {word}: at least" in outcome.err] == [2, 5, 13]


# What it refuses: codes and forms.


def test_every_single_wrong_character_of_a_code_is_found(script, capsys):
    """The check over the whole finds it; in the first two characters, the number of blocks may."""
    code = code_of(bytes.fromhex(BARE["form"]))
    refused = 0
    for place in range(1, len(code) + 1):
        for digit in DIGITS:
            if digit != code[place - 1]:
                with pytest.raises(SystemExit, match=r"^4$"):
                    script.gather(altered(code, place, digit))
                refused += 1
    assert refused == 312 * 31
    err = capsys.readouterr().err
    assert "scan the code again" in err
    assert [piece for piece in SECRET_PIECES if piece in err] == []


@pytest.mark.parametrize("test", INVALID, ids=lambda test: test["comment"])
def test_published_forms_that_are_refused(read_here, test):
    form = bytes.fromhex(test["form"])
    assert read_here(code_of(form)).code == 4
    if len(form) % 15 == 0 and 15 <= len(form) <= 32 * 15:
        assert read_here("\n".join(lines_of(form))).code == 4


FORMS = [bytes.fromhex(test["form"]) for test in VALID]


@given(
    st.sampled_from(FORMS),
    st.integers(0, 400),
    st.integers(0, 255),
    st.sampled_from(["put", "insert", "remove", "blocks"]),
)
@example(FORMS[0], 5, 0x28, "put")
@example(FORMS[5], 5, 0x2B ^ 1, "put")
def test_the_package_and_the_script_agree_on_any_form(script, form, place, value, act):
    """A byte changed, put in or taken out, in a form whose check fits: both refuse, or both read the same."""
    body = form[5:]
    place %= len(body) + (act == "insert")
    if act == "put":
        body = body[:place] + bytes([value]) + body[place + 1 :]
    elif act == "insert":
        body = (body[:place] + bytes([value]) + body[place:])[: len(body) + 1]
    elif act == "remove":
        body = body[:place] + body[place + 1 :] + b"\0"
    body += bytes(-(len(body) + 5) % 15)
    blocks = min(value, 255) if act == "blocks" else (len(body) + 5) // 15
    bent = checked(bytes([blocks]) + bytes(4) + body)
    try:
        expected = members_of(from_paper(bent))
    except DocumentError:
        expected = None
    try:
        found = script.parse(script.gather(code_of(bent)))
    except (SystemExit, ValueError, IndexError):
        found = None
    assert found == expected


def both(script, form):
    """What package and script read in a form; None for a refusal."""
    try:
        expected = members_of(from_paper(form))
    except DocumentError:
        expected = None
    try:
        found = script.parse(form)
    except (ValueError, IndexError):
        found = None
    return expected, found


@pytest.mark.parametrize("form", FORMS, ids=[test["comment"] for test in VALID])
def test_every_first_byte_is_judged_alike(script, form):
    """What it is, and which parts follow."""
    for value in range(256):
        expected, found = both(script, checked(form[:5] + bytes([value]) + form[6:]))
        assert found == expected, value
        assert found is None or value == form[5] or "wrapping" in found


def test_the_bytes_before_the_rows_are_judged_alike(script):
    """Every value of the field; of others, their neighbours by a bit and edges."""
    form, field = FORMS[1], 35
    assert (form[24:field], form[field]) == (b"light-house", 0x1B)
    fields = 0
    for place in range(6, 50):
        near = {form[place] ^ 1 << i for i in range(8)}
        for value in range(256) if place == field else near | {0, 1, 2, 3, 8, 9, 127, 128, 255}:
            expected, found = both(script, checked(form[:place] + bytes([value]) + form[place + 1 :]))
            assert found == expected, (place, value)
            fields += place == field and found is not None
    assert fields == 30  # Irreducible polynomials of degree 8 over GF(2).


def wrapping(**changes):
    return {"wrapping": SEALED["share"]["wrapping"] | changes}


STEP = [2, 1]
ACCEPTED = [
    (BARE, {}),
    (BARE, {"paths": [[STEP] * 8]}),
    (BARE, {"paths": [[[255, 255]]]}),
    (BARE, {"epoch": 2**32 - 1}),
    (SEALED, wrapping(memory=8 * 16, lanes=16, passes=1)),
    (SEALED, wrapping(memory=2**21, lanes=1, passes=10)),
]
REFUSED = [
    (BARE, {"paths": [[STEP] * 9]}),
    (BARE, {"paths": [[[2, 0]]]}),
    (BARE, {"paths": [[[0, 2]]]}),
    (BARE, {"paths": [[STEP], [STEP]], "rows": BARE["share"]["rows"] * 2}),
    (BARE, {"paths": [[STEP, STEP], [STEP]], "rows": BARE["share"]["rows"] * 2}),
    (BARE, {"paths": [[STEP], [STEP, STEP]], "rows": BARE["share"]["rows"] * 2}),
    (BARE, {"epoch": 0}),
    (BARE, {"epoch": 2**32}),
    (SEALED, wrapping(memory=8 * 16 - 1, lanes=16)),
    (SEALED, wrapping(memory=2**21 + 1)),
    (SEALED, wrapping(memory=2**40)),
    (SEALED, wrapping(passes=0)),
    (SEALED, wrapping(passes=11)),
    (SEALED, wrapping(lanes=0)),
    (SEALED, wrapping(lanes=17)),
]


@pytest.mark.parametrize(("test", "changes"), ACCEPTED)
def test_what_a_writer_may_write(script, test, changes):
    expected, found = both(script, made_form(b"".join(made_parts(test["share"] | changes))))
    assert found is not None
    assert found == expected


@pytest.mark.parametrize(("test", "changes"), REFUSED)
def test_what_no_writer_writes(script, test, changes):
    assert both(script, made_form(b"".join(made_parts(test["share"] | changes)))) == (None, None)


def test_a_wrapped_share_of_no_points_is_refused(script):
    """Its length is that of a tag, whatever L is."""
    body = made_parts(SEALED["share"] | {"sealed": "A" * 22})
    assert body[5] == b"\x01\x01\x03\x01"
    body[5], body[-2] = b"\0", bytes([53])
    assert both(script, made_form(b"".join(body))) == (None, None)


def named(script, name):
    form = FORMS[0]
    assert form[23:34] == b"\nnorth-pier"
    raw = name.encode()
    body = form[5:23] + bytes([len(raw)]) + raw + form[34:].rstrip(b"\0")
    body += bytes(-(len(body) + 5) % 15)
    bent = checked(bytes([(len(body) + 5) // 15]) + bytes(4) + body)
    try:
        return from_paper(bent).custodian, script.is_name(name)
    except DocumentError:
        return None, script.is_name(name)


@given(st.text(st.characters(exclude_categories=["Cs"]), max_size=66).filter(lambda name: len(name.encode()) <= 250))
@example("")
@example("x" * 64)
@example("x" * 65)
@example("\u6e2f" * 64)
@example("\U00020000" * 50)
@example("\U00020000" * 51)
@example("a/b")
@example("a\\b")
@example(".a")
@example("-a")
@example("a b")
@example("a  b")
@example(" a")
@example("a\u00a0b")
@example("a\tb")
@example("e\u0301")
@example("\u00e9")
def test_names_are_judged_as_the_package_judges_them(script, name):
    found, good = named(script, name)
    assert (found == name) == good


def test_every_character_is_judged_as_the_package_judges_it(script):
    """Each character of the basic plane, and where later planes hold what does not show."""
    from shares.documents.members import _name_problem

    places = [*range(0xD800), *range(0xE000, 0x10000), *range(0x1FFF0, 0x20010), *range(0xE0000, 0xE0200), 0x10FFFF]
    differ = [f"{c:x}" for c in places if script.is_name(f"a{chr(c)}b") != (_name_problem(f"a{chr(c)}b") is None)]
    assert differ == []


HOSTILE = {
    "nothing": b"",
    "blank": b" \n\t\r\n" * 50,
    "zeros": bytes(5000),
    "no text": bytes(range(256)) * 20,
    "a word": b"hello",
    "one character": b"A",
    "a letter often": b"A" * 312,
    "letters without end": b"A" * 70_000,
    "a file too long": b"\n".join(line.encode() for line in LINES) + b"\n" * 70_000,
    "lines without end": b"A\n" * 30_000,
    "sheets without end": ("\n".join(LINES) + "\n").encode() * 100,
    "another coding": "\n".join(LINES).encode("utf-16"),
    "escape sequences": b"\x1b[2J\x1b]0;title\x07" + LINES[0].encode(),
    "surrogates": "\ud800".encode("utf-8", "surrogatepass") * 31,
    "a share file": (GOLDEN / "flat" / "north-pier.share.json").read_bytes(),
    "a code and lines": (code_of(FORMS[0]) + "\n" + "\n".join(LINES)).encode(),
    "a code twice": code_of(FORMS[0]).encode() * 2,
    "half a code": code_of(FORMS[0])[:150].encode(),
    "a code padded": code_of(FORMS[0])[:-1].encode() + b"=",
    "the largest code": code_of(checked(b"\xff" * (255 * 15))).encode(),
    "a number without end": code_of(checked(bytes([255]) + bytes(4) + b"\x20" + bytes(16) + b"\xff" * 3803)).encode(),
    "paths without end": code_of(
        checked(bytes([255]) + bytes(4) + b"\x20" + bytes(16) + b"\1\1a\x1b" + b"\x8f\xff\xff\xff\x7f" + b"\1" * 3794)
    ).encode(),
}


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_input_is_refused_in_one_line(read, name):
    outcome = read(HOSTILE[name])
    assert outcome.code == 4
    assert outcome.err[:-1].isprintable()
    assert outcome.err.isascii()


# Files and usage.


@pytest.mark.parametrize(
    "words",
    [
        [],
        ["{typed}"],
        ["{typed}", "--to"],
        ["--to", "{target}", "{typed}"],
        ["{typed}", "--into", "{target}"],
        ["{typed}", "--to", "{target}", "more"],
        ["-", "--to", "{target}"],
        ["--help"],
        LINES,
    ],
)
def test_it_says_how_it_is_used(tmp_path, words):
    """Lines given as arguments, against all advice, are not repeated."""
    typed, target = tmp_path / "typed", tmp_path / "share.json"
    typed.write_text("\n".join(LINES))
    outcome = call(*(word.format(typed=typed, target=target) for word in words), target=target)
    assert (outcome.code, "usage: python3 read_sheet_by_hand.py TYPED --to FILE" in outcome.err) == (2, True)
    assert list(tmp_path.iterdir()) == [typed]


def test_the_share_goes_to_a_new_file_of_mode_0600(tmp_path):
    typed, target = tmp_path / "typed", tmp_path / "share.json"
    typed.write_text("\n".join(LINES))
    before = os.umask(0)
    try:
        outcome = call(typed, "--to", target, target=target)
    finally:
        os.umask(before)
    assert outcome.code == 0
    assert stat.S_IMODE(target.stat().st_mode) == 0o600
    assert sorted(tmp_path.iterdir()) == [target, typed]


@pytest.mark.parametrize("kind", ["file", "link", "dangling link", "folder", "fifo"])
def test_what_exists_is_never_overwritten(tmp_path, kind):
    typed, target, other = tmp_path / "typed", tmp_path / "target", tmp_path / "other"
    typed.write_text("\n".join(LINES))
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
    outcome = call(typed, "--to", target)
    assert (outcome.code, "File exists" in outcome.err) == (5, True)
    assert sorted((path.name, path.lstat().st_mode, path.lstat().st_size) for path in tmp_path.iterdir()) == before
    assert other.read_text() == "precious"


def test_files_that_cannot_be_opened(tmp_path):
    typed = tmp_path / "typed"
    typed.write_text("\n".join(LINES))
    for given_file, target in (
        (tmp_path / "none", tmp_path / "a"),
        (tmp_path, tmp_path / "a"),
        (typed, tmp_path / "none" / "a"),
    ):
        outcome = call(given_file, "--to", target)
        assert (outcome.code, str(tmp_path) in outcome.err) == (5, True)


def test_no_room_leaves_nothing(tmp_path):
    """A limit on the size of files (setrlimit(2)) stands for a full medium."""
    typed, target = tmp_path / "typed", tmp_path / "share.json"
    typed.write_text("\n".join(LINES))
    outcome = call(
        typed,
        "--to",
        target,
        target=target,
        preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (100, 100)),
    )
    assert outcome.code == 5
    assert list(tmp_path.iterdir()) == [typed]


def test_odd_file_names_do_not_reach_the_terminal(tmp_path):
    typed, target = tmp_path / "typed", tmp_path / "share\x1b[2J\n\u202e"
    typed.write_text("\n".join(LINES))
    assert "\\x1b[2J\\n\\u202e" in call(typed, "--to", target).out
    again = call(typed, "--to", target)
    assert (again.code, "\x1b" in again.err) == (5, False)
