"""``shares plan --html``: the page is whole, private, and never written over anything.

Source: the page of the library, which tests/planning looks at in a browser.
"""

from __future__ import annotations

import stat
from pathlib import Path

import pytest
from cli.harness import assert_refused, run

import shares
from shares.documents.policy import Policy
from shares.planning.advice import outlook
from shares.planning.assumed import assumptions
from shares.planning.examine import examine
from shares.planning.model import model_of
from shares.planning.page import drawn, plan_page

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"
GATE = EXAMPLES / "tide-gate.toml"


def test_the_page_is_the_librarys_and_private(tmp_path: Path) -> None:
    page = tmp_path / "plan.html"
    result = run("plan", GATE, "--years", "5", "--html", page)
    assert (result.code, result.err) == (0, "")
    assert f"Page, confidential like this: {page}\n" in result.out
    policy = Policy.parse(GATE.read_bytes())
    model = model_of(policy)
    assert page.read_bytes() == plan_page(
        examine(policy),
        model,
        outlook(model, 5),
        drawn(model, 5),
        assumptions(policy),
        digest=policy.digest(),
        program=f"shares {shares.__version__}",
    )
    assert stat.S_IMODE(page.stat().st_mode) == 0o600
    assert run("plan", GATE, "--html", tmp_path / "other.html", "--json").json["page"] == str(tmp_path / "other.html")
    assert run("plan", GATE, "--json").json["page"] is None


def test_a_name_that_is_taken_is_refused_before_anything_is_worked_out(tmp_path: Path) -> None:
    page = tmp_path / "plan.html"
    page.write_text("minutes of the last meeting")
    assert_refused(["plan", GATE, "--html", page], 5, "exists already and is never overwritten")
    assert page.read_text() == "minutes of the last meeting"
    assert_refused(["plan", GATE, "--html", tmp_path / "no" / "plan.html"], 5, "does not exist")
    assert_refused(["plan", GATE, "--html", ""], 2, "an empty value is given")


@pytest.mark.parametrize("more", [("--targets", "loss=0.1"), ("--compare", GATE)])
def test_the_page_is_of_one_plan(tmp_path: Path, more: tuple[str, ...]) -> None:
    page = tmp_path / "plan.html"
    assert_refused(["plan", GATE, *more, "--html", page], 2, "--html is the page of a plan")
    assert not page.exists()


def test_a_refused_policy_has_its_page_all_the_same(tmp_path: Path) -> None:
    path, page = tmp_path / "policy.toml", tmp_path / "plan.html"
    path.write_text((EXAMPLES / "first-draft.toml").read_text().replace("pad = 64", "pad = 64\nstrict = true"))
    assert run("plan", path, "--html", page).code == 4
    assert b"Serious</strong>" in page.read_bytes()
