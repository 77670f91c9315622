"""The golden sample of a ceremony script, signed.

By shares/documents/FORMAT.md, sec. 9, FORMAT_EVIDENCE.md, sec. 19, and `wrapping_v1`, which shares no code with the
package. The signer is the harbour-office of the golden samples of wrapping.
"""

from typing import Any

import wrapped_v1
import wrapping_v1 as by_hand
from dealer_v1 import sha256

CONTACT = "the office on the quay, \u00ab2nd floor\u00bb"
SIGNED = "2026-12-02T09:30:00Z"


def step(part: str, role: str, what: str, expected: str, command: str | None, note: str | None) -> dict[str, Any]:
    return {"part": part, "role": role, "what": what, "command": command, "expected": expected, "note": note}


def script() -> dict[str, Any]:
    """Return a short script with every kind of member, signed."""
    made: dict[str, Any] = {
        "kind": "ceremony-script",
        "version": 1,
        "created": "2026-12-01T07:00:00Z",
        "label": "Tide archive backup root",
        "policy": sha256(b"made up: policy").hex(),
        "rule": "both of north-pier, registrar",
        "software": {"version": "0.1.0", "digest": sha256(b"made up: software").hex()},
        "dual_control": False,
        "planned": "2027-01-15 09:00 UTC, harbour office",
        "standby": None,
        "roles": [
            {"role": "dealer", "duty": "Works at the machine.", "person": "the harbour engineer"},
            {"role": "internal witness", "duty": "Keeps the log.", "person": None},
        ],
        "steps": [
            step("Opening", "everyone", "Sign the list \u2013 with the time.", "All have signed.", None, None),
            step("Dealing", "dealer", "Split.", "2 shares.", "shares split secret", None),
            step("Dealing", "everyone", "Compare the fingerprint.", "All are the same.", None, "Fingerprint"),
        ],
    }
    card = wrapped_v1.card("harbour-office", CONTACT)
    members = {"time": SIGNED, "card": card["fingerprint"], "script": made}
    signature = wrapped_v1.private_keys("harbour-office").signing.sign(by_hand.signed("ceremony-script", members))
    entry = {"time": SIGNED, "card": card, "signature": by_hand.b64(signature)}
    return made | {"signatures": [entry]}
