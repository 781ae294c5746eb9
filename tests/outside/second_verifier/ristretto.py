"""The group ristretto255, written from RFC 9496 (sections 4.1 to 4.3) over Python's integers. Points are extended
coordinates (x, y, z, t) of edwards25519 and are only compared and passed on as their 32-byte encodings. For verifying
only: nothing here runs in constant time, since everything a verifier handles is public."""

P = 2**255 - 19
ORDER = 2**252 + 27742317777372353535851937790883648493
D = -121665 * pow(121666, P - 2, P) % P
D2 = 2 * D % P


class Refused(Exception):
    """Something that does not hold; the text says what."""


def _root_of_ratio(u, v):
    """RFC 9496 SQRT_RATIO_M1: whether u/v is a square, and the non-negative root of u/v or of sqrt(-1) u/v."""
    v3 = v * v % P * v % P
    r = u * v3 % P * pow(u * v3 % P * v3 % P * v % P, (P - 5) // 8, P) % P
    check = v * r % P * r % P
    u %= P
    if check == u:
        square = True
    elif check == (-u) % P:
        square, r = True, r * SQRT_M1 % P
    else:
        square = False
        if check == (-u) * SQRT_M1 % P:
            r = r * SQRT_M1 % P
    return square, P - r if r & 1 else r


SQRT_M1 = pow(2, (P - 1) // 4, P)
SQRT_M1 = P - SQRT_M1 if SQRT_M1 & 1 else SQRT_M1
INVSQRT_A_MINUS_D = _root_of_ratio(1, (-1 - D) % P)[1]
SQRT_AD_MINUS_ONE = P - _root_of_ratio((-D - 1) % P, 1)[1]  # the RFC takes the odd root
ONE_MINUS_D_SQ = (1 - D * D) % P
D_MINUS_ONE_SQ = (D - 1) * (D - 1) % P
ZERO = (0, 1, 1, 0)


def decode(b):
    """A point from its encoding. Refuses what is not canonical, and the identity, which no message may hold."""
    if len(b) != 32:
        raise Refused('a point does not have 32 bytes')
    s = int.from_bytes(b, 'little')
    if s == 0:
        raise Refused('the identity stands where a point should')
    if s >= P or s & 1:
        raise Refused('a point is not encoded canonically')
    ss = s * s % P
    u1, u2 = (1 - ss) % P, (1 + ss) % P
    u2u2 = u2 * u2 % P
    v = (-D * u1 % P * u1 - u2u2) % P
    square, inv = _root_of_ratio(1, v * u2u2 % P)
    dx = inv * u2 % P
    dy = inv * dx % P * v % P
    x = 2 * s * dx % P
    x = P - x if x & 1 else x
    y = u1 * dy % P
    t = x * y % P
    if not square or t & 1 or y == 0:
        raise Refused('32 bytes are not a point')
    return (x, y, 1, t)


def encode(p):
    x0, y0, z0, t0 = p
    u1 = (z0 + y0) * (z0 - y0) % P
    u2 = x0 * y0 % P
    inv = _root_of_ratio(1, u1 * u2 % P * u2 % P)[1]
    d1, d2 = inv * u1 % P, inv * u2 % P
    z = d1 * d2 % P * t0 % P
    if t0 * z % P & 1:
        x, y, d = y0 * SQRT_M1 % P, x0 * SQRT_M1 % P, d1 * INVSQRT_A_MINUS_D % P
    else:
        x, y, d = x0, y0, d2
    if x * z % P & 1:
        y = P - y
    s = d * (z0 - y) % P
    return (P - s if s & 1 else s).to_bytes(32, 'little')


def _map(t):
    r = SQRT_M1 * t % P * t % P
    u = (r + 1) * ONE_MINUS_D_SQ % P
    v = (-1 - r * D) * (r + D) % P
    square, s = _root_of_ratio(u, v)
    c = -1
    if not square:
        s = s * t % P
        s = s if s & 1 else P - s  # minus the absolute value
        c = r
    n = (c * (r - 1) * D_MINUS_ONE_SQ - v) % P
    w0, w1, w2, w3 = 2 * s * v % P, n * SQRT_AD_MINUS_ONE % P, (1 - s * s) % P, (1 + s * s) % P
    return (w0 * w3 % P, w2 * w1 % P, w1 * w3 % P, w0 * w2 % P)


def from_hash(b):
    """The one-way map from 64 bytes (RFC 9496 4.3.4)."""
    mask = 2**255 - 1
    return add(_map((int.from_bytes(b[:32], 'little') & mask) % P), _map((int.from_bytes(b[32:], 'little') & mask) % P))


def add(p, q):
    a = (p[1] - p[0]) * (q[1] - q[0]) % P
    b = (p[1] + p[0]) * (q[1] + q[0]) % P
    c = p[3] * D2 % P * q[3] % P
    d = 2 * p[2] * q[2] % P
    e, f, g, h = b - a, d - c, d + c, b + a
    return (e * f % P, g * h % P, f * g % P, e * h % P)


def double(p):
    x, y, z = p[0], p[1], p[2]
    a, b = x * x, y * y
    e = (x + y) * (x + y) - a - b
    g = b - a
    f = g - 2 * z * z
    h = -a - b
    return (e * f % P, g * h % P, f * g % P, e * h % P)


def negate(p):
    return (P - p[0], p[1], p[2], P - p[3])


def is_zero(p):
    return p[0] == 0 or p[1] == 0  # the four points of the identity's class


class Fixed:
    """A point that is multiplied often: a table of its multiples, so that a product takes 63 additions."""

    def __init__(self, p):
        self.point, self.rows = p, []
        for _ in range(64):
            row = [ZERO, p]
            for _ in range(14):
                row.append(add(row[-1], p))
            self.rows.append(row)
            p = add(row[-1], p)

    def times(self, s):
        out = ZERO
        for row in self.rows:
            if s & 15:
                out = add(out, row[s & 15])
            s >>= 4
        return out


def combine(pairs):
    """Sum of scalar times point. `pairs`: (integer, point or Fixed)."""
    out, tables = ZERO, []
    for s, p in pairs:
        s %= ORDER
        if isinstance(p, Fixed):
            out = add(out, p.times(s))
            continue
        row = [ZERO, p]
        for i in range(14):
            row.append(add(row[-1], p) if i % 2 else double(row[len(row) // 2]))
        tables.append((s, row))
    if tables:
        sum_ = ZERO
        for shift in range(252, -4, -4):
            if sum_ is not ZERO:
                sum_ = double(double(double(double(sum_))))
            for s, row in tables:
                digit = s >> shift & 15
                if digit:
                    sum_ = add(sum_, row[digit])
        out = add(out, sum_)
    return out


def scalar(b, zero_allowed=False):
    """A canonical scalar from 32 bytes."""
    s = int.from_bytes(b, 'little')
    if len(b) != 32 or s >= ORDER:
        raise Refused('a scalar is not canonical')
    if s == 0 and not zero_allowed:
        raise Refused('a scalar is zero')
    return s


BASE_BYTES = bytes.fromhex('e2f2ae0a6abc4e71a884a961c500515f58e30b6aa582dd8db6a65945e08d2d76')  # RFC 9496 A.1
BASE = Fixed(decode(BASE_BYTES))
