"""Key generation, sealed records and partial openings, byte by byte after docs/reference-custody.md."""
import ristretto
from primitives import (H, Reader, T, check_signed, decrypt, encrypt, equal_logarithms, fixed, lagrange_at_zero, number,
                        pad, point, scalar_bytes, unpad)
from ristretto import BASE, ORDER, Refused, combine, encode

# type: (name, capacity, purpose in a full opening)
RECORD_TYPES = {0: ('seed', 4096, 2), 1: ('slot', 8192, 2), 2: ('claim', 16384, 3), 3: ('canary', 256, 5),
                4: ('play report', 4096, 4), 5: ('play note', 512, 4), 6: ('guess', 256, 3), 7: ('milestone', 512, 3),
                8: ('incident', 4096, 3)}
SEED, SLOT, CLAIM, CANARY, REPORT, NOTE, GUESS, MILESTONE, INCIDENT = range(9)
REHEARSAL = 5


def keygen_context(campaign, epoch, attempt, k, keys):
    """`keys`: (signing, exchange) of each custodian in order."""
    return T('keygen/context', campaign, epoch, attempt, len(keys), k, *[x for pair in keys for x in pair])


def value_at(commitments, j):
    """f(j) G from the commitments to f's coefficients."""
    return combine([(pow(j, m, ORDER), c) for m, c in enumerate(commitments)])


class Deal:
    """One dealer's message. `area` is keygen or reshare, `n` the receivers, `k` how many of them are needed."""

    def __init__(self, message, area, ctx, sender, n, k, dealer_key):
        r = Reader(message, 'a deal')
        r.expect(b'QBD1' if area == 'keygen' else b'QBS1')
        self.area, self.ctx, self.sender = area, ctx, r.u32()
        if (self.sender, r.u32(), r.u32()) != (sender, n, k):
            raise Refused("a deal is another custodian's or of another group")
        r.expect(ctx)
        self.c_bytes = [r.take(32) for _ in range(k)]
        r_pop, z_pop, self.e_bytes = r.take(32), r.take(32), r.take(32)
        self.ciphers = [r.take(48) for _ in range(n)]
        self.signature = r.take(64)
        r.end()
        self.c = [point(c) for c in self.c_bytes]
        point(self.e_bytes)
        self.hash = T(area + ('/round-1' if area == 'keygen' else '/deal'), ctx, sender, k, *self.c_bytes, r_pop, z_pop,
                      self.e_bytes, *self.ciphers)
        check_signed(dealer_key, self.hash, self.signature, "the dealer's")
        c = number(T(area + '/possession', ctx, sender, *self.c_bytes, self.e_bytes, r_pop))
        z = ristretto.scalar(z_pop)
        if encode(combine([(z, BASE), (-c, self.c[0])])) != r_pop or not any(r_pop):
            raise Refused("a dealer's proof of possession is false")
        point(r_pop)

    def complaint_is_true(self, message, to, to_exchange):
        """Judges a complaint: True when the dealer is guilty, False when the complaint is false."""
        r = Reader(message, 'a complaint')
        r.expect(b'QBX1')
        if (r.u32(), r.u32()) != (self.sender, to):
            raise Refused('a complaint names other custodians than its entry')
        z_bytes, c, z = r.take(32), r.take(32), r.take(32)
        r.end()
        try:
            equal_logarithms(lambda a1, a2: T(self.area + '/complaint', self.ctx, self.sender, to, to_exchange,
                                              self.e_bytes, z_bytes, a1, a2),
                             c, z, BASE, point(to_exchange), point(self.e_bytes), point(z_bytes), 'a complaint')
        except Refused:
            return False
        key = T(self.area + '/share-key', self.ctx, self.sender, to, self.e_bytes, to_exchange, z_bytes)
        place = self.ctx + self.sender.to_bytes(8, 'little') + to.to_bytes(8, 'little')
        try:
            share = ristretto.scalar(decrypt(key, self.ciphers[to - 1], place, 'a share'))
            return encode(BASE.times(share)) != encode(value_at(self.c, to))
        except Refused:
            return True


class Group:
    """Who can open: the key S, the holders' public shares, and the two transcripts (reference, Resharing)."""

    def __init__(self, s_bytes, th, a, n, k, founding=None):
        self.s, self.th, self.n, self.k = s_bytes, th, n, k
        self.y = [encode(value_at(a, j)) for j in range(1, n + 1)]
        self.record_th = founding.record_th if founding else th
        self.g2 = founding.g2 if founding else encode(ristretto.from_hash(T('record/second-generator', th)))
        if not all(map(any, self.y + [self.g2])) or any(ristretto.is_zero(x) for x in a):
            raise Refused('the group is degenerate')
        self.certificate = T('keygen/certificate', th, s_bytes, *self.y)


def generate(ctx, deals, k):
    a = [combine([(1, d.c[m]) for d in deals]) for m in range(k)]
    s = encode(a[0])
    th = T('keygen/transcript', ctx, *[x for d in deals for x in (d.hash, d.signature)], s)
    return Group(s, th, a, len(deals), k)


class Record:
    def __init__(self, b):
        r = Reader(b, 'a record')
        self.bytes, self.header = bytes(b), r.take(128)
        self.r, self.w, self.c, self.z = (r.take(32) for _ in range(4))
        self.ct = r.take(len(self.bytes) - r.at)
        h = Reader(self.header, 'a record header')
        h.expect(b'QBR1\1\0')
        self.type = h.take(1)[0]
        h.zeros(1)
        self.campaign, self.epoch = h.take(16), h.u32()
        h.zeros(4)
        self.index, self.start, self.duration = h.u64(), h.i64(), h.u64()
        self.author, self.auxiliary = h.take(16), h.take(32)
        h.zeros(24)
        if self.type not in RECORD_TYPES:
            raise Refused('a record has no known type')
        self.name, self.capacity, self.purpose = RECORD_TYPES[self.type]
        if len(self.ct) != 4 + self.capacity + 16:
            raise Refused('a %s record does not have its size' % self.name)
        self.id = T('record/id', self.header, self.r, self.w, self.c, self.z, self.ct)

    def check_proof(self, group):
        equal_logarithms(lambda a1, a2: T('record/proof', group.record_th, group.s, self.header, H(self.ct), self.r,
                                          group.g2, self.w, a1, a2),
                         self.c, self.z, BASE, point(self.r), fixed(group.g2), point(self.w), 'a record')

    def open(self, group, z_bytes):
        key = T('record/key', group.record_th, group.s, self.header, self.r, z_bytes)
        return unpad(decrypt(key, self.ct, self.header, 'a %s record' % self.name), 'a %s record' % self.name)


def seal_again(group, header, r, content, capacity):
    """The sealer's record from its secret scalar, byte for byte."""
    s = group.record_th, group.s, header
    r_bytes = encode(BASE.times(r))
    z = encode(fixed(group.s).times(r))
    ct = encrypt(T('record/key', *s, r_bytes, z), pad(content, capacity), header)
    w_bytes = encode(fixed(group.g2).times(r))
    nonce = number(T('nonce/record', scalar_bytes(r), *s, H(ct), r_bytes, w_bytes))
    a1, a2 = encode(BASE.times(nonce)), encode(fixed(group.g2).times(nonce))
    c = number(T('record/proof', *s, H(ct), r_bytes, group.g2, w_bytes, a1, a2))
    return header + r_bytes + w_bytes + scalar_bytes(c) + scalar_bytes((nonce + c * r) % ORDER) + ct


class Partial:
    SIZE = 236

    def __init__(self, b, group, record, purpose, authority):
        """One custodian's partial opening with its proof. `authority`: the authorising hash, 32 or 64 bytes."""
        r = Reader(b, 'a partial opening')
        r.expect(b'QBP1')
        self.i, given = r.u32(), r.u32()
        if given != purpose or not 1 <= self.i <= group.n:
            raise Refused('a partial opening is of another purpose or of nobody')
        if r.take(64) != record.id or r.take(64) != authority.ljust(64, b'\0'):
            raise Refused('a partial opening is of another record or request')
        self.d, c, z = r.take(32), r.take(32), r.take(32)
        r.end()
        y = group.y[self.i - 1]
        equal_logarithms(lambda a1, a2: T('opening/partial', group.th, record.id, self.i, purpose, authority, y, record.r,
                                          self.d, a1, a2),
                         c, z, BASE, fixed(y), point(record.r), point(self.d), 'a partial opening')


def open_with(group, record, partials):
    """Content from the first k partial openings; further ones must be consistent with them."""
    def joined(chosen):
        numbers = [p.i for p in chosen]
        if len(set(numbers)) != len(numbers):
            raise Refused('a custodian stands twice among the partial openings')
        return encode(combine([(lagrange_at_zero(p.i, numbers), point(p.d)) for p in chosen]))
    if len(partials) < group.k:
        raise Refused('too few partial openings')
    z = joined(partials[:group.k])
    if len(partials) > group.k and joined(partials[-group.k:]) != z:
        raise Refused('partial openings do not fit each other')
    try:
        return record.open(group, z)
    except Refused:
        if record.type in (0, 1):
            raise
        return None  # what a party sealed to nobody: that is the party's doing
