"""By what custodians are counted together: spellings, managers who are custodians themselves, what is not stated."""

from __future__ import annotations

from typing import Any

from strategies import toml_of

from shares.documents.policy import Policy
from shares.planning import labels


def policy_of(*custodians: dict[str, Any]) -> Policy:
    named = [{"person": f"keeper of {c['name']}", "site": "pier house", "reports_to": "board", **c} for c in custodians]
    rule = {"need": 1, "from": [custodian["name"] for custodian in named]}
    return Policy.parse(toml_of({"label": "Tide archive", "custodian": named, "rule": rule}))


def test_spellings_are_one_label_shown_as_first_written() -> None:
    policy = policy_of(
        {"name": "north-pier", "person": "Keeper One", "site": "Pier  House"},
        {"name": "south-pier", "person": "keeper  one", "site": "pier house"},
        {"name": "registrar", "person": "Keeper Two", "site": "dock house"},
    )
    assert labels.people(policy) == {"north-pier": "Keeper One", "south-pier": "Keeper One", "registrar": "Keeper Two"}
    assert labels.holders(labels.sites(policy)) == {
        "Pier  House": {"north-pier", "south-pier"},
        "dock house": {"registrar"},
    }
    assert labels.custodians(policy) == {name: name for name in ("north-pier", "south-pier", "registrar")}


def test_a_manager_commands_their_own_shares_too() -> None:
    policy = policy_of(
        {"name": "harbour-office", "person": "Harbour Master", "reports_to": "board"},
        {"name": "north-pier", "reports_to": "harbour master"},
        {"name": "south-pier", "reports_to": "keeper of north-pier"},
    )
    assert labels.lines(policy) == {
        "harbour-office": "board",
        "north-pier": "harbour master",
        "south-pier": "keeper of north-pier",
    }
    # The next manager only: the board does not answer for whom the harbour master commands.
    assert labels.commanded(policy) == {
        "board": {"harbour-office"},
        "harbour master": {"north-pier", "harbour-office"},
        "keeper of north-pier": {"south-pier", "north-pier"},
    }


def test_ways_of_delivery_where_they_are_stated() -> None:
    policy = policy_of(
        {"name": "north-pier", "carrier": "harbour boat", "channel": "by hand"},
        {"name": "south-pier", "carrier": "Harbour Boat"},
        {"name": "registrar", "channel": "By Hand"},
        {"name": "dry-dock"},
    )
    assert labels.carriers(policy) == {"north-pier": "harbour boat", "south-pier": "harbour boat"}
    assert labels.channels(policy) == {"north-pier": "by hand", "registrar": "by hand"}


def test_media_where_they_are_stated() -> None:
    policy = policy_of(
        {"name": "north-pier", "medium": "paper"},
        {"name": "south-pier", "medium": "Paper"},
        {"name": "registrar"},
    )
    assert labels.media(policy) == {"north-pier": "paper", "south-pier": "paper"}
