"""The wrapped share: a share whose rows are sealed under a passphrase or for a party card.

Source: FORMAT.md, sec. 10.
May import: shares.memory, shares.sharing.rule (points), shares.documents.share, .wrapping.
Secret: the rows, while they are wrapped or unwrapped. Public: all that the file shows, which is what a share shows
without its rows.
Does not: ask for passphrases or hold party keys.
"""

from __future__ import annotations

from typing import ClassVar, Literal, Self

from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares.documents.share import HEADER, MAX_ROW, MIN_ROW, NOTES, Share, ShareFacts
from shares.documents.wrapping import TAG, Envelope, Opener, Sealer
from shares.memory import Secret
from shares.sharing.rule import Point


class WrappedShare(Envelope, ShareFacts):
    """A share with its rows sealed. ``wrap`` makes one, ``open`` gives the share back."""

    KIND: ClassVar[str] = "wrapped-share"
    # Paper carries these and not the other notes, which prove nothing anyway.
    BOUND = (*HEADER, "record")

    kind: Literal["wrapped-share"]

    @model_validator(mode="after")
    def _rows_fit(self) -> Self:
        length, rest = divmod(len(self.sealed) - TAG, len(self.paths))
        if rest or not MIN_ROW <= length <= MAX_ROW:
            raise PydanticCustomError("shares_points", "as many sealed rows as paths, of 53 to 131,072 bytes each")
        return self

    @classmethod
    def wrap(cls, share: Share, seal: Sealer) -> Self:
        """Return ``share`` with its rows sealed.

        Args:
            share: whole, with its notes.
            seal: see ``wrapping.passphrase_sealer`` and ``wrapping.card_sealer``.
        """
        facts = {name: getattr(share, name) for name in (*HEADER, *NOTES)} | {"kind": cls.KIND}
        length = share.row_length
        with Secret(len(share.rows) * length) as rows:
            with rows.view() as view:
                for i, row in enumerate(share.rows):
                    with row.view() as inside:
                        view[i * length : (i + 1) * length] = inside
            wrapping, sealed = seal(rows, cls.model_construct(**facts).bound())
        return cls(**facts, wrapping=wrapping, sealed=sealed, digest=bytes(32)).with_digest()

    @property
    def row_length(self) -> int:
        """L, in bytes."""
        return (len(self.sealed) - TAG) // len(self.paths)

    def open(self, opener: Opener) -> Share:
        """Return the share inside, with its notes and own digest.

        Args:
            opener: what opens the wrapping, for instance ``OpenPartyKey.open``.

        Raises:
            WrongKeyError: another passphrase or party key is needed.
            VerificationError: the file is damaged or was altered.
        """
        length = self.row_length
        with self.content(opener) as rows, rows.view() as view:
            points = [Point(path, Secret.of(view[i * length : (i + 1) * length])) for i, path in enumerate(self.paths)]
        bare = Share.of(
            set_id=self.set,
            epoch=self.epoch,
            custodian=self.custodian,
            points=points,
            field=self.field,
            secret_commitment=self.secret_commitment,
            encrypted_file=self.encrypted_file,
        )
        return bare.with_notes(**{name: getattr(self, name) for name in NOTES})
