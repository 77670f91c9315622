"""Opening what is wrapped: with the passphrases and party keys at hand.

Source: FORMAT.md, sec. 9 and 10.
May import: shares.errors, shares.memory, shares.documents.
Secret: passphrases and party keys, while they are at hand. Public: names, card fingerprints.
Does not: ask anybody; whoever asks for passphrases is handed in.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Protocol, Self, TypeVar

from shares.documents.party import OpenPartyKey, PartyKey
from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import ByCard, Envelope, Opener, passphrase_opener
from shares.errors import VerificationError, WrongKeyError
from shares.memory import Secret

Opened = TypeVar("Opened")


class Passphrases(Protocol):
    """Whoever has passphrases, or asks for them."""

    def opening(self, name: str, attempt: Callable[[Secret], Opened]) -> Opened:
        """Return what ``attempt`` returns for a passphrase of ``name``.

        Raises:
            WrongKeyError: no passphrase at hand fits.
        """


class Opening:
    """Party keys and passphrases at hand; ``with`` wipes the party keys that were opened."""

    def __init__(self, passphrases: Passphrases, keys: Sequence[PartyKey] = ()) -> None:
        self._passphrases = passphrases
        self._keys = {key.card.fingerprint: key for key in keys}
        self._opened: dict[str, OpenPartyKey] = {}

    def party(self, key: PartyKey) -> OpenPartyKey:
        """Return a party key ready for use; it is wiped when this ends.

        Raises:
            WrongKeyError: no passphrase at hand fits.
            VerificationError: it is damaged.
        """
        fingerprint = key.card.fingerprint
        if fingerprint not in self._opened:
            self._opened[fingerprint] = self._passphrases.opening(key.card.name, key.open)
        return self._opened[fingerprint]

    def share(self, wrapped: WrappedShare) -> Share:
        """Return the share inside.

        Raises:
            WrongKeyError: no passphrase or party key at hand fits.
            VerificationError: the file is damaged or was altered.
        """
        return self._with_opener(wrapped, wrapped.custodian, wrapped.open)

    def content(self, envelope: Envelope, name: str) -> Secret:
        """Return what another envelope holds; ``name`` says whose passphrase may open it.

        Raises:
            WrongKeyError, VerificationError: as for ``share``.
        """
        return self._with_opener(envelope, name, envelope.content)

    def _with_opener(
        self,
        envelope: Envelope,
        name: str,
        open_with: Callable[[Opener], Opened],
    ) -> Opened:
        envelope.check_whole()
        wrapping = envelope.wrapping
        if isinstance(wrapping, ByCard):
            return open_with(self._party_of(wrapping.card).open)
        return self._passphrases.opening(name, lambda passphrase: open_with(passphrase_opener(passphrase)))

    def _party_of(self, card: str) -> OpenPartyKey:
        key = self._keys.get(card)
        if key is None:
            raise WrongKeyError(
                f"it is wrapped for the card {card}, and no party key of that card is at hand",
                hint="give it with --key",
            )
        try:
            return self.party(key)
        except VerificationError as error:
            problem = error
        # A party key that is damaged itself says nothing of what is wrapped for its card.
        raise WrongKeyError(f"the party key of {key.card.name} does not open: {problem.what}", hint=problem.hint)

    def close(self) -> None:
        """Wipe the party keys that were opened."""
        for key in self._opened.values():
            key.close()
        self._opened.clear()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()
