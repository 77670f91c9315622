"""``shares wrap`` and ``unwrap``, and wrapped shares in ``split``, ``verify``, ``recover`` and ``show``.

Checked against: FORMAT.md, sections 9 and 10, by the opener written from its text alone
(tests/vectors/make/wrapping_v1.py), and by the bare shares and the secret that went in.
"""

from __future__ import annotations

import json
import os
import stat
from pathlib import Path
from typing import Any

import pytest
from cli.harbour import Harbour
from cli.harness import LABEL, NAMES, PURPOSE, SECRET, Place, assert_one_line, assert_refused, files_in, run
from parties import card, edited, file_of, passphrase, unlocked
from strategies import bits_flipped, revealed
from vectors.make import wrapping_v1 as by_hand

from shares.cli import wrap
from shares.custody.presented import load_record
from shares.documents.wrapping import SUITES

NORTH, SOUTH, LIGHT, REGISTRAR, DOCK = NAMES
pytestmark = pytest.mark.usefixtures("quick")


def private(name: str) -> by_hand.Private:
    with unlocked(name) as key:
        return by_hand.Private(revealed(key.content))


def content_of(share: Path) -> bytes:
    return b"".join(map(by_hand.raw, json.loads(share.read_bytes())["rows"]))


def digested(path: Path, *where: Any, to: Any) -> None:
    """Edit a file, its own digest made to fit, as a forger would."""
    members = edited(path.read_bytes(), *where, to=to)
    path.write_bytes(file_of({**members, "digest": by_hand.envelope_digest(members)}))


# wrap.


@pytest.mark.parametrize("suite", ["passphrase", *SUITES])
def test_a_share_is_wrapped_and_unwrapped(harbour: Harbour, suite: str) -> None:
    share, target, again = harbour.place.share(NORTH), harbour.folder / "wrapped", harbour.folder / "again"
    before = share.read_bytes()
    how = ["--passphrase", *harbour.known(NORTH)] if suite == "passphrase" else [f"--for={harbour.card(NORTH)}"]
    how += [] if suite == "passphrase" else [f"--suite={suite}"]
    done = run("wrap", share, "--to", target, *how)
    assert (done.code, done.err) == (0, "")
    words = "wrapped by passphrase" if suite == "passphrase" else f"wrapped for the card {card(NORTH).fingerprint}"
    for told in (f"The share of {NORTH} is {words}", str(target), "read back", f"then destroy {share}"):
        assert told in done.out
    assert stat.S_IMODE(target.stat().st_mode) == 0o600
    assert share.read_bytes() == before
    members = json.loads(target.read_bytes())
    opener = revealed(passphrase(NORTH)) if suite == "passphrase" else private(NORTH)
    assert by_hand.opened(members, opener) == content_of(share)
    opens = harbour.known(NORTH) if suite == "passphrase" else harbour.keys(NORTH)
    done = run("unwrap", target, "--to", again, *opens)
    assert (done.code, done.err.count("\n")) == (0, 2)
    assert "the share is bare now" in done.err
    assert "nothing says who wrapped it" in done.err
    assert f"Opened: the share of {NORTH}, written to {again}." in done.out
    assert stat.S_IMODE(again.stat().st_mode) == 0o600
    assert json.loads(again.read_bytes()) == json.loads(before)
    assert target.read_bytes() == json.dumps(members, indent=2, ensure_ascii=False).encode() + b"\n"


def test_wrap_and_unwrap_as_json(harbour: Harbour) -> None:
    target = harbour.folder / "wrapped"
    share = harbour.place.share(NORTH)
    done = run("wrap", share, "--to", target, "--for", harbour.card(DOCK), "--json")
    assert (done.code, done.err) == (0, "")
    assert done.json == {
        "done": True,
        "exit": 0,
        "share": str(share),
        "wrapped": str(target),
        "custodian": NORTH,
        "how": f"wrapped for the card {card(DOCK).fingerprint}",
    }
    done = run("unwrap", target, "--to", harbour.folder / "again", *harbour.keys(DOCK), "--json")
    told = done.json
    assert (done.code, done.err, told["what"], len(told["cautions"])) == (0, "", f"the share of {NORTH}", 2)


def test_what_cannot_be_wrapped_is_refused(harbour: Harbour) -> None:
    share, target = harbour.place.share(NORTH), harbour.folder / "wrapped"
    start, for_card = ["wrap", share, "--to", target], f"--for={harbour.card(NORTH)}"
    watched = harbour.folder
    assert_refused(start, 2, "exactly one of --passphrase and --for", watched=watched)
    assert_refused([*start, "--passphrase", for_card], 2, "exactly one", watched=watched)
    assert_refused([*start, "--passphrase"], 2, f"no passphrase is given for {NORTH}", watched=watched)
    assert_refused([*start, for_card, "--suite=p256"], 2, "--suite", watched=watched)
    assert_refused(["wrap", harbour.place.record, *start[2:], for_card], 4, "it is a record", watched=watched)
    assert_refused([*start, f"--for={share}"], 4, "a party card is wanted here", watched=watched)
    assert_refused([*start, "--for=nowhere"], 5, "nowhere", watched=watched)
    assert_refused(["wrap", "nowhere", *start[2:], for_card], 5, "nowhere", watched=watched)
    assert_refused(
        ["wrap", harbour.wrap(SOUTH), *start[2:], for_card], 4, "wrapped already", "shares unwrap", watched=watched
    )
    assert_refused([*start[:2], "--to", harbour.place.record, for_card], 5, "never overwritten", watched=watched)
    share.write_bytes(file_of(edited(share.read_bytes(), "label", to="Another label")))
    assert_refused([*start, for_card], 4, str(share), "own digest does not fit", "shares verify", watched=watched)


@pytest.mark.parametrize("how", ["passphrase", "card"])
def test_a_wrapped_share_that_reads_back_changed_is_not_left(
    harbour: Harbour, monkeypatch: pytest.MonkeyPatch, how: str
) -> None:
    """Who then destroyed the bare one would have nothing."""
    real = wrap.read_back
    monkeypatch.setattr(wrap, "read_back", lambda path, *, limit: real(path, limit=limit)[:-9])
    options = ["--passphrase", *harbour.known(NORTH)] if how == "passphrase" else [f"--for={harbour.card(NORTH)}"]
    before = files_in(harbour.folder)
    refused = run("wrap", harbour.place.share(NORTH), "--to", harbour.folder / "wrapped", *options)
    assert_one_line(refused)
    assert refused.code == 4
    assert files_in(harbour.folder) == before


# unwrap.


def test_what_does_not_open_is_refused_and_nothing_is_written(harbour: Harbour) -> None:
    phrase, to_card = harbour.wrap(NORTH), harbour.wrap(SOUTH, SUITES[0])
    watched = harbour.folder
    to = ["--to", harbour.folder / "bare"]
    assert_refused(["unwrap", phrase, *to], 4, f"the passphrase of {NORTH} is needed", watched=watched)
    wrong = f"--passphrase-file={harbour.phrase(DOCK)}"
    assert_refused(["unwrap", phrase, *to, wrong], 4, "the passphrase does not open it", watched=watched)
    fingerprint = card(SOUTH).fingerprint
    assert_refused(["unwrap", to_card, *to], 4, fingerprint, "give it with --key", watched=watched)
    assert_refused(["unwrap", to_card, *to, *harbour.keys(DOCK)], 4, fingerprint, "no party key", watched=watched)
    key = f"--key={harbour.key(SOUTH)}"
    assert_refused(["unwrap", to_card, *to, key], 4, "the party key of south-pier does not open", watched=watched)
    assert_refused(["unwrap", to_card, *to, key, wrong], 4, "the party key of south-pier", watched=watched)
    assert_refused(["unwrap", to_card, *to, f"--key={to_card}"], 4, "a party key is wanted here", watched=watched)
    assert_refused(["unwrap", harbour.place.share(NORTH), *to], 4, "nothing in it is wrapped", watched=watched)
    assert_refused(["unwrap", phrase, "--to", phrase], 5, "never overwritten", watched=watched)
    assert_refused(["unwrap", phrase, *to, "--passphrase-file=nowhere"], 5, "nowhere", watched=watched)


def test_a_damaged_file_is_told_before_any_passphrase_is_read(harbour: Harbour) -> None:
    path = harbour.wrap(NORTH)
    data = path.read_bytes()
    for _, changed in list(bits_flipped(data))[:: len(data) // 4]:
        path.write_bytes(changed)
        refused = run("unwrap", path, "--to", harbour.folder / "bare", "--passphrase-file=nowhere")
        assert_one_line(refused)
        assert refused.code == 4
    assert not (harbour.folder / "bare").exists()


def test_a_forged_file_is_told_though_its_digest_fits(harbour: Harbour) -> None:
    for name, suite in ((NORTH, None), (SOUTH, SUITES[0]), (LIGHT, SUITES[1])):
        path = harbour.wrap(name, suite)
        digested(path, "epoch", to=2)
        arguments = ["unwrap", path, "--to", harbour.folder / "bare", *harbour.keys(name)]
        assert_refused(arguments, 4, "the key is right, but", "use another copy", watched=harbour.folder)


def test_a_file_that_demands_too_much_is_refused_before_anything_is_computed(harbour: Harbour) -> None:
    for member, value in (("memory", (1 << 21) + 1), ("passes", 11), ("lanes", 17)):
        path = harbour.wrap(NORTH)
        digested(path, "wrapping", member, to=value)
        assert_refused(["unwrap", path, "--to", harbour.folder / "bare", *harbour.known(NORTH)], 4, member)
        assert f"{path}: damaged - " in run("verify", path, *harbour.known(NORTH)).out


# split.


def split_arguments(harbour: Harbour, *more: str, cards: tuple[str, ...] = ()) -> list[str]:
    place = Place(harbour.folder / "new")
    place.drop.mkdir(parents=True, exist_ok=True)
    place.key.write_bytes(SECRET)
    return [
        *place.split_arguments(more=[f"--card={harbour.card(name)}" for name in cards]),
        *more,
    ]


@pytest.mark.parametrize("suite", SUITES)
def test_a_set_is_split_for_cards_and_passphrases_and_signed(harbour: Harbour, suite: str) -> None:
    more = [f"--dealer={harbour.key('harbour-office')}", f"--witness={harbour.key(REGISTRAR)}", f"--suite={suite}"]
    more += harbour.known("harbour-office", REGISTRAR, LIGHT)
    done = run(*split_arguments(harbour, *more, cards=(NORTH, SOUTH)))
    assert (done.code, done.err) == (0, "")
    drop = harbour.folder / "new" / "drop"
    kinds = ("wrapped", "practice")
    assert sorted(files_in(drop)) == sorted(f"{name}.{kind}.json" for name in NAMES[:3] for kind in kinds)
    assert {stat.S_IMODE(path.stat().st_mode) for path in drop.iterdir()} == {0o600}
    record = load_record(harbour.folder / "new" / "set" / "record.json")
    assert [(one.card.name, one.role) for one in record.signatures] == [
        ("harbour-office", "dealer"),
        (REGISTRAR, "witness"),
    ]
    for told in (
        f"wrapped for the card {card(NORTH).fingerprint}",
        "wrapped by passphrase",
        f"signed by harbour-office as dealer, {REGISTRAR} as witness",
        "only its custodian can open it",
        "recovered from all 3 quorums",
    ):
        assert told in " ".join(done.out.split())
    contents = {}
    for name in NAMES[:3]:
        members = json.loads((drop / f"{name}.wrapped.json").read_bytes())
        opener = revealed(passphrase(name)) if name == LIGHT else private(name)
        contents[name] = by_hand.opened(members, opener)
        assert members["wrapping"].get("suite", suite) == suite
    assert len(set(contents.values())) == 3
    out = harbour.folder / "out"
    wrapped = [drop / f"{name}.wrapped.json" for name in (SOUTH, LIGHT)]
    opens = [*harbour.keys(SOUTH), *harbour.known(LIGHT)]
    record_file = harbour.folder / "new" / "set" / "record.json"
    done = run("recover", *wrapped, "--record", record_file, *PURPOSE, "--to", out, *opens)
    assert (done.code, done.err, out.read_bytes()) == (0, "", SECRET)


def test_split_as_json_says_how_each_share_is_packed(harbour: Harbour) -> None:
    done = run(*split_arguments(harbour, *harbour.known(SOUTH, LIGHT), "--json", cards=(NORTH,)))
    told = done.json
    assert (done.code, done.err, told["signers"], told["cautions"]) == (0, "", [], [])
    assert told["packed"] == {
        NORTH: f"wrapped for the card {card(NORTH).fingerprint}",
        SOUTH: "wrapped by passphrase",
        LIGHT: "wrapped by passphrase",
    }


def test_one_passphrase_for_several_is_cautioned(harbour: Harbour) -> None:
    given = f"--passphrase-file={harbour.phrase(DOCK)}"
    done = run(*split_arguments(harbour, given, cards=(NORTH,)))
    assert done.code == 0
    assert done.err == (
        "Caution: one passphrase wraps the shares of several custodians: whoever learns it opens them all.\n"
    )
    done = run(*split_arguments(Harbour(harbour.place), "--json", given, cards=(NORTH, SOUTH)))
    assert done.code == 5  # the first set is there


def test_one_passphrase_for_one_needs_no_caution(harbour: Harbour) -> None:
    done = run(*split_arguments(harbour, f"--passphrase-file={harbour.phrase(DOCK)}", cards=(NORTH, SOUTH)))
    assert (done.code, done.err) == (0, "")


def test_a_card_of_another_name_is_given_with_the_custodians(harbour: Harbour) -> None:
    more = [f"--card={NORTH}={harbour.card(DOCK)}", *harbour.known(SOUTH, LIGHT)]
    assert run(*split_arguments(harbour, *more)).code == 0
    members = json.loads((harbour.folder / "new" / "drop" / f"{NORTH}.wrapped.json").read_bytes())
    assert members["wrapping"]["card"] == card(DOCK).fingerprint


def test_what_cannot_be_packed_is_refused_and_nothing_is_written(harbour: Harbour) -> None:
    base = split_arguments(harbour)
    watched = harbour.folder
    dock, north = harbour.card(DOCK), harbour.card(NORTH)
    for more, code, words in (
        ([f"--card={dock}"], 2, ("card is of dry-dock, who is no custodian here", "write NAME=CARD")),
        ([f"--card={north}", f"--card={north}"], 2, ("two cards are given for north-pier",)),
        ([f"--card={north}", f"--card={NORTH}={dock}"], 2, ("two cards are given for north-pier",)),
        ([f"--card={north}", "--plain"], 2, ("--plain writes bare shares, and --card wraps them",)),
        ([f"--card={north}"], 2, ("no passphrase is given for south-pier",)),
        (["--card=nowhere"], 5, ("nowhere", "does not exist")),
        ([f"--card={harbour.key(NORTH)}"], 4, ("a party card is wanted here",)),
        ([f"--card={north}", "--suite=p256"], 2, ("--suite",)),
        (["--plain", f"--dealer={harbour.key(DOCK)}"], 4, ("the passphrase of dry-dock is needed",)),
        (["--plain", f"--dealer={dock}"], 4, ("a party key is wanted here",)),
        (
            ["--plain", f"--witness={harbour.key(DOCK)}", f"--witness={harbour.key(DOCK)}", *harbour.known(DOCK)],
            2,
            ("one party signed it twice as the same",),
        ),
        (
            ["--plain", f"--dealer={harbour.key(DOCK)}", f"--passphrase-file={harbour.phrase(NORTH)}"],
            4,
            ("the passphrase does not open it",),
        ),
    ):
        assert_refused([*base, *more], code, *words, watched=watched)


def test_a_wrapped_share_that_is_there_already_is_kept(harbour: Harbour) -> None:
    arguments = split_arguments(harbour, *harbour.known(*NAMES[:3]))
    path = harbour.folder / "new" / "drop" / f"{SOUTH}.wrapped.json"
    path.write_bytes(b"kept")
    assert_refused(arguments, 5, str(path), "choose another folder", watched=harbour.folder)


# verify and recover.


def test_wrapped_and_bare_shares_are_verified_together(harbour: Harbour) -> None:
    files = [harbour.wrap(NORTH), harbour.wrap(SOUTH, SUITES[0]), harbour.wrap(LIGHT, SUITES[1])]
    files += [harbour.place.share(REGISTRAR)]
    opens = [*harbour.known(NORTH), *harbour.keys(SOUTH, LIGHT)]
    for record in ([], ["--record", harbour.place.record]):
        done = run("verify", *files, *opens, *record)
        assert (done.code, done.err) == (0, "")
        assert done.out.count(": intact - ") == 4
        assert f"{files[1]} ({SOUTH}): intact - " in done.out


def test_a_share_that_is_not_opened_is_told_and_what_to_give(harbour: Harbour) -> None:
    phrase, to_card, bare = harbour.wrap(NORTH), harbour.wrap(SOUTH, SUITES[0]), harbour.place.share(LIGHT)
    done = run("verify", phrase, to_card, bare, "--record", harbour.place.record)
    lines = done.out.splitlines()
    assert (done.code, done.err) == (4, "")
    assert lines[0].startswith(f"{phrase}: not opened - the passphrase of {NORTH} is needed")
    assert lines[1].startswith(f"{to_card}: not opened - it is wrapped for the card {card(SOUTH).fingerprint}")
    assert lines[2].startswith(f"{bare} ({LIGHT}): intact - ")
    assert "Next, for a share not opened: give its passphrase or party key (--passphrase-file, --key)." in lines
    told = run("verify", phrase, to_card, "--json").json["shares"]
    assert [one["status"] for one in told] == ["not opened"] * 2


def test_a_passphrase_file_that_is_missing_is_named_itself(harbour: Harbour) -> None:
    share = harbour.wrap(NORTH)
    for command in (["verify", share], ["recover", share, "--check"]):
        line = assert_refused([*command, "--passphrase-file=nowhere"], 5, "nowhere", "does not exist")
        assert os.fspath(share) not in line


def test_a_damaged_party_key_is_not_the_shares_fault(harbour: Harbour) -> None:
    share, key = harbour.wrap(SOUTH, SUITES[0]), harbour.key(SOUTH)
    key.write_bytes(file_of(edited(key.read_bytes(), "sealed", to=by_hand.b64(bytes(144)))))
    done = run("verify", share, *harbour.keys(SOUTH))
    assert (done.code, ": not opened - the party key of south-pier does not open: " in done.out) == (4, True)


def test_wrapped_shares_recover(harbour: Harbour) -> None:
    files = [harbour.wrap(NORTH), harbour.wrap(SOUTH, SUITES[0]), harbour.wrap(LIGHT, SUITES[1])]
    opens = [*harbour.known(NORTH), *harbour.keys(SOUTH, LIGHT)]
    out = harbour.folder / "out"
    for more in (["--check"], ["--to", out], ["--record", harbour.place.record, *PURPOSE, "--check"]):
        done = run("recover", *files, *opens, *more)
        assert (done.code, done.err) == (0, ""), more
        assert f"from {NORTH}, {SOUTH}, {LIGHT}" in done.out
    assert out.read_bytes() == SECRET
    done = run("recover", *files, *opens, "--", "cat")
    assert (done.code, done.out.encode()) == (0, SECRET)


def test_what_is_not_opened_is_set_aside_and_named(harbour: Harbour) -> None:
    files = [harbour.wrap(NORTH), harbour.wrap(SOUTH, SUITES[0]), *map(harbour.place.share, (LIGHT, DOCK))]
    line = assert_refused(["recover", *files, "--check"], 3, "3 different shares are needed, 2", "not opened")
    assert str(files[0]) in line
    assert str(files[1]) in line
    digested(files[1], "epoch", to=2)
    done = run("recover", *files, "--check", *harbour.known(NORTH), *harbour.keys(SOUTH))
    assert done.code == 0
    assert f"Caution: {files[1]} is damaged: the key is right, but" in done.err


def test_a_wrapped_share_and_its_bare_twin_count_once(harbour: Harbour) -> None:
    files = [harbour.wrap(NORTH), harbour.place.share(NORTH), harbour.place.share(SOUTH)]
    opens = harbour.known(NORTH)
    assert_refused(["recover", *files, *opens, "--check"], 3, "3 different shares are needed, 2 given")
    done = run("verify", *files, *opens)
    assert (done.code, done.out.count("the same share was given before")) == (0, 1)


# recover --for.


@pytest.mark.parametrize("suite", SUITES)
def test_a_secret_leaves_encrypted_to_its_receiver_alone(harbour: Harbour, suite: str) -> None:
    sealed, out = harbour.folder / "sealed", harbour.folder / "out"
    office = "harbour-office"
    base = ["recover", *harbour.place.shares[:3], "--for", harbour.card(office), f"--suite={suite}"]
    done = run(*base, "--to", sealed)
    assert (done.code, done.err) == (0, "")
    assert f"written to {sealed}, encrypted to {office}, card {card(office).fingerprint}" in done.out
    assert stat.S_IMODE(sealed.stat().st_mode) == 0o600
    members = json.loads(sealed.read_bytes())
    assert (members["kind"], members["label"], members["wrapping"]["suite"]) == ("sealed-secret", LABEL, suite)
    assert by_hand.opened(members, private(office))[4:].startswith(SECRET)
    record = ("--record", harbour.place.record)
    done = run("unwrap", sealed, "--to", out, *harbour.keys(office), *record)
    assert (done.code, done.err, out.read_bytes()) == (0, "", SECRET)
    assert f"Opened: the secret {LABEL}, written to {out}." in done.out
    assert stat.S_IMODE(out.stat().st_mode) == 0o600
    assert_refused(["unwrap", sealed, "--to", out, *harbour.keys(office)], 5, "never overwritten")
    other = harbour.folder / "other"
    words = (card(office).fingerprint, "no party key of that card")
    assert_refused(["unwrap", sealed, "--to", other, *harbour.keys(DOCK)], 4, *words, watched=harbour.folder)
    digested(sealed, "label", to="Another label")
    words = ("the key is right, but",)
    assert_refused(["unwrap", sealed, "--to", other, *harbour.keys(office)], 4, *words, watched=harbour.folder)


def test_for_a_receiver_a_file_is_needed_and_a_card(harbour: Harbour) -> None:
    base = ["recover", *harbour.place.shares[:3], "--for", harbour.card("harbour-office")]
    watched = harbour.folder
    assert_refused([*base, "--check"], 2, "--for goes with --to FILE", watched=watched)
    assert_refused([*base, "--", "cat"], 2, "--for goes with --to FILE", watched=watched)
    to = ["--to", harbour.folder / "out"]
    shares = harbour.place.shares
    assert_refused(["recover", *shares, "--for", shares[0], *to], 4, "a party card is wanted here", watched=watched)
    assert_refused(["recover", *shares, "--for", "nowhere", *to], 5, "nowhere", watched=watched)
    assert_refused(["recover", *shares[:2], "--for", harbour.card(DOCK), *to], 3, "3 different", watched=watched)


# show.


def test_show_tells_how_a_file_is_wrapped_and_opens_nothing(harbour: Harbour) -> None:
    sealed = harbour.folder / "sealed"
    run("recover", *harbour.place.shares[:3], "--for", harbour.card(DOCK), "--to", sealed)
    for path, kind, how in (
        (
            harbour.wrap(NORTH),
            "wrapped share (its rows are sealed)",
            "by passphrase (Argon2id, 0 MiB, 1 passes, 1 lanes)",
        ),
        (
            harbour.wrap(SOUTH, "x25519"),
            "wrapped share (its rows are sealed)",
            f"for the card {card(SOUTH).fingerprint} (x25519)",
        ),
        (sealed, "sealed secret (for one receiver)", f"for the card {card(DOCK).fingerprint} (mlkem768-x25519)"),
    ):
        done = run("show", path)
        assert (done.code, done.err) == (0, "")
        assert kind in done.out
        assert how in done.out
        assert LABEL in done.out
        assert "fits" in done.out
        told = run("show", path, "--json").json
        assert told["wrapped"] == how
        assert not {"sealed", "rows", "wrapping"} & set(told)
        path.write_bytes(file_of(edited(path.read_bytes(), "label", to="Another label")))
        assert "does not fit: the file was damaged or edited" in run("show", path).out


def test_a_card_without_usable_keys_wraps_nothing(harbour: Harbour) -> None:
    """Its maker signed it all the same; the refusal comes when it is encrypted to."""
    private_keys = private(DOCK)
    members = edited(harbour.card(DOCK).read_bytes(), "x25519", to=by_hand.b64(bytes(32)))
    members["fingerprint"] = by_hand.fingerprint("party-card", members)
    body = by_hand.without(members, "signature")
    members["signature"] = by_hand.b64(private_keys.signing.sign(by_hand.signed("party-card", body)))
    harbour.card(DOCK).write_bytes(file_of(members))
    assert run("party", "show", harbour.card(DOCK)).code == 0
    arguments = ["wrap", harbour.place.share(DOCK), "--to", harbour.folder / "x", "--for", harbour.card(DOCK)]
    assert_refused(arguments, 4, "holds no usable public keys", watched=harbour.folder)
    assert_refused(
        split_arguments(harbour, f"--card={NORTH}={harbour.card(DOCK)}", *harbour.known(SOUTH, LIGHT)),
        4,
        "holds no usable public keys",
    )
    assert list((harbour.folder / "new" / "drop").iterdir()) == []
