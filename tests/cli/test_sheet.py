"""``shares sheet``: one page and its receipt in a new private file, or a clear refusal.

Source: the exit codes are this project's own (README). What is on the page is tested in tests/paper.
"""

from __future__ import annotations

import json
import os
import re
from pathlib import Path

import pytest
from cli.harness import NAMES, Place, assert_refused, run
from cli.test_show import leaks, rows_of

from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import Cost, passphrase_sealer
from shares.memory import Secret


def page(path: Path) -> str:
    return path.read_text("utf-8")


def test_a_page_for_a_bare_share(dealt: Place) -> None:
    target = dealt.folder / "sheet.html"
    done = run("sheet", dealt.share("north-pier"), "--to", target)
    assert done.code == 0
    assert target.stat().st_mode & 0o7777 == 0o600
    serial = re.search(r"^Sheet ([A-Z2-7]{4}-[A-Z2-7]{4}) of north-pier, epoch 1: 13 lines to type", done.out)
    assert serial is not None
    assert page(target).count(serial[1]) == 3
    assert done.err.startswith("Caution: this share is bare, and so is its sheet")
    assert "Next: open the file in a browser on a computer without network" in done.out.replace("\n", " ")


def test_by_script(dealt: Place) -> None:
    target = dealt.folder / "sheet.html"
    done = run("sheet", dealt.share("dry-dock"), "--to", target, "--serial", "Harbour 0017", "--json")
    told = done.json
    assert (done.code, done.err, told["done"]) == (0, "", True)
    assert (told["file"], told["custodian"], told["epoch"], told["serial"]) == (
        str(target),
        "dry-dock",
        1,
        "Harbour 0017",
    )
    assert (told["lines"], told["code"]["level"]) == (13, "H")
    assert any("bare" in caution for caution in told["cautions"])
    assert "Harbour 0017" in page(target)


def test_a_wrapped_share_needs_no_key_to_be_printed(dealt: Place) -> None:
    share = Share.parse(dealt.share("registrar").read_bytes())
    wrapped = dealt.folder / "registrar.wrapped.json"
    wrapped.write_bytes(WrappedShare.wrap(share, passphrase_sealer(Secret.of(b"made up"), Cost(64, 1, 1))).to_file())
    target = dealt.folder / "sheet.html"
    done = run("sheet", wrapped, "--to", target)
    assert (done.code, done.err) == (0, "")
    assert "Sealed with a passphrase" in page(target)


def test_a_long_share_has_a_code_alone_and_says_so(place: Place) -> None:
    place.key.write_bytes(bytes(700))
    place.split()
    target = place.folder / "sheet.html"
    done = run("sheet", place.shares[0], "--to", target)
    assert (done.code, "a code alone" in done.out) == (0, True)
    assert "Caution: there are no lines to type" in done.err


@pytest.mark.parametrize("json_option", [[], ["--json"]])
def test_nothing_of_the_share_is_printed_to_the_terminal(dealt: Place, json_option: list[str]) -> None:
    done = run("sheet", dealt.shares[0], "--to", dealt.folder / "sheet.html", *json_option)
    assert done.code == 0
    assert leaks(done.out + done.err, rows_of(dealt)) == []
    lines = re.findall(r"<td>([A-Z2-7]{3,4})</td>", page(dealt.folder / "sheet.html"))
    assert len(lines) == 13 * 8
    assert not [group for group in lines if len(group) == 4 and group in done.out + done.err]


def test_refusals(dealt: Place, place: Place) -> None:
    target = dealt.folder / "sheet.html"
    good = dealt.share(NAMES[0])
    taken = dealt.folder / "taken.html"
    taken.write_text("here before")
    damaged = dealt.folder / "damaged.json"
    damaged.write_text(json.dumps(json.loads(good.read_text()) | {"epoch": 2}))
    watched = dealt.folder
    assert_refused(["sheet", good, "--to", taken], 5, "taken.html", "exists already", watched=watched)
    assert_refused(["sheet", damaged, "--to", target], 4, "damaged.json", "damaged or edited", watched=watched)
    assert_refused(["sheet", dealt.record, "--to", target], 4, "record.json", "is wanted here", watched=watched)
    assert_refused(["sheet", dealt.folder / "none", "--to", target], 5, "does not exist", watched=watched)
    assert_refused(["sheet", good, "--to", watched / "no" / "x"], 5, "does not exist", watched=watched)
    assert_refused(["sheet", good], 2, "--to", watched=watched)
    assert_refused(["sheet", good, "--to", target, "--serial", "x" * 41], 2, "--serial", "40", watched=watched)
    assert_refused(["sheet", good, "--to", target, "--serial", ""], 2, "--serial", watched=watched)
    place.key.write_bytes(os.urandom(65_536))
    place.split()
    assert_refused(["sheet", place.shares[0], "--to", target], 2, "too large for paper", "encrypt", watched=watched)
