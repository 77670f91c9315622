"""Write the golden samples and check values of format version 1.

    python3 tests/vectors/make/make_set_v1.py [FOLDER]

FOLDER is tests/vectors unless given. Every byte follows from seeds named in the files: a second run writes the same.

Source: shares/documents/FORMAT.md, worked out by `dealer_v1` (independent of the package; checked in turn by
examples/recover_by_hand.py, a third way through the same page).
May import: the standard library and the `_v1` modules beside it.
Secret: nothing; the secrets shared here are made up.
Does not: test anything. test_make_set_v1.py does.
"""

import json
import sys
from dataclasses import replace
from itertools import combinations
from pathlib import Path
from typing import Any

import attested_v1
import ceremony_v1
import journal_v1
import keyed_v1
import record_cases_v1
import recovery_cases_v1
import share_cases_v1
import wrapped_v1
from cases_v1 import NOTES as REFUSALS
from dealer_v1 import Dealing, Plan, canonical, deal, pretty, renew, satisfied, sha256, shake

PIERS = ["north-pier", "south-pier", "light-house"]
FLAT = {"need": 3, "from": [*PIERS, "registrar", "harbour-office"]}
TWO_OF_THREE = {"need": 2, "from": ["north-pier", "south-pier", "registrar"]}
# The light-house stands in two places: as one of three in the first group, and alone among the auditors.
TREE = {
    "need": 2,
    "from": [
        {"need": 2, "from": PIERS},
        "registrar",
        {"need": 1, "from": ["auditor-east", "auditor-west", "light-house"]},
    ],
}
# All that the page allows and the other samples lack: weights, three levels, a name with letters outside ASCII, one
# with quotation marks, one with a space, a second epoch, pad 1, and members null, or not, where they may be either.
WIDE = {
    "need": 3,
    "from": [
        "registrar",
        "registrar",
        {
            "need": 2,
            "from": [{"need": 1, "from": ["north-pier", 'the "old" pier']}, "phare-ch\u00e2telet", "south pier"],
        },
        {"need": 1, "from": ["auditor-east"]},
    ],
}


def plan(name: str, rule: dict[str, Any], secret_length: int, **choices: Any) -> Plan:
    """Give a plan whose secret comes from its seed."""
    secret = shake(secret_length, f"harbour sample {name}/secret".encode())
    return Plan(**{"name": name, "rule": rule, "secret": secret, "label": "Tide archive backup root", **choices})


def plans() -> dict[str, tuple[Dealing, list[str], str]]:
    """Deal the valid samples: name of the file, dealing, flags, comment."""
    wide = replace(
        plan("wide", WIDE, 1, pad=1, label='Lock gates: \u201cwest\u201d & "east" \U0001f512', polynomial="0x1d7"),
        encrypted_file=sha256(b"an encrypted file").hex(),
        policy=sha256(b"a policy file").hex(),
        notice=None,
    )
    return {
        "flat_3_of_5": (deal(plan("flat 3 of 5", FLAT, 32)), ["Flat"], "3 of 5, default polynomial, 32-byte key"),
        "flat_2_of_3_0x1f5": (
            deal(plan("flat 2 of 3, 0x1f5", TWO_OF_THREE, 32, polynomial="0x1f5")),
            ["Flat", "OtherPolynomial"],
            "2 of 3 over x^8 + x^7 + x^6 + x^5 + x^4 + x^2 + 1",
        ),
        "tree": (
            deal(plan("tree", TREE, 32)),
            ["Tree"],
            "2 of (2 of 3, one name, 1 of 3), one custodian in two places",
        ),
        "one_byte": (deal(plan("one byte", TWO_OF_THREE, 1)), ["Flat", "Length"], "the shortest secret, padded to 16"),
        "thousand_bytes": (
            deal(plan("thousand bytes", TWO_OF_THREE, 1000)),
            ["Flat", "Length"],
            "a secret whose check matrix is over a thousand columns wide",
        ),
        "wide": (
            renew(deal(wide)),
            ["Tree", "OtherPolynomial", "Length", "SecondEpoch", "Unicode"],
            "weights, three levels, odd names, epoch 2, the shortest row, an encrypted file",
        ),
    }


NOTES = {
    "Flat": "A rule of one node.",
    "Tree": "A rule with nodes below the root.",
    "OtherPolynomial": "A field polynomial other than x^8 + x^4 + x^3 + x + 1; readers with that one built in fail.",
    "Length": "A secret whose length lies at an edge: of the padding, of the row, or of the check matrix.",
    "SecondEpoch": "A record that names the record of the epoch before.",
    "Unicode": "Quotation marks, and letters outside ASCII: canonical JSON escapes just what RFC 8785 does.",
    **wrapped_v1.FLAGS,
}

SEEDS = (
    "In place of randomness: each draw's entropy is SHAKE256 of `seed`/`purpose`/entropy, its nonce 32 bytes of "
    "SHAKE256 of `seed`/`purpose`/nonce, and what is drawn is entropy XOR SHAKE256('shares/v1/hedge' || nonce || what "
    "is hidden). Blind and mask are one draw of 48 bytes that hides the message (a later epoch keeps the blind, and "
    "only the mask is taken from it); f_1, f_2, ... of a node, in this order, are one draw that hides its f_0, with "
    "the k and x of each step to the node, one byte each, before it. Nodes are numbered in pre-order. No reader can "
    "see any of this, so another program may draw otherwise."
)


def dealing_test(dealing: Dealing, flags: list[str], comment: str) -> dict[str, Any]:
    """Give all values of a dealing that are worth a check."""
    plan = dealing.plan
    names = list(dealing.paths)
    subsets = [set(c) for size in range(len(names) + 1) for c in combinations(names, size)]
    quorums = [s for s in subsets if satisfied(plan.rule, s)]
    short = [s for s in subsets if not satisfied(plan.rule, s)]
    width = len(dealing.payload) - 16
    return {
        "tcId": 1,
        "comment": comment,
        "flags": flags,
        "seed": plan.seed,
        "rule": plan.rule,
        "field": plan.polynomial,
        "pad": plan.pad,
        "set": dealing.set_id.hex(),
        "epoch": plan.epoch,
        "label": plan.label,
        "created": plan.created,
        "secret": plan.secret.hex(),
        "draws": dealing.draws,
        "message": dealing.message.hex(),
        "blind": dealing.blind.hex(),
        "mask": dealing.mask.hex(),
        "payload": dealing.payload.hex(),
        "nodes": [
            {
                "path": node.prefix,
                "need": node.need,
                "coefficients": [row.hex() for row in node.coefficients],
                "checks": dealing.record["checks"][i],
            }
            for i, node in enumerate(dealing.nodes)
        ],
        "secret_commitment": dealing.secret_commitment.hex(),
        "check_matrix_first_row": dealing.matrix[:width].hex(),
        "check_matrix_sha256": sha256(dealing.matrix).hex(),
        "custodians": [
            {
                "name": name,
                "paths": dealing.paths[name],
                "rows": [row.hex() for row in dealing.rows[name]],
                "header": dealing.cores[name][: -sum(map(len, dealing.rows[name]))].decode(),
                "core_sha256": sha256(dealing.cores[name]).hex(),
                "share_commitment": dealing.record["custodians"][i]["share_commitment"],
                "attestation_seed": dealing.attestation_seeds[name].hex(),
                "attestation_key": dealing.record["custodians"][i]["attestation_key"],
                "digest": dealing.shares[name]["digest"],
                "document": pretty(dealing.shares[name]),
            }
            for i, name in enumerate(names)
        ],
        "record": {
            "canonical_sha256": sha256(
                canonical({k: v for k, v in dealing.record.items() if k not in ("fingerprint", "signatures")})
            ).hex(),
            "fingerprint": dealing.record["fingerprint"],
            "document": pretty(dealing.record),
        },
        "smallest_quorums": [sorted(s) for s in quorums if not any(q < s for q in quorums)],
        "largest_insufficient": [sorted(s) for s in short if not any(s < other for other in short)],
        "result": "valid",
    }


def source(section: str) -> dict[str, str]:
    """Say where a group comes from."""
    return {
        "title": "The documents of `shares`, format version 1",
        "section": section,
        "link": "shares/documents/FORMAT.md",
        "obtained": "worked out by tests/vectors/make/dealer_v1.py, which shares no code with the package",
    }


def vectors(algorithm: str, schema: str, notes: dict[str, Any], groups: list[dict[str, Any]]) -> str:
    """Give the text of a file of check values, its tests numbered through."""
    number = 0
    for group in groups:
        for test in group["tests"]:
            number += 1
            test["tcId"] = number
    used = {flag for group in groups for test in group["tests"] for flag in test["flags"]}
    body = {
        "algorithm": algorithm,
        "schema": schema,
        "numberOfTests": number,
        "notes": {flag: notes[flag] for flag in sorted(used)},
        "testGroups": groups,
    }
    return json.dumps(body, indent=1, ensure_ascii=True) + "\n"


def valid_note(flag: str) -> dict[str, Any]:
    return {"bugType": "BASIC", "description": NOTES[flag], "effect": "a correct document is refused", "links": []}


def files() -> dict[str, str]:
    """Make every file: its name below tests/vectors, and its text."""
    made = {}
    samples = plans()
    for name, (dealing, flags, comment) in samples.items():
        group = {"source": source("2 to 6"), "seeds": SEEDS, "tests": [dealing_test(dealing, flags, comment)]}
        made[f"set_v1_{name}.json"] = vectors(
            "dealing of a share set", "dealing", {f: valid_note(f) for f in flags}, [group]
        )
    flat, tree, short, wide = (samples[name][0] for name in ("flat_3_of_5", "tree", "one_byte", "wide"))
    for folder, dealing in (("flat", flat), ("tree", tree)):
        made[f"golden/v1/{folder}/record.json"] = pretty(dealing.record)
        for name, share in dealing.shares.items():
            made[f"golden/v1/{folder}/{name}.share.json"] = pretty(share)
    for name, (algorithm, groups) in {
        "share_v1": ("verification of one share against a record", share_cases_v1.shares(flat, tree, short)),
        "record_v1": ("reading of a record", record_cases_v1.records(flat, tree, wide)),
        "set_v1_recover": ("recovery from several shares", recovery_cases_v1.recoveries(flat, tree)),
    }.items():
        groups = [{"source": source(group.pop("section")), **group} for group in groups]
        made[f"{name}.json"] = vectors(
            algorithm, name.split("_")[-1].replace("v1", name.split("_")[0]), REFUSALS, groups
        )
    made |= {f"golden/v1/wrapped/{name}": text for name, text in wrapped_v1.files(flat).items()}
    made |= {f"golden/v1/attested/{name}": text for name, text in attested_v1.files(flat).items()}
    cards = [wrapped_v1.documents(flat)[f"{name}.card.json"] for name in ("harbour-office", "registrar")]
    made["golden/v1/journal/journal.jsonl"] = journal_v1.text(flat.record, cards)
    made |= {f"golden/v1/keyed/{name}": text for name, text in keyed_v1.files().items()}
    made["golden/v1/ceremony/script.json"] = pretty(ceremony_v1.script())
    notes = {flag: valid_note(flag) for flag in wrapped_v1.FLAGS}
    group = {"source": source("9 and 10"), "seed": wrapped_v1.SEED, "tests": wrapped_v1.tests(flat)}
    made["wrapped_v1.json"] = vectors("opening of what is wrapped", "wrapped", notes, [group])
    return made


def main(folder: Path) -> None:
    for name, text in files().items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(text.encode())


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parents[1])
