"""``shares party``, ``passphrase``, ``record sign``, and ``verify --trust``.

Checked against: FORMAT.md, section 9, by the reader written from its text alone (tests/vectors/make/wrapping_v1.py).
"""

from __future__ import annotations

import json
import os
import stat
from pathlib import Path

import pytest
from cli.harbour import Harbour
from cli.harness import LABEL, PURPOSE, Place, assert_refused, files_in, run
from parties import QUICK, card, edited, file_of, passphrase
from vectors.make import wrapping_v1 as by_hand

from shares.custody.passphrase import WORDS
from shares.custody.presented import load_record
from shares.documents.party import new_party

PHRASE = "made up: gulls over the slipway"


@pytest.fixture
def phrase(place: Place) -> Path:
    path = place.folder / "a.passphrase"
    path.write_text(PHRASE + "\n")
    return path


def new(place: Place, phrase: Path, *more: str) -> list[str | Path]:
    return ["party", "new", "north-pier", "--in", place.drop, "--passphrase-file", phrase, *more]


# party new, show.


@pytest.mark.usefixtures("quick")
def test_a_party_is_made_private_and_complete(place: Place, phrase: Path) -> None:
    done = run(*new(place, phrase, "--contact", "quay 4"))
    assert (done.code, done.err) == (0, "")
    key, made = place.drop / "north-pier.key.json", place.drop / "north-pier.card.json"
    assert sorted(files_in(place.drop)) == [made.name, key.name]
    assert [stat.S_IMODE(path.stat().st_mode) for path in (key, made)] == [0o600, 0o644]
    members = json.loads(made.read_bytes())
    by_hand.verify(members, members["signature"], "party-card", by_hand.without(members, "signature"))
    private = by_hand.Private(by_hand.opened(json.loads(key.read_bytes()), PHRASE.encode()))
    assert private.public().items() <= members.items()
    for told in (str(key), str(made), members["fingerprint"], "read the fingerprint aloud", "Who loses either"):
        assert told in done.out
    assert PHRASE not in done.out


@pytest.mark.usefixtures("quick")
def test_a_party_as_json(place: Place, phrase: Path) -> None:
    done = run(*new(place, phrase, "--json"))
    told = done.json
    members = json.loads((place.drop / "north-pier.card.json").read_bytes())
    assert (done.code, done.err, told["done"], told["name"], told["contact"]) == (0, "", True, "north-pier", None)
    assert (told["fingerprint"], told["created"]) == (members["fingerprint"], members["created"])
    assert (told["key"], told["card"]) == tuple(
        os.fspath(place.drop / f"north-pier.{kind}.json") for kind in ("key", "card")
    )


@pytest.mark.usefixtures("quick")
def test_a_weak_passphrase_is_told(place: Place, phrase: Path) -> None:
    phrase.write_text("short")
    done = run(*new(place, phrase))
    assert (done.code, done.err.count("\n")) == (0, 1)
    assert "Caution: the passphrase for north-pier: it is shorter than 16 characters" in done.err


@pytest.mark.parametrize(
    ("changes", "code", "words"),
    [
        ({2: ""}, 2, ("empty",)),
        ({2: "a/b"}, 2, ("path separator",)),
        ({2: "..", 4: "."}, 2, ("dot",)),
        ({4: "nowhere"}, 5, ("nowhere", "the folder is not there")),
        ({4: ""}, 2, ("--in", "empty")),
        ({6: "nowhere"}, 5, ("nowhere", "does not exist")),
        ({6: "/dev/null"}, 2, ("/dev/null", "the passphrase is empty")),
        ({6: "south-pier=x"}, 2, ("no passphrase is given for north-pier", "--passphrase-file north-pier=FILE")),
        ({5: "--passphrase-fd", 6: "2"}, 2, ("--passphrase-fd", "3 or more")),
    ],
)
def test_a_party_that_cannot_be_is_not_made(
    place: Place, phrase: Path, changes: dict[int, str], code: int, words: tuple[str, ...]
) -> None:
    arguments = new(place, phrase)
    for i, text in changes.items():
        arguments[i] = text
    assert_refused(arguments, code, *words, watched=place.folder)


def test_a_contact_that_cannot_be_is_refused(place: Place, phrase: Path) -> None:
    assert_refused(new(place, phrase, "--contact", "a\nb"), 2, "control", watched=place.folder)


@pytest.mark.usefixtures("quick")
def test_a_party_is_never_overwritten(place: Place, phrase: Path) -> None:
    assert run(*new(place, phrase)).code == 0
    # Not even a passphrase is read: what is there is seen before.
    phrase.unlink()
    assert_refused(new(place, phrase), 5, "north-pier.key.json", "never overwritten", watched=place.folder)
    (place.drop / "north-pier.key.json").unlink()
    assert_refused(new(place, phrase), 5, "north-pier.card.json", "never overwritten", watched=place.folder)


def test_a_card_is_shown(harbour: Harbour) -> None:
    done = run("party", "show", harbour.card("registrar"))
    assert (done.code, done.err) == (0, "")
    for told in ("Card of registrar", card("registrar").fingerprint, "does not prove who that is"):
        assert told in done.out
    told = run("party", "show", harbour.card("registrar"), "--json").json
    assert (told["name"], told["fingerprint"]) == ("registrar", card("registrar").fingerprint)


def test_a_card_that_was_altered_is_not_shown(harbour: Harbour) -> None:
    path = harbour.card("registrar")
    path.write_bytes(file_of(edited(path.read_bytes(), "name", to="dry-dock")))
    assert_refused(["party", "show", path], 4, str(path), "fingerprint does not fit")
    assert_refused(["party", "show", harbour.key("registrar")], 4, "a party card is wanted here, but it is a party key")
    assert_refused(["show", path], 4, str(path), "fingerprint does not fit")


@pytest.mark.parametrize("kind", ["key", "card"])
def test_show_tells_of_keys_and_cards(harbour: Harbour, kind: str) -> None:
    path = harbour.key("registrar") if kind == "key" else harbour.card("registrar")
    done = run("show", path)
    assert (done.code, done.err) == (0, "")
    assert ("party key (private, wrapped by passphrase)" if kind == "key" else "party card (public)") in done.out
    assert card("registrar").fingerprint in done.out
    told = run("show", path, "--json").json
    assert set(told) == {"done", "exit", "kind", "name", "contact", "created", "fingerprint"}


# party passphrase.


@pytest.mark.usefixtures("quick")
def test_a_key_gets_a_new_passphrase_and_keeps_its_card(harbour: Harbour) -> None:
    (harbour.folder / "new = phrase").write_text(PHRASE + "\n")
    target = harbour.folder / "again.key.json"
    arguments = ["party", "passphrase", harbour.key("registrar"), "--to", target, *harbour.known("registrar")]
    arguments += ["--new-passphrase-file", harbour.folder / "new = phrase"]
    before = harbour.key("registrar").read_bytes()
    done = run(*arguments)
    assert (done.code, done.err) == (0, "")
    assert "Wrapped the key of registrar under the new passphrase" in done.out
    assert "then destroy" in done.out
    assert stat.S_IMODE(target.stat().st_mode) == 0o600
    assert harbour.key("registrar").read_bytes() == before
    members = json.loads(target.read_bytes())
    assert members["card"] == json.loads(harbour.card("registrar").read_bytes())
    assert by_hand.opened(members, PHRASE.encode()) == by_hand.opened(
        json.loads(before), harbour.phrase("registrar").read_bytes().rstrip()
    )
    # The name is taken now; the passphrases are not even looked at.
    assert_refused([*arguments[:5], "--passphrase-file=nowhere"], 5, str(target), "never overwritten")


def test_a_wrong_passphrase_rewraps_nothing(harbour: Harbour) -> None:
    arguments = ["party", "passphrase", harbour.key("registrar"), "--to", harbour.folder / "x"]
    given = f"--passphrase-file={harbour.phrase('dry-dock')}"
    words = ("the passphrase does not open it", "upper and lower case")
    assert_refused(
        [*arguments, given, "--new-passphrase-file", harbour.phrase("dry-dock")], 4, *words, watched=harbour.folder
    )
    assert_refused(arguments, 4, "the passphrase of registrar is needed", "no terminal", watched=harbour.folder)


# passphrase.


@pytest.mark.parametrize(("more", "words"), [([], 10), (["--words", "6"], 6), (["--words=32"], 32)])
def test_a_passphrase_is_drawn_into_a_file_and_not_shown(place: Place, more: list[str], words: int) -> None:
    target = place.folder / "drawn"
    done = run("passphrase", "--to", target, *more)
    assert (done.code, done.err) == (0, "")
    line = target.read_text()
    assert stat.S_IMODE(target.stat().st_mode) == 0o600
    assert line.endswith("\n")
    drawn = line[:-1].split("-")
    assert (len(drawn), set(drawn) <= set(WORDS)) == (words, True)
    assert f"{words} words, {8 * words} bits, in {target}" in done.out
    shown = [word for word in drawn if word in done.out.replace(str(target), "")]
    assert len(shown) < words / 2
    assert_refused(["passphrase", "--to", target], 5, str(target), "never overwritten", watched=place.folder)


def test_a_drawn_passphrase_as_json_and_as_it_is_used(place: Place) -> None:
    target = place.folder / "drawn"
    told = run("passphrase", "--to", target, "--json").json
    assert told == {"done": True, "exit": 0, "file": str(target), "words": 10, "bits": 80}
    done = run(*new(place, target))
    assert (done.code, done.err) == (0, "")


@pytest.mark.parametrize("words", ["5", "33", "0", "-1", "x"])
def test_other_numbers_of_words_are_refused(place: Place, words: str) -> None:
    assert_refused(["passphrase", "--to", place.folder / "x", f"--words={words}"], 2, "--words", watched=place.folder)
    assert_refused(["passphrase"], 2, "--to")


# record sign, verify --trust.


def sign(harbour: Harbour, name: str, role: str, source: Path | None = None) -> list[str | Path]:
    target = harbour.folder / f"signed by {name} as {role}.json"
    arguments: list[str | Path] = ["record", "sign", source or harbour.place.record, "--as", role, "--to", target]
    return [*arguments, "--key", harbour.key(name), *harbour.known(name)]


def signed(harbour: Harbour, *signers: tuple[str, str]) -> Path:
    source = harbour.place.record
    for name, role in signers:
        arguments = sign(harbour, name, role, source)
        assert run(*arguments).code == 0
        source = Path(arguments[6])
    return source


def test_a_record_is_signed_into_a_new_file(harbour: Harbour) -> None:
    before = harbour.place.record.read_bytes()
    first = sign(harbour, "harbour-office", "dealer")
    done = run(*first)
    assert (done.code, done.err) == (0, "")
    second = run(*sign(harbour, "registrar", "witness", Path(first[6])), "--json")
    told = second.json
    assert told["signers"] == ["harbour-office as dealer", "registrar as witness"]
    record = load_record(told["record"])
    assert told["fingerprint"] == record.fingerprint == load_record(harbour.place.record).fingerprint
    assert f"Fingerprint, as before: {record.fingerprint}" in done.out
    assert stat.S_IMODE(Path(told["record"]).stat().st_mode) == 0o644
    assert harbour.place.record.read_bytes() == before
    members = json.loads(Path(told["record"]).read_bytes())
    for entry in members["signatures"]:
        by_hand.verify(entry["card"], entry["signature"], "record", by_hand.signed_of_record(members, entry))
    shown = run("show", told["record"])
    assert f"registrar as witness, card {card('registrar').fingerprint}" in shown.out
    # Shares know the signed record as the one they were dealt with.
    verified = run("verify", *harbour.place.shares, "--record", told["record"])
    assert (verified.code, verified.out.count("intact - ")) == (0, 5)
    assert run("recover", *harbour.place.shares[:3], "--record", told["record"], "--check").code == 0


def test_what_cannot_be_signed_is_refused(harbour: Harbour) -> None:
    record = signed(harbour, ("harbour-office", "dealer"))
    watched = harbour.folder
    again = sign(harbour, "registrar", "dealer", record)
    assert_refused(again, 2, "more than one party signed it as its dealer", "shares show RECORD", watched=watched)
    again[6] = harbour.folder / "x"
    assert_refused([*again[:4], "auditor", *again[5:]], 2, "--as", "auditor", watched=watched)
    assert_refused(sign(harbour, "harbour-office", "dealer"), 5, "never overwritten", watched=watched)
    twice = sign(harbour, "harbour-office", "dealer", record)
    twice[6] = harbour.folder / "x"
    assert_refused(twice, 2, "twice as the same", watched=watched)
    wrong = sign(harbour, "registrar", "witness")[:-1]
    assert_refused([*wrong, *harbour.known("dry-dock")], 4, "the passphrase of registrar is needed", watched=watched)
    given = f"--passphrase-file={harbour.phrase('dry-dock')}"
    assert_refused([*wrong, given], 4, "the passphrase does not open it", watched=watched)
    members = edited(harbour.place.record.read_bytes(), "label", to="Another label")
    harbour.place.record.write_bytes(file_of(members))
    assert_refused(sign(harbour, "registrar", "witness"), 4, "fingerprint does not fit", watched=watched)


def test_a_record_is_trusted_by_whom_it_is_signed(harbour: Harbour) -> None:
    record = signed(harbour, ("harbour-office", "dealer"), ("registrar", "witness"))
    share = harbour.place.shares[0]
    for trusted, code in (
        (["harbour-office"], 0),
        (["registrar"], 0),
        (["auditor-east", "registrar"], 0),
        (["auditor-east"], 4),
        (["auditor-east", "dry-dock"], 4),
    ):
        options = [f"--trust={harbour.card(name)}" for name in trusted]
        for shares in ([share], []):
            done = run("verify", *shares, "--record", record, *options)
            assert (done.code, done.err) == (code, ""), trusted
            assert ("signed by none of the parties you trust" in done.out) is bool(code)
            told = run("verify", *shares, "--record", record, *options, "--json").json
            assert (told["done"], told["exit"]) == (code == 0, code)
            marks = {one["name"]: one["trusted"] for one in told["signatures"]}
            assert marks == {name: name in trusted for name in ("harbour-office", "registrar")}
            assert [one["fingerprint"] for one in told["signatures"]] == [
                card(name).fingerprint for name in ("harbour-office", "registrar")
            ]


def test_a_card_of_the_same_name_is_not_trusted_for_it(harbour: Harbour, tmp_path: Path) -> None:
    """Names prove nothing: another card that says registrar is another party's."""
    record = signed(harbour, ("registrar", "witness"))
    forged = tmp_path / "registrar.card.json"
    forged.write_bytes(new_party("registrar", passphrase("x"), cost=QUICK).card.to_file())
    done = run("verify", "--record", record, "--trust", forged)
    assert done.code == 4
    assert "not among the cards you trust" in done.out


def test_an_unsigned_record_is_trusted_by_nobody(harbour: Harbour) -> None:
    done = run("verify", "--record", harbour.place.record, "--trust", harbour.card("registrar"))
    assert done.code == 4
    assert "--trust asks for a signature" in done.out
    plain = run("verify", "--record", harbour.place.record)
    assert (plain.code, plain.err) == (0, "")
    assert f"The record of {LABEL} agrees with itself" in plain.out
    told = run("verify", "--record", harbour.place.record, "--json").json
    assert (told["signatures"], told["shares"], told["trusted"]) == ([], [], None)


def test_what_is_proved_depends_on_signatures(harbour: Harbour) -> None:
    share, record = harbour.place.shares[0], harbour.place.record
    flat = " ".join(run("verify", share, "--record", record).out.split())
    assert "It does not prove who made that record" in flat
    flat = " ".join(run("verify", share, "--record", signed(harbour, ("registrar", "witness"))).out.split())
    assert "whose card each signer's is" in flat
    assert "--trust tells whether you trust that card" in flat


def test_a_damaged_share_is_damaged_whoever_signed(harbour: Harbour) -> None:
    record, share = signed(harbour, ("registrar", "witness")), harbour.place.shares[0]
    share.write_bytes(share.read_bytes().replace(b'"epoch": 1', b'"epoch": 2'))
    done = run("verify", share, "--record", record, "--trust", harbour.card("registrar"))
    assert (done.code, "damaged - " in done.out) == (4, True)


def test_a_record_with_a_bent_signature_is_refused_before_any_share_is_judged(harbour: Harbour) -> None:
    record = signed(harbour, ("registrar", "witness"))
    record.write_bytes(file_of(edited(record.read_bytes(), "signatures", 0, "role", to="dealer")))
    for arguments in (
        ["verify", *harbour.place.shares, "--record", record],
        ["recover", *harbour.place.shares, "--record", record, *PURPOSE, "--check"],
        ["show", record],
    ):
        assert_refused(arguments, 4, "the signature by registrar does not fit its content")


def test_nothing_to_check_and_no_cards_to_trust_are_refused(harbour: Harbour) -> None:
    assert_refused(["verify"], 2, "there is nothing to check")
    share = harbour.place.shares[0]
    assert_refused(["verify", share, "--trust", harbour.card("registrar")], 2, "there is nothing to check")
    record = harbour.place.record
    assert_refused(["verify", share, "--record", record, "--trust", share], 4, "a party card is wanted here")
    assert_refused(["verify", share, "--record", record, "--trust", "nowhere"], 5, "nowhere", "does not exist")


def test_a_recovery_can_demand_a_trusted_record(harbour: Harbour) -> None:
    base = ["recover", *harbour.place.shares[:3], "--check"]
    record = signed(harbour, ("registrar", "witness"))
    trusted = ["--trust", harbour.card("registrar")]
    assert run(*base, "--record", record, *trusted).code == 0
    words = "signed by a party you trust"
    assert_refused([*base, "--record", record, "--trust", harbour.card("harbour-office")], 4, words)
    assert_refused([*base, "--record", harbour.place.record, *trusted], 4, words, "shares verify --record")
    assert_refused([*base, *trusted], 4, words)
