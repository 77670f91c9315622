"""examples/open_by_hand.py opens what the package encrypts, refuses the rest, and is what its docstring claims.

Sources: FIPS 197, appendix C.3; McGrew and Viega's test cases 13 to 16 of GCM (tests/vectors/aes_256_gcm.json);
`cryptography` as a reference for every length; shares/documents/FORMAT.md, sec. 13. The script runs as a person would
run it, but for `-I -S`, under which no installed package can be imported.
"""

import ast
import importlib.util
import itertools
import json
import os
import resource
import stat
import subprocess
import sys
from pathlib import Path
from typing import NamedTuple

import pytest
from cryptography.hazmat.primitives.ciphers.aead import AESGCM
from hypothesis import given, settings
from hypothesis import strategies as st
from vectors.make.encrypted_file_v1 import encrypted_file, made_up

from shares.custody.encrypted_file import encrypt_file
from shares.custody.split import flat_rule, split

ROOT = Path(__file__).parents[2]
SCRIPT = ROOT / "examples" / "open_by_hand.py"
VECTORS = ROOT / "tests" / "vectors"
KEY, SET, CHUNK = made_up("key", 32), bytes(range(16)), 65_536
SECRET = made_up("secret", 2 * CHUNK + 100)
FILE, DIGEST = encrypted_file(KEY, SET, CHUNK, SECRET)
HEADER, FULL = 44, CHUNK + 16


class Outcome(NamedTuple):
    code: int
    out: str
    err: str
    secret: bytes | None


def call(words, target):
    """Run the script, and check what holds for every run."""
    command = [sys.executable, "-I", "-S", "-W", "error", SCRIPT, *words]
    done = subprocess.run(command, capture_output=True, text=True, stdin=subprocess.DEVNULL, timeout=100, check=False)
    assert "Traceback" not in done.stderr
    if done.returncode == 0:
        assert (done.stderr, done.stdout.count("\n")) == ("", 1)
    else:
        assert done.returncode in (2, 4, 5)
        assert (done.stdout, done.stderr.count("\n")) == ("", 1)
        assert done.stderr.startswith("open_by_hand: ")
        assert not target.exists()
    return Outcome(done.returncode, done.stdout, done.stderr, target.read_bytes() if target.is_file() else None)


@pytest.fixture
def opened(tmp_path):
    """Run the script on contents of its three files."""

    def run(key=KEY, file=FILE, share=None, *, check=False):
        given = {"key": key, "file": file, "share": json.dumps({"set": SET.hex(), "encrypted_file": DIGEST.hex()})}
        given["share"] = given["share"] if share is None else share
        for name, content in given.items():
            (tmp_path / name).write_bytes(content if isinstance(content, bytes) else content.encode())
        (tmp_path / "secret").unlink(missing_ok=True)
        options = ["--check"] if check else ["--to", tmp_path / "secret"]
        return call([*(tmp_path / name for name in given), *options], tmp_path / "secret")

    return run


@pytest.fixture(scope="module")
def script():
    spec = importlib.util.spec_from_file_location("open_by_hand", SCRIPT)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_it_is_short_and_stands_alone():
    """At most 150 lines with its docstring, and it imports the standard library alone."""
    text = SCRIPT.read_text()
    assert len(text.splitlines()) <= 150
    assert max(map(len, text.splitlines())) <= 120
    tree = ast.parse(text)
    imported = {alias.name for node in ast.walk(tree) if isinstance(node, ast.Import) for alias in node.names}
    assert imported == {"hashlib", "hmac", "json", "os", "sys"}
    assert not [node for node in ast.walk(tree) if isinstance(node, ast.ImportFrom)]
    for word in ("NOT constant time", "offline", "Destroy KEY", "replace it", "FORMAT.md", "Exit codes"):
        assert word in ast.get_docstring(tree)


# AES-256 and its mode.


def groups(kind):
    data = json.loads((VECTORS / "aes_256_gcm.json").read_text())
    assert sum(len(group["tests"]) for group in data["testGroups"]) == data["numberOfTests"] == 5
    return [test for group in data["testGroups"] if group["type"] == kind for test in group["tests"]]


def sealed(script, key, nonce, header, text):
    """What the script's parts make of a text: ciphertext and tag."""
    round_keys = script.expand(key)
    stream = script.key_stream(round_keys, nonce, 2, -(-len(text) // 16)) if text else b""
    masked = script.add_up(text, stream[: len(text)])
    return masked + script.tag(round_keys, script.hash_tables(round_keys), nonce, header, masked)


@pytest.mark.parametrize("test", groups("block"), ids=lambda test: test["comment"])
def test_published_block(script, test):
    key, block = bytes.fromhex(test["key"]), bytes.fromhex(test["msg"])
    assert b"".join(script.encrypt(script.expand(key), [bytes([byte]) for byte in block])).hex() == test["ct"]


@pytest.mark.parametrize("test", groups("aead"), ids=lambda test: test["comment"])
def test_published_mode(script, test):
    key, nonce, header, text = (bytes.fromhex(test[name]) for name in ("key", "iv", "aad", "msg"))
    assert sealed(script, key, nonce, header, text).hex() == test["ct"] + test["tag"]
    # The reference is held against the same published values.
    assert AESGCM(key).encrypt(nonce, text, header).hex() == test["ct"] + test["tag"]


@settings(max_examples=40, deadline=None)
@given(
    st.binary(min_size=32, max_size=32),
    st.binary(min_size=12, max_size=12),
    st.binary(max_size=50),
    st.binary(max_size=300),
)
def test_any_text_against_the_reference(script, key, nonce, header, text):
    assert sealed(script, key, nonce, header, text) == AESGCM(key).encrypt(nonce, text, header)


def test_the_substitution_is_the_published_one(script):
    """FIPS 197, figure 7: corners of the table; and it is a permutation."""
    assert [script.ONCE[i] for i in (0x00, 0x01, 0x10, 0x53, 0xF0, 0xFF)] == [0x63, 0x7C, 0xCA, 0xED, 0x8C, 0x16]
    assert sorted(script.ONCE) == list(range(256))


# Files.


@pytest.mark.parametrize("size", [1, CHUNK - 1, CHUNK, CHUNK + 1, 2 * CHUNK, 2 * CHUNK + 1])
def test_it_opens_what_another_maker_made(opened, size):
    secret = made_up("by hand", size)
    file, digest = encrypted_file(KEY, SET, CHUNK, secret)
    outcome = opened(file=file, share=json.dumps({"set": SET.hex(), "encrypted_file": digest.hex()}))
    assert (outcome.code, outcome.secret) == (0, secret)
    assert outcome.out.startswith(f"Opened {size} bytes: ")


def test_it_opens_the_golden_samples(opened):
    tests = json.loads((VECTORS / "aes_256_gcm_chunks.json").read_text())["testGroups"][0]["tests"]
    for test in tests:
        secret = made_up(test["comment"], test["length"])
        key, set_id = bytes.fromhex(test["key"]), bytes.fromhex(test["set"])
        file, _ = encrypted_file(key, set_id, test["chunk"], secret)
        share = json.dumps({"set": test["set"], "encrypted_file": test["digest"]})
        assert opened(key=key, file=file, share=share).secret == secret, test["comment"]


def test_it_opens_what_the_package_made(tmp_path):
    """More than a chunk of 1 MiB; and the target is private."""
    secret = made_up("package", (1 << 20) + 1)
    (tmp_path / "source").write_bytes(secret)
    key, digest = encrypt_file(tmp_path / "source", tmp_path / "file", SET)
    with key.view() as view:
        (tmp_path / "key").write_bytes(view)
    (tmp_path / "share").write_text(json.dumps({"set": SET.hex(), "encrypted_file": digest.hex()}))
    words = [tmp_path / name for name in ("key", "file", "share")]
    outcome = call([*words, "--to", tmp_path / "secret"], tmp_path / "secret")
    assert (outcome.code, outcome.secret) == (0, secret)
    assert stat.S_IMODE((tmp_path / "secret").stat().st_mode) == 0o600
    # What is there is never overwritten.
    again = subprocess.run(
        [sys.executable, SCRIPT, *words, "--to", tmp_path / "secret"], capture_output=True, check=False
    )
    assert (again.returncode, (tmp_path / "secret").read_bytes()) == (5, secret)


def test_check_writes_nothing(opened, tmp_path):
    outcome = opened(check=True)
    assert (outcome.code, outcome.secret) == (0, None)
    assert "Nothing" in outcome.out
    assert sorted(os.listdir(tmp_path)) == ["file", "key", "share"]


ONE, TWO, LAST = (FILE[HEADER + i * FULL : HEADER + (i + 1) * FULL] for i in range(3))
REFUSED = {
    **{
        f"chunks {order}": FILE[:HEADER] + b"".join((ONE, TWO, LAST)[i] for i in order)
        for length in range(4)
        for order in itertools.permutations(range(3), length)
        if order != (0, 1, 2)
    },
    "a byte less": FILE[:-1],
    "a byte more": FILE + b"\0",
    "a header alone": FILE[:44],
    "less than a header": FILE[:43],
    "nothing": b"",
    "another version": FILE[:23] + b"\2" + FILE[24:],
    "another kind": b"S" + FILE[1:],
    "another set": FILE[:24] + bytes(16) + FILE[40:],
    "small chunks": FILE[:40] + (65_535).to_bytes(4, "big") + FILE[44:],
    "large chunks": FILE[:40] + ((1 << 24) + 1).to_bytes(4, "big") + FILE[44:],
    "other chunks": FILE[:40] + (65_537).to_bytes(4, "big") + FILE[44:],
    "one bit": FILE[:1000] + bytes([FILE[1000] ^ 1]) + FILE[1001:],
    "one bit of a tag": FILE[:-1] + bytes([FILE[-1] ^ 128]),
    "another secret under this key": encrypted_file(KEY, SET, CHUNK, made_up("other", len(SECRET)))[0],
    "flag on the first": encrypted_file(KEY, SET, CHUNK, SECRET, lasts=[True, False, True])[0],
    "flag on none": encrypted_file(KEY, SET, CHUNK, SECRET, lasts=[False, False, False])[0],
}


@pytest.mark.parametrize("name", REFUSED)
def test_it_refuses_what_is_not_the_file(opened, name):
    assert opened(file=REFUSED[name]).code == 4


@pytest.mark.parametrize("key", [b"", bytes(32), KEY[:31], KEY + b"\n"])
def test_it_refuses_another_key(opened, key):
    assert opened(key=key).code == 4


@pytest.mark.parametrize(
    "share",
    [
        "",
        "[]",
        "{}",
        "\udcff".encode("utf-8", "surrogatepass"),
        "[" * 100_000,
        json.dumps({"set": SET.hex()}),
        json.dumps({"set": SET.hex(), "encrypted_file": None}),
        json.dumps({"set": SET.hex(), "encrypted_file": ""}),
        json.dumps({"set": SET.hex(), "encrypted_file": DIGEST.hex()[:-1] + "0"}),
        json.dumps({"set": SET.hex(), "encrypted_file": 7}),
        json.dumps({"set": bytes(16).hex(), "encrypted_file": DIGEST.hex()}),
    ],
    ids=range(11),
)
def test_it_refuses_another_share(opened, share):
    assert opened(share=share).code == 4


@pytest.mark.parametrize(
    "words",
    [
        [],
        ["a"],
        ["a", "b", "c"],
        ["a", "b", "c", "--to"],
        ["a", "b", "--check"],
        ["-", "b", "c", "--check"],
        ["a", "b", "c", "d", "--to", "e"],
        ["a", "b", "c", "--check", "d"],
    ],
)
def test_it_says_how_it_is_used(tmp_path, words):
    outcome = call(words, tmp_path / "none")
    assert (outcome.code, "usage: " in outcome.err) == (2, True)


def test_a_missing_file(tmp_path):
    assert call([tmp_path / "a", tmp_path / "b", tmp_path / "c", "--check"], tmp_path / "none").code == 5


def test_no_room_leaves_nothing(opened, tmp_path):
    """A limit on the size of files stands for a full medium: it strikes in the second pass."""
    opened(check=True)
    words = [tmp_path / name for name in ("key", "file", "share")]
    done = subprocess.run(
        [sys.executable, SCRIPT, *words, "--to", tmp_path / "secret"],
        capture_output=True,
        text=True,
        check=False,
        preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (CHUNK, CHUNK)),
    )
    assert (done.returncode, done.stdout, "Traceback" in done.stderr) == (5, "", False)
    assert not (tmp_path / "secret").exists()


def test_from_shares_to_the_secret_by_hand(tmp_path):
    """Law 3 in full: two shares of a key and the encrypted file; both scripts, and nothing of the package."""
    secret = made_up("archive", 100_000)
    (tmp_path / "source").write_bytes(secret)
    key, digest = encrypt_file(tmp_path / "source", tmp_path / "file", SET)
    dealt = split(key, flat_rule(2, ["north-pier", "south-pier", "light-house"]), label="Tide archive")
    key.close()
    for share in dealt.shares:
        (tmp_path / share.custodian).write_bytes(share.to_file())
    by_hand = [sys.executable, "-I", "-S", ROOT / "examples" / "recover_by_hand.py"]
    shares = [tmp_path / "south-pier", tmp_path / "light-house"]
    subprocess.run([*by_hand, *shares, "--to", tmp_path / "key"], check=True, capture_output=True)
    (tmp_path / "share").write_text(json.dumps({"set": SET.hex(), "encrypted_file": digest.hex()}))
    words = [tmp_path / name for name in ("key", "file", "share")]
    assert call([*words, "--to", tmp_path / "secret"], tmp_path / "secret").secret == secret
