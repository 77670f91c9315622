"""Choose the kernel: the one place that knows there are two of them.

For: everything above calls ``kernel()`` and never asks which one answers.
Source: this project's own rule (DEVELOPERS.md, "Run").
May import: shares.errors, shares.field._kernel (C), shares.field._lanes (portable); the last two only when chosen.
Secret: the rows that pass through ``combine`` and ``project``. Public: the choice, the modulus, the matrix, lengths.
Does not: arithmetic. ``gf256`` is the face of the field; this module says only who computes.

The environment variable ``SHARES_KERNEL``, read once at the first use:

    unset or empty   native if it can be loaded, else portable
    native           native, or a KernelUnavailableError
    portable         portable; the C module is never loaded
"""

from __future__ import annotations

import os
from collections.abc import Sequence
from functools import cache
from typing import NamedTuple, Protocol

from shares.errors import KernelUnavailableError, ParameterError

# Any object with a contiguous buffer of bytes will do; these are the ones that the package itself passes.
ReadableBuffer = bytes | bytearray | memoryview
WritableBuffer = bytearray | memoryview


class Combine(Protocol):
    """Write ``out[i][t] = sum over j of matrix[i][j] * rows[j][t]``."""

    def __call__(
        self,
        modulus: int,
        matrix: Sequence[bytes],
        rows: Sequence[ReadableBuffer],
        out: Sequence[WritableBuffer],
        /,
    ) -> None: ...


class Project(Protocol):
    """Write ``out[i] = sum over j of matrix[i][j] * row[j]``."""

    def __call__(self, modulus: int, matrix: ReadableBuffer, row: ReadableBuffer, out: WritableBuffer, /) -> None: ...


class Kernel(NamedTuple):
    """The two operations that touch secret bytes, and who computes them.

    Args:
        name: ``native`` or ``portable``.
        path: the way through the processor: ``gfni``, ``avx2``, ``ssse3``, ``neon``, ``lanes64`` (native) or
            ``integers`` (portable).
        combine: public scalars times secret rows, see ``gf256.Field.combine``.
        project: public rows times one secret row, see ``gf256.Field.project``.
    """

    name: str
    path: str
    combine: Combine
    project: Project


@cache
def kernel(choice: str | None = None) -> Kernel:
    """Give the kernel in use, or the one that is named.

    Args:
        choice: ``native`` or ``portable``; by default what ``SHARES_KERNEL`` says.

    Returns:
        The kernel; the same object on every call with the same choice.

    Raises:
        KernelUnavailableError: the native kernel is demanded and cannot be loaded.
        ParameterError: the choice is neither of the two.

    >>> kernel("portable").path
    'integers'
    """
    if choice is None:
        wanted = os.environ.get("SHARES_KERNEL")
        if wanted:
            return kernel(wanted)
        try:
            return kernel("native")
        except KernelUnavailableError:
            return kernel("portable")
    if choice == "native":
        try:
            from shares.field import _kernel
        except ImportError as error:
            raise KernelUnavailableError(
                "the native kernel cannot be loaded",
                where="SHARES_KERNEL",
                hint="install again with a C compiler, or set SHARES_KERNEL=portable",
            ) from error
        return Kernel("native", _kernel.default_path(), _kernel.combine, _kernel.project)
    if choice == "portable":
        from shares.field import _lanes

        return Kernel("portable", "integers", _lanes.combine, _lanes.project)
    raise ParameterError("the kernel must be native or portable", where="SHARES_KERNEL")
