"""Secret sharing for people who keep recovery keys: split, verify, recover.

Everything that a program needs stands here; the rooms behind it are described in DEVELOPERS.md. Names are imported when
they are first used, so that importing the package costs little.

>>> from shares import Presented, Secret, flat_rule, recover, split
>>> rule = flat_rule(2, ["north-pier", "south-pier", "light-house"])
>>> dealt = split(Secret.of(b"not a real key"), rule, label="Tide archive")
>>> recovery = recover([Presented(share.custodian, share) for share in dealt.shares[:2]])
>>> recovery.secret == Secret.of(b"not a real key")
True
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from shares.custody.handover import HandedOver, hand_over
    from shares.custody.packing import Packing
    from shares.custody.presented import Finding, Presented, Status, load_record, load_shares
    from shares.custody.recover import Recovery, recover
    from shares.custody.selftest import selftest
    from shares.custody.split import Dealt, flat_rule, split
    from shares.custody.verify import examine, examine_alone, verify_share
    from shares.documents.party import PartyCard, PartyKey, new_party
    from shares.documents.policy import Policy
    from shares.documents.record import Record
    from shares.documents.share import Share
    from shares.documents.wrapped_share import WrappedShare
    from shares.errors import (
        NotEnoughSharesError,
        ParameterError,
        SharesError,
        VerificationError,
    )
    from shares.field.gf256 import Field
    from shares.memory import Secret
    from shares.sharing.rule import Rule

__version__ = "0.1.0"

_HOMES = {
    "custody.handover": ("HandedOver", "hand_over"),
    "custody.packing": ("Packing",),
    "custody.presented": ("Finding", "Presented", "Status", "load_record", "load_shares"),
    "custody.recover": ("Recovery", "recover"),
    "custody.selftest": ("selftest",),
    "custody.split": ("Dealt", "flat_rule", "split"),
    "custody.verify": ("examine", "examine_alone", "verify_share"),
    "documents.party": ("PartyCard", "PartyKey", "new_party"),
    "documents.policy": ("Policy",),
    "documents.record": ("Record",),
    "documents.share": ("Share",),
    "documents.wrapped_share": ("WrappedShare",),
    "errors": ("NotEnoughSharesError", "ParameterError", "SharesError", "VerificationError"),
    "field.gf256": ("Field",),
    "memory": ("Secret",),
    "sharing.rule": ("Rule",),
}
_HOME_OF = {name: home for home, names in _HOMES.items() for name in names}

__all__ = [
    "Dealt",
    "Field",
    "Finding",
    "HandedOver",
    "NotEnoughSharesError",
    "Packing",
    "ParameterError",
    "PartyCard",
    "PartyKey",
    "Policy",
    "Presented",
    "Record",
    "Recovery",
    "Rule",
    "Secret",
    "Share",
    "SharesError",
    "Status",
    "VerificationError",
    "WrappedShare",
    "examine",
    "examine_alone",
    "flat_rule",
    "hand_over",
    "load_record",
    "load_shares",
    "new_party",
    "recover",
    "selftest",
    "split",
    "verify_share",
]


def __getattr__(name: str) -> object:
    home = _HOME_OF.get(name)
    if home is None:
        raise AttributeError(f"module 'shares' has no attribute {name!r}")
    value: object = getattr(import_module(f"shares.{home}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted([*globals(), *__all__])
