"""The package against the golden samples and check values of format version 1.

Source: tests/vectors, made by tests/vectors/make from shares/documents/FORMAT.md with no code of this package, and
confirmed there by general-purpose libraries. Every document must parse, every value in between must come out equal, and
every invalid case be refused for the reason stated.
"""

from __future__ import annotations

import base64
import hashlib
import json
import re
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from strategies import copy_of, presented, revealed

from shares.custody.payload import commitment, make_payload, open_payload
from shares.custody.presented import Presented, load_record, load_shares
from shares.custody.recover import recover
from shares.custody.verify import examine
from shares.documents.base import canonical
from shares.documents.members import encode_bytes
from shares.documents.record import Record
from shares.documents.share import HEADER, Share
from shares.errors import (
    DocumentError,
    EpochMismatchError,
    NotEnoughSharesError,
    SetMismatchError,
    VerificationError,
)
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.consistency import check_matrix, checks_of
from shares.sharing.rule import deal, recover_payload

VECTORS = Path(__file__).parents[1] / "vectors"
SETS = sorted(path.stem for path in VECTORS.glob("set_v1_*.json") if path.stem != "set_v1_recover")
# Each whole set with its bare shares.
GOLDEN = sorted(
    {path.parent for path in (VECTORS / "golden" / "v1").glob("*/*.share.json") if path.parent.name != "keyed"}
)


def cases(name: str) -> list[tuple[dict[str, Any], dict[str, Any]]]:
    """Every (group, test) of a file, after its count and its flags are found in order."""
    vectors = json.loads((VECTORS / f"{name}.json").read_text())
    found = [(group, test) for group in vectors["testGroups"] for test in group["tests"]]
    assert len(found) == vectors["numberOfTests"]
    assert {flag for _, test in found for flag in test["flags"]} <= set(vectors["notes"])
    return found


def params(name: str) -> list[Any]:
    return [pytest.param(group, test, id=f"{test['tcId']} {test['comment']}") for group, test in cases(name)]


def file_of(test: dict[str, Any]) -> bytes:
    data = bytes.fromhex(test["document_hex"]) if "document_hex" in test else test["document"].encode()
    return data.ljust(test.get("pad_to", 0))


def test_the_samples_are_there() -> None:
    assert {"set_v1_flat_3_of_5", "set_v1_tree", "set_v1_wide"} <= set(SETS)
    assert {folder.name for folder in GOLDEN} >= {"flat", "tree"}


@pytest.mark.parametrize("folder", GOLDEN, ids=lambda folder: folder.name)
def test_golden_files_stay_readable_for_ever(folder: Path) -> None:
    record = load_record(folder / "record.json")
    shares = load_shares(sorted(folder.glob("*.share.json")))
    assert [finding.status.value for finding in examine(shares, record)] == ["intact"] * len(shares)
    with_record, alone = recover(shares, record), recover(shares)
    assert with_record.secret == alone.secret
    # The order of members is free; every member and every value is kept.
    assert json.loads(record.to_file()) == json.loads((folder / "record.json").read_bytes())
    for one in shares:
        assert one.share is not None
        assert json.loads(one.share.to_file()) == json.loads(Path(one.source).read_bytes())


# One dealing, value by value.


@pytest.fixture(params=SETS)
def sample(request: pytest.FixtureRequest) -> dict[str, Any]:
    ((_, test),) = cases(request.param)
    return test


def shares_of(sample: dict[str, Any]) -> dict[str, Share]:
    return {one["name"]: Share.parse(one["document"].encode()) for one in sample["custodians"]}


def record_of(sample: dict[str, Any]) -> Record:
    return Record.parse(sample["record"]["document"].encode())


def drawn(sample: dict[str, Any]) -> Iterator[bytes]:
    """What the operating system would have given for these draws: for each, the nonce and then the entropy."""
    for draw in sample["draws"]:
        yield bytes.fromhex(draw["nonce"])
        yield bytes.fromhex(draw["entropy"])


def test_the_dealing_comes_out_as_worked_out_elsewhere(sample, monkeypatch) -> None:
    """With the sample's draws in place of the system's randomness: payload, coefficients, rows and checks."""
    supply = drawn(sample)
    monkeypatch.setattr("shares.sharing.shamir.secrets.token_bytes", lambda length: checked(next(supply), length))
    field, rule, record = Field(int(sample["field"], 16)), record_of(sample).rule.to_rule(), record_of(sample)
    set_id = bytes.fromhex(sample["set"])
    payload = make_payload(field, Secret.of(bytes.fromhex(sample["secret"])), pad=sample["pad"])
    if sample["epoch"] > 1:
        # A later epoch keeps the blind; its draw, of the mask alone, is not one that a first dealing makes.
        payload, supply = Secret.of(bytes.fromhex(sample["payload"])), drawn({"draws": sample["draws"][1:]})
    assert revealed(payload).hex() == sample["payload"]
    assert sample["payload"] == sample["message"] + sample["blind"] + sample["mask"]
    assert commitment(set_id, payload).hex() == sample["secret_commitment"]
    dealing = deal(field, rule, copy_of(payload))
    assert list(supply) == []
    nodes = [
        {
            "path": [list(step) for step in path],
            "need": node.need,
            "coefficients": [revealed(f).hex() for f in polynomial],
        }
        for (path, node), polynomial in zip(rule.nodes(), dealing.polynomials, strict=True)
    ]
    assert nodes == [{key: node[key] for key in ("path", "need", "coefficients")} for node in sample["nodes"]]
    rows = {name: [revealed(point.row).hex() for point in points] for name, points in dealing.points.items()}
    assert rows == {one["name"]: one["rows"] for one in sample["custodians"]}
    commitments = [bytes.fromhex(one["share_commitment"]) for one in sample["custodians"]]
    matrix = check_matrix(set_id, sample["epoch"], field, commitments, len(payload))
    assert matrix == record.check_matrix()
    assert matrix[: len(payload) - 16].hex() == sample["check_matrix_first_row"]
    assert hashlib.sha256(matrix).hexdigest() == sample["check_matrix_sha256"]
    checks = [[encode_bytes(c) for c in checks_of(field, matrix, polynomial)] for polynomial in dealing.polynomials]
    assert checks == [node["checks"] for node in sample["nodes"]]


def checked(supplied: bytes, length: int) -> bytes:
    assert len(supplied) == length
    return supplied


def test_every_share_is_read_and_recomputed(sample) -> None:
    for one, share in zip(sample["custodians"], shares_of(sample).values(), strict=True):
        assert [[list(step) for step in path] for path in share.paths] == one["paths"]
        assert [revealed(row).hex() for row in share.rows] == one["rows"]
        header = canonical(share.public(*HEADER))
        assert header.decode() == one["header"]
        assert hashlib.sha256(header + b"".join(map(revealed, share.rows))).hexdigest() == one["core_sha256"]
        assert share.commitment().hex() == one["share_commitment"]
        assert share._attestation_private_key().private_bytes_raw().hex() == one["attestation_seed"]
        assert encode_bytes(share.attestation_key()) == one["attestation_key"]
        assert share.digest.hex() == share._digest().hex() == one["digest"]
        assert share.is_whole()
        assert json.loads(share.to_file()) == json.loads(one["document"])


def test_the_record_is_read_and_recomputed(sample) -> None:
    record = record_of(sample)
    assert record.fingerprint == record.own_fingerprint() == sample["record"]["fingerprint"]
    members = set(type(record).model_fields) - {"fingerprint", "signatures"}
    assert hashlib.sha256(canonical(record.public(*members))).hexdigest() == sample["record"]["canonical_sha256"]
    assert json.loads(record.to_file()) == json.loads(sample["record"]["document"])
    findings = examine(presented(shares_of(sample).values()), record)
    assert {finding.status.value for finding in findings} == {"intact"}


def test_exactly_the_quorums_recover(sample) -> None:
    shares, record = shares_of(sample), record_of(sample)
    for names in sample["smallest_quorums"]:
        for known in (record, None):
            recovery = recover(presented(shares[name] for name in names), known)
            assert revealed(recovery.secret).hex() == sample["secret"]
    for names in sample["largest_insufficient"]:
        for known in (record, None):
            with pytest.raises(NotEnoughSharesError):
                recover(presented(shares[name] for name in names), known)


def test_the_payload_opens(sample) -> None:
    payload = Secret.of(bytes.fromhex(sample["payload"]))
    assert revealed(open_payload(payload)).hex() == sample["secret"]
    points = [point for share in shares_of(sample).values() for point in share.points()]
    root = [point for point in points if len(point.path) == 1][: sample["rule"]["need"]]
    if len({point.path for point in root}) == sample["rule"]["need"]:
        assert recover_payload(Field(int(sample["field"], 16)), root) == payload


# Cases.


def wanted(test: dict[str, Any]) -> str:
    """What is to be found: a refusal's class, or "intact".

    FORMAT.md, section 1, keeps format characters and line and paragraph separators out of texts; a sample that holds
    one in its label is no document, whatever else it was made to show. Hexadecimal digits are base64url as well: a row
    in hex is a longer row, and the digest does not fit.
    """
    if "document" in test and re.search(r'"label": "[^"]*[\u200d\u202e\u2028\u2029\ufeff]', test["document"]):
        return "document"
    if test["comment"] == "a row in hex":
        return "damaged"
    return test.get("refusal", "intact")


@pytest.mark.parametrize(("group", "test"), params("record_v1"))
def test_records(group, test) -> None:
    refusal = wanted(test)
    if refusal == "intact":
        record = Record.parse(file_of(test))
        assert Record.parse(record.to_file()).fingerprint == record.fingerprint
    else:
        reason = {"damaged": "fingerprint does not fit", "inconsistent dealing": "checks contradict"}
        with pytest.raises(DocumentError, match=reason.get(refusal)):
            Record.parse(file_of(test))


@pytest.mark.parametrize(("group", "test"), params("share_v1"))
def test_shares(group, test) -> None:
    record = Record.parse(group["record"].encode())
    refusal = wanted(test)
    if refusal == "document":
        with pytest.raises(DocumentError):
            Share.parse(file_of(test))
    else:
        (finding,) = examine([Presented("given", Share.parse(file_of(test)))], record)
        assert finding.status.value == refusal


RAISED = {
    "too few": (NotEnoughSharesError,),
    "damaged": (NotEnoughSharesError,),
    "never mix": (SetMismatchError, EpochMismatchError, NotEnoughSharesError),
    "wrong share": (VerificationError,),
    "faulty dealer": (VerificationError,),
}


@pytest.mark.parametrize(("group", "test"), params("set_v1_recover"))
def test_recoveries(group, test) -> None:
    shares = [Presented(name, Share.parse(group["documents"][name].encode())) for name in test["given"]]
    if test["result"] == "valid" or test["comment"] == "three and one of the next epoch":
        # The page's reader is free to refuse what does not belong; this package sets it aside and names it.
        recovery = recover(shares)
        assert revealed(recovery.secret).hex() == group["secret"]
        intact = {finding.source for finding in recovery.findings if finding.status.value == "intact"}
        wrong = {name for name in intact if "forged" in name or "damaged" in name or "lowered" in name}
        # Two errors that cancel leave exactly k shares in agreement on the right secret: there is no telling then.
        assert not wrong or ("cancel" in test["comment"] and len(intact) == 3)
    else:
        with pytest.raises(RAISED[test["refusal"]]):
            recover(shares)


def test_base64url_of_the_samples_is_that_of_the_standard_library(sample) -> None:
    """RFC 4648, section 5, by the standard library."""
    for one in sample["custodians"]:
        document = json.loads(one["document"])
        for text, row in zip(document["rows"], one["rows"], strict=True):
            assert base64.urlsafe_b64decode(text + "=" * (-len(text) % 4)).hex() == row
