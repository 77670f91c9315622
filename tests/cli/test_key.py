"""``shares key deal``, ``show`` and ``verify``, as people and scripts use them.

Checked against: ``openssl`` and ``ssh-keygen``, which read what is exported, and make the key that is imported.
"""

from __future__ import annotations

import json
import subprocess
from pathlib import Path

import pytest
from cli.harness import assert_refused, files_in, run, with_json
from cli.keyed import AUDITOR, LABEL, OFFICE, Keyed

from shares.documents.key_share import KeyShare

NAMES = ("north-pier", "south-pier", "light-house")


def tool(*words: str | Path, stdin: bytes = b"") -> str:
    done = subprocess.run(words, input=stdin, capture_output=True, check=False)
    assert done.returncode == 0, done.stderr
    return done.stdout.decode()


@pytest.fixture(scope="module")
def once(tmp_path_factory: pytest.TempPathFactory) -> Keyed:
    return Keyed.make(tmp_path_factory.mktemp("keyed") / "harbour").dealt()


@pytest.fixture
def keyed(once: Keyed, tmp_path: Path) -> Keyed:
    """A key dealt 2 of 3, to be damaged at will."""
    return once.copy(tmp_path / "harbour")


@pytest.fixture
def bare(tmp_path: Path) -> Keyed:
    """Parties, and no key."""
    return Keyed.make(tmp_path / "bare")


def test_deal_by_hand_says_what_was_done_and_what_to_be_careful_of(bare: Keyed) -> None:
    done = run(*bare.deal_arguments())
    record = bare.record
    assert done.code == 0
    for words in (f"Dealt: {LABEL}. Any 2 of 3 custodians use it.", record.fingerprint, "Checked: ", "Next: "):
        assert words in done.out
    assert "Caution: this machine has held the whole key" in done.err
    assert all(str(bare.own(name)) in done.out for name in NAMES)


def test_deal_by_script_tells_the_same(bare: Keyed) -> None:
    done = run(*bare.deal_arguments(), "--json")
    assert (done.code, done.err) == (0, "")
    record, told = bare.record, done.json
    assert told["done"] is True
    assert told["public_key"] == record.public_key.encode().hex()
    assert told["fingerprint"] == record.fingerprint
    assert told["custodians"] == {name: str(bare.own(name)) for name in NAMES}
    assert len(told["cautions"]) == 1


def test_each_share_is_for_its_custodian_alone(keyed: Keyed) -> None:
    for name in NAMES:
        share = KeyShare.parse((keyed.own(name) / "share.json").read_bytes())
        assert (share.custodian, share.wrapping.method) == (name, "card")
        done = run("key", "verify", keyed.own(name), *keyed.as_(name, "--key"))
        assert (done.code, f"The key share of {name} holds" in done.out) == (0, True)
        other = next(one for one in NAMES if one != name)
        assert_refused(["key", "verify", keyed.own(name), *keyed.as_(other, "--key")], 4, "wrapped for the card")


def test_an_imported_key_stays_what_it_was(bare: Keyed) -> None:
    pem, words = bare.path("old.pem"), bare.path("old.passphrase")
    words.write_text("made up\n")
    for encrypted in (False, True):
        pem.unlink(missing_ok=True)
        more = ["-aes256", "-pass", f"file:{words}"] if encrypted else []
        tool("openssl", "genpkey", "-algorithm", "ed25519", *more, "-out", pem)
        before = tool("openssl", "pkey", "-in", pem, "-passin", f"file:{words}", "-pubout")
        target, made = bare.path(f"key-{encrypted}"), bare.path(f"made-{encrypted}")
        made.mkdir()
        changes: dict[str, object] = {"import": pem, "key-folder": target, "deliver": made}
        arguments = bare.deal_arguments(**changes)
        if encrypted:
            assert_refused(arguments, 4, "passphrase of import is needed", watched=bare.folder)
            wrong = f"--passphrase-file=import={bare.path('north-pier.passphrase')}"
            assert_refused([*arguments, wrong], 4, "does not open the private key", watched=bare.folder)
        done = run(*arguments, f"--passphrase-file=import={words}")
        assert done.code == 0
        assert "until the last of them is destroyed" in done.err
        assert run("key", "show", target, "--pem", bare.path(f"{encrypted}.pem")).code == 0
        assert bare.path(f"{encrypted}.pem").read_text() == before


def test_what_is_no_key_is_not_imported(bare: Keyed) -> None:
    pem = bare.path("other.pem")
    for algorithm, words in (("x25519", "another kind"), ("nothing", "no private key in PEM")):
        pem.unlink(missing_ok=True)
        if algorithm == "nothing":
            pem.write_bytes(b"no key")
        else:
            tool("openssl", "genpkey", "-algorithm", algorithm, "-out", pem)
        assert_refused(bare.deal_arguments(**{"import": pem}), 4, words, watched=bare.folder)
    assert_refused(bare.deal_arguments(**{"import": bare.path("missing.pem")}), 5, "missing.pem", watched=bare.folder)


@pytest.mark.parametrize(
    ("changes", "code", "words"),
    [
        ({"need": 1}, 2, "2 to 3 can be needed, not 1"),
        ({"need": 4}, 2, "2 to 3 can be needed, not 4"),
        ({"label": "a\nb"}, 2, "label"),
        ({"deliver": "missing"}, 5, "is not there"),
        ({"deliver": "dry-dock=made"}, 2, "--deliver"),
        ({"custodian": "harbour-office.key.json"}, 4, "a party card is wanted"),
    ],
)
def test_what_cannot_be_is_refused_before_anything_is_made(
    bare: Keyed, changes: dict[str, object], code: int, words: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(bare.folder)
    assert_refused(bare.deal_arguments(**changes), code, words, watched=bare.folder)


def test_a_passphrase_for_nobody_is_a_slip(bare: Keyed) -> None:
    arguments = [*bare.deal_arguments(), bare.phrase("north-pier")]
    assert_refused(arguments, 2, "north-pier", watched=bare.folder)


def test_a_second_key_goes_to_another_place(keyed: Keyed) -> None:
    assert_refused(keyed.deal_arguments(), 5, "of another key", watched=keyed.folder)


def test_show_exports_what_others_read(keyed: Keyed) -> None:
    pem, ssh, x25519 = (keyed.path(name) for name in ("k.pem", "k.pub", "x.pem"))
    done = run("key", "show", keyed.key, "--pem", pem, "--openssh", ssh, "--x25519-pem", x25519, "--json")
    assert (done.code, done.json["written"]) == (0, [str(pem), str(ssh), str(x25519)])
    public_key = keyed.record.public_key.encode().hex()
    assert done.json["public_key"] == public_key
    read = tool("openssl", "pkey", "-pubin", "-in", pem, "-text", "-noout")
    assert public_key in read.replace(":", "").replace(" ", "").replace("\n", "")
    assert "ED25519" in tool("ssh-keygen", "-l", "-f", ssh)
    assert "X25519" in tool("openssl", "pkey", "-pubin", "-in", x25519, "-text", "-noout")
    # The same from the record alone, and nothing that is there is written over.
    by_hand = run("key", "show", keyed.key / "record.json")
    assert (by_hand.code, by_hand.out) == (0, run("key", "show", keyed.own("north-pier")).out)
    assert_refused(["key", "show", keyed.key, "--pem", pem], 5, "never overwritten", watched=keyed.folder)


def test_two_public_keys_do_not_go_to_one_file(keyed: Keyed) -> None:
    same = ["key", "show", keyed.key, "--pem", keyed.path("same"), "--x25519-pem", f"{keyed.folder}/./same"]
    assert_refused(same, 2, "one file", watched=keyed.folder)


def test_verify_the_record_alone_against_what_is_known(keyed: Keyed) -> None:
    pem, office, auditor = keyed.path("k.pem"), keyed.path(f"{OFFICE}.card.json"), keyed.path(f"{AUDITOR}.card.json")
    assert run("key", "show", keyed.key, "--pem", pem).code == 0
    for source in (keyed.key, keyed.key / "record.json"):
        done = run("key", "verify", source, "--public", pem, "--trust", office)
        assert done.code == 0
        assert "It proves nothing of any key share" in " ".join(done.out.split())
    assert_refused(["key", "verify", keyed.key, "--trust", auditor], 4, "none of the parties you trust")
    tool("openssl", "genpkey", "-algorithm", "ed25519", "-out", keyed.path("o.key"))
    keyed.path("o.pem").write_text(tool("openssl", "pkey", "-in", keyed.path("o.key"), "-pubout"))
    assert_refused(["key", "verify", keyed.key, "--public", keyed.path("o.pem")], 4, "another key")


def test_verify_says_what_it_has_not_looked_at(keyed: Keyed) -> None:
    closed = run("key", "verify", keyed.own("north-pier"), "--json").json
    assert (closed["opened"], closed["custodian"]) == (False, "north-pier")
    assert "It was not opened" in closed["proves"]
    by_hand = run("key", "verify", keyed.own("north-pier")).out
    assert by_hand.startswith("The key share of north-pier names this record, and was not opened: ")
    assert " holds" not in by_hand
    share = keyed.own("north-pier") / "share.json"
    assert_refused(["key", "verify", share], 2, "--record")
    done = run(
        "key", "verify", share, "--record", keyed.key / "record.json", *keyed.as_("north-pier", "--key"), "--json"
    )
    assert done.json["opened"] is True
    assert_refused(["key", "verify", keyed.key, *keyed.as_(OFFICE, "--key")], 2, "no key share here")


def test_damage_and_exchange_are_found(keyed: Keyed) -> None:
    own = keyed.own("north-pier") / "share.json"
    members = json.loads(own.read_text())
    whole = own.read_bytes()
    own.write_text(json.dumps(members | {"label": "Another key"}))
    assert_refused(["key", "verify", keyed.own("north-pier")], 4, "damaged")
    own.write_bytes((keyed.own("south-pier") / "share.json").read_bytes())
    assert_refused(
        ["key", "verify", keyed.own("north-pier"), *keyed.as_("north-pier", "--key")], 4, "wrapped for the card"
    )
    own.write_bytes(whole)
    record = keyed.own("north-pier") / "record.json"
    record.write_bytes(record.read_bytes().replace(b"Harbour release", b"Harbour RELEASE"))
    assert_refused(["key", "verify", keyed.own("north-pier")], 4, "fingerprint does not fit")


def test_the_journal_of_a_key_is_shown_and_verified(keyed: Keyed) -> None:
    for folder in (keyed.key, keyed.own("north-pier")):
        assert "key dealt, epoch 1" in run("journal", "show", folder).out
        told = run("journal", "verify", folder, "--json")
        assert (told.code, told.json["problems"], told.json["label"]) == (0, [], LABEL)
        assert run("journal", "head", folder).code == 0
    # Another key's record beside it, and a journal that tells of no birth.
    other = Keyed.make(keyed.folder / "other").dealt()
    (keyed.key / "record.json").write_bytes((other.key / "record.json").read_bytes())
    assert run("journal", "verify", keyed.key).code == 4
    (keyed.own("south-pier") / "journal.jsonl").write_bytes(b"")
    begun_later = run("journal", "verify", keyed.own("south-pier"), "--json")
    assert [one["breaks"] for one in begun_later.json["problems"]] == [False]


def test_other_commands_say_where_to_turn(keyed: Keyed) -> None:
    share, record = keyed.own("north-pier") / "share.json", keyed.key / "record.json"
    told = run("show", share, "--json").json
    assert (told["kind"], told["custodian"], told["need"]) == ("key-share", "north-pier", 2)
    assert run("show", record, "--json").json["fingerprint"] == keyed.record.fingerprint
    assert "`shares key verify`" in run("show", share).out
    assert "`shares key show`" in run("show", record).out
    assert_refused(["verify", share, "--record", record], 4, "shares key")
    shares = [keyed.own(name) / "share.json" for name in NAMES]
    line = assert_refused(["recover", *shares, "--check"], 3, "shares key", *map(str, shares))
    assert line.count("shares key") == 1
    assert_refused(["key", "show", keyed.folder], 5, "record.json")
    assert_refused(["key", "commit", keyed.folder, "--to=c", *keyed.as_(NAMES[0], "--key")], 5, "is no folder of a key")


def test_nothing_secret_is_printed_or_left_in_the_open(bare: Keyed) -> None:
    """The seed of an imported key: raw, hexadecimal or base64, in no output and no file but its own."""
    pem = bare.path("old.pem")
    tool("openssl", "genpkey", "-algorithm", "ed25519", "-out", pem)
    seed = bytes.fromhex(
        "".join(
            tool("openssl", "pkey", "-in", pem, "-text", "-noout").split("priv:")[1].split("pub:")[0].split()
        ).replace(":", "")
    )
    assert len(seed) == 32
    body = pem.read_text().splitlines()[1][-40:]
    told = ""
    for arguments in (bare.deal_arguments(**{"import": pem}), bare.deal_arguments(**{"import": pem})):
        done = run(*with_json(arguments))
        told += done.out + done.err
    assert seed.hex() not in told
    for name, (_, content) in files_in(bare.folder).items():
        if content is not None and name != "old.pem":
            assert seed not in content
            assert seed.hex().encode() not in content
            assert body.encode() not in content
