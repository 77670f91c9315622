"""The libraries and encodings that documents rest on, against published values.

Source: RFC 4648, section 10; RFC 5869, appendix A; RFC 8032, section 7.1; RFC 8785, sections 3.2.2 to 3.2.4, appendix B
and its authors' test data: tests/vectors/rfc*.json, where each file says how its values were had and checked.
"""

from __future__ import annotations

import base64
import json
import struct
from pathlib import Path
from typing import Any

import pytest
from cryptography.hazmat.primitives import hashes, serialization
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.kdf.hkdf import HKDF
from pydantic_core import PydanticCustomError

from shares.documents.base import canonical
from shares.documents.members import decode_bytes, encode_bytes
from shares.errors import DocumentError

VECTORS = Path(__file__).parents[1] / "vectors"


def vectors(name: str) -> dict[str, Any]:
    return json.loads((VECTORS / f"{name}.json").read_text())


def pairs(encoding: str) -> list[tuple[str, str]]:
    [found] = [entry["pairs"] for entry in vectors("rfc4648_base_n")["vectors"] if entry["encoding"] == encoding]
    return [tuple(pair) for pair in found]


@pytest.mark.parametrize(("plain", "encoded"), pairs("BASE64"))
def test_base64url_without_padding(plain: str, encoded: str) -> None:
    """RFC 4648, section 10; its values hold no character in which the alphabet of section 5 differs."""
    text = encoded.rstrip("=")
    assert encode_bytes(plain.encode()) == text
    if text:
        assert decode_bytes(text) == plain.encode()
        with pytest.raises(PydanticCustomError):
            decode_bytes(text + "=")


@pytest.mark.parametrize(("plain", "encoded"), pairs("BASE32"))
def test_base32_as_fingerprints_use_it(plain: str, encoded: str) -> None:
    assert base64.b32encode(plain.encode()).decode() == encoded


@pytest.mark.parametrize("vector", vectors("rfc5869_hkdf_sha256")["vectors"], ids=lambda vector: vector["section"])
def test_hkdf(vector: dict[str, Any]) -> None:
    salt = bytes.fromhex(vector["salt"]) or None
    kdf = HKDF(algorithm=hashes.SHA256(), length=vector["L"], salt=salt, info=bytes.fromhex(vector["info"]))
    assert kdf.derive(bytes.fromhex(vector["IKM"])).hex() == vector["OKM"]


@pytest.mark.parametrize("vector", vectors("rfc8032_ed25519")["vectors"], ids=lambda vector: vector["name"])
def test_ed25519(vector: dict[str, Any]) -> None:
    key = Ed25519PrivateKey.from_private_bytes(bytes.fromhex(vector["secret_key"]))
    public = key.public_key().public_bytes(serialization.Encoding.Raw, serialization.PublicFormat.Raw)
    assert public.hex() == vector["public_key"]
    assert key.sign(bytes.fromhex(vector["message"])).hex() == vector["signature"]


JCS = vectors("rfc8785_jcs")
TEXTS = [
    ("3.2.2", JCS["section_3_2_2_example"]["input"], JCS["section_3_2_2_example"]["canonical_utf8_hex"]),
    ("3.2.3", JCS["section_3_2_3_sorting"]["input"], JCS["section_3_2_3_sorting"]["computed_canonical_utf8_hex"]),
    *((entry["name"], entry["input"], entry["canonical_utf8_hex"]) for entry in JCS["authors_test_data"]),
]


@pytest.mark.parametrize(("name", "text", "expected"), TEXTS, ids=[name for name, *_ in TEXTS])
def test_the_canonical_form(name: str, text: str, expected: str) -> None:
    assert canonical(json.loads(text)).hex() == expected


@pytest.mark.parametrize(("bits", "text", "comment"), JCS["number_samples"])
def test_numbers_in_canonical_form(bits: str, text: str | None, comment: str) -> None:
    """Documents hold integers only; the library is checked whole all the same."""
    (number,) = struct.unpack(">d", bytes.fromhex(bits))
    if text is None:
        with pytest.raises((ValueError, DocumentError)):
            canonical({"n": number})
    else:
        assert canonical({"n": number}) == f'{{"n":{text}}}'.encode()
