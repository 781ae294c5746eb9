#!/usr/bin/python3
"""Writes tests/vectors/custody_frozen.h: our own formats computed a second time, from docs/reference-custody.md alone.

Group arithmetic follows RFC 9496 in plain integers, BLAKE2b is Python's, the cipher PyNaCl's; nothing of server/ is used. A
difference between this and the C code means that one of them departs from the page.  usage: make_custody_frozen.py > custody_frozen.h
"""
import hashlib
import struct

from nacl.bindings import crypto_aead_xchacha20poly1305_ietf_encrypt as seal
from nacl.bindings import crypto_sign_seed_keypair

P = 2**255 - 19
L = 2**252 + 27742317777372353535851937790883648493
D = -121665 * pow(121666, -1, P) % P
SQRT_M1 = pow(2, (P - 1) // 4, P)


def negative(x):
    return x % P & 1


def absolute(x):
    return -x % P if negative(x) else x % P


def sqrt_ratio(u, v):
    """RFC 9496 4.2: (was square, root)."""
    r = u * pow(v, 3, P) * pow(u * pow(v, 7, P), (P - 5) // 8, P) % P
    check = v * r * r % P
    flipped = check == -u % P
    flipped_i = check == -u * SQRT_M1 % P
    if flipped or flipped_i:
        r = r * SQRT_M1 % P
    return check == u % P or flipped, absolute(r)


INVSQRT_A_MINUS_D = sqrt_ratio(1, (-1 - D) % P)[1]
SQRT_AD_MINUS_ONE = sqrt_ratio((-D - 1) % P, 1)[1]
if SQRT_AD_MINUS_ONE != 25063068953384623474111414158702152701244531502492656460079210482610430750235:
    SQRT_AD_MINUS_ONE = P - SQRT_AD_MINUS_ONE  # RFC 9496 4.1 fixes the sign


def add(p, q):
    (x1, y1, z1, t1), (x2, y2, z2, t2) = p, q
    a, b = (y1 - x1) * (y2 - x2), (y1 + x1) * (y2 + x2)
    c, d = 2 * D * t1 * t2, 2 * z1 * z2
    e, f, g, h = b - a, d - c, d + c, b + a
    return e * f % P, g * h % P, f * g % P, e * h % P


def mul(s, p):
    out = (0, 1, 1, 0)
    while s:
        if s & 1:
            out = add(out, p)
        p = add(p, p)
        s >>= 1
    return out


def encode(p):
    x0, y0, z0, t0 = p
    u1, u2 = (z0 + y0) * (z0 - y0) % P, x0 * y0 % P
    inv = sqrt_ratio(1, u1 * u2 * u2 % P)[1]
    den1, den2 = inv * u1 % P, inv * u2 % P
    z_inv = den1 * den2 * t0 % P
    if negative(t0 * z_inv):
        x, y, den = y0 * SQRT_M1 % P, x0 * SQRT_M1 % P, den1 * INVSQRT_A_MINUS_D % P
    else:
        x, y, den = x0, y0, den2
    if negative(x * z_inv):
        y = -y
    return absolute(den * (z0 - y)).to_bytes(32, "little")


def map_point(t):
    r = SQRT_M1 * t * t % P
    u = (r + 1) * (1 - D * D) % P
    v = (-1 - r * D) * (r + D) % P
    square, s = sqrt_ratio(u, v)
    if not square:
        s, c = -absolute(s * t) % P, r
    else:
        c = P - 1
    n = (c * (r - 1) * (D - 1) * (D - 1) - v) % P
    w0, w1, w2, w3 = 2 * s * v, n * SQRT_AD_MINUS_ONE, 1 - s * s, 1 + s * s
    return w0 * w3 % P, w2 * w1 % P, w1 * w3 % P, w0 * w2 % P


def from_hash(h):
    half = [int.from_bytes(h[i:i + 32], "little") % 2**255 % P for i in (0, 32)]
    return add(map_point(half[0]), map_point(half[1]))


_y = 4 * pow(5, -1, P) % P
_x = sqrt_ratio((_y * _y - 1) % P, (D * _y * _y + 1) % P)[1]
G = (_x, _y, 1, _x * _y % P)
assert encode(G).hex().startswith("e2f2ae0a6abc4e71")


def u64(v):
    return struct.pack("<Q", v)


def T(label, *fields):
    h = hashlib.blake2b()
    for f in (b"quietbell/1/" + label.encode(), *(u64(f) if isinstance(f, int) else f for f in fields)):
        h.update(u64(len(f)) + f)
    return h.digest()


def H(b):
    return hashlib.blake2b(b).digest()


def scalar(h):
    return int.from_bytes(h, "little") % L


def sc(v):
    return v.to_bytes(32, "little")


def crypt(key, ad, plain):
    return seal(plain, ad, key[32:56], key[:32])


def pad(content, capacity):
    return struct.pack("<I", len(content)) + content + bytes(capacity - len(content))


out = {}
campaign = bytes(range(16))
parties = [(crypto_sign_seed_keypair(bytes([j]) * 32)[0], encode(mul(1000 + j, G))) for j in (1, 2, 3)]
ctx = T("keygen/context", campaign, 5, 2, 3, 2, *(f for p in parties for f in p))
out["ctx"] = ctx
contributions = [bytes([0x40 + j]) * 32 for j in range(4)]
out["commitment"] = T("seal/contribution", ctx, 1, 2, contributions[2])
seed = T("draw/seed", ctx, 1, 0, *contributions)
out["seed"] = seed
truth = T("slot/truth", seed, 31)[:32]
r = scalar(T("slot/record-scalar", seed, 31))
slot_key = T("slot/key", seed, 31)[:32]
out["truth"], out["r"], out["slot_key"] = truth, sc(r), slot_key
out["uniform_bits"] = T("draw/uniform", truth, 7)[:8]
out["audit_seed"] = u64(int.from_bytes(T("audit/seed", seed)[:8], "little") % 2**63)
out["campaign_truth"] = T("draw/campaign", seed)[:32]
out["seed_record_scalar"] = sc(scalar(T("draw/seed-record-scalar", seed)))
key_commitment = T("slot/key-commitment", campaign, 31, slot_key)
out["key_commitment"] = key_commitment

th = bytes([0x5a]) * 64
S = mul(424242, G)
G2 = from_hash(T("record/second-generator", th))
out["s"], out["g2"] = encode(S), encode(G2)
header = struct.pack("<4sHBB16sIIQqQ16s32s24x", b"QBR1", 1, 1, 0, campaign, 5, 0, 31, 1488789012000000000, 3600 * 10**9,
                     bytes([9]) * 16, key_commitment[:32])
R, W, Z = encode(mul(r, G)), encode(mul(r, G2)), encode(mul(r, S))
ct = crypt(T("record/key", th, encode(S), header, R, Z), header, pad(b'{"drill":"live"}', 8192))
w = scalar(T("nonce/record", sc(r), th, encode(S), header, H(ct), R, W))
c = scalar(T("record/proof", th, encode(S), header, H(ct), R, encode(G2), W, encode(mul(w, G)), encode(mul(w, G2))))
z = (w + c * r) % L
record = header + R + W + sc(c) + sc(z) + ct
out["record_head"], out["record_hash"] = record[:256], H(record)
out["record_id"] = T("record/id", header, R, W, sc(c), sc(z), ct)

address = (31, 2, 1)
rs = scalar(T("slot/recipe-scalar", seed, *address))
out["recipe_scalar"] = sc(rs)
ad = ctx + b"".join(u64(a) for a in address)
prekey, RR = encode(mul(777, G)), encode(mul(rs, G))
inner = RR + crypt(T("recipe/key", ctx, *address, prekey, RR, encode(mul(rs * 777 % L, G))), ad, pad(b"gain 0", 4096))
recipe = struct.pack("<4sIQQ", b"QBY1", 1, 31, 2) + crypt(T("recipe/outer-key", ctx, *address, slot_key), ad, inner)
out["recipe_hash"] = T("recipe/hash", recipe)
out["certificate"] = T("keygen/certificate", th, encode(S), *(encode(mul(50 + j, G)) for j in (1, 2, 3)))
body = b'{"what":"hold"}'
out["entry_digest_of_body"] = T("ledger/entry", body)
out["hidden"] = T("ledger/hidden", bytes([3]) * 32, body)
out["key_id"] = T("key/id", parties[0][0])[:16]
out["fingerprint"] = T("key/fingerprint", *parties[0])[:16]


# One outer ciphertext with a valid tag under two slot keys: Poly1305 is linear in each block, so one free block makes the tags meet.
# All other bytes are zero. What it decrypts to does not matter here: the point is that the cipher alone accepts both keys.


def chacha_rounds(state):
    x = list(state)
    for _ in range(10):
        for a, b, c, d in ((0, 4, 8, 12), (1, 5, 9, 13), (2, 6, 10, 14), (3, 7, 11, 15),
                           (0, 5, 10, 15), (1, 6, 11, 12), (2, 7, 8, 13), (3, 4, 9, 14)):
            for i, j, k, n in ((a, b, d, 16), (c, d, b, 12), (a, b, d, 8), (c, d, b, 7)):
                x[i] = (x[i] + x[j]) & 0xffffffff
                v = x[k] ^ x[i]
                x[k] = (v << n | v >> (32 - n)) & 0xffffffff
    return x


SIGMA = struct.unpack("<4I", b"expand 32-byte k")


def poly_key(key, nonce):
    """r (clamped) and s of XChaCha20-Poly1305: HChaCha20, then block 0."""
    x = chacha_rounds(SIGMA + struct.unpack("<8I4I", key + nonce[:16]))
    state = SIGMA + tuple(x[:4]) + tuple(x[12:]) + (0, 0) + struct.unpack("<2I", nonce[16:])
    block = struct.pack("<8I", *((a + b) & 0xffffffff for a, b in zip(chacha_rounds(state)[:8], state)))
    return int.from_bytes(block[:16], "little") & 0x0ffffffc0ffffffc0ffffffc0fffffff, int.from_bytes(block[16:], "little")


Q = 2**130 - 5
FREE = 10  # which block of the ciphertext is solved for
n_ct = 4148


def poly_without(r, counter):
    """Accumulator without the free block's own value (its 2^128 included), and the factor of that value."""
    body = bytearray(n_ct + -n_ct % 16)
    body[0:4] = struct.pack("<I", counter)
    data = ad + bytes(-len(ad) % 16) + bytes(body) + u64(len(ad)) + u64(n_ct)
    blocks = [int.from_bytes(data[i:i + 16], "little") + 2**128 for i in range(0, len(data), 16)]
    acc = 0
    for b in blocks:
        acc = (acc + b) * r % Q
    place = (len(ad) + -len(ad) % 16) // 16 + FREE
    return acc, pow(r, len(blocks) - place, Q)


other_key = bytes([0xee]) * 32
keys = [T("recipe/outer-key", ctx, *address, k) for k in (slot_key, other_key)]
(r1, s1), (r2, s2) = (poly_key(k[:32], k[32:56]) for k in keys)


def two_key_ciphertext():
    for counter in range(1000):
        (a1, f1), (a2, f2) = poly_without(r1, counter), poly_without(r2, counter)
        for m in range(-4, 5):
            b = (s2 - s1 + m * 2**128 - (a1 - a2)) * pow(f1 - f2, -1, Q) % Q
            t1, t2 = (((a + b * f) % Q + t) % 2**128 for a, f, t in ((a1, f1, s1), (a2, f2, s2)))
            if b < 2**128 and t1 == t2:
                return counter, b, t1


counter, b, tag = two_key_ciphertext()
out["two_key_other"] = other_key
out["two_key_counter"] = struct.pack("<I", counter)
out["two_key_block"], out["two_key_tag"] = b.to_bytes(16, "little"), tag.to_bytes(16, "little")

print("/*\n * Our own formats, computed by make_custody_frozen.py from the reference page, independently of server/. Hexadecimal.\n */")
print("#ifndef QB_VECTORS_CUSTODY_FROZEN_H\n#define QB_VECTORS_CUSTODY_FROZEN_H\n")
for name, value in out.items():
    text = value.hex()
    lines = "\n".join(f'\t"{text[i:i + 96]}"' for i in range(0, len(text), 96))
    print(f"static const char frozen_{name}[] =\n{lines};")
print("\n#endif")
