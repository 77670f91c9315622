"""Make the golden samples of encrypted files: ``python tests/vectors/make/encrypted_file_v1.py FOLDER``.

By shares/documents/FORMAT.md, sec. 13. It shares no code with the package: AES-256-GCM is the two-part interface of
`cryptography`, SHA-256 the standard library's. Everything is drawn from SHAKE256 of names, so it comes out the same
each time; such keys are for samples alone.
"""

from __future__ import annotations

import hashlib
import json
import sys
from pathlib import Path

from cryptography.hazmat.primitives.ciphers import Cipher, algorithms, modes

ABOUT = {
    "one byte": (1, 65_536),
    "forty bytes, chunks of the usual size": (40, 1_048_576),
    "one whole chunk": (65_536, 65_536),
    "one byte more than a chunk": (65_537, 65_536),
    "three chunks, the last one byte short": (196_607, 65_536),
    "chunks of an odd size": (200_000, 65_537),
}


def made_up(name: str, length: int) -> bytes:
    return hashlib.shake_256(f"made up: {name}".encode()).digest(length)


def seal(key: bytes, nonce: bytes, header: bytes, part: bytes) -> bytes:
    encryptor = Cipher(algorithms.AES(key), modes.GCM(nonce)).encryptor()
    encryptor.authenticate_additional_data(header)
    return encryptor.update(part) + encryptor.finalize() + encryptor.tag


def encrypted_file(
    key: bytes, set_id: bytes, chunk: int, secret: bytes, *, version: int = 1, lasts: list[bool] | None = None
) -> tuple[bytes, bytes]:
    """Return a file and its digest; ``lasts`` puts the last-chunk flag elsewhere, for files that must be refused."""
    header = b"shares encrypted file\n" + version.to_bytes(2, "big") + set_id + chunk.to_bytes(4, "big")
    parts = [secret[i : i + chunk] for i in range(0, len(secret), chunk)]
    lasts = [i == len(parts) - 1 for i in range(len(parts))] if lasts is None else lasts
    chunks = [
        seal(key, i.to_bytes(11, "big") + (b"\1" if last else b"\0"), header, part)
        for i, (part, last) in enumerate(zip(parts, lasts, strict=True))
    ]
    digests = b"".join(hashlib.sha256(sealed).digest() for sealed in chunks)
    return header + b"".join(chunks), hashlib.sha256(b"shares/v1/encrypted-file" + header + digests).digest()


def samples() -> dict[str, object]:
    tests = []
    for number, (comment, (length, chunk)) in enumerate(ABOUT.items(), 1):
        key, set_id, secret = made_up(f"{comment} key", 32), made_up(f"{comment} set", 16), made_up(comment, length)
        file, digest = encrypted_file(key, set_id, chunk, secret)
        test: dict[str, object] = {
            "tcId": number,
            "comment": comment,
            "flags": [],
            "key": key.hex(),
            "set": set_id.hex(),
            "chunk": chunk,
            "length": length,
            "digest": digest.hex(),
            "sha256": hashlib.sha256(file).hexdigest(),
            "result": "valid",
        }
        if len(file) < 200:
            test["file"] = file.hex()
        tests.append(test)
    source = "shares/documents/FORMAT.md, sec. 13; made by tests/vectors/make/encrypted_file_v1.py with `cryptography`"
    return {
        "algorithm": "shares encrypted file, version 1: AES-256-GCM in chunks",
        "schema": "the secret is SHAKE256('made up: ' || comment) to length; sha256 is of the whole file",
        "numberOfTests": len(tests),
        "notes": {},
        "testGroups": [{"source": source, "tests": tests}],
    }


if __name__ == "__main__":
    (Path(sys.argv[1]) / "aes_256_gcm_chunks.json").write_text(json.dumps(samples(), indent=1) + "\n")
