"""No byte of a share, nor of the key that it makes, shows in an answer, in a refusal, or in what the command prints.

What is looked for, and how, is that of tests/test_canary.py.
"""

from __future__ import annotations

import traceback
from collections.abc import Callable
from datetime import timedelta
from pathlib import Path

import pytest
from attested import NEXT_DAY, RECORD, SHARES, answered, challenge, given
from cli.harness import run
from parties import card, party
from strategies import flipped, resealed, revealed, with_rows
from test_canary import Telltales

from shares import clock
from shares.custody.parties import write_party
from shares.documents.share import Share
from shares.errors import SharesError
from shares.evidence.attest import answer
from shares.evidence.judge import judge

CHALLENGE = challenge()
SHARE = SHARES["north-pier"]
BENT = with_rows(SHARE, flipped(9))
DAMAGED = SHARE.model_copy(update={"rows": BENT})
FORGED = resealed(SHARE, rows=BENT)


@pytest.fixture(scope="module")
def telltales() -> Telltales:
    rows = [revealed(row) for share in SHARES.values() for row in share.rows]
    return Telltales(*rows, revealed(DAMAGED.rows[0]), SHARE._attestation_private_key().private_bytes_raw())


def test_the_search_finds_a_row(telltales: Telltales) -> None:
    assert telltales.found(SHARE.to_file())
    assert telltales.found(SHARE._attestation_private_key().private_bytes_raw().hex())


@pytest.mark.parametrize("share", [SHARE, DAMAGED, FORGED], ids=["intact", "damaged", "forged"])
def test_an_answer_shows_no_share(share: Share, telltales: Telltales) -> None:
    made = answered(CHALLENGE, share=share)
    found = judge(made, CHALLENGE, RECORD, card=card("north-pier").fingerprint, received=NEXT_DAY, earlier={})
    for seen in (made.to_file(), repr(made), str(made), repr(found), repr(given(share))):
        assert telltales.found(seen) is None


REFUSED: dict[str, Callable[[], object]] = {
    "nobody signs": lambda: answered(CHALLENGE, signer=None, share=DAMAGED),
    "a forger does not sign": lambda: answered(CHALLENGE, signer=None, share=FORGED),
    "another's share": lambda: answered(CHALLENGE, "south-pier", share=SHARE),
    "another grade": lambda: answer(CHALLENGE, RECORD, "north-pier", grade="present", share=given(SHARE)),
    "another challenge": lambda: answered(challenge(custodians=("south-pier",)), share=SHARE),
    "a text that may not be": lambda: answered(CHALLENGE, share=SHARE, remark="a\nb"),
    "a time that is none": lambda: answered(CHALLENGE, share=SHARE, time=NEXT_DAY.replace(microsecond=5)),
}


@pytest.mark.parametrize("name", REFUSED)
def test_a_refusal_shows_no_share(name: str, telltales: Telltales) -> None:
    with pytest.raises(SharesError) as caught:
        REFUSED[name]()
    error: BaseException | None = caught.value
    seen = "".join(traceback.format_exception(caught.value))
    while error is not None:
        seen += repr(error) + str(error) + repr(error.args) + repr(vars(error))
        error = error.__cause__ or error.__context__
    assert telltales.found(seen) is None


def test_the_command_shows_no_share(telltales: Telltales, tmp_path: Path) -> None:
    write_party(party("north-pier"), tmp_path)
    (tmp_path / "passphrase").write_text("the passphrase of north-pier\n")
    (tmp_path / "record").write_bytes(RECORD.to_file())
    (tmp_path / "challenge").write_bytes(fresh())
    seen = []
    for name, share in {"intact": SHARE, "damaged": DAMAGED, "forged": FORGED}.items():
        (tmp_path / name).write_bytes(share.to_file())
        command = ["attest", "answer", tmp_path / "challenge", "--record", tmp_path / "record"]
        command += ["--share", tmp_path / name, "--sign", tmp_path / "north-pier.key.json"]
        command += ["--passphrase-file", tmp_path / "passphrase", "--to", tmp_path / f"{name}.answer"]
        done = run(*command)
        assert done.code == (0 if name == "intact" else 4)
        seen += [done.out, done.err, run(*command, "--json").out]
        checked = run(
            "attest", "check", tmp_path / "challenge", tmp_path / f"{name}.answer", "--record", tmp_path / "record"
        )
        seen += [checked.out, checked.err, (tmp_path / f"{name}.answer").read_text()]
    assert not [text for text in seen if telltales.found(text)]


def fresh() -> bytes:
    """A challenge that this machine's clock takes for one of today."""
    now = clock.now()
    return challenge(created=now, due=now + timedelta(days=1)).to_file()
