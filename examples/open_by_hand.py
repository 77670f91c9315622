#!/usr/bin/env python3
"""Open an encrypted file with its recovered key, with Python's standard library alone.

    python3 open_by_hand.py KEY ENCRYPTED SHARE --to FILE   (FILE is new and yours alone; or --check, which writes none)

KEY is the file of 32 bytes that recover_by_hand.py made; SHARE any share of the set, or its record. By FORMAT.md, sec.
13: a first pass checks the digest that the share names and every chunk's tag (NIST SP 800-38D); only then is a byte
written, in a second one that checks all of it again. AES (FIPS 197) is done for all blocks of a chunk at once: a plane
holds the same byte of every block. A megabyte takes about a second, a gigabyte some minutes.
Cautions. The arithmetic uses tables, is NOT constant time, and leaves copies of key and secret in memory: use a machine
that is offline and yours alone, swap off. Destroy KEY when you are done. A secret that was put together is known to
that machine and all who had access: use it, then replace it, by your procedure.
Exit codes: 0 done, 2 usage, 4 verification failed, 5 file or I/O.
"""
import hashlib, hmac, json, os, sys  # noqa: E401, I001 - so that all of it fits on three sheets of paper.

def refuse(code, why):
    print(f"open_by_hand: {why}", file=sys.stderr)
    sys.exit(code)

def times(a, b):
    """FIPS 197, section 4.2: for each bit of b, the product so far times x, modulo 11b hex, plus a or nothing."""
    product = 0
    for i in range(7, -1, -1):
        product = product << 1 ^ 0x11B * (product >> 7) ^ a * (b >> i & 1)
    return product

def substitute(x):
    """FIPS 197, section 5.1.1: the inverse (0 for 0), its rotations by 0 to 4 bits and 63 hex, added up."""
    inverse, total = next((y for y in range(256) if times(x, y) == 1), 0), 0x63
    for i in range(5):
        total ^= (inverse << i | inverse >> 8 - i) & 255
    return total

ONCE = bytes(map(substitute, range(256)))
TWICE, THRICE = (bytes(times(factor, s) for s in ONCE) for factor in (2, 3))

def expand(key):
    """FIPS 197, section 5.2: the 15 round keys of 16 bytes."""
    words, constant = [key[i:i + 4] for i in range(0, 32, 4)], 1
    while len(words) < 60:
        word = words[-1]
        if len(words) % 4 == 0:
            word = word.translate(ONCE)
        if len(words) % 8 == 0:
            word = bytes([word[1] ^ constant, word[2], word[3], word[0]])
            constant = times(constant, 2)
        words.append(bytes(a ^ b for a, b in zip(word, words[-8], strict=True)))
    return [b"".join(words[i:i + 4]) for i in range(0, 60, 4)]

def encrypt(round_keys, planes):
    """FIPS 197, section 5.1: SubBytes is a table, ShiftRows an order, MixColumns and AddRoundKey are sums of planes."""
    length, ones = len(planes[0]), int.from_bytes(b"\1" * len(planes[0]), "big")
    def add(byte, *terms):
        total = ones * byte
        for term in terms:
            total ^= int.from_bytes(term, "big")
        return total.to_bytes(length, "big")
    state = [add(round_keys[0][i], planes[i]) for i in range(16)]
    for key in round_keys[1:14]:
        shifted = [state[(i + 4 * (i % 4)) % 16] for i in range(16)]
        one, two, three = ([plane.translate(table) for plane in shifted] for table in (ONCE, TWICE, THRICE))
        columns = [[i // 4 * 4 + (i + down) % 4 for down in range(4)] for i in range(16)]
        state = [add(key[i], two[a], three[b], one[c], one[d]) for i, (a, b, c, d) in enumerate(columns)]
    return [add(round_keys[14][i], state[(i + 4 * (i % 4)) % 16].translate(ONCE)) for i in range(16)]

def key_stream(round_keys, nonce, first, count):
    """SP 800-38D, section 6.5: blocks of nonce || counter in 4 bytes, encrypted; the counter goes up from first."""
    counters, stream = b"".join(i.to_bytes(4, "big") for i in range(first, first + count)), bytearray(16 * count)
    planes = [bytes([byte]) * count for byte in nonce] + [counters[i::4] for i in range(4)]
    for i, plane in enumerate(encrypt(round_keys, planes)):
        stream[i::16] = plane
    return stream

def hash_tables(round_keys):
    """SP 800-38D, section 6.3: for each place and value of a byte, its product with H, the zero block encrypted."""
    product, tables = int.from_bytes(b"".join(encrypt(round_keys, [b"\0"] * 16)), "big"), [[0] for _ in range(16)]
    for place, table in enumerate(tables):
        for _ in range(8):  # Bits count from the left: the next one's product is this one's times x.
            table = [entry ^ term for entry in table for term in (0, product)]
            product = product >> 1 ^ 0xE1 * (product & 1) << 120
        tables[place] = table
    return tables

def add_up(left, right):
    return (int.from_bytes(left, "big") ^ int.from_bytes(right, "big")).to_bytes(len(left), "big")

def tag(round_keys, tables, nonce, header, text):
    """SP 800-38D, section 7: the hash of header, ciphertext and both lengths in bits, plus the stream's block 1."""
    total = 0
    blocks = b"".join(part + bytes(-len(part) % 16) for part in (header, text))
    blocks += (8 * len(header)).to_bytes(8, "big") + (8 * len(text)).to_bytes(8, "big")
    for i in range(0, len(blocks), 16):
        block, total = (total ^ int.from_bytes(blocks[i:i + 16], "big")).to_bytes(16, "big"), 0
        for table, byte in zip(tables, block, strict=True):
            total ^= table[byte]
    return add_up(total.to_bytes(16, "big"), key_stream(round_keys, nonce, 1, 1))

def read(stream, key, named, new=None):
    """Section 13: read the open file once and check all of it; write the parts to new, where there is one."""
    round_keys, size = expand(key), os.fstat(stream.fileno()).st_size - 44
    tables = hash_tables(round_keys)
    header = stream.seek(0) or stream.read(44)
    full = int.from_bytes(header[40:], "big") + 16
    count, whole = -(-size // full), 2**16 <= full - 16 <= 2**24 and (size - 1) % full >= 16
    if header[:24] != b"shares encrypted file\n\0\1" or not whole or not 1 <= count <= 2**24:
        refuse(4, "this is no whole encrypted file of format version 1")
    if header[24:40].hex() != named["set"]:
        refuse(4, f"the encrypted file is of set {header[24:40].hex()}, the share of set {named['set']!a}")
    digest = hashlib.sha256(b"shares/v1/encrypted-file" + header)
    for number in range(count):
        chunk = stream.read(full)
        digest.update(hashlib.sha256(chunk).digest())
        text, nonce = chunk[:-16], number.to_bytes(11, "big") + bytes([number == count - 1])
        if not hmac.compare_digest(tag(round_keys, tables, nonce, header, text), chunk[-16:]):
            refuse(4, f"chunk {number + 1} of {count} was altered or is out of place, or this is another key's file")
        if new:
            new.write(add_up(text, key_stream(round_keys, nonce, 2, -(-len(text) // 16))[:len(text)]))
    if digest.hexdigest() != named["encrypted_file"]:
        refuse(4, "the key opens this file, but it is not the one that the share names")
    return size - 16 * count

def main(arguments):
    if [len(arguments), *arguments[3:4]] not in ([4, "--check"], [5, "--to"]) or "-" in [a[:1] for a in arguments[:3]]:
        refuse(2, "usage: python3 open_by_hand.py KEY ENCRYPTED SHARE --to FILE (or --check, which writes nothing)")
    with open(arguments[0], "rb") as key_file, open(arguments[2], "rb") as share:
        key, text = key_file.read(33), share.read(2**20)
    try:
        named = {name: str(json.loads(text)[name]) for name in ("set", "encrypted_file")}
    except (ValueError, TypeError, KeyError, RecursionError):  # Their texts could show what the share holds.
        named = {}
    if len(key) != 32 or named.get("encrypted_file", "None") == "None":
        refuse(4, "KEY is not 32 bytes long, or SHARE is damaged, or names no encrypted file")
    with open(arguments[1], "rb") as stream:
        length, went = read(stream, key, named), "Nothing"
        if arguments[3] == "--to":
            with open(went := arguments[4], "xb", opener=lambda path, flags: os.open(path, flags, 0o600)) as new:
                try:
                    read(stream, key, named, new)
                    new.flush()
                except BaseException:  # What stands there is a part.
                    os.unlink(went)
                    raise
    print(f"Opened {length} bytes: the encrypted file is the one which the share names, whole. {went!a} written.")

if __name__ == "__main__":
    try:
        main(sys.argv[1:])
    except OSError as error:
        refuse(5, error)
