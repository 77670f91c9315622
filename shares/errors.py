"""Everything this package can refuse with: one tree, each with an exit code and a slug.

Source: the exit codes are this project's own table (README, "Exit codes").
May import: nothing of this package.
Secret: nothing. A message names the parameter, the rule and public numbers; never a secret-derived value.
Does not: print, exit or log. ``shares.cli`` turns an error into one line, in one place.

    SharesError                                      1  failed
      ParameterError      (also ValueError)          2  usage: k, n, x, names, lengths out of range
        PolynomialError                              2  not irreducible of the wanted degree: says the factors
      NotEnoughSharesError                           3  says needed and given
      VerificationError                              4  a public check failed: commitment, check, digest
        WrongKeyError                                4  a passphrase or party key does not open it
        AmbiguousError                               4  more than one explanation fits: none is chosen
      ShareError          (also ValueError)          4  shares that cannot be used together
        DuplicatePointError                          4
        SetMismatchError                             4
        EpochMismatchError                           4
      DocumentError       (also ValueError)          4  parse, version, schema: paths and rule names only
        OtherKindError                               4  a document of another kind than is wanted
      StorageError        (also OSError)             5  file or I/O
      CommandFailedError                             7  the command that was fed failed
      KernelUnavailableError (also RuntimeError)     1  the demanded kernel cannot be loaded
      ExtraMissingError                              1  a package that only some commands need is missing

Exit code 6 (an audit found something due) is a result, not an error.
"""

from __future__ import annotations

from typing import ClassVar


class SharesError(Exception):
    """A refusal that says what is wrong, where, and what to do next.

    Args:
        what: one sentence without a final stop; public facts only.
        where: the file, option or field concerned, if there is one.
        hint: what the reader can do now, one sentence without a final stop, if there is something.
    """

    exit_code: ClassVar[int] = 1
    code: ClassVar[str] = "failed"

    def __init__(self, what: str, *, where: str | None = None, hint: str | None = None) -> None:
        super().__init__(what)
        self.what = what
        self.where = where
        self.hint = hint
        self.findings: tuple[dict[str, str | None], ...] = ()
        """What was found of each share given, where that was looked at; public facts only."""

    def __str__(self) -> str:
        place = f"{self.where}: " if self.where else ""
        advice = f" ({self.hint})" if self.hint else ""
        return f"{place}{self.what}{advice}"


class ParameterError(SharesError, ValueError):
    """A threshold, total, evaluation point, name or length is out of range."""

    exit_code = 2
    code = "parameter"


class PolynomialError(ParameterError):
    """A polynomial is not an irreducible one of the wanted degree."""

    code = "polynomial"


class NotEnoughSharesError(SharesError):
    """The shares given do not make a quorum."""

    exit_code = 3
    code = "not-enough-shares"


class VerificationError(SharesError):
    """A public check failed; the message says which."""

    exit_code = 4
    code = "verification"


class WrongKeyError(VerificationError):
    """A passphrase or party key is not the one that opens something; nothing says that it is damaged."""

    code = "wrong-key"


class AmbiguousError(VerificationError):
    """More than one secret can be recovered from what was given, so none is."""

    code = "ambiguous"


class ShareError(SharesError, ValueError):
    """Shares that are malformed or cannot be used together."""

    exit_code = 4
    code = "share"


class DuplicatePointError(ShareError):
    """Two rows stand at the same evaluation point."""

    code = "duplicate-point"


class SetMismatchError(ShareError):
    """Documents of different share sets were given together."""

    code = "set-mismatch"


class EpochMismatchError(ShareError):
    """Documents of different epochs of one set were given together."""

    code = "epoch-mismatch"


class DocumentError(SharesError, ValueError):
    """A document cannot be read: its text, version or fields are wrong."""

    exit_code = 4
    code = "document"


class OtherKindError(DocumentError):
    """A document is one of this program's, but not of the kind that is wanted."""

    code = "other-kind"


class StorageError(SharesError, OSError):
    """A file or folder cannot be read or written as asked."""

    exit_code = 5
    code = "storage"


class CommandFailedError(SharesError):
    """The command that was given the secret did not succeed; its own code is in ``status``."""

    exit_code = 7
    code = "command-failed"

    def __init__(self, what: str, *, status: int | None, where: str | None = None, hint: str | None = None) -> None:
        super().__init__(what, where=where, hint=hint)
        self.status = status


class KernelUnavailableError(SharesError, RuntimeError):
    """The kernel that ``SHARES_KERNEL`` demands cannot be loaded."""

    code = "kernel-unavailable"


class ExtraMissingError(SharesError):
    """What was asked for takes a package that only some commands need and is not installed; the message says which."""

    code = "extra-missing"
