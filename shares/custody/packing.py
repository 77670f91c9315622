"""How one custodian's share is packed for its way: wrapped by passphrase, wrapped for a card, or bare.

Source: FORMAT.md, sec. 4 and 10.
May import: shares.errors, shares.memory, shares.documents.
Secret: the share; passphrases. Public: file endings, whose card it is.
Does not: write files; ``custody.handover`` does.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Self

from shares.documents.event import Packed
from shares.documents.party import PartyCard
from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import (
    SUITES,
    Sealer,
    Suite,
    card_sealer,
    passphrase_opener,
    passphrase_sealer,
)
from shares.errors import VerificationError
from shares.memory import Secret

BARE_SUFFIX = ".share.json"
WRAPPED_SUFFIX = ".wrapped.json"


@dataclass(frozen=True, slots=True, eq=False)
class Packing:
    """What turns a share into its file, and what was written back into a share.

    Attributes:
        words: how it is packed, for people; public.
        method: the same in one word, for the journal.
        suffix: how the file's name ends, after the custodian's name.
        pack: takes the share and returns the bytes of its file.
        is_sealed: whether only the custodian can open it.
        unpack: takes the bytes read back, what to call them, and the share that was packed; returns the share that the
            file gives. Where only the custodian can open it, that the file is unchanged has to do.
    """

    words: str
    method: Packed
    suffix: str
    pack: Callable[[Share], bytes]
    unpack: Callable[[bytes, str, Share], Share]
    is_sealed: bool = False

    @classmethod
    def bare(cls) -> Self:
        """No wrapping: whoever has enough of these files has the secret."""
        return cls("bare", "bare", BARE_SUFFIX, Share.to_file, lambda data, where, _: Share.parse(data, where=where))

    @classmethod
    def by_passphrase(cls, passphrase: Secret) -> Self:
        """Wrapped under ``passphrase``, which the caller keeps until all is written, and wipes."""

        def unpack(data: bytes, where: str, _: Share) -> Share:
            return WrappedShare.parse(data, where=where).open(passphrase_opener(passphrase))

        return cls("wrapped by passphrase", "passphrase", WRAPPED_SUFFIX, _pack(passphrase_sealer(passphrase)), unpack)

    @classmethod
    def for_card(cls, card: PartyCard, suite: Suite = SUITES[0]) -> Self:
        """Wrapped for the card of the custodian, who alone can open it."""
        packed: list[bytes] = []

        def pack(share: Share) -> bytes:
            packed.append(WrappedShare.wrap(share, card_sealer(card.recipient(), suite)).to_file())
            return packed[-1]

        def unpack(data: bytes, where: str, share: Share) -> Share:
            if data not in packed:
                raise VerificationError("what was written reads back changed", where=where)
            return share

        words = f"wrapped for the card {card.fingerprint}"
        return cls(words, "card", WRAPPED_SUFFIX, pack, unpack, is_sealed=True)


def _pack(seal: Sealer) -> Callable[[Share], bytes]:
    return lambda share: WrappedShare.wrap(share, seal).to_file()
