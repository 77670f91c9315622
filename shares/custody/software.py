"""The digest of this program as it is installed, so that two machines can be compared.

Source: FIPS 180-4 (SHA-256), RFC 8785 (canonical form); FORMAT_EVIDENCE.md, sec. 19.
May import: shares.storage, shares.documents.base.
Secret: nothing. Public: everything.
Does not: cover Python, the libraries or the system: the hashes of the wheels and the medium that was started do. A
program that was tampered with can print any digest; compare with one that another machine computed over the files. A
checkout holds more files than a wheel: compare installations of one kind.
"""

from __future__ import annotations

import hashlib
import os
from pathlib import Path

from shares.documents.base import canonical, sha256
from shares.storage import read_file

_HERE = Path(__file__).parent.parent
_LARGEST = 64 << 20


def software_digest(folder: Path = _HERE) -> bytes:
    """Return one digest over the files of the installed package.

    Args:
        folder: the package's.

    Returns:
        32 bytes: SHA-256 over a label and the canonical JSON object of each file's path and SHA-256 in hex. What Python
        writes beside them by itself (``__pycache__``) is left out.

    Raises:
        StorageError: a file cannot be read.
    """
    files: dict[str, str] = {}
    for above, folders, names in os.walk(folder):
        folders[:] = [name for name in folders if name != "__pycache__"]
        for name in names:
            path = Path(above, name)
            digest = hashlib.sha256(read_file(path, limit=_LARGEST))
            files[path.relative_to(folder).as_posix()] = digest.hexdigest()
    return sha256(b"shares/v1/software", canonical(files))
