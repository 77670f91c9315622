"""What is found amiss: each finding where its cause stands, and not where it does not.

Sources: the demands named in ``shares/planning/findings.py``; the binomial sum behind ``AMPLE_LOSSES``; brute force
over all sets of custodians for who suffices and who blocks, on policies drawn at random.
"""

from __future__ import annotations

import math
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import authorised, policies, toml_of

from shares.documents.policy import Policy, folded
from shares.planning.examine import examine
from shares.planning.findings import AMPLE_LOSSES, Finding

NAMES = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock")


def sound(**changes: dict[str, Any]) -> dict[str, Any]:
    """A policy of 3 of 5 in which nothing is amiss, but for changes of single custodians."""
    custodians = [
        {
            "name": name,
            "person": f"keeper of {name}",
            "site": f"house of {name}",
            "reports_to": f"chief of {name}",
            "channel": f"road to {name}",
            "carrier": f"courier to {name}",
            "weight": 1,
            **changes.get(name.replace("-", "_"), {}),
        }
        for name in NAMES
    ]
    rule = {"need": 3, "from": list(NAMES)}
    return {"label": "Tide archive", "key_type": "symmetric", "custodian": custodians, "group": {}, "rule": rule}


def found(data: dict[str, Any]) -> dict[str, Finding]:
    plan = examine(Policy.parse(toml_of(data)))
    codes = [finding.code for finding in plan.findings]
    assert len(set(codes)) == len(codes)
    return {finding.code: finding for finding in plan.findings}


def codes(data: dict[str, Any]) -> set[str]:
    return set(found(data))


def on(member: str, value: str, *names: str) -> dict[str, dict[str, Any]]:
    return {name.replace("-", "_"): {member: value} for name in names}


def test_nothing_is_amiss_with_a_sound_policy() -> None:
    assert codes(sound()) == set()


@pytest.mark.parametrize(
    ("member", "code", "severity"),
    [
        ("person", "person-suffices", "serious"),
        ("site", "site-suffices", "serious"),
        ("reports_to", "line-suffices", "serious"),
        ("channel", "channel-suffices", "serious"),
        ("carrier", "carrier-suffices", "serious"),
    ],
)
def test_who_holds_three_of_five_suffices_and_two_do_not(member: str, code: str, severity: str) -> None:
    few = found(sound(**on(member, "the same", *NAMES[:2])))
    assert code not in few
    many = found(sound(**on(member, "the same", *NAMES[1:4])))
    assert many[code].severity == severity
    assert many[code].about == ("the same",)
    assert "the same (south-pier, light-house, registrar)" in many[code].what
    blocks = code.replace("suffices", "blocks")
    # Without three of five, two are left: who suffices here blocks as well. A channel blocks nothing for good.
    assert (blocks in many) == (member in ("person", "site", "reports_to"))


def test_a_manager_suffices_with_their_own_share() -> None:
    reports = on("reports_to", "keeper of dry-dock", "north-pier", "south-pier")
    assert found(sound(**reports))["line-suffices"].about == ("keeper of dry-dock",)
    assert "line-suffices" not in codes(sound(**on("reports_to", "keeper of wharf", "north-pier", "south-pier")))


@pytest.mark.parametrize(("member", "one", "many"), [("site", "site", "sites"), ("person", "person", "people")])
def test_two_are_too_few_and_a_third_is_enough(member: str, one: str, many: str) -> None:
    """2 of 3 custodians, spread over three places, two, and one."""
    data = {**sound(), "custodian": sound()["custodian"][:3], "rule": {"need": 2, "from": list(NAMES[:3])}}
    assert f"too-few-{many}" not in found(data)
    data["custodian"][1][member] = data["custodian"][0][member]
    two = found(data)[f"too-few-{many}"]
    assert (two.severity, len(two.about)) == ("serious", 2)
    assert two.what.startswith(f"With two {many}, one of them always makes a quorum or blocks every quorum")
    assert two.advice == f"A third {one} is needed."
    data["custodian"][2][member] = data["custodian"][0][member]
    alone = found(data)[f"too-few-{many}"]
    assert (alone.severity, len(alone.about)) == ("serious", 1)
    assert "Two more are needed" in alone.advice


@given(policies(), st.data())
def test_what_is_said_of_too_few_holds_for_every_rule_and_every_distribution(data: dict[str, Any], draw: Any) -> None:
    """Whatever the rule and however custodians are spread over two places, what makes a policy fail is found."""
    told = found(data)
    for member, many in (("site", "sites"), ("person", "people")):
        assert (f"too-few-{many}" in told) == (len({folded(one[member]) for one in data["custodian"]}) < 3)
    for member, one in (("site", "site"), ("person", "person")):
        for custodian in data["custodian"]:
            custodian[member] = draw.draw(st.sampled_from(["east side", "west side"]))
        assert {f"{one}-suffices", f"{one}-blocks", "all-needed"} & codes(data)


def test_weight_can_make_one_person_suffice() -> None:
    assert "person-suffices" not in codes(sound(north_pier={"weight": 2}))
    assert found(sound(north_pier={"weight": 3}))["person-suffices"].about == ("keeper of north-pier",)


def test_every_custodian_suffices_where_one_is_needed() -> None:
    every = found({**sound(), "rule": {"need": 1, "from": list(NAMES)}})
    assert every["person-suffices"].about == tuple(f"keeper of {name}" for name in NAMES)
    assert every["more-than-needed"].severity == "note"


def test_where_all_are_needed_that_is_said_once() -> None:
    every = found({**sound(), "rule": {"need": 5, "from": list(NAMES)}})
    assert every["all-needed"].severity == "serious"
    assert every["all-needed"].about == NAMES
    assert not {"person-blocks", "site-blocks", "line-blocks"} & set(every)
    assert "all-needed" not in codes({**sound(), "rule": {"need": 4, "from": list(NAMES)}})


def test_a_rule_of_groups_can_need_all_as_well() -> None:
    groups = {"piers": {"need": 2, "from": list(NAMES[:2])}, "others": {"need": 3, "from": list(NAMES[2:])}}
    assert "all-needed" in codes({**sound(), "group": groups, "rule": {"need": 2, "from": ["piers", "others"]}})


def test_one_person_whom_every_quorum_needs() -> None:
    data = {**sound(), "group": {"others": {"need": 2, "from": list(NAMES[1:])}}}
    data["rule"] = {"need": 2, "from": ["others", "north-pier"]}
    blocks = found(data)
    assert (blocks["person-blocks"].severity, blocks["person-blocks"].about) == ("serious", ("keeper of north-pier",))
    assert (blocks["site-blocks"].severity, blocks["site-blocks"].about) == ("serious", ("house of north-pier",))
    assert (blocks["line-blocks"].severity, blocks["line-blocks"].about) == ("caution", ("chief of north-pier",))


def test_one_custodian_alone_both_suffices_and_blocks() -> None:
    data = sound()
    data |= {"custodian": data["custodian"][:1], "rule": {"need": 1, "from": ["north-pier"]}}
    assert {"person-suffices", "person-blocks"} <= codes(data)


def test_the_margin() -> None:
    assert codes({**sound(), "rule": {"need": 4, "from": list(NAMES)}}) == {"one-loss-left"}
    assert codes({**sound(), "rule": {"need": 2, "from": list(NAMES)}}) == set()


def test_more_custodians_than_needed() -> None:
    names = [f"pier {i}" for i in range(7)]
    fields = ("person", "site", "reports_to", "channel")
    custodians = [{"name": name, **{field: f"{field} of {name}" for field in fields}} for name in names]
    for need, expected in ((4, set()), (3, {"more-than-needed"})):
        data = {**sound(), "custodian": custodians, "rule": {"need": need, "from": names}}
        assert codes(data) == expected


def test_how_many_losses_are_ample() -> None:
    """Of 7 with 4 needed, 3 may be lost: the binomial probability of 4 losses or more, one in ten each."""
    total = 2 * AMPLE_LOSSES + 1
    missing = sum(math.comb(total, lost) * 0.1**lost * 0.9 ** (total - lost) for lost in range(AMPLE_LOSSES + 1, 8))
    assert round(missing, 3) == 0.003


def test_a_custodian_nobody_needs() -> None:
    data = {**sound(north_pier={"weight": 3}), "group": {"first": {"need": 3, "from": list(NAMES[:2])}}}
    data["rule"] = {"need": 2, "from": ["first", *NAMES[2:]]}
    idle = found(data)["never-needed"]
    assert (idle.severity, idle.about) == ("caution", ("south-pier",))


def test_key_types() -> None:
    signature = found({**sound(), "key_type": "signature", "reason": "canary reason"})
    assert set(signature) == {"signature-key"}
    assert signature["signature-key"].severity == "caution"
    assert '"canary reason"' in signature["signature-key"].what
    unstated = sound()
    del unstated["key_type"]
    assert codes(unstated) == {"key-type-not-stated"}
    for key_type in ("symmetric", "private-decryption", "password", "other"):
        assert codes({**sound(), "key_type": key_type}) == set()


def test_ways_that_are_not_stated() -> None:
    data = sound()
    for custodian in data["custodian"][:2]:
        del custodian["channel"]
    assert codes(data) == set()  # the carrier is
    for custodian in data["custodian"][1:4]:
        del custodian["carrier"]
    assert found(data)["delivery-not-stated"].about == ("south-pier",)


def test_many_names_are_cut_short() -> None:
    names = [f"pier {i}" for i in range(20)]
    custodians = [{"name": name, "person": f"keeper {name}", "site": "pier house", "reports_to": "x"} for name in names]
    told = found({**sound(), "custodian": custodians, "rule": {"need": 1, "from": names}})
    assert told["person-suffices"].what.endswith("keeper pier 5 (pier 5); and 14 more.")
    assert told["site-suffices"].what.endswith("pier 5, and 14 more).")


@given(policies())
def test_who_suffices_and_who_blocks_against_trying_it_out(data: dict[str, Any]) -> None:
    told = found(data)
    everyone = {custodian["name"] for custodian in data["custodian"]}

    def groups(member: str) -> dict[str, set[str]]:
        held: dict[str, set[str]] = {}
        for custodian in data["custodian"]:
            held.setdefault(custodian[member], set()).add(custodian["name"])
        return held

    managers = groups("reports_to")
    for custodian in data["custodian"]:
        if folded(custodian["person"]) in managers:
            managers[custodian["person"]].add(custodian["name"])
    for kind, held in (("person", groups("person")), ("site", groups("site")), ("line", managers)):
        suffice = {one for one, names in held.items() if authorised(data, names)}
        block = {one for one, names in held.items() if not authorised(data, everyone - names)}
        assert set(told[f"{kind}-suffices"].about if f"{kind}-suffices" in told else ()) == suffice
        if "all-needed" in told:
            assert all(not authorised(data, everyone - {name}) for name in everyone)
        else:
            assert set(told[f"{kind}-blocks"].about if f"{kind}-blocks" in told else ()) == block


@given(policies())
def test_serious_findings_come_first_and_every_finding_gives_advice(data: dict[str, Any]) -> None:
    told = list(found(data).values())
    order = [("serious", "caution", "note").index(finding.severity) for finding in told]
    assert order == sorted(order)
    for finding in told:
        assert finding.what.endswith((".", '".'))
        assert finding.advice.endswith(".")
