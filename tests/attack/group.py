"""ristretto255 in plain integers after RFC 9496, and the transcript T of docs/reference-custody.md: the ground that the malicious party
of the system tests stands on. Nothing of server/ is used, so that what both sides agree on is the written protocol."""
import hashlib
import os

P = 2**255 - 19
L = 2**252 + 27742317777372353535851937790883648493
D = -121665 * pow(121666, -1, P) % P
SQRT_M1 = pow(2, (P - 1) // 4, P)
IDENTITY = (0, 1, 1, 0)


def _abs(x):
    x %= P
    return P - x if x & 1 else x


def _sqrt_ratio(u, v):
    """RFC 9496, 4.2: (was square, root)."""
    r = u * pow(v, 3, P) * pow(u * pow(v, 7, P), (P - 5) // 8, P) % P
    check = v * r * r % P
    flipped = check == -u % P
    if flipped or check == -u * SQRT_M1 % P:
        r = r * SQRT_M1 % P
    return check == u % P or flipped, _abs(r)


_INVSQRT_A_MINUS_D = _sqrt_ratio(1, (-1 - D) % P)[1]
# RFC 9496, 4.1, fixes the sign of this root.
_SQRT_AD_MINUS_ONE = 25063068953384623474111414158702152701244531502492656460079210482610430750235


def add(p, q):
    (x1, y1, z1, t1), (x2, y2, z2, t2) = p, q
    a, b = (y1 - x1) * (y2 - x2) % P, (y1 + x1) * (y2 + x2) % P
    c, d = 2 * D * t1 * t2 % P, 2 * z1 * z2 % P
    e, f, g, h = b - a, d - c, d + c, b + a
    return e * f % P, g * h % P, f * g % P, e * h % P


def neg(p):
    return -p[0] % P, p[1], p[2], -p[3] % P


def mul(s, p):
    out, s = IDENTITY, s % L
    while s:
        if s & 1:
            out = add(out, p)
        p = add(p, p)
        s >>= 1
    return out


def total(points):
    out = IDENTITY
    for p in points:
        out = add(out, p)
    return out


def encode(p):
    x0, y0, z0, t0 = p
    u1, u2 = (z0 + y0) * (z0 - y0) % P, x0 * y0 % P
    inv = _sqrt_ratio(1, u1 * u2 * u2 % P)[1]
    den1, den2 = inv * u1 % P, inv * u2 % P
    z_inv = den1 * den2 * t0 % P
    if t0 * z_inv % P & 1:
        x, y, den = y0 * SQRT_M1 % P, x0 * SQRT_M1 % P, den1 * _INVSQRT_A_MINUS_D % P
    else:
        x, y, den = x0, y0, den2
    if x * z_inv % P & 1:
        y = -y
    return _abs(den * (z0 - y)).to_bytes(32, 'little')


def decode(b):
    """The point, or None: RFC 9496, 4.3.1."""
    s = int.from_bytes(b, 'little')
    if s >= P or s & 1:
        return None
    ss = s * s % P
    u1, u2 = (1 - ss) % P, (1 + ss) % P
    v = (-D * u1 * u1 - u2 * u2) % P
    square, inv = _sqrt_ratio(1, v * u2 * u2 % P)
    x = _abs(2 * s * inv * u2 % P * 1)
    y = u1 * inv % P * (inv * u2 % P * v % P) % P
    t = x * y % P
    return None if not square or t & 1 or y == 0 else (x, y, 1, t)


def _map_point(t):
    r = SQRT_M1 * t * t % P
    u = (r + 1) * (1 - D * D) % P
    v = (-1 - r * D) * (r + D) % P
    square, s = _sqrt_ratio(u, v)
    if square:
        c = P - 1
    else:
        s, c = -_abs(s * t) % P, r
    n = (c * (r - 1) * (D - 1) * (D - 1) - v) % P
    w0, w1, w2, w3 = 2 * s * v, n * _SQRT_AD_MINUS_ONE, 1 - s * s, 1 + s * s
    return w0 * w3 % P, w2 * w1 % P, w1 * w3 % P, w0 * w2 % P


def from_hash(h):
    halves = [int.from_bytes(h[i:i + 32], 'little') % 2**255 % P for i in (0, 32)]
    return add(_map_point(halves[0]), _map_point(halves[1]))


_y = 4 * pow(5, -1, P) % P
_x = _sqrt_ratio((_y * _y - 1) % P, (D * _y * _y + 1) % P)[1]
G = (_x, _y, 1, _x * _y % P)
# RFC 9496, A.1: the encodings of G and 2 G; then encode and decode against each other.
assert encode(G).hex() == 'e2f2ae0a6abc4e71a884a961c500515f58e30b6aa582dd8db6a65945e08d2d76'
assert encode(mul(2, G)).hex() == '6a493210f7499cd17fecb510ae0cea23a110e8d5b901f8acadd3095c73a3b919'
assert encode(decode(encode(mul(12345, G)))) == encode(mul(12345, G))


def u64(v):
    return v.to_bytes(8, 'little', signed=v < 0)


def u32(v):
    return v.to_bytes(4, 'little')


def sc(v):
    return (v % L).to_bytes(32, 'little')


def scalar(b):
    return int.from_bytes(b, 'little') % L


def fresh():
    return int.from_bytes(os.urandom(64), 'little') % (L - 1) + 1


def T(label, *fields):
    """T("quietbell/1/<label>", ...): integers as 8 bytes, text as UTF-8, points encoded."""
    h = hashlib.blake2b()
    for f in ('quietbell/1/' + label,) + fields:
        f = u64(f) if isinstance(f, int) else f.encode() if isinstance(f, str) else encode(f) if isinstance(f, tuple) else f
        h.update(len(f).to_bytes(8, 'little') + f)
    return h.digest()


def H(b):
    return hashlib.blake2b(b).digest()


def lagrange(indices, i, at=0):
    """The coefficient of i among the indices, for the value at `at`."""
    out = 1
    for m in indices:
        if m != i:
            out = out * (m - at) % L * pow(m - i, -1, L) % L
    return out


# Encodings that no honest party sends. RFC 9496, A.3, has bad encodings of these kinds: not canonical, negative, not a square.
BAD_POINTS = {
    'the identity': bytes(32),
    'a field element that is not canonical': ((P + 2).to_bytes(32, 'little')),
    'a negative field element': (P - 2 if (P - 2) & 1 else P - 1).to_bytes(32, 'little'),
    'the highest bit set': bytes(31) + b'\x80',
    'no point of the group': next(s for s in (v.to_bytes(32, 'little') for v in range(2, 200, 2)) if decode(s) is None),
}


def not_reduced(b):
    """The same scalar in another encoding: plus the order."""
    v = int.from_bytes(b, 'little') + L
    return v.to_bytes(32, 'little')
