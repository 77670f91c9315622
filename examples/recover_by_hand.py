#!/usr/bin/env python3
"""Recover a secret from its share files, with Python's standard library alone.

    python3 recover_by_hand.py SHARE... --to FILE      (FILE is new and yours alone; or --check, which writes nothing)

By FORMAT.md, version 1, whose sections are named below: A. Shamir, "How to share a secret", CACM 22(11), 1979, once for
each node of the rule. Before a byte is written, each share is checked against its digest and the others, and the secret
against the commitment in every share; bad shares are left out where the rest suffice. Success proves that this is the
secret which these shares name. That they are the shares which were dealt, only the record proves.
Cautions. The arithmetic is plain, without tables, NOT constant time, and leaves copies of the secret in memory: use a
machine that is offline and yours alone, swap off. Shares that lie together are the secret: take them apart at once. A
key that was put together is known to that machine and all who had access: use it, then replace it, by your procedure.
Exit codes: 0 done, 2 usage, 3 not enough shares, 4 verification failed (also for a damaged share), 5 file or I/O.
"""
import base64, hashlib, itertools, json, os, sys  # noqa: E401, I001 - so that all of it fits on two sheets of paper.

def refuse(code, why):
    print(f"recover_by_hand: {why}", file=sys.stderr)
    sys.exit(code)

def canonical(share, *names):  # RFC 8785: names sorted, no white space; in strings, json escapes just what it asks for.
    return json.dumps({n: share[n] for n in names}, sort_keys=True, separators=(",", ":"), ensure_ascii=False).encode()

def multiply(a, b, m):  # Section 1: for each bit of b, the product so far times x, modulo m, plus a or nothing.
    product = 0
    for i in range(7, -1, -1):
        product = product << 1 ^ m * (product >> 7) ^ a * (b >> i & 1)
    return product

def interpolate(points, m):
    """Section 3: f_0 = sum of row_i * product over j != i of x_j / (x_i + x_j), for k points (x_i, row_i)."""
    f_0 = bytes(len(points[0][1]))
    for x, row in points:
        weight = 1
        for other in {other for other, _ in points} - {x}:
            weight = multiply(weight, next(q for q in range(256) if multiply(q, x ^ other, m) == other), m)
        f_0 = bytes(s ^ multiply(weight, byte, m) for s, byte in zip(f_0, row, strict=True))
    return f_0

def fold(shares, m):
    """Section 8, step 2: the payload, from the leaves up, by every k neighbours; empty if too few, or two disagree."""
    found = [point for share in shares for point in share["points"]]
    for depth in range(8, -1, -1):
        rows, nodes = dict(found), {}
        if any(rows[path] != row for path, row in found):
            return b""
        for path in (path for path in rows if len(path) == depth > 0):
            nodes.setdefault((path[:-1], path[-1][0]), []).append((path[-1][1], rows[path]))
        for (node, k), points in nodes.items():
            found += [(node, interpolate(points[i:i + k], m)) for i in range(len(points) - k + 1)]
    return rows.get((), b"")

def read(file):
    """Sections 1 and 4: a share. The form of all that the secret depends on is checked, and the digest of the whole."""
    with open(file, "rb") as stream:
        pairs = json.loads(stream.read(2**20).decode(), object_pairs_hook=tuple, parse_float=int, parse_constant=int)
    share = dict(pairs)
    m, paths = int(share["field"], 16), [tuple((k, x) for k, x in path) for path in share["paths"]]
    rows = [base64.urlsafe_b64decode(row + "=" * (-len(row) % 4)) for row in share["rows"]]
    header = canonical(share, "kind", "version", "set", "epoch", "custodian", "field", "paths", "secret_commitment",
                       "encrypted_file")
    commitment = hashlib.sha256(b"shares/v1/share" + header + b"".join(rows)).digest()
    rest = canonical(share, "label", "rule", "notice", "record")
    if not (os.path.getsize(file) <= 2**20 and isinstance(pairs, tuple) and len(pairs) == 15  # All 15 are asked for.
            and canonical(share, "kind", "version") == b'{"kind":"share","version":1}'
            and share["set"] == bytes.fromhex(share["set"]).hex() and len(share["set"]) == 32
            and len(rows) == len(paths) <= 1000 and all(1 <= len(path) <= 8 for path in paths)
            and all(type(n) is int and 1 <= n <= 255 for path in paths for step in path for n in step)
            and not any(path == other[:len(path)] for path, other in itertools.permutations(paths, 2))
            and [base64.urlsafe_b64encode(row).decode().rstrip("=") for row in rows] == share["rows"]
            and len({len(row) for row in rows}) == 1 and 53 <= len(rows[0]) <= 131072
            and share["digest"] == hashlib.sha256(b"shares/v1/digest" + commitment + rest).hexdigest()
            and share["field"] == f"0x{m:x}" and m >> 8 == 1  # And m has no factor, so no two bytes multiply to zero:
            and all(multiply(a, b, m) for a in range(2, 32) for b in range(1, 256))):
        raise ValueError
    return share | {"points": list(zip(paths, rows, strict=True)), "file": file, "length": len(rows[0])}

def main(arguments):  # Section 8, and what to say about it.
    split = -1 if arguments[-1:] == ["--check"] else -2
    files, option = arguments[:split], arguments[split:]
    if not files or option[0] != {-1: "--check", -2: "--to"}[split] or any(file.startswith("-") for file in files):
        refuse(2, "usage: python3 recover_by_hand.py SHARE... --to FILE (or --check, which writes nothing)")
    good, bad, enough = [], [], False
    for file in files:
        try:
            good.append(read(file))
        except (ValueError, TypeError, KeyError, RecursionError):  # Their texts could show what the file holds.
            bad.append(f"left out {file!a}: it is damaged, or no share of format version 1")
    for name in ("set", "epoch", "field", "secret_commitment", "encrypted_file", "length"):
        if len(kinds := {canonical(share, name): ascii(share["file"]) for share in good}) > 1:
            refuse(4, f"{' and '.join(kinds.values())} differ in {name} and never mix: give those of one set and epoch")
    selections = (kept for size in range(len(good), 0, -1) for kept in itertools.combinations(good, size))
    for kept in itertools.islice(selections, 2_000):  # More would take too long: give fewer, better shares.
        payload = fold(kept, int(kept[0]["field"], 16))
        named = b"shares/v1/secret" + bytes.fromhex(kept[0]["set"]) + payload[:-16]
        if hashlib.sha256(named).hexdigest() == kept[0]["secret_commitment"]:
            break
        enough = enough or payload != b""
    else:
        why = "at least one share here is wrong" if enough else f"{len(good)} sound shares are no quorum (see rule)"
        refuse(4 if enough or bad else 3, "; ".join([f"{why}: bring more; nothing was written", *bad]))
    length, message = int.from_bytes(payload[:4], "big"), payload[4:-48]
    if not 1 <= length <= min(len(message), 65536) or any(message[length:]):
        refuse(4, "these shares agree, but what they hold is no secret in the published form: the dealer was in error")
    bad += [f"left out {share['file']!a}: it contradicts the others" for share in good if share not in kept]
    if split == -2:
        with open(option[1], "xb", buffering=0, opener=lambda path, flags: os.open(path, flags, 0o600)) as new:
            if new.write(message[:length]) < length:
                os.unlink(option[1])
                refuse(5, f"no room for {option[1]!a}: it was removed again")
    print(f"Recovered {length} bytes from {len(kept)} shares. By its commitment it is the secret which they name.",
          f"Compare with the record: {canonical(kept[0], 'set', 'secret_commitment').decode()}", *bad,
          f"{'Nothing' if split == -1 else ascii(option[1])} written. Take shares apart; replace the key.", sep="\n")

if __name__ == "__main__":
    try:
        main(sys.argv[1:])
    except OSError as error:
        refuse(5, error)
