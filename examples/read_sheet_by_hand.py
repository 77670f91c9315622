#!/usr/bin/env python3
"""Read a share back from its sheet of paper, with Python's standard library alone.

    python3 read_sheet_by_hand.py TYPED --to FILE      (FILE is new and yours alone)

TYPED is a text file: the sheet's lines in their order, without the number before each (spaces, small letters and blank
lines do not matter), or the text of the scanned code. By FORMAT.md, version 1, section 11: each line is checked by
itself (I. S. Reed, G. Solomon, "Polynomial codes over certain finite fields", J. SIAM 8(2), 1960), then the whole.
Nothing is set right: a line that is refused is to be compared with the sheet and mended in TYPED. FILE becomes the
share, as printed, without label, rule and notice. recover_by_hand.py takes it when it is bare; when it is wrapped,
sections 9 and 10 say how to open it. That it is the share which was dealt, only the record proves.
Cautions. TYPED and FILE are as secret as the sheet, and copies stay in memory: use a machine that is offline and yours
alone, swap off, with both files on a RAM disk. Never give lines as arguments. Destroy TYPED once FILE is there.
Exit codes: 0 done, 2 usage, 4 verification failed (a line, the code or the whole is not right), 5 file or I/O.
"""
import base64, hashlib, io, json, os, re, sys, textwrap, unicodedata  # noqa: E401, I001 - all fits on three sheets.

DIGITS = "ABCDEFGHIJKLMNOPQRSTUVWXYZ234567"  # RFC 4648, section 6: A stands for 0, 7 for 31.
BARRED = re.compile("[/\\\\\u034f\u115f\u1160\u17b4\u17b5\u180b-\u180f\u2800\u3164\ufdd0-\ufdef\ufe00-\ufe0f\uffa0"
                    "\U000e0100-\U000e01ef]")  # What section 1 has in no name, with what is_name looks for.

def refuse(code, why):
    print(f"read_sheet_by_hand: {why}", file=sys.stderr)
    sys.exit(code)

def multiply(a, b, m):  # For each bit of b, the product so far times x, modulo m, plus a or nothing.
    product, top = 0, m.bit_length() - 2
    for i in range(top, -1, -1):
        product = product << 1 ^ m * (product >> top) ^ a * (b >> i & 1)
    return product

def evaluate(line, x):  # r(x) over GF(32): the first character is the coefficient of x^30.
    value = 0
    for character in line:
        value = multiply(value, x, 0b100101) ^ DIGITS.index(character)
    return value

def wrong(text, n=0):
    """Section 11, typed lines: which rule line n breaks, or a code where there is no n; empty if it breaks none."""
    if odd := [place for place, character in enumerate(text, 1) if character not in DIGITS]:
        return f"character {odd[0]} is none of the letters A to Z and the digits 2 to 7"
    if len(text) != (length := 31 if n else len(text) // 24 * 24):
        return f"it has {len(text)} characters, and should have {length}{'' if n else ' or 24 more'}"
    if n and [evaluate(text, x) for x in (2, 4, 8, 16, 5, 10)] != [1, 0, 0, 0, 0, 0]:  # x = a, a^2, ..., a^6.
        return "at least one character is wrong (the rule: r(a) is 1, and r(a^2) to r(a^6) are 0)"
    return f"by its first character it is line {DIGITS.index(text[0]) + 1}" if n and text[0] != DIGITS[n - 1:n] else ""

def gather(text):
    """The form, of typed lines or of a code. Its first byte, the number of blocks, and its check fit."""
    typed = ["".join(line.split()).encode("ascii", "replace").decode().upper() for line in text.splitlines()]
    lines, code = [line for line in typed if line], "".join(typed)
    if max(map(len, lines), default=0) > 2 * 31:  # No line is so long, nor are two that were run together.
        if why := wrong(code):
            refuse(4, f"the code: {why}. Scan it again")
        form = base64.b32decode(code)
    else:
        if bad := [f"line {n}: {why}" for n, line in enumerate(lines, 1) if (why := wrong(line, n))]:
            refuse(4, f"{'; '.join(bad[:32])}. Compare with the sheet (lines are counted from 1, blank ones left out)")
        form = base64.b32decode("".join(line[1:25] for line in lines))
    if not form or len(form) != 15 * form[0]:
        refuse(4, f"{len(form) // 15} lines (in a code: of 24 characters) are here, and by the first one the sheet has "
                  f"{form[0] if form else 'more'}. Compare with the sheet")
    if hashlib.sha256(b"shares/v1/paper" + form[:1] + form[5:]).digest()[:4] != form[1:5]:
        refuse(4, "the check over the whole does not fit: see that every line is of this sheet, or scan the code again")
    return form

def is_name(name):  # Section 1. Characters which this Python does not know yet are accepted.
    return (1 <= len(name) <= 64 and len(name.encode()) <= 200 and unicodedata.normalize("NFC", name) == name
            and " ".join(name.split()) == name and name[0] not in ".-" and not BARRED.search(name) and not any(
            unicodedata.category(c) in ("Cc", "Cf", "Cs", "Co", "Zl", "Zp") or ord(c) & 0xFFFE == 0xFFFE for c in name))

def canonical(members):  # RFC 8785: names sorted, no white space; in strings, json escapes just what it asks for.
    return json.dumps(members, sort_keys=True, separators=(",", ":"), ensure_ascii=False).encode()

def parse(form):
    """Section 11, the paper form: the document. ValueError or IndexError for what no writer would have written."""
    take = io.BytesIO(form[5:] + bytes(15)).read  # These zeros are still there in the end, unless a part was cut short.
    def byte():
        return take(1)[0]
    def number():
        value = 0
        while (digit := byte()) & 128:
            value = value << 7 | digit & 127
            if not 1 <= value < 2**25:  # A leading zero digit, or more than any number here can be.
                raise ValueError
        return value << 7 | digit
    def b64(part):
        return base64.urlsafe_b64encode(part).decode().rstrip("=")
    def fingerprint():
        return "-".join(textwrap.wrap(base64.b32encode(take(20)).decode(), 4))
    what, set_id, epoch, name, m = byte(), take(16).hex(), number(), take(byte()).decode(), 256 | byte()
    kind, paths = what & 7, [[[byte(), byte()] for _ in range(byte())] for _ in range(number())]
    header = {"kind": "wrapped-share" if kind else "share", "version": 1, "set": set_id, "epoch": epoch,
              "custodian": name, "field": f"0x{m:x}", "paths": paths, "secret_commitment": take(32).hex(),
              "encrypted_file": take(32).hex() if what & 16 else None}
    notes = {"label": None, "rule": None, "notice": None, "record": fingerprint() if what & 8 else None}
    good = (what >> 5 == 1 and kind <= 3 and 1 <= epoch < 2**32 and is_name(name) and paths
            and all(1 <= len(path) <= 8 and all(map(all, path)) for path in paths)
            and not any(a is not b and a == b[:len(a)] for a in paths for b in paths)
            and all(multiply(a, b, m) for a in range(2, 32) for b in range(1, 256)))  # So m has no factor.
    if kind == 1:
        wrapping = {"method": "passphrase", "memory": (memory := number()), "passes": (passes := byte()),
                    "lanes": (lanes := byte()), "salt": b64(take(16)), "commitment": b64(take(32))}
        good = good and 1 <= lanes <= 16 and 8 * lanes <= memory <= 2097152 and 1 <= passes <= 10
    elif kind:
        wrapping = {"method": "card", "suite": "mlkem768-x25519" if kind == 2 else "x25519", "card": fingerprint(),
                    "commitment": b64(take(32)), "key": b64(take(number()))}
    length = number()
    if kind:
        document = header | notes | {"wrapping": wrapping, "sealed": b64(take(length * len(paths) + 16))}
        digest = hashlib.sha256(b"shares/v1/envelope" + canonical(document))  # Section 10.
    else:
        rows = [take(length) for _ in paths]
        document = header | {"rows": [b64(row) for row in rows]} | notes
        commitment = hashlib.sha256(b"shares/v1/share" + canonical(header) + b"".join(rows)).digest()  # Section 4.
        digest = hashlib.sha256(b"shares/v1/digest" + commitment + canonical(notes))
    if not good or length < 53 or not 15 <= len(rest := take()) < 30 or any(rest):
        raise ValueError
    return document | {"digest": digest.hexdigest()}

def main(arguments):
    if len(arguments) != 3 or arguments[1] != "--to" or arguments[0].startswith("-"):
        refuse(2, "usage: python3 read_sheet_by_hand.py TYPED --to FILE (TYPED holds the lines, or the code's text)")
    with open(arguments[0], "rb") as stream:
        typed = stream.read(65537)
    if len(typed) > 65536:  # Ten times the largest code, of 255 blocks.
        refuse(4, "the file is far too long for a sheet: give the lines, or the text of the code, and nothing else")
    form = gather(typed.decode("utf-8-sig", "replace"))
    try:
        document = parse(form)
    except (ValueError, IndexError):  # Their texts could show what the sheet holds.
        refuse(4, "every check fits, but this is no share of format version 1: the maker of the sheet was in error")
    with open(arguments[2], "xb", opener=lambda path, flags: os.open(path, flags, 0o600)) as new:
        try:
            new.write(json.dumps(document, indent=2).encode() + b"\n")
            new.flush()
            os.fsync(new.fileno())
        except BaseException:  # What stands there is a part.
            os.unlink(arguments[2])
            raise
    print(f"Every check fits. {arguments[2]!a} written. Destroy what you typed, and this when it has served.",
          f"Compare with the record: {json.dumps({n: document[n] for n in ('custodian', 'epoch', 'set', 'record')})}",
          "It is bare: whoever reads it has the share. recover_by_hand.py takes it." if "rows" in document else
          "It is wrapped: FORMAT.md, sections 9 and 10, say how to open it.", sep="\n")

if __name__ == "__main__":
    try:
        main(sys.argv[1:])
    except OSError as error:
        refuse(5, error)
