"""``shares journal``: by hand and by script, what happened is added, shown, checked, and its head read aloud.

Checked against: tests/history/by_hand.py, a reader written from FORMAT_EVIDENCE.md, section 16, alone.
"""

from __future__ import annotations

import json
import tempfile
from pathlib import Path

import pytest
from cli.harness import assert_one_line, assert_refused, run, run_unprivileged
from history import by_hand
from history.making import key, note, set_folder
from history.test_folder import POLICY, with_policy
from parties import party

from shares.cli.keys import UNSIGNED_ENTRY
from shares.history.files import FolderFiles
from shares.history.journal import append, load_journal
from shares.history.pack import write_pack
from shares.history.reports import NEEDS


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A set with a journal of one signed entry, and beside it two party keys, their passphrases and cards."""
    for name in ("harbour-office", "registrar", "north-pier"):
        (tmp_path / f"{name}.key.json").write_bytes(party(name).to_file())
        (tmp_path / f"{name}.card.json").write_bytes(party(name).card.to_file())
        (tmp_path / f"{name}.passphrase").write_text(f"the passphrase of {name}\n")
    return set_folder(tmp_path / "set", "harbour-office")


def sign(folder: Path, *names: str) -> list[str]:
    beside = folder.parent
    return [
        word
        for name in names
        for word in ("--sign", f"{beside}/{name}.key.json", "--passphrase-file", f"{name}={beside}/{name}.passphrase")
    ]


def test_what_happened_is_added_signed_and_shown(folder: Path) -> None:
    done = run(
        "journal", "add", folder, "received", "--custodian=north-pier", "--serial=HT-0031", *sign(folder, "registrar")
    )
    assert (done.code, done.err.count("Caution:"), "was sent" in done.err) == (0, 1, True)
    head = run("journal", "head", folder).out.strip()
    assert done.out == f"Added: share of north-pier received, serial HT-0031.\nThe journal stands at {head}.\n"
    shown = run("journal", "show", folder)
    assert shown.code == 0
    lines = shown.out.splitlines()
    assert lines[0].startswith("    1  2026-01-05T09:00:00Z  epoch 1 dealt to north-pier, south-pier, light-house")
    assert lines[0].endswith("[harbour-office]")
    assert lines[1].endswith("share of north-pier received, serial HT-0031 [registrar]")
    assert lines[2:] == [
        f"{name} signed by the card {key(name).card.fingerprint}." for name in ("harbour-office", "registrar")
    ]
    assert by_hand.check((folder / "journal.jsonl").read_bytes())[0] == []


def test_scripts_get_all_of_it(folder: Path) -> None:
    told = run("journal", "add", folder, "noted", "--remark", "windy", "--json").json
    assert (told["done"], told["sequence"], told["event"]) == (True, 2, {"what": "noted", "remark": "windy"})
    assert (told["words"], told["signers"], told["documents"]) == ("windy", [], [])
    assert run("journal", "head", folder, "--json").json == {"done": True, "exit": 0, **told["head"]}
    shown = run("journal", "show", folder, "--json").json
    assert (shown["done"], shown["exit"], [entry["sequence"] for entry in shown["entries"]]) == (True, 0, [1, 2])
    checked = run("journal", "verify", folder, "--json").json
    assert checked["head"] == told["head"]
    assert checked["signers"] == [{"name": "harbour-office", "card": key().card.fingerprint, "entries": 1}]
    assert [problem["kind"] for problem in checked["problems"]] == ["trust"]


def test_entries_are_chosen_by_time_and_event(folder: Path) -> None:
    append(folder, note("later"))
    for arguments, wanted in (
        (["--since=2026-01-05T09:00:00Z"], [1, 2]),
        (["--since=2026-01-05T09:00:01Z"], [2]),
        (["--event=dealt"], [1]),
        (["--event=dealt", "--event=noted"], [1, 2]),
        (["--event=retired"], []),
    ):
        told = run("journal", "show", folder, *arguments, "--json").json
        assert [entry["sequence"] for entry in told["entries"]] == wanted
    assert run("journal", "show", folder, "--event=retired").out == "No entry.\n"
    assert_refused(["journal", "show", folder, "--since=yesterday"], 2, "--since", "2026-12-01T07:00:00Z")
    assert_refused(["journal", "show", folder, "--event=forgotten"], 2, "--event")


def test_long_entries_are_broken_into_lines(folder: Path) -> None:
    append(folder, note("a word " * 60))
    lines = run("journal", "show", folder).out.splitlines()
    assert max(map(len, lines)) <= 100
    assert lines[2].startswith(" " * 29 + "word ")


def test_a_departure_says_until_when_and_cautions(folder: Path) -> None:
    done = run("journal", "add", folder, "departed", "--person=A. Keeper", "--custodian=north-pier", "--within=2d")
    assert done.code == 0
    entry = load_journal(folder).entries[1]
    due = entry.event.due.isoformat().replace("+00:00", "Z")  # type: ignore[union-attr]
    assert f"Next: deal with it by {due}, and enter that" in done.out
    assert (entry.event.due - entry.time).days == 2  # type: ignore[union-attr]
    assert "Caution: who leaves keeps what they know." in done.err
    told = run("journal", "add", folder, "resolved", "--entry=2", "--how=refreshed", "--json").json
    assert told["event"]["how"] == "refreshed"


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["incident", "--custodian=north-pier", "--remark=seen"], ["counts as knowing it"]),
        (["handed-on", "--custodian=north-pier", "--to=B. Keeper"], ["the one before still knows the share"]),
        (["incident", "--custodian=north-pier", "--remark=wet", "--not-exposed"], []),
        (["noted", "--remark=calm"], []),
    ],
)
def test_cautions_stand_where_they_matter(folder: Path, arguments: list[str], words: list[str]) -> None:
    done = run("journal", "add", folder, *arguments)
    assert done.code == 0
    assert done.err.count("Caution:") == len(words) + 1
    assert all(word in done.err for word in (*words, f"Caution: {UNSIGNED_ENTRY}"))
    assert run("journal", "add", folder, *arguments, "--json").err == ""


def test_a_card_is_introduced_with_the_usual_caution(folder: Path) -> None:
    card = folder.parent / "north-pier.card.json"
    done = run("journal", "add", folder, "introduced", "--custodian=south-pier", "--card", card)
    assert done.code == 0
    assert "the card is of north-pier, not south-pier" in done.err
    assert "compare its fingerprint" in done.err
    journal = load_journal(folder)
    assert journal.entries[1].event.card in journal.cards  # type: ignore[union-attr]
    own = run("journal", "add", folder, "introduced", "--custodian=north-pier", "--card", card)
    assert (own.code, "not south-pier" in own.err) == (0, False)


def test_a_document_is_kept_and_missed_when_it_goes(folder: Path) -> None:
    paper = folder.parent / "receipt.pdf"
    paper.write_bytes(b"signed by hand")
    told = run("journal", "add", folder, "noted", "--remark=receipt", "--document", paper, "--json").json
    kept = folder / told["documents"][0]["path"]
    assert kept.read_bytes() == b"signed by hand"
    assert "1 document named" in run("journal", "verify", folder).out
    kept.unlink()
    done = run("journal", "verify", folder)
    assert done.code == 4
    assert "Line 2: it names documents/" in done.out
    assert "which is missing" in " ".join(done.out.split())
    assert_refused(
        ["journal", "add", folder, "noted", "--remark=x", "--document", folder.parent / "no"], 5, "does not exist",
        watched=folder,
    )  # fmt: skip


@pytest.mark.parametrize("what", NEEDS)
def test_a_missing_fact_is_named_by_its_option(folder: Path, what: str) -> None:
    needed = NEEDS[what][0][0].replace("_", "-")
    assert_refused(["journal", "add", folder, what], 2, f"--{needed}", what, watched=folder)


@pytest.mark.parametrize("what", ["dealt", "attested", "recovered", "destroyed", "set-aside", "forgotten"])
def test_what_other_commands_do_is_not_added_by_hand(folder: Path, what: str) -> None:
    assert_refused(["journal", "add", folder, what], 2, "EVENT", watched=folder)


@pytest.mark.parametrize("remark", ["", "x" * 501, "bell\x07"])
def test_texts_that_are_none_are_refused(folder: Path, remark: str) -> None:
    assert_refused(["journal", "add", folder, "noted", "--remark", remark], 2, "remark", watched=folder)


def test_dual_control_asks_for_two(tmp_path: Path, folder: Path) -> None:
    planned = with_policy(tmp_path / "planned", POLICY)
    add = ["journal", "add", planned, "noted", "--remark=both"]
    one = sign(folder, "registrar")
    for given in ([], one, one + one):
        assert_refused([*add, *given], 2, "dual control", "--sign", watched=planned)
    assert run(*add, *one, *sign(folder, "harbour-office")).code == 0
    assert [len(entry.signatures) for entry in load_journal(planned).entries] == [2]


def test_a_whole_journal_says_what_it_proves_and_what_not(folder: Path) -> None:
    for _ in range(2):
        append(folder, note("kept"), keys=[key()])
    append(folder, note("unsigned"))
    head = run("journal", "head", folder).out.strip()
    early = run("journal", "show", folder, "--json").json["entries"][0]
    done = run("journal", "verify", folder, "--head", head, "--head", head.replace("entry ", ""))
    assert done.code == 0
    text = " ".join(done.out.split())
    assert "is whole: 4 entries, 0 documents named, 2 heads noted elsewhere." in text
    assert f"Signed by harbour-office, card {key().card.fingerprint}: 3 entries." in text
    assert f"It stands at {head}." in text
    assert "up to entry 3, the last that is signed" in text
    assert "could write another journal from the start" in text
    assert early["signers"] == [key().card.fingerprint]


def test_an_unsigned_journal_proves_nothing_by_itself(tmp_path: Path) -> None:
    done = run("journal", "verify", set_folder(tmp_path / "set"))
    assert (done.code, "by itself it proves nothing" in " ".join(done.out.split())) == (0, True)


def test_a_broken_journal_is_told_by_every_command(folder: Path) -> None:
    append(folder, note("the truth"), keys=[key()])
    append(folder, note("more"), keys=[key()])
    path = folder / "journal.jsonl"
    path.write_bytes(path.read_bytes().replace(b"the truth", b"a mistake"))
    done = run("journal", "verify", folder)
    assert done.code == 4
    assert "Line 2: the signature by harbour-office does not fit its content." in done.out
    assert "Line 3: it does not follow the line before it" in done.out
    assert "is broken: 3 entries" in done.out
    assert "It proves" not in done.out
    told = run("journal", "verify", folder, "--json").json
    assert (told["done"], told["exit"], told["proves"]) == (False, 4, None)
    assert [(one["line"], one["kind"], one["breaks"]) for one in told["problems"]] == [
        (2, "signature", True), (3, "chain", True), (2, "trust", False),
    ]  # fmt: skip
    shown = run("journal", "show", folder)
    assert (shown.code, "a mistake [unsigned]" in shown.out) == (4, True)
    assert "Caution: the journal is broken, first at line 2" in shown.err
    assert_refused(["journal", "head", folder], 4, "line 2", "would prove nothing")
    # What happened meanwhile can still be added.
    assert run("journal", "add", folder, "exception", "--remark=found a changed line").code == 0


def test_a_cut_journal_is_told_by_a_head_in_a_file(folder: Path) -> None:
    noted = folder.parent / "challenge.json"
    append(folder, note("the last"), keys=[key()])
    head = load_journal(folder).head
    assert head is not None
    noted.write_text(json.dumps({"kind": "challenge", "journal": head.public("sequence", "head")}))
    assert run("journal", "verify", folder, "--head", noted).code == 0
    path = folder / "journal.jsonl"
    path.write_bytes(path.read_bytes().split(b"\n")[0] + b"\n")
    assert run("journal", "verify", folder).code == 0
    done = run("journal", "verify", folder, "--head", noted)
    assert (done.code, "The journal: it never stood at entry 2" in done.out) == (4, True)
    assert_refused(["journal", "verify", folder, "--head", "57 ABCD"], 2, "--head", "no head of a journal")
    assert_refused(["journal", "verify", folder, "--head", folder / "record.json"], 2, "record.json", "no head")


def test_trusted_cards_are_demanded(folder: Path) -> None:
    def trusting(name: str) -> int:
        return run("journal", "verify", folder, "--trust", folder.parent / f"{name}.card.json").code

    assert (trusting("harbour-office"), trusting("registrar")) == (0, 4)


def test_many_problems_are_told_in_few_lines(folder: Path) -> None:
    path = folder / "journal.jsonl"
    path.write_bytes(path.read_bytes() + b"rubbish\n" * 100)
    done = run("journal", "verify", folder)
    assert done.out.count("it is no entry") == 20
    assert "And 80 more; --json lists them all." in done.out
    assert len(run("journal", "verify", folder, "--json").json["problems"]) == 100


def test_without_its_policy_the_journal_is_checked_as_far_as_it_goes(tmp_path: Path) -> None:
    planned = with_policy(tmp_path / "planned", POLICY)
    append(planned, note("alone"), keys=[key()])
    assert "dual control" in run("journal", "verify", planned).out
    (planned / "policy.toml").unlink()
    done = run("journal", "verify", planned)
    assert "Caution: the policy is not beside the record" in done.err
    assert "dual control" not in done.out
    assert_refused(["journal", "add", planned, "noted", "--remark=x"], 5, "policy.toml", watched=planned)


@pytest.mark.parametrize("command", ["show", "head", "verify"])
def test_a_pack_is_read_as_its_folder_is(folder: Path, tmp_path: Path, command: str) -> None:
    planned = with_policy(tmp_path / "planned", POLICY)
    append(planned, note("windy"))
    append(folder, note("calm"), keys=[key("harbour-office")])
    pack, packed, none = (tmp_path / f"{name}.tar" for name in ("pack", "packed", "none"))
    write_pack(FolderFiles(folder), pack)
    write_pack(FolderFiles(planned), packed)
    for original, copy in ((folder, pack), (planned, packed)):
        for options in ((), ("--json",)):
            here, there = (run("journal", command, one, *options) for one in (original, copy))
            assert (there.code, there.out, there.err) == (here.code, here.out, here.err)
    assert run("journal", command, pack).code == 0
    none.write_bytes(b"a tape of something else" * 100)
    refused = run("journal", command, none)
    assert (refused.code, refused.err.startswith("shares: "), str(none) in refused.err) == (4, True, True)
    pack.write_bytes(pack.read_bytes().replace(b'"remark":"calm"', b'"remark":"wild"'))
    assert run("journal", command, pack).code == 4


@pytest.mark.parametrize("command", ["show", "head", "verify"])
def test_a_folder_without_a_journal_is_refused(tmp_path: Path, command: str, folder: Path) -> None:
    (folder / "journal.jsonl").unlink()
    assert_refused(["journal", command, folder], 5, "holds no journal", watched=folder)
    assert_refused(["journal", command, tmp_path / "nowhere"], 5, "nowhere")


def test_a_journal_that_may_not_be_written_is_refused_and_read() -> None:
    # The folders of pytest are closed to others.
    with tempfile.TemporaryDirectory() as open_folder:
        folder = set_folder(Path(open_folder) / "set", "harbour-office")
        for path in (Path(open_folder), folder, *folder.iterdir()):
            path.chmod(0o755)
        before = (folder / "journal.jsonl").read_bytes()
        (folder / "journal.jsonl").chmod(0o444)
        done = run_unprivileged("journal", "add", folder, "noted", "--remark=x")
        assert (done.code, "permission denied" in assert_one_line(done)) == (5, True)
        assert (folder / "journal.jsonl").read_bytes() == before
        assert run_unprivileged("journal", "verify", folder).code == 0
        (folder / "journal.jsonl").chmod(0o000)
        done = run_unprivileged("journal", "verify", folder)
        assert (done.code, "permission denied" in assert_one_line(done)) == (5, True)
