"""``shares show``: what it tells is public, and nothing of a share's rows is in it in any form."""

from __future__ import annotations

import base64
import json

import pytest
from cli.harness import LABEL, NAMES, SECRET, Place, run

from shares.documents.record import Record
from shares.documents.share import Share


def windows(data: bytes | str, length: int = 8) -> set:
    return {data[i : i + length] for i in range(len(data) - length + 1)}


def secret_forms(row: bytes) -> dict[str, set]:
    """Every stretch of eight characters (bytes) of a row in the forms in which it could be printed."""
    forms: dict[str, set] = {"raw": windows(row), "hex": windows(row.hex()), "HEX": windows(row.hex().upper())}
    # Base64 depends on where the row starts within a group of three bytes.
    for shift in range(3):
        forms[f"base64 {shift}"] = windows(base64.b64encode(row[shift:]).decode().rstrip("="))
        forms[f"base64url {shift}"] = windows(base64.urlsafe_b64encode(row[shift:]).decode().rstrip("="))
    forms["base32"] = windows(base64.b32encode(row).decode().rstrip("="))
    forms["numbers"] = {", ".join(map(str, row[i : i + 4])) for i in range(len(row) - 3)}
    return forms


def leaks(output: str, rows: list[bytes]) -> list[str]:
    """Name the forms of rows found in an output; not what was found."""
    raw = output.encode("utf-8", "surrogateescape")
    return sorted(
        {
            form
            for row in rows
            for form, pieces in secret_forms(row).items()
            if any(piece in (raw if isinstance(piece, bytes) else output) for piece in pieces)
        }
    )


def rows_of(place: Place) -> list[bytes]:
    rows = []
    for path in place.shares:
        for row in Share.parse(path.read_bytes()).rows:
            with row.view() as view:
                rows.append(bytes(view))
    return rows


def test_the_search_for_leaks_finds_them(dealt: Place) -> None:
    rows = rows_of(dealt)
    text = dealt.shares[0].read_text()
    assert "base64url 0" in leaks(text, rows)
    digits = rows[0][5:14].hex()
    # Eight digits that happen to have no letter among them are both forms at once.
    both = any(piece.isdecimal() for piece in windows(digits))
    assert leaks(f"x{digits}x", rows) == (["HEX", "hex"] if both else ["hex"])
    assert leaks(repr(list(rows[1][:9])), rows) == ["numbers"]
    assert leaks("nothing of the kind", rows) == []


@pytest.mark.parametrize("json_option", [[], ["--json"]])
def test_no_row_is_ever_shown(dealt: Place, json_option: list[str]) -> None:
    rows = [*rows_of(dealt), SECRET]
    for path in dealt.shares:
        result = run("show", path, *json_option)
        assert result.code == 0
        found = leaks(result.out + result.err, rows)
        assert found == []


@pytest.mark.parametrize("json_option", [[], ["--json"]])
def test_no_other_command_shows_one_either(dealt: Place, json_option: list[str]) -> None:
    rows = [*rows_of(dealt), SECRET]
    for arguments in (
        ["verify", *dealt.shares],
        ["verify", *dealt.shares, "--record", dealt.record],
        ["recover", *dealt.shares, "--check"],
        ["recover", *dealt.shares[:3], "--to", dealt.folder / f"out{len(json_option)}"],
        ["recover", *dealt.shares[:2], "--check"],
    ):
        result = run(*arguments, *json_option)
        found = leaks(result.out + result.err, rows)
        assert found == []


def test_the_facts_of_a_share(dealt: Place) -> None:
    path = dealt.share("registrar")
    share = Share.parse(path.read_bytes())
    result = run("show", path)
    assert (result.code, result.err) == (0, "")
    for fact in (
        "share (its rows are secret and not shown)",
        LABEL,
        "registrar",
        share.set.hex(),
        "x^8 + x^4 + x^3 + x + 1",
        "x = 4 of a threshold of 3",
        "any 3 of north-pier, south-pier, light-house, registrar, dry-dock",
        share.commitment().hex(),
        str(share.record),
        "fits",
    ):
        assert fact in result.out
    told = run("show", path, "--json").json
    assert (told["done"], told["custodian"], told["epoch"], told["set"]) == (True, "registrar", 1, share.set.hex())
    assert not {"rows", "digest"} & set(told)


def test_the_facts_of_a_record(dealt: Place) -> None:
    record = Record.parse(dealt.record.read_bytes())
    result = run("show", dealt.record)
    assert (result.code, result.err) == (0, "")
    for fact in ("record (public)", LABEL, ", ".join(NAMES), record.fingerprint, record.set.hex(), "unsigned"):
        assert fact in result.out
    told = run("show", dealt.record, "--json").json
    assert told["custodians"] == list(NAMES)
    assert told["fingerprint"] == record.fingerprint


def test_a_damaged_share_is_shown_as_damaged(dealt: Place) -> None:
    members = json.loads(dealt.shares[0].read_bytes())
    dealt.shares[0].write_text(json.dumps(members | {"label": "Another label"}))
    result = run("show", dealt.shares[0])
    assert result.code == 0
    assert "does not fit: the file was damaged or edited" in result.out


def test_a_share_without_notes(dealt: Place) -> None:
    share = Share.parse(dealt.shares[0].read_bytes())
    bare = share.model_copy(update={"label": None, "rule": None, "notice": None, "record": None})
    dealt.shares[0].write_bytes(bare.model_copy(update={"digest": bare._digest()}).to_file())
    result = run("show", dealt.shares[0])
    assert (result.code, result.out.count("not stated"), "None" in result.out) == (0, 3, False)
