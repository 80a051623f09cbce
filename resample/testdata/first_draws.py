"""First draws of a plan, made from the specifications alone.

Written apart from the Go code, to pin it: the stream from the text of
chacha8rand (C2SP, https://c2sp.org/chacha8rand), the integers from Lemire
(2019), algorithm 5, the shuffle from Knuth, volume 2, algorithm P, the
jitter from SHA-256 (FIPS 180-4) of label, seed, draw and name.

    python3 first_draws.py
"""

import hashlib
import struct

MASK = 0xFFFFFFFF


def quarter(s, a, b, c, d):
    for x, y, z, turn in ((a, b, d, 16), (c, d, b, 12), (a, b, d, 8), (c, d, b, 7)):
        s[x] = (s[x] + s[y]) & MASK
        s[z] ^= s[x]
        s[z] = ((s[z] << turn) | (s[z] >> (32 - turn))) & MASK


def chacha_block(key, counter):
    start = list(struct.unpack("<4I", b"expand 32-byte k")) + list(key) + [counter, 0, 0, 0]
    s = start[:]
    for _ in range(4):  # 8 rounds: 4 of columns, 4 of diagonals
        for i in range(4):
            quarter(s, i, 4 + i, 8 + i, 12 + i)
        for i in range(4):
            quarter(s, i, 4 + (i + 1) % 4, 8 + (i + 2) % 4, 12 + (i + 3) % 4)
    for i in range(4, 12):  # only the key is added in the end
        s[i] = (s[i] + start[i]) & MASK
    return s


def stream(key_bytes):
    """64-bit numbers: 16 blocks a round, four by four with words interleaved;
    the last 32 bytes of a round are the next key."""
    key = struct.unpack("<8I", key_bytes)
    while True:
        out = b""
        for group in range(0, 16, 4):
            blocks = [chacha_block(key, group + i) for i in range(4)]
            for word in range(16):
                out += struct.pack("<4I", *(b[word] for b in blocks))
        yield from struct.unpack("<124Q", out[:992])
        key = struct.unpack("<8I", out[992:])


def generator(label, seed, number, attempt):
    return stream(label.encode().ljust(15, b"\0") + struct.pack("<BQQ", attempt, seed, number))


def below(src, limit):
    while True:
        product = next(src) * limit
        if product % 2**64 >= 2**64 % limit:
            return product >> 64


def choose(src, items, m):
    for i in range(m):
        j = i + below(src, len(items) - i)
        items[i], items[j] = items[j], items[i]


def strata(rows, code):
    """Strata in the order of their first rows."""
    groups = {}
    for row in rows:
        groups.setdefault(code(row), []).append(row)
    return list(groups.values())


def pair(groups, seed, k, attempt=0):
    src, first, second = generator("halves", seed, k, attempt), [], []
    for items in groups:
        items = list(items)
        if len(items) % 2:
            choose(src, items, 1)
            items = items[1:]
        m = len(items) // 2
        choose(src, items, m)
        first, second = first + items[:m], second + items[m:]
    return sorted(first), sorted(second)


def bootstrap(groups, seed, draw, attempt=0):
    src, counts = generator("bootstrap", seed, draw, attempt), {}
    for units in groups:
        for _ in units:
            row = units[below(src, len(units))]
            counts[row] = counts.get(row, 0) + 1
    return [counts.get(row, 0) for row in range(sum(map(len, groups)))]


def jitter(low, seed, draw, name):
    digest = hashlib.sha256(b"jitter".ljust(16, b"\0") + struct.pack("<QQ", seed, draw) + name.encode()).digest()
    return low + (1 - low) * ((struct.unpack("<Q", digest[:8])[0] >> 11) / 2**53)


TANKS = "babcbdbababcaaeb"  # each letter is a stratum


if __name__ == "__main__":
    print("halves, 25 rows, seed 1")
    for k in (0, 1):
        for half in pair([range(25)], 1, k):
            print("   ", half)
    print("bootstrap, 12 rows, seed 1")
    for draw in range(3):
        print("   ", bootstrap([range(12)], 1, draw))
    print("halves, 1000 rows, seed 2^64-1, pair 2^32: sum of row numbers of each half")
    print("   ", *(sum(h) for h in pair([range(1000)], 2**64 - 1, 2**32)))
    print("halves, 25 rows, seed 1, pair 0, attempts 1 and 20")
    for attempt in (1, 20):
        for half in pair([range(25)], 1, 0, attempt):
            print("   ", half)
    print("bootstrap, 12 rows, seed 1, draw 0, attempt 1")
    print("   ", bootstrap([range(12)], 1, 0, 1))
    groups = strata(range(len(TANKS)), lambda row: TANKS[row])
    print("halves in strata", TANKS, [len(g) for g in groups], "seed 1")
    for k in (0, 1):
        for half in pair(groups, 1, k):
            print("   ", half)
    print("bootstrap in the same strata, seed 1")
    for draw in range(2):
        print("   ", bootstrap(groups, 1, draw))
    print("jitter 0.25, seed 1: draws 0 and 1, and 2^40 of seed 2^64-1")
    names = ["ph", "temperature_d07", "", "größe", "a name longer than sixty-four bytes, as a survey's whole question is"]
    for seed, draw in ((1, 0), (1, 1), (2**64 - 1, 2**40)):
        print("   ", *(repr(jitter(0.25, seed, draw, name)) for name in names))
