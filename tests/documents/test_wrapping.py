"""Wrapping: content comes back by what it was wrapped for, and everything else is refused for the right reason.

Checked against: RFC 9106, section 5 (Argon2id; tests/vectors/rfc9106_argon2.json); RFC 9180, appendix A
(tests/vectors/rfc9180_hpke_x25519_base.json); FORMAT.md, section 9, by the opener that is written from its text alone
(tests/vectors/make/wrapping_v1.py), and by the samples made with it (tests/vectors/wrapped_v1.json).
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from cryptography.exceptions import InvalidTag, UnsupportedAlgorithm
from cryptography.hazmat.primitives import hpke
from cryptography.hazmat.primitives.asymmetric.mlkem import MLKEM768PrivateKey
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PrivateKey, X25519PublicKey
from cryptography.hazmat.primitives.ciphers.aead import AESGCM, ChaCha20Poly1305
from hypothesis import given, settings
from hypothesis import strategies as st
from parties import QUICK
from strategies import octets, revealed
from vectors.make import wrapping_v1 as by_hand

from shares import memory
from shares.documents import wrapping
from shares.documents.party import PartyCard, PartyKey
from shares.documents.sealed_secret import SealedSecret
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import (
    MAX_LANES,
    MAX_MEMORY,
    MAX_PASSES,
    SUITES,
    TAG,
    ByCard,
    ByPassphrase,
    Cost,
    Envelope,
    Recipient,
    RecipientKey,
    card_sealer,
    open_by_card,
    open_by_passphrase,
    passphrase_sealer,
)
from shares.errors import SharesError, VerificationError, WrongKeyError
from shares.memory import Secret

VECTORS = Path(__file__).parents[1] / "vectors"
CONTENT = b"not a real key, made up for a test"
BOUND = b"what it is bound to"
PASSPHRASE = b"made up, and long enough"
CURVE, LATTICE = X25519PrivateKey.generate(), MLKEM768PrivateKey.generate()
OWN = RecipientKey("the card", CURVE, LATTICE)
TO = Recipient("the card", CURVE.public_key().public_bytes_raw(), LATTICE.public_key().public_bytes_raw())
FINGERPRINT = "-".join(["ABCD"] * 8)


def by_passphrase(content: bytes = CONTENT, passphrase: bytes = PASSPHRASE) -> tuple[ByPassphrase, bytes]:
    made, sealed = passphrase_sealer(Secret.of(passphrase), QUICK)(Secret.of(content), BOUND)
    assert isinstance(made, ByPassphrase)
    return made, sealed


def for_card(suite: Any = SUITES[0], content: bytes = CONTENT) -> tuple[ByCard, bytes]:
    to = Recipient(FINGERPRINT, TO.x25519, TO.mlkem768)
    made, sealed = card_sealer(to, suite)(Secret.of(content), BOUND)
    assert isinstance(made, ByCard)
    return made, sealed


OWNER = RecipientKey(FINGERPRINT, CURVE, LATTICE)

# What comes back.


@given(octets(0, 300), octets(1, 64), octets(0, 40))
def test_content_comes_back_by_its_passphrase(content: bytes, passphrase: bytes, bound: bytes) -> None:
    made, sealed = passphrase_sealer(Secret.of(passphrase), QUICK)(Secret.of(content), bound)
    assert isinstance(made, ByPassphrase)
    assert len(sealed) == len(content) + TAG
    assert revealed(open_by_passphrase(made, sealed, bound, Secret.of(passphrase))) == content


@pytest.mark.parametrize("suite", SUITES)
@settings(max_examples=30)
@given(content=octets(0, 300), bound=octets(0, 40))
def test_content_comes_back_by_the_key_of_the_card(suite: Any, content: bytes, bound: bytes) -> None:
    to = Recipient(FINGERPRINT, TO.x25519, TO.mlkem768)
    made, sealed = card_sealer(to, suite)(Secret.of(content), bound)
    assert isinstance(made, ByCard)
    assert (made.suite, made.card, len(sealed)) == (suite, FINGERPRINT, len(content) + TAG)
    assert revealed(open_by_card(made, sealed, bound, OWNER)) == content


def test_the_default_is_the_hybrid_suite() -> None:
    made, _ = card_sealer(Recipient(FINGERPRINT, TO.x25519, TO.mlkem768))(Secret.of(CONTENT), BOUND)
    assert made.public("suite") == {"suite": "mlkem768-x25519"}
    # FIPS 203, table 3: a ciphertext of 1,088 bytes; then the curve's 32 and the encrypted key of 32 with its tag.
    assert len(by_hand.raw(made.public("key")["key"])) == 1088 + 32 + 32 + 16


def test_the_default_cost_is_the_second_recommendation_of_rfc_9106() -> None:
    """RFC 9106, section 4: t = 3, p = 4, m = 2^16 KiB."""
    assert Cost() == Cost(memory=2**16, passes=3, lanes=4)
    made, sealed = passphrase_sealer(Secret.of(PASSPHRASE))(Secret.of(CONTENT), BOUND)
    assert made.public("memory", "passes", "lanes") == {"memory": 65_536, "passes": 3, "lanes": 4}
    assert isinstance(made, ByPassphrase)
    assert revealed(open_by_passphrase(made, sealed, BOUND, Secret.of(PASSPHRASE))) == CONTENT


def test_nothing_is_drawn_twice() -> None:
    """One key seals one content: what was wrapped twice has nothing in common."""
    for make in (by_passphrase, for_card):
        found = [make() for _ in range(20)]
        assert len({sealed for _, sealed in found}) == 20
        assert len({made.commitment for made, _ in found}) == 20
    assert len({by_passphrase()[0].salt for _ in range(20)}) == 20


# Against the outside.


def test_argon2id_is_that_of_rfc_9106_without_secret_and_associated_data() -> None:
    """RFC 9106, section 5.3, as far as a passphrase is stretched: the file says how the tag without both was had."""
    vector = json.loads((VECTORS / "rfc9106_argon2.json").read_text())["no_secret_no_ad"]
    cost = Cost(vector["memory_kib"], vector["passes"], vector["parallelism"])
    out = wrapping._stretch(Secret.of(bytes.fromhex(vector["password"])), bytes.fromhex(vector["salt"]), cost)
    assert revealed(out).hex() == vector["tag"]


@pytest.mark.parametrize(
    "vector",
    json.loads((VECTORS / "rfc9180_hpke_x25519_base.json").read_text())["vectors"],
    ids=lambda vector: vector["suite"],
)
def test_hpke_by_hand_gives_the_values_of_rfc_9180(vector: dict[str, Any]) -> None:
    """RFC 9180, appendix A: so the opener by hand may judge the library, which takes no associated data."""
    found = {name: bytes.fromhex(value) for name, value in vector.items() if name in ("skRm", "pkRm", "enc", "info")}
    exchanged = X25519PrivateKey.from_private_bytes(found["skRm"]).exchange(
        X25519PublicKey.from_public_bytes(found["enc"])
    )
    shared = by_hand.dhkem_secret(exchanged, found["enc"], found["pkRm"])
    assert shared.hex() == vector["shared_secret"]
    schedule = by_hand.key_schedule(vector["kem_id"], shared, found["info"], vector["aead_id"])
    length = len(vector["key"]) // 2
    if length == 32:
        assert {name: value.hex() for name, value in schedule.items()} == {name: vector[name] for name in schedule}
        aead: Any = AESGCM if vector["aead_id"] == 2 else ChaCha20Poly1305
        first = vector["encryptions"][0]
        plain = aead(schedule["key"]).decrypt(
            schedule["base_nonce"], bytes.fromhex(first["ct"]), bytes.fromhex(first["aad"])
        )
        assert plain.hex() == first["pt"]
    else:  # AES-128: the key is of another length, which stands in what it is derived from.
        assert schedule["secret"].hex() == vector["secret"]


def test_the_librarys_hpke_opens_what_is_made_by_hand_with_the_keys_of_rfc_9180() -> None:
    """The suite with AES-256-GCM: enc || ciphertext with the RFC's ephemeral key, under the library's decryption."""
    (vector,) = (
        one
        for one in json.loads((VECTORS / "rfc9180_hpke_x25519_base.json").read_text())["vectors"]
        if one["aead_id"] == 2
    )
    card = {"x25519": by_hand.b64(bytes.fromhex(vector["pkRm"])), "fingerprint": FINGERPRINT}
    made = by_hand.for_card(
        card, "x25519", bytes(range(32)), bytes.fromhex(vector["skEm"]), CONTENT, BOUND, lattice=(b"", b"")
    )["wrapping"]
    whole = by_hand.raw(made["key"])
    assert whole[:32].hex() == vector["enc"]
    own = X25519PrivateKey.from_private_bytes(bytes.fromhex(vector["skRm"]))
    suite = hpke.Suite(hpke.KEM.X25519, hpke.KDF.HKDF_SHA256, hpke.AEAD.AES_256_GCM)
    assert suite.decrypt(whole, own, b"shares/v1/hpke" + BOUND) == bytes(range(32))
    with pytest.raises(InvalidTag):
        suite.decrypt(whole, own, b"shares/v1/hpke")


@pytest.mark.parametrize("content", [b"", b"\0", CONTENT, bytes(70_000)], ids=len)
def test_the_opener_by_hand_opens_what_is_wrapped_by_passphrase(content: bytes) -> None:
    made, sealed = by_passphrase(content)
    source = by_hand.stretched(PASSPHRASE, made.model_dump(mode="json"))
    key, commitment = by_hand.key_and_commitment(source)
    assert commitment == made.commitment
    assert AESGCM(key).decrypt(bytes(12), sealed, BOUND) == content


@pytest.mark.parametrize("suite", SUITES)
def test_the_opener_by_hand_opens_what_is_wrapped_for_a_card(suite: Any) -> None:
    """With the hybrid KEM spelled out: SHA3-256 over both secrets, both public keys of the curve, and the label."""
    made, sealed = for_card(suite)
    private = by_hand.Private(bytes(32) + CURVE.private_bytes_raw() + LATTICE.private_bytes_raw())
    source = by_hand.decrypted(private, made.model_dump(mode="json"), BOUND)
    key, commitment = by_hand.key_and_commitment(source)
    assert commitment == made.commitment
    assert AESGCM(key).decrypt(bytes(12), sealed, BOUND) == CONTENT


@pytest.mark.parametrize("suite", SUITES)
def test_what_is_wrapped_by_hand_is_opened(suite: Any) -> None:
    card = {"x25519": by_hand.b64(TO.x25519), "fingerprint": FINGERPRINT}
    shared, ciphertext = LATTICE.public_key().encapsulate()
    made = by_hand.for_card(
        card, suite, bytes(range(32)), bytes(range(1, 33)), CONTENT, BOUND, lattice=(ciphertext, shared)
    )
    read = ByCard.model_validate_json(json.dumps(made["wrapping"]))
    assert revealed(open_by_card(read, by_hand.raw(made["sealed"]), BOUND, OWNER)) == CONTENT
    made = by_hand.by_passphrase(PASSPHRASE, bytes(16), (16, 2, 2), CONTENT, BOUND)
    phrase = ByPassphrase.model_validate_json(json.dumps(made["wrapping"]))
    assert revealed(open_by_passphrase(phrase, by_hand.raw(made["sealed"]), BOUND, Secret.of(PASSPHRASE))) == CONTENT


# The golden samples, made by hand once and kept.

GOLDEN = json.loads((VECTORS / "wrapped_v1.json").read_text())
SAMPLES = [test for group in GOLDEN["testGroups"] for test in group["tests"]]
WRAPPED: dict[str, type[Envelope | PartyKey]] = {kind.KIND: kind for kind in (PartyKey, WrappedShare, SealedSecret)}


def test_the_golden_samples_are_there() -> None:
    assert len(SAMPLES) == GOLDEN["numberOfTests"]
    assert {flag for test in SAMPLES for flag in test["flags"]} == set(GOLDEN["notes"])
    files = {test["file"] for test in SAMPLES}
    folder = VECTORS / "golden" / "v1" / "wrapped"
    sealed = {path.name for path in folder.iterdir() if b'"sealed"' in path.read_bytes()}
    assert {name.rpartition("/")[2] for name in files} == sealed


@pytest.mark.parametrize("test", SAMPLES, ids=lambda test: test["file"].rpartition("/")[2])
def test_a_golden_sample_opens_by_hand_and_by_the_package(test: dict[str, Any]) -> None:
    """Every value on the way: bound bytes, source, key, commitment, content."""
    data = (VECTORS / test["file"]).read_bytes()
    members = json.loads(data)
    is_phrase = "passphrase" in test
    opener = bytes.fromhex(test["passphrase"]) if is_phrase else by_hand.Private(bytes.fromhex(test["private_keys"]))
    assert by_hand.opened(members, opener).hex() == test["content"]
    assert by_hand.bound_of(members).decode() == test["bound"]
    with wrapping._Keys(Secret.of(bytes.fromhex(test["source"]))) as keys:
        assert (revealed(keys._key).hex(), keys.commitment.hex()) == (test["key"], test["commitment"])
    document: Any = WRAPPED[members["kind"]].parse(data)
    bound = test["bound"].encode()
    if is_phrase:
        found = open_by_passphrase(document.wrapping, document.sealed, bound, Secret.of(opener))
    else:
        own = RecipientKey(document.wrapping.card, opener.curve, opener.lattice)
        found = open_by_card(document.wrapping, document.sealed, bound, own)
    assert revealed(found).hex() == test["content"]
    assert json.loads(document.to_file()) == members


def test_golden_cards_stay_readable_for_ever() -> None:
    folder = VECTORS / "golden" / "v1" / "wrapped"
    for name in ("registrar", "harbour-office"):
        data = (folder / f"{name}.card.json").read_bytes()
        read = PartyCard.parse(data)
        assert json.loads(read.to_file()) == json.loads(data)
        assert PartyKey.parse((folder / f"{name}.key.json").read_bytes()).card == read


# What does not open.


@given(octets(1, 40))
def test_another_passphrase_is_told_by_the_commitment(passphrase: bytes) -> None:
    made, sealed = by_passphrase()
    if passphrase != PASSPHRASE:
        with pytest.raises(WrongKeyError, match="the passphrase does not open it"):
            open_by_passphrase(made, sealed, BOUND, Secret.of(passphrase))


@pytest.mark.parametrize("near", [PASSPHRASE + b"\n", PASSPHRASE[:-1], PASSPHRASE.upper(), b" " + PASSPHRASE, b""])
def test_a_passphrase_is_taken_as_it_was_typed(near: bytes) -> None:
    made, sealed = by_passphrase()
    with pytest.raises(WrongKeyError):
        open_by_passphrase(made, sealed, BOUND, Secret.of(near))


@pytest.mark.parametrize(
    "change",
    [
        {"salt": bytes(16)},
        {"commitment": bytes(32)},
        {"memory": 9},
        {"passes": 2},
        {"memory": 16, "lanes": 2},
    ],
    ids=str,
)
def test_other_public_members_make_another_key(change: dict[str, Any]) -> None:
    made, sealed = by_passphrase()
    with pytest.raises(WrongKeyError):
        open_by_passphrase(made.model_copy(update=change), sealed, BOUND, Secret.of(PASSPHRASE))


def flips(data: bytes) -> list[bytes]:
    return [data[:i] + bytes([data[i] ^ 1 << bit]) + data[i + 1 :] for i in range(len(data)) for bit in range(8)]


def test_every_flipped_bit_of_what_is_sealed_by_passphrase_is_damage() -> None:
    made, sealed = by_passphrase(b"short")
    for changed in (*flips(sealed), sealed[:-1], sealed + b"\0", sealed[:15], b""):
        with pytest.raises(VerificationError, match="the key is right") as refusal:
            open_by_passphrase(made, changed, BOUND, Secret.of(PASSPHRASE))
        assert not isinstance(refusal.value, WrongKeyError)
    for bound in (BOUND + b"\0", BOUND[:-1], b"", *flips(BOUND)):
        with pytest.raises(VerificationError, match="the facts it is bound to") as refusal:
            open_by_passphrase(made, sealed, bound, Secret.of(PASSPHRASE))
        assert not isinstance(refusal.value, WrongKeyError)


@pytest.mark.parametrize("suite", SUITES)
def test_whatever_is_changed_of_what_is_sealed_for_a_card_is_damage(suite: Any) -> None:
    made, sealed = for_card(suite, b"short")
    keys = [made.key[:i] + bytes([made.key[i] ^ 0x41]) + made.key[i + 1 :] for i in range(len(made.key))]
    keys += [made.key[:-1], made.key + b"\0", made.key[:32], made.key[:31], b"\0", bytes(len(made.key))]
    cases = [(made.model_copy(update={"key": key}), sealed, BOUND) for key in keys]
    cases += [(made, changed, BOUND) for changed in (*flips(sealed), sealed[:-1], sealed[:15], b"")]
    cases += [(made, sealed, bound) for bound in (BOUND + b"\0", BOUND[:-1], b"")]
    cases += [(made.model_copy(update={"commitment": changed}), sealed, BOUND) for changed in flips(made.commitment)]
    other = for_card(suite, b"other")
    cases += [(made.model_copy(update={"key": other[0].key}), sealed, BOUND), (made, other[1], BOUND)]
    other_suite = next(one for one in SUITES if one != suite)
    cases += [(made.model_copy(update={"suite": other_suite}), sealed, BOUND)]
    for changed, content, bound in cases:
        with pytest.raises(VerificationError, match="the key is right") as refusal:
            open_by_card(changed, content, bound, OWNER)
        assert not isinstance(refusal.value, WrongKeyError)


def test_no_sealed_content_opens_under_two_passphrases_even_if_its_maker_tries() -> None:
    """The commitment holds where AES-GCM alone would not: a key that fits the tag but not the commitment is refused.

    A maker who knows two keys can make a tag that fits both (Albertini et al. 2022). Here the tag is simply made under
    the second key, with the commitment of the first.
    """
    made, _ = by_passphrase()
    second = b"another passphrase, made up"
    key, _ = by_hand.key_and_commitment(by_hand.stretched(second, made.model_dump(mode="json")))
    sealed = AESGCM(key).encrypt(bytes(12), CONTENT, BOUND)
    with pytest.raises(WrongKeyError):
        open_by_passphrase(made, sealed, BOUND, Secret.of(second))


@pytest.mark.parametrize("suite", SUITES)
def test_a_key_for_a_card_that_does_not_fit_the_commitment_is_refused(suite: Any) -> None:
    """A maker encrypts to the card one key and commits to another; the tag would fit."""
    made, _ = for_card(suite)
    private = by_hand.Private(bytes(32) + CURVE.private_bytes_raw() + LATTICE.private_bytes_raw())
    key, _ = by_hand.key_and_commitment(by_hand.decrypted(private, made.model_dump(mode="json"), BOUND))
    sealed = AESGCM(key).encrypt(bytes(12), CONTENT, BOUND)
    assert revealed(open_by_card(made, sealed, BOUND, OWNER)) == CONTENT
    with pytest.raises(VerificationError):
        open_by_card(made.model_copy(update={"commitment": bytes(32)}), sealed, BOUND, OWNER)


@pytest.mark.parametrize("suite", SUITES)
@pytest.mark.parametrize("length", [0, 16, 31, 33])
def test_a_key_of_another_length_for_a_card_is_refused(suite: Any, length: int) -> None:
    card = {"x25519": by_hand.b64(TO.x25519), "fingerprint": FINGERPRINT}
    shared, ciphertext = LATTICE.public_key().encapsulate()
    made = by_hand.for_card(
        card, suite, bytes(length), bytes(range(1, 33)), CONTENT, BOUND, lattice=(ciphertext, shared)
    )
    with pytest.raises(VerificationError):
        open_by_card(
            ByCard.model_validate_json(json.dumps(made["wrapping"])), by_hand.raw(made["sealed"]), BOUND, OWNER
        )


def test_a_key_of_another_card_is_told_before_anything_is_tried() -> None:
    made, sealed = for_card()
    with pytest.raises(WrongKeyError, match="this party key belongs to the card"):
        open_by_card(made, sealed, BOUND, OWN)
    # The name of the card is nothing that is sealed: where it was changed to another's, damage is found.
    stranger = RecipientKey(FINGERPRINT, X25519PrivateKey.generate(), MLKEM768PrivateKey.generate())
    with pytest.raises(VerificationError, match="changed"):
        open_by_card(made, sealed, BOUND, stranger)


LOW_ORDER = (
    bytes(32),
    b"\1" + bytes(31),
    bytes.fromhex("ecffffffffffffffffffffffffffffffffffffffffffffffffffffffffffff7f"),
)


@pytest.mark.parametrize("suite", SUITES)
@pytest.mark.parametrize("point", LOW_ORDER, ids=["0", "1", "p - 1"])
def test_nothing_is_encrypted_to_a_point_of_low_order(suite: Any, point: bytes) -> None:
    """RFC 7748, section 6.1, and RFC 9180, section 7.1.4: the exchange would give zeros to everyone."""
    with pytest.raises(VerificationError, match="holds no usable public keys") as refusal:
        card_sealer(Recipient(FINGERPRINT, point, TO.mlkem768), suite)(Secret.of(CONTENT), BOUND)
    assert refusal.value.__cause__ is refusal.value.__context__ is None
    made, sealed = for_card(suite)
    key = made.key[:-80] + point + made.key[-48:]
    with pytest.raises(VerificationError, match="changed"):
        open_by_card(made.model_copy(update={"key": key}), sealed, BOUND, OWNER)


def test_nothing_is_encrypted_to_a_lattice_key_out_of_range() -> None:
    """FIPS 203, section 7.2: the encapsulation key check; every coefficient is below 3329."""
    with pytest.raises(VerificationError, match="holds no usable public keys"):
        card_sealer(Recipient(FINGERPRINT, TO.x25519, b"\xff" * 1184))(Secret.of(CONTENT), BOUND)


# What a file may demand.


def members(**changes: Any) -> bytes:
    return json.dumps({**by_passphrase()[0].model_dump(mode="json"), **changes}).encode()


@pytest.mark.parametrize(
    ("changes", "ok"),
    [
        ({"memory": MAX_MEMORY}, True),
        ({"memory": MAX_MEMORY + 1}, False),
        ({"memory": 7}, False),
        ({"memory": 0}, False),
        ({"passes": MAX_PASSES}, True),
        ({"passes": MAX_PASSES + 1}, False),
        ({"passes": 0}, False),
        ({"lanes": MAX_LANES, "memory": 8 * MAX_LANES}, True),
        ({"lanes": MAX_LANES + 1, "memory": 8 * MAX_LANES + 8}, False),
        ({"lanes": 0}, False),
        ({"lanes": 2, "memory": 16}, True),
        ({"lanes": 2, "memory": 15}, False),
        ({"lanes": 16, "memory": 127}, False),
        ({"memory": "8"}, False),
        ({"passes": True}, False),
        ({"salt": by_hand.b64(bytes(15))}, False),
        ({"salt": by_hand.b64(bytes(17))}, False),
        ({"commitment": by_hand.b64(bytes(31))}, False),
        ({"method": "phrase"}, False),
        ({"pepper": ""}, False),
    ],
    ids=str,
)
def test_the_reader_bounds_what_a_file_demands_before_anything_is_computed(
    changes: dict[str, Any], ok: bool, monkeypatch: pytest.MonkeyPatch
) -> None:
    """FORMAT.md, section 9: 2 GiB, 10 passes, 16 lanes, and 8 KiB for each lane (RFC 9106, section 3.1)."""
    assert (MAX_MEMORY, MAX_PASSES, MAX_LANES) == (2 * 1024 * 1024, 10, 16)
    data = members(**changes)
    monkeypatch.setattr(wrapping, "Argon2id", lambda **_: pytest.fail("something was computed"))
    if ok:
        assert ByPassphrase.model_validate_json(data).public(*changes) == changes
    else:
        with pytest.raises(ValueError, match="validation error"):
            ByPassphrase.model_validate_json(data)


@pytest.mark.parametrize(
    ("error", "words"),
    [(MemoryError(), "did not give the 2,048 MiB"), (UnsupportedAlgorithm("x"), "built without Argon2id")],
)
def test_a_machine_that_cannot_stretch_says_so(error: Exception, words: str, monkeypatch: pytest.MonkeyPatch) -> None:
    made, sealed = by_passphrase()

    class Refusing:
        def __init__(self, **_: object) -> None:
            pass

        def derive_into(self, *_: object) -> None:
            raise error

    monkeypatch.setattr(wrapping, "Argon2id", Refusing)
    with pytest.raises(SharesError, match=words) as refusal:
        open_by_passphrase(made.model_copy(update={"memory": MAX_MEMORY}), sealed, BOUND, Secret.of(PASSPHRASE))
    assert refusal.value.exit_code == 1
    assert refusal.value.__context__ is None


# What is kept in the dark.


def test_keys_do_not_show_in_text() -> None:
    shown = f"{OWN!r} {OWN}"
    assert "x25519" not in shown
    with wrapping._Keys(Secret.of(bytes(32))) as keys:
        assert keys.seal(Secret.of(b""), BOUND)
    with pytest.raises(ValueError, match="the secret is closed"):
        keys.seal(Secret.of(b""), BOUND)


@settings(max_examples=20)
@given(st.sampled_from(["passphrase", *SUITES]))
def test_secrets_on_the_way_are_wiped_whether_it_works_or_not(way: Any) -> None:
    """Every ``Secret`` made on the way is closed again but the one returned."""
    passphrase, content = Secret.of(PASSPHRASE), Secret.of(CONTENT)
    made, sealed = passphrase_sealer(passphrase, QUICK)(content, BOUND) if way == "passphrase" else for_card(way)
    before = set(memory._open)
    if way == "passphrase":
        passphrase_sealer(passphrase, QUICK)(content, BOUND)
        by_what: Any = passphrase
    else:
        for_card(way)
        by_what = OWNER
    open_: Any = open_by_passphrase if way == "passphrase" else open_by_card
    with pytest.raises(VerificationError):
        open_(made, sealed[:-1], BOUND, by_what)
    found = open_(made, sealed, BOUND, by_what)
    assert set(memory._open) - before == {found._number}
    found.close()
    assert set(memory._open) <= before
