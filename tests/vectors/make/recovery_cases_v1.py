"""Selections of shares that recover, and that must not.

Source: shares/documents/FORMAT.md, section 8.
May import: the standard library, `dealer_v1`, `cases_v1`.
Secret: nothing.
Does not: say which of several faults a program names first, where a selection has more than one.
"""

import copy
from dataclasses import replace

from cases_v1 import Document, flip, sealed
from dealer_v1 import Dealing, b64, deal, pretty, renew


def recoveries(flat: Dealing, tree: Dealing) -> list[Document]:
    """Make the groups of set_v1_recover.json: documents by name, and which of them are given."""
    names = list(flat.shares)
    a, b, c, d, e = names
    foreign = deal(replace(flat.plan, name=f"{flat.plan.name}, another set"))
    later = renew(flat)
    texts = {name: pretty(share) for name, share in flat.shares.items()}
    texts |= {f"{name}, next epoch": pretty(share) for name, share in later.shares.items()}
    texts |= {f"{name}, another set": pretty(share) for name, share in foreign.shares.items()}
    for place, (name, share) in enumerate(flat.shares.items()):
        texts[f"{name}, damaged"] = texts[name].replace(share["rows"][0], flip(share["rows"][0]))
        texts[f"{name}, forged"] = sealed({**share, "rows": [flip(share["rows"][0], 5 + 8 * place)]})
        texts[f"{name}, same bit forged"] = sealed({**share, "rows": [flip(share["rows"][0])]})
    wrong_x = copy.deepcopy(flat.shares[a])
    wrong_x["paths"][0][0][1] = 2
    texts[f"{a}, at the x of {b}"] = sealed(wrong_x)
    wrong_k = copy.deepcopy(flat.shares[a])
    wrong_k["paths"][0][0][0] = 2
    texts[f"{a}, need lowered"] = sealed(wrong_k)
    texts[f"{a}, longer"] = sealed({**flat.shares[a], "rows": [b64(bytes(len(flat.payload) + 16))]})
    texts[f"{a}, other commitment"] = sealed({**flat.shares[a], "secret_commitment": 64 * "0"})
    texts[f"{a}, other set"] = sealed({**flat.shares[a], "set": 32 * "0"})
    texts[f"{a}, other epoch"] = sealed({**flat.shares[a], "epoch": 2**32 - 1})
    texts[f"{a}, other field"] = sealed({**flat.shares[a], "field": "0x11d"})
    texts[f"{a}, other file"] = sealed({**flat.shares[a], "encrypted_file": 64 * "0"})
    texts[f"{a}, renamed and relabelled"] = sealed(
        {**flat.shares[a], "custodian": "dry-dock", "label": None, "record": None}
    )

    good, few, mix, bad = "valid", "too few", "never mix", "wrong share"
    cases: list[tuple[str, str, list[str], str]] = [
        ("three", "Basic", [a, b, c], good),
        ("three, in another order", "Basic", [e, a, c], good),
        ("all", "Basic", names, good),
        ("three, one twice", "Basic", [a, b, b, c], good),
        ("three, one with another name, label and no record", "Basic", [f"{a}, renamed and relabelled", b, c], good),
        ("all, one damaged", "Damage", [f"{a}, damaged", b, c, d, e], good),
        ("all, two damaged", "Damage", [f"{a}, damaged", b, f"{c}, damaged", d, e], good),
        ("four, one of them a damaged copy", "Damage", [a, f"{a}, damaged", b, c], good),
        ("all, one forged", "Forgery", [f"{a}, forged", b, c, d, e], good),
        ("all, two forged", "Forgery", [f"{a}, forged", f"{b}, forged", c, d, e], good),
        ("all, one forged and one damaged", "Forgery", [a, f"{b}, forged", c, d, f"{e}, damaged"], good),
        ("three and a forged copy of one", "Forgery", [a, f"{a}, forged", b, c], good),
        ("three and one that claims another's x", "Forgery", [f"{a}, at the x of {b}", b, c, d], good),
        ("three and one that claims a lower need", "Forgery", [f"{a}, need lowered", b, c, d], good),
        # With x = 1, 4, 5 the weights at 0 are 1, w, w: so equal errors at 4 and 5 cancel, and the secret is right.
        (
            "three, two forged so that the errors cancel",
            "Wrong",
            [a, f"{d}, same bit forged", f"{e}, same bit forged"],
            good,
        ),
        ("none", "Quorum", [], few),
        ("one", "Quorum", [c], few),
        ("two", "Quorum", [a, e], few),
        ("two, each twice", "Quorum", [a, e, a, e], few),
        ("three, one damaged", "Damage", [a, b, f"{c}, damaged"], "damaged"),
        ("three, all damaged", "Damage", [f"{n}, damaged" for n in (a, b, c)], "damaged"),
        ("three, one forged", "Wrong", [a, b, f"{c}, forged"], bad),
        ("four, two forged", "Wrong", [a, b, f"{c}, forged", f"{d}, forged"], bad),
        ("all, three forged", "Wrong", [a, b, f"{c}, forged", f"{d}, forged", f"{e}, forged"], bad),
        ("two, one at the x of the other, and a third", "Wrong", [f"{a}, at the x of {b}", b, c], few),
        ("two that claim a lower need, and are enough for it", "Wrong", [f"{a}, need lowered", b], few),
        ("three and one of the next epoch", "Belonging", [a, b, c, f"{d}, next epoch"], mix),
        ("two and one of the next epoch", "Belonging", [a, b, f"{c}, next epoch"], mix),
        ("two and one of another set", "Belonging", [a, b, f"{c}, another set"], mix),
        ("two and one under another set's number", "Belonging", [f"{a}, other set", b, c], mix),
        ("two and one under another epoch's number", "Belonging", [f"{a}, other epoch", b, c], mix),
        ("two and one of another field", "Belonging", [f"{a}, other field", b, c], mix),
        ("two and one of another secret commitment", "Belonging", [f"{a}, other commitment", b, c], mix),
        ("two and one of another encrypted file", "Belonging", [f"{a}, other file", b, c], mix),
        ("two and one of another row length", "Belonging", [f"{a}, longer", b, c], mix),
        ("three of the next epoch", "Basic", [f"{n}, next epoch" for n in (a, b, c)], good),
    ]
    groups = [_recovery("flat", flat, texts, cases)]

    house, north, south, registrar, east, west = (
        tree.shares[n] for n in ("light-house", "north-pier", "south-pier", "registrar", "auditor-east", "auditor-west")
    )
    texts = {name: pretty(share) for name, share in tree.shares.items()}
    for name in ("north-pier", "registrar", "auditor-east"):
        share = tree.shares[name]
        texts[f"{name}, forged"] = sealed({**share, "rows": [flip(share["rows"][0])]})
    texts["light-house, second row forged"] = sealed({**house, "rows": [house["rows"][0], flip(house["rows"][1])]})
    inner = tree.nodes[1].coefficients[0]
    texts["whoever holds the first group's own row"] = sealed(
        {**registrar, "custodian": "dry-dock", "paths": [[[2, 1]]], "rows": [b64(inner)]}
    )
    n, s, h, r, e, w = (share["custodian"] for share in (north, south, house, registrar, east, west))
    cases = [
        ("two piers and the registrar", "Basic", [n, s, r], good),
        ("a pier, and the light-house in both its places", "Basic", [n, h], good),
        ("the registrar and an auditor", "Basic", [r, w], good),
        ("the light-house, as an auditor, and the registrar", "Basic", [h, r], good),
        ("all", "Basic", [n, s, h, r, e, w], good),
        ("all, a pier forged", "Forgery", [f"{n}, forged", s, h, r, e, w], good),
        ("all, the registrar forged", "Forgery", [n, s, h, f"{r}, forged", e, w], good),
        ("all, an auditor forged", "Forgery", [n, s, h, r, f"{e}, forged", w], good),
        ("a second row forged, another quorum left", "Forgery", [n, s, f"{h}, second row forged", r], good),
        ("an inner node's own row, and an auditor", "Basic", ["whoever holds the first group's own row", e], good),
        (
            "an inner node's own row, and two points below it",
            "Basic",
            ["whoever holds the first group's own row", n, s, r],
            good,
        ),
        ("all the piers", "Quorum", [n, s], few),
        ("a pier and the registrar", "Quorum", [n, r], few),
        ("the light-house", "Quorum", [h], few),
        ("two auditors", "Quorum", [e, w], few),
        ("two auditors and a pier", "Quorum", [e, w, s], few),
        ("the registrar forged, and an auditor", "Wrong", [f"{r}, forged", e], bad),
        ("a pier forged, another pier, the registrar", "Wrong", [f"{n}, forged", s, r], bad),
        ("two auditors who disagree, one forged", "Wrong", [f"{e}, forged", w], few),
    ]
    groups.append(_recovery("a tree", tree, texts, cases))

    message = flat.message
    for what, faulty in {
        "length 0": bytes(len(message)),
        "a length of one byte too many": (len(message) - 3).to_bytes(4, "big") + message[4:],
        "a length of 2^32 - 1": b"\xff\xff\xff\xff" + message[4:],
        "a byte that is not zero behind the secret": message[:-1] + b"\x01",
        "a length of one byte too few": (31).to_bytes(4, "big") + message[4:],
    }.items():
        dealing = deal(replace(flat.plan, name=f"{flat.plan.name}, {what}", message=faulty))
        texts = {name: pretty(share) for name, share in list(dealing.shares.items())[:3]}
        groups.append(
            _recovery(f"faulty dealer: {what}", dealing, texts, [(what, "Dealer", [a, b, c], "faulty dealer")])
        )
    full = message[:4] + message[4:36]
    dealing = deal(replace(flat.plan, name=f"{flat.plan.name}, no zeros", message=full))
    texts = {name: pretty(share) for name, share in list(dealing.shares.items())[:3]}
    groups.append(
        _recovery("a message that ends with its secret", dealing, texts, [("no zeros", "Basic", [a, b, c], good)])
    )
    return groups


def _recovery(
    about: str, dealing: Dealing, texts: dict[str, str], cases: list[tuple[str, str, list[str], str]]
) -> Document:
    used = {name for _, _, given, _ in cases for name in given}
    return {
        "section": "8",
        "about": about,
        "secret": dealing.plan.secret.hex(),
        "documents": {name: text for name, text in texts.items() if name in used},
        "tests": [
            {"tcId": 0, "comment": comment, "flags": [flag], "given": given, "result": "valid"}
            if verdict == "valid"
            else {
                "tcId": 0,
                "comment": comment,
                "flags": [flag],
                "given": given,
                "result": "invalid",
                "refusal": verdict,
            }
            for comment, flag, given, verdict in cases
        ],
    }
