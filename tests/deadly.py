"""What makes a worker of many audits die, or fail, at the sight of one set; other processes import it by name."""

from __future__ import annotations

import os
from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context
from typing import Any

from shares.evidence import many

DEADLY, FAULTY = "deadly", "faulty"
_audit = many.audit


def audit(files: Any, **more: Any) -> Any:
    """Audit, but die where a folder is called deadly, and fail where it is called faulty."""
    name = os.path.basename(files.where)
    if name == DEADLY:
        os._exit(9)
    if name == FAULTY:
        raise LookupError("made up: a secret could stand here")
    return _audit(files, **more)


def arm() -> None:
    """Put it in the place of the real one."""
    many.audit = audit  # type: ignore[assignment]


def processes(jobs: int) -> ProcessPoolExecutor:
    """Processes that are armed."""
    return ProcessPoolExecutor(jobs, mp_context=get_context("forkserver"), initializer=arm)
