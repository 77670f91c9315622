"""A key's folder where a set's is wanted: refused with the commands that it has, and never called broken or packed."""

from __future__ import annotations

from pathlib import Path

import pytest
from cli.harness import assert_refused, run
from cli.keyed import OFFICE, Keyed


@pytest.fixture(scope="module")
def keyed(tmp_path_factory: pytest.TempPathFactory) -> Keyed:
    return Keyed.make(tmp_path_factory.mktemp("keyed") / "harbour").dealt()


@pytest.mark.parametrize(
    "arguments",
    [
        ["audit", "{key}"],
        ["audit", "{own}"],
        ["audit", "pack", "{key}", "--to", "{new}"],
        ["audit", "pack", "{own}", "--to", "{new}"],
        ["attest", "challenge", "{key}", "--to", "{new}", "--sign", "{signer}"],
        ["retire", "status", "{key}"],
        ["drill", "open", "{key}", "--kind", "practice", "--objective", "people know the steps", "--sign", "{signer}"],
    ],
    ids=" ".join,
)
def test_it_is_refused_with_what_it_has(keyed: Keyed, arguments: list[str]) -> None:
    names = {"key": keyed.key, "own": keyed.own("north-pier"), "new": keyed.path("new")}
    filled = [one.format(**names, signer=keyed.path(f"{OFFICE}.key.json")) for one in arguments]
    assert_refused(filled, 4, "record.json", "`shares key --help`", watched=keyed.folder)


def test_beside_sets_it_is_passed_over(keyed: Keyed, tmp_path: Path) -> None:
    (tmp_path / "a-set").mkdir()
    (tmp_path / "a-set" / "record.json").write_bytes(b"damaged")
    (tmp_path / "a-key").mkdir()
    (tmp_path / "a-key" / "record.json").write_bytes((keyed.key / "record.json").read_bytes())
    told = run("audit", tmp_path, "--json")
    assert (told.code, told.json["passed_over"]) == (4, [str(tmp_path / "a-key")])
    assert [one["where"] for one in told.json["sets"]] == [str(tmp_path / "a-set")]


def test_a_record_that_only_says_the_word_is_left_to_the_audit(tmp_path: Path) -> None:
    (tmp_path / "record.json").write_bytes(b'{"kind": "key-record"')
    told = run("audit", tmp_path)
    assert (told.code, told.out[:7]) == (4, "Broken:")
