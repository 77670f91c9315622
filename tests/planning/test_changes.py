"""What if: each change is the one that its name says, and the rest of the model stays.

Source: the rule followed by hand, for every set of custodians.
"""

from __future__ import annotations

from dataclasses import replace

import pytest
from strategies import sets_of

from shares.errors import ParameterError
from shares.planning.changes import (
    attesting_every,
    moved,
    on_another_medium,
    refreshing_every,
    reporting_elsewhere,
    with_another,
)
from shares.planning.model import Cause, Model
from shares.sharing.rule import Rule

PIERS = Rule(2, ("north-pier", "south-pier", "south-pier", Rule(1, ("north-pier", "registrar"))))


def cause(kind: str, *members: str, loss: float = 0.1) -> Cause:
    return Cause(kind, f"{kind} {members[0]}", frozenset(members), loss, 0.2, 0.3)  # type: ignore[arg-type]


MODEL = Model(
    PIERS,
    (
        cause("share", "north-pier"),
        cause("share", "south-pier"),
        cause("person", "north-pier", "registrar"),
        cause("site", "north-pier", "south-pier"),
        cause("line", "registrar"),
    ),
    attest_every=90,
)


def test_intervals() -> None:
    assert attesting_every(MODEL, 45) == replace(MODEL, attest_every=45)
    assert attesting_every(MODEL, None).attest_every is None
    assert refreshing_every(MODEL, 365) == replace(MODEL, refresh_every=365)
    with pytest.raises(ParameterError):
        attesting_every(MODEL, 0)


def test_another_custodian_stands_where_the_first_does_and_is_another_person() -> None:
    more = with_another(MODEL, "north-pier")
    assert set(more.custodians) == {*MODEL.custodians, "north-pier 2"}
    assert more.rule.need == PIERS.need
    for held in sets_of(MODEL.custodians):
        assert more.rule.satisfied_by(held) == PIERS.satisfied_by(held)
        swapped = {"north-pier 2" if name == "north-pier" else name for name in held}
        assert more.rule.satisfied_by(swapped) == PIERS.satisfied_by(held)
    hit = {(one.kind, one.name): set(one.members) for one in more.causes}
    assert hit["share", "north-pier 2"] == hit["person", "north-pier 2"] == {"north-pier 2"}
    assert hit["person", "person north-pier"] == {"north-pier", "registrar"}
    assert hit["site", "site north-pier"] == {"north-pier", "north-pier 2", "south-pier"}
    assert hit["line", "line registrar"] == {"registrar"}
    # Weights go with the place.
    assert with_another(MODEL, "south-pier").rule.children.count("south-pier 2") == 2
    # A second one finds a name that is free.
    assert "north-pier 3" in with_another(more, "north-pier").custodians
    with pytest.raises(ParameterError):
        with_another(MODEL, "dry-dock")


def test_a_share_at_a_site_of_its_own() -> None:
    apart = moved(MODEL, "north-pier")
    sites = [one for one in apart.causes if one.kind == "site"]
    assert [set(site.members) for site in sites] == [{"south-pier"}, {"north-pier"}]
    assert {(site.loss, site.leak, site.absent) for site in sites} == {(0.1, 0.2, 0.3)}
    assert [one for one in apart.causes if one.kind != "site"] == [one for one in MODEL.causes if one.kind != "site"]
    assert len([one for one in moved(apart, "north-pier").causes if one.kind == "site"]) == 2
    with pytest.raises(ParameterError):
        moved(MODEL, "dry-dock")


def test_a_share_on_another_medium() -> None:
    sticks = replace(MODEL, causes=(*MODEL.causes, cause("medium", "north-pier", "south-pier")))
    apart = on_another_medium(sticks, "south-pier")
    media = [one for one in apart.causes if one.kind == "medium"]
    assert [(one.members, one.loss) for one in media] == [({"north-pier"}, 0.1), ({"south-pier"}, 0.1)]
    assert [one for one in apart.causes if one.kind != "medium"] == list(MODEL.causes)
    with pytest.raises(ParameterError):
        on_another_medium(sticks, "dry-dock")


def test_whoever_reports_elsewhere_takes_along_all_shares_they_hold_but_not_the_line_they_command() -> None:
    board = Cause("line", "board", frozenset({"north-pier", "south-pier", "registrar"}), 0.1, 0.2, 0.3)
    own = Cause("line", "PERSON  north-pier", frozenset({"north-pier", "registrar", "south-pier"}), 0.3)
    model = replace(MODEL, causes=(*MODEL.causes[:4], board, own))
    apart = reporting_elsewhere(model, "registrar")
    lines = [one for one in apart.causes if one.kind == "line"]
    assert [one.members for one in lines] == [{"south-pier"}, {"north-pier", "registrar"}, own.members]
    assert lines[1] == replace(board, name="a line for registrar", members=lines[1].members)
    assert apart.causes[:4] == model.causes[:4]
    with pytest.raises(ParameterError):
        reporting_elsewhere(model, "dry-dock")
