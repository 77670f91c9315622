"""The golden samples of format version 1 are what their maker makes, and agree with libraries that know nothing of it.

Sources: shares/documents/FORMAT.md; python-flint for the field and for interpolation; the package `rfc8785` for
canonical JSON (RFC 8785); the standard library's hashes; `cryptography` for Ed25519 (RFC 8032).
"""

import base64
import hashlib
import json
import subprocess
import sys
from collections import Counter
from itertools import combinations
from pathlib import Path

import flint
import pytest
import rfc8785
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey, Ed25519PublicKey

HERE = Path(__file__).parent
VECTORS = HERE.parent
SETS = sorted(path for path in VECTORS.glob("set_v1_*.json") if path.stem != "set_v1_recover")
HEADER = ("kind", "version", "set", "epoch", "custodian", "field", "paths", "secret_commitment", "encrypted_file")
CASES = [VECTORS / name for name in ("share_v1.json", "record_v1.json", "set_v1_recover.json", "wrapped_v1.json")]


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    """Run the maker as its docstring says, into a folder of its own."""
    folder = tmp_path_factory.mktemp("made")
    subprocess.run([sys.executable, "-W", "error", HERE / "make_set_v1.py", folder], check=True)
    return folder


def dealing(path):
    """Give the one test of a set's file."""
    (group,) = json.loads(path.read_text())["testGroups"]
    (test,) = group["tests"]
    return test


def raw(text):
    return base64.urlsafe_b64decode(text + "=" * (-len(text) % 4))


class Field:
    """GF(2)[x]/(m) by python-flint: polynomials over GF(2), and the remainder by m."""

    def __init__(self, field):
        self.modulus = self.element(int(field, 16))

    @staticmethod
    def element(number):
        return flint.nmod_poly([number >> i & 1 for i in range(9)], 2)

    def number(self, element):
        return sum(int(element[i]) << i for i in range(8))

    def times(self, a, b):
        return self.number(self.element(a) * self.element(b) % self.modulus)

    def inverse(self, a):
        gcd, inverse, _ = self.element(a).xgcd(self.modulus)
        assert gcd == 1
        return self.number(inverse % self.modulus)

    def at_zero(self, points):
        """Interpolate rows at zero, for points (x, row)."""
        total = bytes(len(points[0][1]))
        for x, row in points:
            weight = 1
            for other in {other for other, _ in points} - {x}:
                weight = self.times(weight, self.times(other, self.inverse(x ^ other)))
            products = [self.times(weight, value) for value in range(256)]
            total = bytes(t ^ products[value] for t, value in zip(total, row, strict=True))
        return total


def test_a_second_run_writes_the_same_bytes(made):
    """And nothing else of its kind lies about."""
    written = {path.relative_to(made) for path in made.rglob("*") if path.is_file()}
    patterns = ("*_v1*.json", "golden/v1/**/*.json", "golden/v1/**/*.jsonl")
    kept = {path.relative_to(VECTORS) for pattern in patterns for path in VECTORS.glob(pattern)}
    kept -= {path for path in kept if path.parts[:3] == ("golden", "v1", "opened")}  # test_opened.py says what it is.
    assert written == kept - {Path("paper_v1.json")}  # make_paper_v1 makes that one.
    assert len(written) == len(SETS) + len(CASES) + 13 + 9 + 4 + 1 + 1 + 15
    for name in written:
        assert (made / name).read_bytes() == (VECTORS / name).read_bytes(), name


@pytest.mark.parametrize("path", [*SETS, *CASES], ids=lambda path: path.stem)
def test_the_layout_holds(path):
    """Counts, numbers and flags are those that style.md asks for."""
    body = json.loads(path.read_text())
    tests = [test for group in body["testGroups"] for test in group["tests"]]
    assert [test["tcId"] for test in tests] == list(range(1, body["numberOfTests"] + 1))
    assert {flag for test in tests for flag in test["flags"]} == set(body["notes"])
    assert all(note["description"] and note["effect"] for note in body["notes"].values())
    assert all(set(group["source"]) == {"title", "section", "link", "obtained"} for group in body["testGroups"])
    assert all((test["result"] == "invalid") == ("refusal" in test) for test in tests)
    assert {test["result"] for test in tests} <= {"valid", "invalid"}


def test_invalid_cases_outnumber_valid_ones():
    """As style.md asks, over all files of format version 1."""
    groups = [group for path in [*SETS, *CASES] for group in json.loads(path.read_text())["testGroups"]]
    results = Counter(test["result"] for group in groups for test in group["tests"])
    assert results["invalid"] > 4 * results["valid"] > 0


def test_no_document_stands_twice_with_two_verdicts():
    """Against one record, the same bytes cannot be both right and wrong."""
    for path in CASES[:2]:
        for group in json.loads(path.read_text())["testGroups"]:
            verdicts = {}
            for test in group["tests"]:
                bytes_of = (test.get("document"), test.get("document_hex"), test.get("pad_to"))
                assert verdicts.setdefault(bytes_of, test.get("refusal")) == test.get("refusal"), test["comment"]


@pytest.mark.parametrize("path", SETS, ids=lambda path: path.stem)
def test_canonical_json_and_digests_agree_with_the_library(path):
    """RFC 8785 by the package rfc8785; then every hash from the parts of the finished documents."""
    test = dealing(path)
    record = json.loads(test["record"]["document"])
    body = rfc8785.dumps({name: value for name, value in record.items() if name not in ("fingerprint", "signatures")})
    assert hashlib.sha256(body).hexdigest() == test["record"]["canonical_sha256"]
    print_of = base64.b32encode(hashlib.sha256(b"shares/v1/fingerprintrecord" + body).digest()[:20]).decode()
    assert record["fingerprint"] == test["record"]["fingerprint"]
    assert record["fingerprint"].replace("-", "") == print_of

    opening = b"shares/v1/secret" + bytes.fromhex(test["set"] + test["message"] + test["blind"])
    assert hashlib.sha256(opening).hexdigest() == test["secret_commitment"] == record["secret_commitment"]
    for custodian, entry in zip(test["custodians"], record["custodians"], strict=True):
        share = json.loads(custodian["document"])
        text = rfc8785.dumps({name: share[name] for name in HEADER})
        assert text.decode() == custodian["header"]
        core = text + b"".join(raw(row) for row in share["rows"])
        commitment = hashlib.sha256(b"shares/v1/share" + core)
        assert commitment.hexdigest() == custodian["share_commitment"] == entry["share_commitment"]
        rest = rfc8785.dumps({name: share[name] for name in ("label", "rule", "notice", "record")})
        assert share["digest"] == hashlib.sha256(b"shares/v1/digest" + commitment.digest() + rest).hexdigest()
        assert share["record"] == record["fingerprint"]
        # A signature by the stated seed verifies under the record's key (RFC 8032, by `cryptography`).
        seed = bytes.fromhex(custodian["attestation_seed"])
        signature = Ed25519PrivateKey.from_private_bytes(seed).sign(b"challenge")
        Ed25519PublicKey.from_public_bytes(raw(entry["attestation_key"])).verify(signature, b"challenge")


@pytest.mark.parametrize("path", SETS, ids=lambda path: path.stem)
def test_rows_lie_on_the_polynomials(path):
    """By python-flint: each node's rows interpolate to its f_0, from every k of its children up to the payload."""
    test = dealing(path)
    field = Field(test["field"])
    rows = {}
    for custodian in test["custodians"]:
        for point, row in zip(custodian["paths"], custodian["rows"], strict=True):
            rows[tuple(map(tuple, point))] = bytes.fromhex(row)
    for node in reversed(test["nodes"]):
        prefix, k = tuple(map(tuple, node["path"])), node["need"]
        points = [(p[-1][1], row) for p, row in rows.items() if p[:-1] == prefix and p[-1][0] == k]
        assert len(points) >= k
        found = {field.at_zero(chosen) for chosen in combinations(points, k)}
        assert found == {bytes.fromhex(node["coefficients"][0])}
        rows[prefix] = found.pop()
    assert rows[()].hex() == test["payload"] == test["message"] + test["blind"] + test["mask"]
    message, secret = bytes.fromhex(test["message"]), bytes.fromhex(test["secret"])
    assert message == len(secret).to_bytes(4, "big") + secret + bytes(len(message) - 4 - len(secret))
    assert len(message) % test["pad"] == 0


@pytest.mark.parametrize("path", [p for p in SETS if "thousand" not in p.stem], ids=lambda path: path.stem)
def test_checks_agree_with_matrix_and_rows(path):
    """By python-flint: check(row) is its node's check polynomial at its x, and c_0 of a node its parent's at its x."""
    test = dealing(path)
    record = json.loads(test["record"]["document"])
    field, length = Field(test["field"]), record["row_length"]
    products = [[field.times(a, b) for b in range(256)] for a in range(256)]
    start = bytes.fromhex(test["set"]) + test["epoch"].to_bytes(4, "big") + int(test["field"], 16).to_bytes(2, "big")
    commitments = b"".join(bytes.fromhex(entry["share_commitment"]) for entry in record["custodians"])
    matrix = hashlib.shake_256(b"shares/v1/check" + start + commitments).digest(16 * (length - 16))
    assert hashlib.sha256(matrix).hexdigest() == test["check_matrix_sha256"]

    def check(row):
        out = bytearray(row[-16:])
        for i in range(16):
            for j in range(length - 16):
                out[i] ^= products[matrix[i * (length - 16) + j]][row[j]]
        return bytes(out)

    def at(values, x):
        total, power = bytes(16), 1
        for value in values:
            total = bytes(t ^ products[power][v] for t, v in zip(total, raw(value), strict=True))
            power = products[power][x]
        return total

    checks = {tuple(map(tuple, n["path"])): values for n, values in zip(test["nodes"], record["checks"], strict=True)}
    for prefix, values in checks.items():
        if prefix:
            assert raw(values[0]) == at(checks[prefix[:-1]], prefix[-1][1])
    for custodian in test["custodians"]:
        for point, row in zip(custodian["paths"], custodian["rows"], strict=True):
            assert check(bytes.fromhex(row)) == at(checks[tuple(map(tuple, point[:-1]))], point[-1][1])


def test_the_plain_files_are_the_documents_of_the_sets():
    """golden/v1 holds what a program would have written for two of the sets."""
    for folder, name in (("flat", "flat_3_of_5"), ("tree", "tree")):
        test = dealing(VECTORS / f"set_v1_{name}.json")
        texts = {f"{custodian['name']}.share.json": custodian["document"] for custodian in test["custodians"]}
        texts["record.json"] = test["record"]["document"]
        assert {p.name: p.read_text() for p in (VECTORS / "golden/v1" / folder).iterdir()} == texts
