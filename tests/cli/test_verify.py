"""``shares verify``: each finding in words and as JSON, the exit codes 0, 4 and 5, and what it says is not proved."""

from __future__ import annotations

import json
import os

import pytest
from cli.harness import NAMES, Place, run
from strategies import crooked_split, flat, flipped, with_rows

from shares.documents.share import Share


def statuses(*arguments: object) -> list[str]:
    return [one["status"] for one in run("verify", *map(str, arguments), "--json").json["shares"]]


def test_intact_shares_with_the_record(dealt: Place) -> None:
    result = run("verify", *dealt.shares, "--record", dealt.record)
    lines = result.out.splitlines()
    assert (result.code, result.err) == (0, "")
    assert len([line for line in lines if ": intact - commitment and consistency check fit the record" in line]) == 5
    assert "5 of 5 intact, set Tide archive root." in lines
    fingerprint = json.loads(dealt.record.read_text())["fingerprint"]
    said = " ".join(lines)
    assert f"fingerprint {fingerprint}" in said
    assert "It does not prove who made that record" in said
    assert "Next:" not in said


def test_intact_shares_alone_prove_less_and_it_is_said(dealt: Place) -> None:
    result = run("verify", *dealt.shares)
    said = " ".join(result.out.splitlines())
    assert result.code == 0
    assert said.count(": intact - its own digest fits, and it agrees with the others given") == 5
    assert "does not prove that they are the shares that were dealt" in said
    assert "give --record" in said


def test_one_share_alone(dealt: Place) -> None:
    assert run("verify", dealt.shares[0]).code == 0
    assert run("verify", dealt.shares[0], "--record", dealt.record).code == 0


def test_json_with_and_without_the_record(dealt: Place) -> None:
    told = run("verify", *dealt.shares, "--record", dealt.record, "--json").json
    assert told["record"] == json.loads(dealt.record.read_text())["fingerprint"]
    assert [(one["file"], one["custodian"]) for one in told["shares"]] == [
        (os.fspath(path), path.name.removesuffix(".share.json")) for path in dealt.shares
    ]
    alone = run("verify", *dealt.shares, "--json").json
    assert (alone["done"], alone["record"], alone["repeated"]) == (True, None, [])
    assert "does not prove" in alone["proves"]


def test_each_kind_of_finding_has_its_exit_code(dealt: Place, tmp_path_factory: pytest.TempPathFactory) -> None:
    other = Place.make(tmp_path_factory.mktemp("other") / "place")
    other.split(names=["quay", *NAMES[1:3]])
    good, bad, missing = dealt.shares[0], dealt.folder / "bad.json", dealt.folder / "missing.json"
    bad.write_bytes(dealt.shares[1].read_bytes()[:-40])
    record = ("--record", dealt.record)
    foreign = other.shares[0]
    expected = {
        (good,): 0,
        (good, bad): 4,
        (bad,): 4,
        (good, missing): 5,
        (missing,): 5,
        (good, missing, bad): 4,
        (good, foreign): 4,
        (foreign, missing): 4,
    }
    assert {files: run("verify", *files, *record).code for files in expected} == expected
    without = {files: code for files, code in expected.items() if files != (foreign, missing)}
    assert {files: run("verify", *files).code for files in without} == without
    assert statuses(good, bad, missing, foreign, *record) == ["intact", "damaged", "unreadable", "foreign set"]
    assert "keep the file as it is" in run("verify", good, bad).out


@pytest.mark.parametrize("record", [True, False])
def test_a_flipped_bit_of_the_row_is_damage(dealt: Place, record: bool) -> None:
    share = Share.parse(dealt.shares[0].read_bytes())
    bent = share.model_copy(update={"rows": with_rows(share, flipped(5))})
    dealt.shares[0].write_bytes(bent.to_file())
    result = run("verify", *dealt.shares, *(["--record", dealt.record] if record else []))
    assert result.code == 4
    assert "dry-dock.share.json (dry-dock): damaged - its own digest does not fit" in result.out
    assert "4 of 5 intact" in result.out


def test_a_custodian_whom_the_record_does_not_name(dealt: Place) -> None:
    members = json.loads(dealt.shares[0].read_bytes())
    share = Share.parse(json.dumps(members | {"custodian": "east-quay"}).encode())
    dealt.shares[0].write_bytes(share.model_copy(update={"digest": share._digest()}).to_file())
    assert statuses(*dealt.shares, "--record", dealt.record)[0] == "not in the record"
    # Alone, its digest fits and it contradicts nobody: that is what having no record means.
    assert run("verify", dealt.shares[0]).code == 0


def test_a_dishonest_dealer_is_caught_by_the_custodian_concerned(dealt: Place) -> None:
    made = crooked_split(
        b"made up",
        flat(2, 3),
        bend=lambda dealing: (
            dealing.points["south-pier"][0].row.view().__setitem__(0, 0xFF)
            if dealing.points["south-pier"][0].row.view()[0] != 0xFF
            else dealing.points["south-pier"][0].row.view().__setitem__(0, 0)
        ),
    )
    record = dealt.folder / "crooked.json"
    record.write_bytes(made.record.to_file())
    paths = [dealt.folder / f"{share.custodian}.json" for share in made.shares]
    for path, share in zip(paths, made.shares, strict=True):
        path.write_bytes(share.to_file())
    assert statuses(*paths, "--record", record) == ["intact", "inconsistent dealing", "intact"]
    assert "the dealer was faulty or dishonest" in run("verify", paths[1], "--record", record).out
    # Nobody can tell without the record.
    assert statuses(*paths) == ["intact"] * 3


def test_names_from_a_file_cannot_steer_the_terminal(dealt: Place) -> None:
    path = dealt.folder / "a\x1b]0;title\x07\n.json"
    path.write_bytes(dealt.shares[0].read_bytes())
    for arguments in (["verify", path], ["recover", path, *dealt.shares[1:3], "--check"], ["show", path]):
        result = run(*arguments)
        assert result.code == 0
        assert all(line.isprintable() for line in (result.out + result.err).splitlines())


def test_the_order_given_is_the_order_told(dealt: Place) -> None:
    backwards = dealt.shares[::-1]
    told = run("verify", *backwards, "--json").json
    assert [one["file"] for one in told["shares"]] == list(map(os.fspath, backwards))


def test_files_after_two_hyphens_are_files(dealt: Place, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(dealt.drop)
    os.link(dealt.shares[0], dealt.drop / "--json")
    result = run("verify", "--", "--json")
    assert (result.code, result.out.splitlines()[0][:17]) == (0, "--json (dry-dock)")
