"""Two policies side by side: the sentence goes with the numbers, whichever comes first."""

from __future__ import annotations

from pathlib import Path

import pytest

from shares.documents.policy import Policy
from shares.planning import compare as module
from shares.planning.compare import side, verdict
from shares.planning.confidence import interval
from shares.planning.examine import examine
from shares.planning.model import model_of
from shares.planning.odds import Odds, odds
from shares.planning.reckoned import Reckoned
from shares.planning.simulate import Estimate, Simulated, simulate

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.toml")), ids=lambda path: path.stem)
def test_a_side_holds_what_was_found_elsewhere(path: Path) -> None:
    policy = Policy.parse(path.read_bytes())
    found = side(policy, 5)
    assert (found.plan, found.model, found.odds) == (examine(policy), model_of(policy), odds(model_of(policy), 5))
    assert (found.simulated, found.now) == (None, found.odds)


def test_a_side_is_simulated_where_it_is_not_exact(monkeypatch: pytest.MonkeyPatch) -> None:
    policy = Policy.parse((EXAMPLES / "tide-gate.toml").read_bytes())
    monkeypatch.setattr(module, "odds", lambda *_: None)
    found = side(policy, 5, histories=1000, seed=3)
    assert found.odds is None
    assert found.simulated == found.now == simulate(model_of(policy), 5, histories=1000, seed=3)


@pytest.mark.parametrize(
    ("first", "second", "words"),
    [
        ((0.1, 0.1, 0.1), (0.1, 0.1, 0.1), "The odds of both policies are alike, to within a tenth."),
        ((0.1, 0.1, 0.1), (0.109, 0.0911, 0.1), "The odds of both policies are alike, to within a tenth."),
        ((0.1, 0.1, 0.1), (0.2, 0.1, 0.1), "The first policy is better in loss, and worse in nothing."),
        ((0.1, 0.1, 0.1), (0.0, 0.1, 0.05), "The second policy is better in loss and absence, and worse in nothing."),
        (
            (0.1, 0.2, 0.3),
            (0.2, 0.3, 0.4),
            "The first policy is better in loss, exposure and absence, and worse in nothing.",
        ),
        (
            (0.1, 0.2, 0.3),
            (0.2, 0.1, 0.3),
            "The first policy is better in loss, the second in exposure: it is for you to weigh them.",
        ),
    ],
)
def test_the_verdict(first: tuple[float, ...], second: tuple[float, ...], words: str) -> None:
    one, other = Odds(*first, 1.0), Odds(*second, 1.0)
    assert verdict(one, other) == words
    swapped = words.replace("first", "x").replace("The second", "The first").replace("the second", "the x")
    if "it is for you" not in words:
        assert verdict(other, one) == swapped.replace("The x", "The second")


def seen(*counts: int) -> Simulated:
    """Odds of which so many were seen among 1,000 histories."""
    estimates = [Estimate(count / 1000, *interval(count, 1000), count) for count in counts]
    return Simulated(*estimates, None, 1000, 1, "2.4.0")  # type: ignore[misc]


@pytest.mark.parametrize(
    ("first", "second", "words"),
    [
        # 5 of 1,000 are anything from 0.16 % to 1.2 %.
        (seen(5, 5, 5), seen(10, 10, 10), "So many histories do not show that one policy is better than the other."),
        (
            seen(5, 5, 5),
            Odds(0.01, 0.002, 0.005, 1),
            "So many histories do not show that one policy is better than the",
        ),
        (
            seen(5, 5, 5),
            Odds(0.02, 0.001, 0.005, 1),
            "The first policy is better in loss, the second in exposure: it is for you to weigh them.",
        ),
        (
            seen(0, 500, 500),
            seen(50, 500, 500),
            "The first policy is better in loss, and worse in nothing that so many histories show.",
        ),
        (seen(0, 0, 0), Odds(0.003, 0, 0, 1), "So many histories do not show"),
        # Apart, yet by less than a tenth.
        (seen(*[500] * 3), Odds(0.54, 0.54, 0.54, 1), "So many histories do not show"),
    ],
)
def test_a_verdict_on_what_is_simulated(first: Reckoned, second: Reckoned, words: str) -> None:
    assert verdict(first, second).startswith(words)
    swapped = verdict(second, first)
    assert swapped.startswith(words) is words.startswith("So many")
