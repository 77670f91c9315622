"""The functions of examples/recover_by_hand.py, one by one, against general-purpose libraries and exhaustive changes.

Sources: python-flint for GF(2)[x]; R. Lidl, H. Niederreiter, Introduction to Finite Fields, Theorem 3.25 (Gauss), for
the number of polynomials; the package `rfc8785` for canonical JSON (RFC 8785); shares/documents/FORMAT.md.
"""

import hashlib
import importlib.util
import io
import itertools
import json
from base64 import urlsafe_b64decode, urlsafe_b64encode
from pathlib import Path

import flint
import pytest
import rfc8785

ROOT = Path(__file__).parents[2]
SHARE = ROOT / "tests" / "vectors" / "golden" / "v1" / "flat" / "registrar.share.json"
HEADER = ("kind", "version", "set", "epoch", "custodian", "field", "paths", "secret_commitment", "encrypted_file")


@pytest.fixture(scope="module")
def script():
    spec = importlib.util.spec_from_file_location("recover_by_hand", ROOT / "examples" / "recover_by_hand.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def reseal(share):
    """Set a share's digest anew (section 4), its canonical JSON by the library."""
    rows = b"".join(urlsafe_b64decode(row + "=" * (-len(row) % 4)) for row in share["rows"])
    header = rfc8785.dumps({name: share[name] for name in HEADER})
    commitment = hashlib.sha256(b"shares/v1/share" + header + rows).digest()
    rest = rfc8785.dumps({name: share[name] for name in ("label", "rule", "notice", "record")})
    return json.dumps({**share, "digest": hashlib.sha256(b"shares/v1/digest" + commitment + rest).hexdigest()})


def polynomial(number):
    return flint.nmod_poly([number >> i & 1 for i in range(16)], 2)


IRREDUCIBLE = [m for m in range(256, 512) if polynomial(m).factor()[1] == [(polynomial(m), 1)]]


def test_thirty_fields():
    """Gauss's formula gives 30."""
    assert len(IRREDUCIBLE) == 30


def test_products_are_those_of_gf2_x(script):
    """All fields: products of every two powers of x, by python-flint. Two fields: bilinear in all 65,536 products."""
    for m in IRREDUCIBLE:
        for i, j in itertools.product(range(8), repeat=2):
            remainder = polynomial(1 << i) * polynomial(1 << j) % polynomial(m)
            assert script.multiply(1 << i, 1 << j, m) == sum(int(remainder[b]) << b for b in range(8))
    for m in (0x11B, 0x1F5):
        powers = [[script.multiply(1 << i, 1 << j, m) for j in range(8)] for i in range(8)]
        for a, b in itertools.product(range(256), repeat=2):
            total = 0
            for i, j in itertools.product((i for i in range(8) if a >> i & 1), (j for j in range(8) if b >> j & 1)):
                total ^= powers[i][j]
            assert script.multiply(a, b, m) == total


@pytest.mark.parametrize("m", [0x11B, 0x1F5, 0x1D7])
@pytest.mark.parametrize("k", [1, 2, 3, 5])
def test_interpolation_finds_the_constant(script, m, k):
    """Values of chosen polynomials over flint's field, at points that include 255, interpolate to the constant."""

    def value(coefficients, x):
        total = polynomial(0)
        for c in reversed(coefficients):
            total = (total * polynomial(x) + polynomial(c)) % polynomial(m)
        return sum(int(total[b]) << b for b in range(8))

    rows = [[(17 * i + 101 * j + 1) % 256 for j in range(k)] for i in range(16)]
    points = [(x, bytes(value(row, x) for row in rows)) for x in (255, 1, 128, 2, 77)[:k]]
    assert script.interpolate(points, m) == bytes(row[0] for row in rows)


def test_canonical_json_is_that_of_rfc_8785(script):
    """For every character that a name or text may hold, and beyond: the same bytes as the library."""
    every = "".join(map(chr, itertools.chain(range(0xD800), range(0xE000, 0x110000))))
    share = {"label": every, "kind": "share", "version": 1, "epoch": 2**32 - 1, "paths": [[[255, 1]]], "rule": None}
    assert script.canonical(share, *share) == rfc8785.dumps(share)
    # RFC 8785 orders names by UTF-16 code units, Python by code points; for ASCII names, as here, the two are one.
    assert all(name.isascii() for name in json.loads(SHARE.read_text()))


def test_only_irreducible_fields_are_taken(script, monkeypatch):
    """Of the 256 polynomials of degree 8, by python-flint's factors."""
    share = json.loads(SHARE.read_text())
    for m in range(256, 512):
        text = reseal({**share, "field": f"0x{m:x}"}).encode()
        monkeypatch.setattr(script, "open", lambda *_, text=text: io.BytesIO(text), raising=False)
        if m in IRREDUCIBLE:
            assert script.read(SHARE)["field"] == f"0x{m:x}"
        else:
            with pytest.raises(ValueError, match=r"^$"):
                script.read(SHARE)


def test_every_flipped_bit_is_refused(script, monkeypatch):
    """Each bit of a share file, alone; and nothing else is raised than what the script sets aside."""
    data = bytearray(SHARE.read_bytes())
    monkeypatch.setattr(script, "open", lambda *_: io.BytesIO(data), raising=False)
    assert script.read(SHARE)["custodian"] == "registrar"
    for at, bit in itertools.product(range(len(data)), range(8)):
        data[at] ^= 1 << bit
        with pytest.raises((ValueError, TypeError, KeyError)):
            script.read(SHARE)
        data[at] ^= 1 << bit


def test_every_shortened_file_is_refused(script, monkeypatch):
    """Cut off after each byte; only the newline at the end may go."""
    data = SHARE.read_bytes()
    for length in range(len(data) - 1):
        monkeypatch.setattr(script, "open", lambda *_, length=length: io.BytesIO(data[:length]), raising=False)
        with pytest.raises((ValueError, TypeError, KeyError)):
            script.read(SHARE)


def test_the_search_for_a_quorum_is_bounded(script, tmp_path, monkeypatch, capsys):
    """Of 26 shares that each claim to be enough alone there are 2^26 selections: it still ends, in a refusal."""
    share = json.loads(SHARE.read_text())
    for x in range(1, 27):
        row = urlsafe_b64encode(bytes(52) + bytes([x])).decode().rstrip("=")
        (tmp_path / f"{x}").write_text(reseal({**share, "paths": [[[1, x]]], "rows": [row]}))
    folds = []
    real = script.fold
    monkeypatch.setattr(script, "fold", lambda *arguments: folds.append(len(arguments[0])) or real(*arguments))
    with pytest.raises(SystemExit) as stop:
        script.main([*(str(path) for path in tmp_path.iterdir()), "--check"])
    assert stop.value.code == 3
    assert len(folds) == 2000
    assert "nothing was written" in capsys.readouterr().err


def test_reading_refuses_what_the_secret_depends_on(script, monkeypatch):
    """The cases of share_v1.json on the file, its members, set, field, points and rows: all refused."""
    flags, members = {"Json", "Members", "Version", "Point", "Row"}, ("set:", "field:")
    refused = 0
    for group in json.loads((ROOT / "tests" / "vectors" / "share_v1.json").read_text())["testGroups"]:
        for case in group["tests"]:
            if case.get("refusal") != "document" or "pad_to" in case:
                continue
            if flags & set(case["flags"]) or case["comment"].startswith(members):
                data = case["document"].encode() if "document" in case else bytes.fromhex(case["document_hex"])
                monkeypatch.setattr(script, "open", lambda *_, data=data: io.BytesIO(data), raising=False)
                with pytest.raises((ValueError, TypeError, KeyError, RecursionError)):
                    script.read(SHARE)
                refused += 1
    assert refused > 100
