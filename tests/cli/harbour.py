"""The parties of the demo harbour as files: keys, cards, passphrases, and shares wrapped for them."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from cli.harness import NAMES, Place
from parties import QUICK, card, party, passphrase

from shares.custody.parties import write_party
from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import Sealer, Suite, card_sealer, passphrase_sealer


@dataclass(frozen=True)
class Harbour:
    """A folder with a set, and beside it the files of every party."""

    place: Place

    @property
    def folder(self) -> Path:
        return self.place.folder

    def key(self, name: str) -> Path:
        return self.folder / f"{name}.key.json"

    def card(self, name: str) -> Path:
        return self.folder / f"{name}.card.json"

    def phrase(self, name: str) -> Path:
        return self.folder / f"{name}.passphrase"

    def wrapped(self, name: str) -> Path:
        return self.folder / f"{name}.wrapped.json"

    def known(self, *names: str) -> list[str]:
        """The options that give the passphrases of these."""
        return [f"--passphrase-file={name}={self.phrase(name)}" for name in names]

    def keys(self, *names: str) -> list[str]:
        """The options that give the party keys of these, and their passphrases."""
        return [f"--key={self.key(name)}" for name in names] + self.known(*names)

    def wrap(self, name: str, suite: Suite | None = None) -> Path:
        """Write a custodian's share wrapped by passphrase, or for their card."""
        seal: Sealer = passphrase_sealer(passphrase(name), QUICK)
        if suite is not None:
            seal = card_sealer(card(name).recipient(), suite)
        share = Share.parse(self.place.share(name).read_bytes())
        self.wrapped(name).write_bytes(WrappedShare.wrap(share, seal).to_file())
        return self.wrapped(name)

    @classmethod
    def make(cls, place: Place) -> Harbour:
        made = cls(place)
        for name in (*NAMES, "harbour-office", "auditor-east"):
            write_party(party(name), place.folder)
            made.phrase(name).write_text(f"the passphrase of {name}\n")
        return made
