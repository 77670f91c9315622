"""Two policies side by side: the sentence goes with the numbers, whichever comes first."""

from __future__ import annotations

from pathlib import Path

import pytest

from shares.documents.policy import Policy
from shares.planning.compare import side, verdict
from shares.planning.examine import examine
from shares.planning.model import model_of
from shares.planning.odds import Odds, odds

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.toml")), ids=lambda path: path.stem)
def test_a_side_holds_what_was_found_elsewhere(path: Path) -> None:
    policy = Policy.parse(path.read_bytes())
    found = side(policy, 5)
    assert (found.plan, found.model, found.odds) == (examine(policy), model_of(policy), odds(model_of(policy), 5))


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
