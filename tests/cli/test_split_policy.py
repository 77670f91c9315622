"""A policy splits as the short options do, and more: groups, cards, strictness, acknowledgements.

Source: the policies are this project's own demo world (examples/policies).
"""

from __future__ import annotations

import hashlib
import itertools
import stat
from pathlib import Path

import pytest
from cli.harness import PURPOSE, SECRET, Place, assert_refused, run

from shares.custody.parties import write_party
from shares.documents.party import PartyKey, new_party
from shares.documents.record import Record
from shares.documents.wrapping import Cost
from shares.memory import Secret

POLICY = Path(__file__).resolve().parents[2] / "examples" / "policies" / "tide-archive.toml"
OPERATORS = ("north-pier", "south-pier", "light-house")
AUDITORS = ("auditor-east", "auditor-west")
EVERYONE = (*OPERATORS, "registrar", *AUDITORS)


@pytest.fixture
def place(tmp_path: Path) -> Place:
    return Place.make(tmp_path / "place")


def split(place: Place, policy: Path = POLICY, *more: str | Path) -> list[str | Path]:
    return ["split", place.key, "--policy", policy, "--set", place.set, "--deliver", place.drop, *more]


def party(place: Place, name: str) -> PartyKey:
    """A party whose files lie in the place's folder; its passphrase is its name."""
    key = new_party(name, Secret.of(name.encode()), cost=Cost(memory=8, passes=1, lanes=1))
    write_party(key, place.folder)
    (place.folder / f"{name}.passphrase").write_text(name)
    return key


def test_the_policy_is_copied_privately_and_its_digest_recorded(place: Place) -> None:
    done = run(*split(place, POLICY, "--plain"))
    assert (done.code, "north-pier, south-pier, light-house; and" in done.out) == (0, True)
    copy = place.set / "policy.toml"
    assert copy.read_bytes() == POLICY.read_bytes()
    assert stat.S_IMODE(copy.stat().st_mode) == 0o600
    record = Record.parse(place.record.read_bytes())
    assert record.policy == hashlib.sha256(POLICY.read_bytes()).digest()
    assert record.label == "Tide archive backup root"
    assert "harbour master" not in place.record.read_text()  # Who reports to whom stays in the policy.


def test_every_set_of_custodians_recovers_exactly_when_the_rule_says_so(place: Place) -> None:
    """All 63 sets of six custodians, against the rule said anew in Python: brute force."""
    assert run(*split(place, POLICY, "--plain")).code == 0
    for size in range(1, 7):
        for chosen in itertools.combinations(EVERYONE, size):
            operators = sum(name in OPERATORS for name in chosen) >= 2
            oversight = "registrar" in chosen or set(AUDITORS) <= set(chosen)
            done = run("recover", *map(place.share, chosen), "--record", place.record, *PURPOSE, "--check")
            assert (chosen, done.code) == (chosen, 0 if operators and oversight else 3)


def test_the_policy_says_what_the_options_say(place: Place) -> None:
    for option in ("--need=2", "--label=x", "--custodian=registrar", "--polynomial=0x11d"):
        assert_refused(split(place, POLICY, "--plain", option), 2, "the policy says what", watched=place.folder)
    bare = ["split", place.key, "--set", place.set, "--deliver", place.drop, "--plain"]
    assert_refused(bare, 2, "--need, --label and each --custodian, or --policy", watched=place.folder)


def test_cards_come_from_the_policy_and_from_options(place: Place) -> None:
    keys = {name: party(place, name) for name in ("north-pier", "registrar")}
    text = POLICY.read_text().replace('name = "north-pier"\n', 'name = "north-pier"\ncard = "north-pier.card.json"\n')
    policy = place.folder / "policy.toml"
    policy.write_text(text)
    passphrase = place.folder / "registrar.passphrase"
    told = run(
        *split(place, policy, "--card", place.folder / "registrar.card.json", "--passphrase-file", passphrase, "--json")
    ).json
    assert told["packed"]["north-pier"] == f"wrapped for the card {keys['north-pier'].card.fingerprint}"
    assert told["packed"]["registrar"] == f"wrapped for the card {keys['registrar'].card.fingerprint}"
    assert told["packed"]["south-pier"] == "wrapped by passphrase"
    wrapped = [place.drop / f"{name}.wrapped.json" for name in ("north-pier", "south-pier", "registrar")]
    opening = [
        *("--key", place.folder / "north-pier.key.json", "--passphrase-file", place.folder / "north-pier.passphrase"),
        *("--key", place.folder / "registrar.key.json", "--passphrase-file", passphrase),
    ]
    out = place.folder / "out"
    assert run("recover", *wrapped, *opening, "--record", place.record, *PURPOSE, "--to", out).code == 0
    assert out.read_bytes() == SECRET


def test_a_strict_policy_with_a_serious_finding_is_refused(place: Place) -> None:
    policy = place.folder / "policy.toml"
    policy.write_text(POLICY.read_text().replace('person = "operator of the north pier"', 'person = "registrar"'))
    moved = policy.read_text().replace('person = "operator of the south pier"', 'person = "registrar"')
    policy.write_text(moved)
    assert_refused(split(place, policy, "--plain"), 4, "strict", "shares plan", watched=place.folder)
    policy.write_text(moved.replace("strict = true", "strict = false"))
    done = run(*split(place, policy, "--plain"))
    assert (done.code, "Caution: serious: " in done.err) == (0, True)


def test_one_card_for_several_custodians(place: Place) -> None:
    """One party key would open a quorum, however many people the policy names."""
    party(place, "north-pier")
    text = POLICY.read_text()
    for name in EVERYONE:
        text = text.replace(f'name = "{name}"\n', f'name = "{name}"\ncard = "north-pier.card.json"\n')
    policy = place.folder / "policy.toml"
    policy.write_text(text)
    assert_refused(split(place, policy), 4, "One card is given for north-pier, south-pier", watched=place.folder)
    policy.write_text(text.replace("strict = true", "strict = false"))
    done = run(*split(place, policy))
    assert done.code == 0
    assert "Caution: serious: One card is given for north-pier, south-pier" in done.err
    assert "The card of registrar is in the name of north-pier" in done.err


def test_a_passphrase_for_nobody_is_refused(place: Place) -> None:
    """A slip in a name once wrapped the share under another passphrase than its custodian had."""
    (place.folder / "a").write_text("a passphrase made up for all\n")
    (place.folder / "b").write_text("the passphrase of one alone\n")
    given = ["--passphrase-file", place.folder / "a", "--passphrase-file", f"nort-pier={place.folder / 'b'}"]
    assert_refused(split(place, POLICY, *given), 2, "nort-pier", "north-pier", watched=place.folder)


def test_a_broken_policy_names_the_key_or_the_line(place: Place) -> None:
    policy = place.folder / "policy.toml"
    for old, new, words in (
        ('"light-house"]', '"lighthouse"]', "group.operators.from[2] names no custodian"),
        ("need = 2", 'need = "2"', "need"),
        ("[rule]", "[rule", "line "),
    ):
        policy.write_text(POLICY.read_text().replace(old, new))
        assert_refused(split(place, policy, "--plain"), 4, words, watched=place.folder)


@pytest.fixture
def dutiful(place: Place) -> tuple[Place, Path, list[str | Path]]:
    """A policy that asks for acknowledgements, and one from everyone: by hand, or signed by those who have a card."""
    policy = place.folder / "policy.toml"
    text = POLICY.read_text().replace("strict = true", "strict = true\nacknowledgement = true")
    policy.write_text(text.replace('name = "registrar"\n', 'name = "registrar"\ncard = "registrar.card.json"\n'))
    party(place, "registrar")
    (place.folder / "scan").write_bytes(b"signed by hand")
    given: list[str | Path] = []
    for name in EVERYONE:
        how = ["--custodian", name, "--form", place.folder / "scan"]
        if name == "registrar":
            secret = place.folder / "registrar.passphrase"
            how = ["--key", place.folder / "registrar.key.json", "--passphrase-file", secret]
        target = place.folder / f"{name}.ack.json"
        done = run("acknowledge", "--label", "Tide archive backup root", *how, "--to", target)
        assert (done.code, name in done.out) == (0, True)
        given += ["--acknowledged", target]
    return place, policy, given


def test_with_all_acknowledgements_the_shares_are_delivered(dutiful: tuple[Place, Path, list[str | Path]]) -> None:
    place, policy, given = dutiful
    done = run(*split(place, policy, "--plain", *given))
    assert (done.code, done.out.count("Duties accepted by ")) == (0, len(EVERYONE))
    assert "Duties accepted by registrar: by registrar, card " in done.out
    assert sorted(path.stem for path in (place.set / "acknowledgements").iterdir()) == sorted(EVERYONE)


def test_no_share_is_delivered_to_whoever_has_none(dutiful: tuple[Place, Path, list[str | Path]]) -> None:
    place, policy, given = dutiful
    assert_refused(split(place, policy, "--plain"), 4, "no acknowledgement", "auditor-west", watched=place.folder)
    assert_refused(split(place, policy, "--plain", *given[2:]), 4, "north-pier", watched=place.folder)
    assert_refused(split(place, policy, "--plain", *given, *given[:2]), 2, "two acknowledgements", watched=place.folder)


@pytest.mark.parametrize("change", ["label", "custodian", "duties", "signer"])
def test_an_acknowledgement_of_something_else_does_not_count(
    dutiful: tuple[Place, Path, list[str | Path]], change: str
) -> None:
    place, policy, given = dutiful
    last, registrar = place.folder / "auditor-west.ack.json", place.folder / "registrar.ack.json"
    words = {"label": "label", "custodian": "no custodian", "duties": "duties", "signer": "card"}[change]
    if change == "label":
        last.write_text(last.read_text().replace("Tide archive backup root", "Another"))
    elif change == "custodian":
        last.write_text(last.read_text().replace('"auditor-west"', '"auditor-north"'))
    elif change == "duties":
        last.write_text(last.read_text().replace("I check it", "I never check it"))
    else:
        forger = place.folder / "forger"
        forger.mkdir()
        other = Place(forger)
        party(other, "registrar")
        registrar.unlink()
        how = ["--key", forger / "registrar.key.json", "--passphrase-file", forger / "registrar.passphrase"]
        run("acknowledge", "--label", "Tide archive backup root", *how, "--to", registrar)
    assert_refused(split(place, policy, "--plain", *given), 4, "does not count", words, watched=place.folder)


def test_a_changed_signed_acknowledgement_is_no_document(dutiful: tuple[Place, Path, list[str | Path]]) -> None:
    place, policy, given = dutiful
    path = place.folder / "registrar.ack.json"
    path.write_text(path.read_text().replace("I check it", "I never check it"))
    assert_refused(split(place, policy, "--plain", *given), 4, "its signature does not fit", watched=place.folder)
    assert "signature" in run("show", path).err
