"""Records, partial openings, boxes, deals, complaints and recipes made by the book (docs/reference-custody.md), with every part open to
being made wrong: what a hostile custodian, analyst, driver or service would send."""
import os
import struct

import nacl.signing
from nacl.bindings import (crypto_aead_xchacha20poly1305_ietf_decrypt as _open, crypto_aead_xchacha20poly1305_ietf_encrypt as _seal)

from group import G, H, L, T, decode, encode, fresh, from_hash, lagrange, mul, sc, scalar, total, u32, u64

SEED, SLOT, CLAIM, CANARY, REPORT, NOTE, GUESS, MILESTONE, INCIDENT, ANSWER = range(10)
CAPACITY = {SEED: 4096, SLOT: 8192, CLAIM: 16384, CANARY: 256, REPORT: 4096, NOTE: 512, GUESS: 256, MILESTONE: 512, INCIDENT: 4096}
SPOT, TRUTH, CLAIMS, DELIVERY, REHEARSAL = range(1, 6)
FULL_PURPOSE = {SEED: TRUTH, SLOT: TRUTH, CLAIM: CLAIMS, CANARY: REHEARSAL, REPORT: DELIVERY, NOTE: DELIVERY, GUESS: CLAIMS,
                MILESTONE: CLAIMS, INCIDENT: CLAIMS}


def crypt(key, ad, plain):
    return _seal(plain, ad, key[32:56], key[:32])


def decrypt(key, ad, ct):
    """The plaintext, or None."""
    try:
        return _open(ct, ad, key[32:56], key[:32])
    except Exception:
        return None


def pad(content, capacity):
    return u32(len(content)) + content + bytes(capacity - len(content))


def unpad(plain):
    return plain[4:4 + int.from_bytes(plain[:4], 'little')]


def key_id(signing_public):
    return T('key/id', signing_public)[:16]


class Group:
    """The public outcome of a key generation, computed from the deals in the ledger."""

    def __init__(self, campaign, keys, n, k, deals, epoch=1, attempt=1):
        self.campaign, self.keys, self.n, self.k, self.epoch, self.attempt = campaign, keys, n, k, epoch, attempt
        self.ctx = context(campaign, keys, n, k, epoch, attempt)
        self.deals = [Deal.parse(d) for d in deals]
        if not deals:
            return
        firsts = [decode(d.commitments[0]) for d in self.deals]
        self.s = total(firsts)
        self.S = encode(self.s)
        self.th = T('keygen/transcript', self.ctx, *(f for d in self.deals for f in (d.hash(), d.signature)), self.S)
        self.y = [total(mul(pow(j, m), decode(c)) for d in self.deals for m, c in enumerate(d.commitments)) for j in range(1, n + 1)]
        self.Y = [encode(y) for y in self.y]
        self.g2 = from_hash(T('record/second-generator', self.th))
        self.G2 = encode(self.g2)
        self.certificate = T('keygen/certificate', self.th, self.S, *self.Y)

    def share(self, j, exchange):
        """s_j, from the parts dealt to custodian j, whose exchange scalar this is."""
        return sum(d.take(self.ctx, j, self.keys[j - 1][1], exchange) for d in self.deals) % L


def context(campaign, keys, n, k, epoch=1, attempt=1):
    return T('keygen/context', campaign, epoch, attempt, n, k, *(f for pair in keys for f in pair))


# ---- deals ----


class Deal:
    """QBD1, field by field."""

    def __init__(self, ctx, i, n, k):
        self.magic, self.ctx, self.i, self.n, self.k = b'QBD1', ctx, i, n, k
        self.commitments, self.r, self.z, self.e, self.shares, self.signature = [], bytes(32), bytes(32), bytes(32), [], bytes(64)

    @staticmethod
    def make(ctx, i, keys, k, coefficients=None, ephemeral=None, signing=None, commitments=None, spoil=None):
        """A deal by the book. `spoil` maps a recipient to what is added to his share; without `signing` it stays unsigned."""
        d = Deal(ctx, i, len(keys), k)
        a = coefficients or [fresh() for _ in range(k)]
        e = ephemeral or fresh()
        d.commitments = commitments or [encode(mul(c, G)) for c in a]
        d.e = encode(mul(e, G))
        d.prove(a[0])
        for j, (_, exchange) in enumerate(keys, 1):
            f = (sum(c * pow(j, m, L) for m, c in enumerate(a)) + (spoil or {}).get(j, 0)) % L
            d.shares.append(crypt(share_key(ctx, i, j, d.e, exchange, encode(mul(e, decode(exchange)))), ctx + u64(i) + u64(j), sc(f)))
        if signing:
            d.sign(signing)
        return d

    def prove(self, a0):
        w = fresh()
        self.r = encode(mul(w, G))
        self.z = sc(w + scalar(T('keygen/possession', self.ctx, self.i, *self.commitments, self.e, self.r)) * a0)
        return self

    def hash(self):
        return T('keygen/round-1', self.ctx, self.i, self.k, *self.commitments, self.r, self.z, self.e, *self.shares)

    def sign(self, signing):
        self.signature = signing.sign(self.hash()).signature
        return self

    def encode(self):
        return (self.magic + u32(self.i) + u32(self.n) + u32(self.k) + self.ctx + b''.join(self.commitments) + self.r + self.z + self.e +
                b''.join(self.shares) + self.signature)

    @staticmethod
    def parse(b):
        i, n, k = struct.unpack_from('<III', b, 4)
        d = Deal(b[16:80], i, n, k)
        at = 80
        d.commitments = [b[at + 32 * m:at + 32 * m + 32] for m in range(k)]
        at += 32 * k
        d.r, d.z, d.e = b[at:at + 32], b[at + 32:at + 64], b[at + 64:at + 96]
        at += 96
        d.shares = [b[at + 48 * j:at + 48 * j + 48] for j in range(n)]
        d.signature = b[at + 48 * n:]
        return d

    def take(self, ctx, j, exchange_point, exchange):
        z = encode(mul(exchange, decode(self.e)))
        return int.from_bytes(decrypt(share_key(ctx, self.i, j, self.e, exchange_point, z), ctx + u64(self.i) + u64(j), self.shares[j - 1]), 'little')


def share_key(ctx, i, j, e, exchange, z):
    return T('keygen/share-key', ctx, i, j, e, exchange, z)


def complaint(ctx, accused, by, deal, exchange, lie=None):
    """QBX1: shows Z = p E and proves it. `lie`: another Z."""
    big_p, big_e = encode(mul(exchange, G)), deal.e
    z = lie or encode(mul(exchange, decode(big_e)))
    w = fresh()
    c = scalar(T('keygen/complaint', ctx, accused, by, big_p, big_e, z, encode(mul(w, G)), encode(mul(w, decode(big_e)))))
    return b'QBX1' + u32(accused) + u32(by) + z + sc(c) + sc(w + c * exchange)


# ---- records ----


def header(group, kind, index, author, start=0, duration=0, auxiliary=bytes(32), campaign=None, epoch=None):
    return struct.pack('<4sHBB16sIIQqQ16s32s24x', b'QBR1', 1, kind, 0, campaign or group.campaign,
                       group.epoch if epoch is None else epoch, 0, index, start, duration, author, auxiliary)


class Record:
    """Header, R, W, c, z, ciphertext; every part can be replaced before `encode`."""

    def __init__(self, head, r, w, c, z, ct):
        self.header, self.r, self.w, self.c, self.z, self.ct = head, r, w, c, z, ct

    @staticmethod
    def parse(b):
        return Record(b[:128], b[128:160], b[160:192], b[192:224], b[224:256], b[256:])

    def encode(self):
        return self.header + self.r + self.w + self.c + self.z + self.ct

    def copy(self, **parts):
        return Record(*(parts.get(name, getattr(self, name)) for name in ('header', 'r', 'w', 'c', 'z', 'ct')))

    @property
    def id(self):
        return T('record/id', self.header, self.r, self.w, self.c, self.z, self.ct)

    @property
    def index(self):
        return int.from_bytes(self.header[32:40], 'little')


def record_challenge(group, head, ct, r, w, a1, a2, leave_out=()):
    fields = {'th': group.th, 'S': group.S, 'header': head, 'H(ct)': H(ct), 'R': r, 'G2': group.G2, 'W': w, 'A': a1, 'A2': a2}
    return scalar(T('record/proof', *(v for name, v in fields.items() if name not in leave_out)))


def seal(group, head, content, kind=None, r=None, ct=None, leave_out=(), wide=None):
    """A record by the book; `ct` replaces the ciphertext before the proof is made, `leave_out` leaves fields out of the challenge."""
    kind = head[6] if kind is None else kind
    r = r or fresh()
    big_r, big_w, z = encode(mul(r, G)), encode(mul(r, group.g2)), encode(mul(r, group.s))
    if ct is None:
        plain = pad(content, CAPACITY[kind]) if wide is None else wide
        ct = crypt(T('record/key', group.th, group.S, head, big_r, z), head, plain)
    w = fresh()
    c = record_challenge(group, head, ct, big_r, big_w, encode(mul(w, G)), encode(mul(w, group.g2)), leave_out)
    return Record(head, big_r, big_w, sc(c), sc(w + c * r), ct)


def forged_proof(group, head, big_r, big_w, ct):
    """Somebody who does not know the logarithm of R: z and A are chosen, c follows. The equations hold for no W but r G2."""
    c, z = fresh(), fresh()
    return Record(head, big_r, big_w, sc(c), sc(z), ct)


def record_opens(group, record, z):
    """Content under Z = r S, or None."""
    plain = decrypt(T('record/key', group.th, group.S, record.header, record.r, z), record.header, record.ct)
    return None if plain is None else unpad(plain)


# ---- partial openings ----


class Partial:
    def __init__(self, i, purpose, record_id, authority, d, c, z):
        self.magic, self.i, self.purpose, self.record_id, self.authority, self.d, self.c, self.z = b'QBP1', i, purpose, record_id, authority, d, c, z

    def encode(self):
        return self.magic + u32(self.i) + u32(self.purpose) + self.record_id + self.authority.ljust(64, b'\0') + self.d + self.c + self.z

    @staticmethod
    def parse(b):
        i, purpose = struct.unpack_from('<II', b, 4)
        return Partial(i, purpose, b[12:76], b[76:140], b[140:172], b[172:204], b[204:236])

    def copy(self, **parts):
        out = Partial.parse(self.encode())
        for name, value in parts.items():
            setattr(out, name, value)
        return out


def partial(group, record, i, share, purpose, authority, d=None, leave_out=()):
    """D_i = s_i R with its proof; `leave_out` ('D') makes the challenge forget a field, `d` replaces D_i before the proof is made."""
    big_r = decode(record.r)
    right = encode(mul(share, big_r))
    d = d or right
    w = fresh()
    fields = {'th': group.th, 'record': record.id, 'i': i, 'purpose': purpose, 'authority': authority, 'Y': group.Y[i - 1], 'R': record.r, 'D': d,
              'A': encode(mul(w, G)), 'A2': encode(mul(w, big_r))}
    c = scalar(T('opening/partial', *(v for name, v in fields.items() if name not in leave_out)))
    return Partial(i, purpose, record.id, authority, d, sc(c), sc(w + c * share))


def forged_partial(group, record, i, share, purpose, authority):
    """A false D_i whose proof would hold for a verifier that left D_i out of the challenge: A' is chosen first and D_i solved for."""
    w, big_r = fresh(), decode(record.r)
    a1, a2 = mul(w, G), mul(fresh(), G)
    c = scalar(T('opening/partial', group.th, record.id, i, purpose, authority, group.Y[i - 1], record.r, a1, a2))
    z = w + c * share
    d = mul(pow(c, -1, L), total([mul(z, big_r), mul(L - 1, a2)]))
    return Partial(i, purpose, record.id, authority, encode(d), sc(c), sc(z))


def combine(partials):
    indices = [p.i for p in partials]
    return encode(total(mul(lagrange(indices, p.i), decode(p.d)) for p in partials))


# ---- boxes ----


def box(to, purpose, ad, content, padded=None):
    e = fresh()
    big_e, z = encode(mul(e, G)), encode(mul(e, decode(to)))
    return b'QBB1' + big_e + crypt(T('box/key', purpose, big_e, to, z, ad), ad, pad(content, padded or len(content)))


def box_open(exchange, purpose, ad, b):
    mine, z = encode(mul(exchange, G)), encode(mul(exchange, decode(b[4:36])))
    plain = decrypt(T('box/key', purpose, b[4:36], mine, z, ad), ad, b[36:])
    return None if plain is None else unpad(plain)


# ---- what follows from a seed ----


def draw_seed(ctx, attempt, contributions, first=0):
    return T('draw/seed', ctx, attempt, first, *contributions)


def slot_secrets(seed, slot, stations=3):
    """Everything that must be gone after the sealing: truth bytes, r, K_slot, recipe scalars."""
    return {'truth bytes': T('slot/truth', seed, slot)[:32], 'r': sc(scalar(T('slot/record-scalar', seed, slot))),
            'slot key': T('slot/key', seed, slot)[:32],
            **{'recipe scalar of station %d' % s: sc(scalar(T('slot/recipe-scalar', seed, slot, s, 0))) for s in range(stations)}}


def commitment(ctx, attempt, who, contribution):
    return T('seal/contribution', ctx, attempt, who, contribution)


class Keys:
    """One party's keys. With a rehearsal seed those that `quietbell key new --rehearsal-seed` makes, else fresh ones."""

    def __init__(self, name, seed=None):
        self.name = name
        if seed is None:
            self.seed, self.exchange = os.urandom(32), fresh()
        else:
            self.seed = T('rehearsal/key', seed, name)[:32]
            self.exchange = scalar(T('rehearsal/exchange-key', seed, name))
        self.signing = nacl.signing.SigningKey(self.seed)
        self.public = bytes(self.signing.verify_key)
        self.point = encode(mul(self.exchange, G))
        self.id = key_id(self.public)
