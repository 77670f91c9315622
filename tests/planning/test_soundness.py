"""What is called sound of a model is what the examination of the same policy, written out, finds nothing serious in.

Source: ``findings`` itself, on policies made at random in which managers, people and sites overlap.
"""

from __future__ import annotations

import random
from pathlib import Path

import pytest

from shares.documents.policy import Policy
from shares.planning.changes import with_another
from shares.planning.examine import examine
from shares.planning.lineup import lined_up
from shares.planning.model import model_of
from shares.planning.soundness import sound

LIKE = Path(__file__).parents[2] / "examples" / "policies" / "break-glass.toml"


def policy_text(custodians: list[tuple[str, str, str, str]], need: int) -> str:
    text = 'label = "Tide archive"\nkey_type = "other"\n'
    for name, person, site, manager in custodians:
        text += f'[[custodian]]\nname = "{name}"\nperson = "{person}"\nsite = "{site}"\nreports_to = "{manager}"\n'
    names = ", ".join(f'"{name}"' for name, *_ in custodians)
    return f"{text}[rule]\nneed = {need}\nfrom = [{names}]\n"


def at_random(lot: random.Random) -> list[tuple[str, str, str, str]]:
    """Three to seven custodians; some person holds two shares, and some are managers of others."""
    people = [f"keeper {i}" for i in range(lot.randint(3, 6))]
    return [
        (f"pier {i}", lot.choice(people), f"quay {lot.randint(0, 4)}", lot.choice([*people, "board", "trust"]))
        for i in range(lot.randint(3, 7))
    ]


def serious(text: str) -> set[str]:
    return {one.code for one in examine(Policy.parse(text.encode())).serious}


@pytest.mark.parametrize("seed", range(8))
def test_it_is_what_the_examination_finds(seed: int) -> None:
    lot = random.Random(seed)
    outcomes = set()
    for _ in range(60):
        custodians = at_random(lot)
        need = lot.randint(1, len(custodians))
        text = policy_text(custodians, need)
        outcomes.add(sound(model_of(Policy.parse(text.encode()))))
        assert sound(model_of(Policy.parse(text.encode()))) is not bool(serious(text)), (text, serious(text))
    assert outcomes == {True, False}


@pytest.mark.parametrize("seed", range(8))
def test_another_custodian_commands_nobody(seed: int) -> None:
    """One more like somebody, written out: same site, same manager, another person."""
    lot = random.Random(100 + seed)
    for _ in range(40):
        custodians = at_random(lot)
        like = lot.choice([one for one in custodians if one[1] != one[3]] or custodians)
        if like[1] == like[3]:
            continue
        need = lot.randint(1, len(custodians))
        more = [*custodians, (f"{like[0]} b", "somebody new", *like[2:])]
        twin = with_another(model_of(Policy.parse(policy_text(custodians, need).encode())), like[0])
        written = policy_text(more, need)
        assert sound(twin) is not bool(serious(written)), (written, serious(written))


def test_rules_over_a_policys_custodians_are_judged_as_they_stand() -> None:
    custodians = lined_up(model_of(Policy.parse(LIKE.read_bytes())))
    # The harbour master has two piers among the first custodians, and whoever is imagined like them.
    assert sound(custodians.rule(3, 5))
    assert not sound(custodians.rule(1, 5))
    assert not sound(custodians.rule(5, 5))
    assert not sound(custodians.rule(2, 5))
