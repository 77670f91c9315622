"""What a split is to be, from a policy or from the short options that say the same.

Source: none.
May import: shares.errors, shares.field, shares.sharing.rule, shares.documents, shares.planning, shares.custody,
shares.history, shares.storage, shares.cli.keys, shares.cli.output.
Secret: nothing. Confidential: the policy. Public: the rest.
Does not: touch the secret.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from shares.cli.keys import cards_by_name
from shares.custody.entries import ACKNOWLEDGEMENTS
from shares.custody.parties import load_card
from shares.custody.payload import DEFAULT_PAD
from shares.custody.split import flat_rule
from shares.documents.base import MAX_FILE
from shares.documents.party import PartyCard
from shares.errors import ParameterError
from shares.field.gf256 import DEFAULT_MODULUS, Field
from shares.field.polynomial import Polynomial
from shares.history.files import POLICY_NAME
from shares.sharing.rule import Rule
from shares.storage import read_file

if TYPE_CHECKING:
    from shares.documents.acknowledgement import Acknowledgement
    from shares.planning.findings import Finding


@dataclass(frozen=True, slots=True)
class Wanted:
    """What a split is to be.

    Attributes:
        label: what the secret is.
        rule: who can recover.
        field: over which it is shared.
        pad: bytes to a multiple of which the secret is filled.
        cards: party cards of custodians, by name.
        policy: digest of the policy, or None.
        acknowledged: who has accepted the duties, and how, in words.
        beside: files that go into the set's folder beside the record, by name.
        cautions: what the examination of the policy found.
        practice: whether a worthless set is dealt as well, for rehearsals.
        dual_control: whether two parties sign each entry of the journal.
    """

    label: str
    rule: Rule
    field: Field
    pad: int
    cards: Mapping[str, PartyCard]
    policy: bytes | None
    acknowledged: list[str]
    beside: Mapping[str, bytes]
    cautions: list[str]
    practice: bool = True
    dual_control: bool = False

    @property
    def custodians(self) -> tuple[str, ...]:
        """The custodians, in the rule's order."""
        return tuple(self.rule.paths())


def from_options(
    need: int | None,
    custodians: tuple[str, ...],
    label: str | None,
    polynomial: str | None,
    cards: tuple[str, ...],
) -> Wanted:
    """Return what the short options say: any K of the custodians.

    Raises:
        ParameterError: one of them is missing, or wrong.
    """
    if need is None or label is None or not custodians:
        raise ParameterError(
            "give --need, --label and each --custodian, or --policy, which says all of it", hint="see --help"
        )
    rule = flat_rule(need, custodians)
    field = Field(Polynomial.parse(polynomial).number if polynomial else DEFAULT_MODULUS)
    given = cards_by_name(cards, list(custodians), option="--card")
    return Wanted(
        label=label,
        rule=rule,
        field=field,
        pad=DEFAULT_PAD,
        cards=given,
        policy=None,
        acknowledged=[],
        beside={},
        cautions=_card_cautions(given) if given else [],
    )


def from_policy(path: str, cards: tuple[str, ...], acknowledged: tuple[str, ...]) -> Wanted:
    """Return what a policy says, after examining its structure.

    Args:
        path: the policy.
        cards: ``[NAME=]CARD`` options; they come before the cards that the policy names.
        acknowledged: files of acknowledgements.

    Raises:
        StorageError: a file cannot be read.
        DocumentError: the policy, or a card or acknowledgement, is not one.
        VerificationError: the policy is strict and a serious finding stands; or an acknowledgement is missing or wrong.
    """
    # Imported late: the short options need nothing of it, and a split is to start quickly.
    from shares.custody.duties import check_acknowledged
    from shares.documents.policy import Policy
    from shares.planning.examine import examine

    policy = Policy.parse(read_file(path, limit=MAX_FILE), where=path)
    names = [custodian.name for custodian in policy.custodians]
    chosen = {
        custodian.name: load_card(Path(path).parent / custodian.card)
        for custodian in policy.custodians
        if custodian.card is not None
    } | cards_by_name(cards, names, option="--card")
    plan = examine(policy, cards=chosen)
    plan.require_sound()
    found = _acknowledgements(acknowledged)
    if policy.acknowledgement or found:
        check_acknowledged(names, policy.label, found.values(), chosen)
    beside = {POLICY_NAME: policy.text} | {
        f"{ACKNOWLEDGEMENTS}/{one.custodian}.json": one.to_file() for one in found.values()
    }
    return Wanted(
        label=policy.label,
        rule=policy.rule(),
        field=policy.field(),
        pad=policy.pad,
        cards=chosen,
        policy=policy.digest(),
        acknowledged=[one.words() for one in found.values()],
        beside=beside,
        cautions=_told(plan.findings),
        practice=policy.practice,
        dual_control=policy.dual_control,
    )


def _card_cautions(cards: Mapping[str, PartyCard]) -> list[str]:
    from shares.planning.cards import card_findings

    return _told(card_findings(cards))


def _told(findings: Iterable[Finding]) -> list[str]:
    """Return what is to be cautioned about; notes are for the plan alone."""
    return [
        f"{'serious: ' if one.severity == 'serious' else ''}{one.what.rstrip('.')}. {one.advice.rstrip('.')}"
        for one in findings
        if one.severity != "note"
    ]


def _acknowledgements(paths: tuple[str, ...]) -> dict[str, Acknowledgement]:
    from shares.documents.acknowledgement import Acknowledgement

    found: dict[str, Acknowledgement] = {}
    for path in paths:
        one = Acknowledgement.parse(read_file(path, limit=MAX_FILE), where=path)
        if one.custodian in found:
            raise ParameterError(f"two acknowledgements of {one.custodian} are given", where=path)
        found[one.custodian] = one
    return found
