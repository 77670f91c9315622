"""Encrypt FILE to a threshold key, with the `cryptography` package alone: python3 send_to_key.py KEY.PEM FILE MESSAGE

KEY.PEM is the key's X25519 public key; MESSAGE, a new file, is what a quorum of custodians can open. Compare the key's
fingerprint with a custodian first: to whom you encrypt is who can read it. RFC 9180, base mode; not for secrets that
must last ten years, since X25519 does not withstand quantum computers.
"""

import sys
from pathlib import Path

from cryptography.hazmat.primitives import hpke
from cryptography.hazmat.primitives.serialization import load_pem_public_key

public_key, content = load_pem_public_key(Path(sys.argv[1]).read_bytes()), Path(sys.argv[2]).read_bytes()
suite = hpke.Suite(hpke.KEM.X25519, hpke.KDF.HKDF_SHA256, hpke.AEAD.AES_256_GCM)
with open(sys.argv[3], "xb") as message:
    message.write(suite.encrypt(content, public_key))  # encapsulated key, then ciphertext
