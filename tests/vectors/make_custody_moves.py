#!/usr/bin/python3
"""Writes tests/vectors/custody_moves.h: a resharing, a repair, a paper copy and words, made from docs/reference-custody.md by
the second verifier's arithmetic (tests/outside/second_verifier), of which nothing comes from server/. All secrets are fixed,
so that the messages are: who reads them must come to the same shares, group and digests, byte for byte.
usage: make_custody_moves.py > custody_moves.h
"""
import os
import re
import sys

from nacl.bindings import crypto_sign_seed_keypair
from nacl.signing import SigningKey

here = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, os.path.join(here, '..', 'outside', 'second_verifier'))
from primitives import T, encrypt, number, scalar_bytes  # noqa: E402
from ristretto import BASE, ORDER, combine, decode, encode  # noqa: E402

out = {}
campaign = bytes(range(16))
EPOCH, OLD_TH = 5, b'\x5a' * 64


def u32(v):
    return v.to_bytes(4, 'little')


def u64(v):
    return v.to_bytes(8, 'little')


def secret(*what):
    """A fixed number of full size for each name."""
    return number(T('test/' + '/'.join(str(w) for w in what)))


def g(s):
    return encode(BASE.times(s % ORDER))


def times(s, p):
    return encode(combine([(s, decode(p))]))


def plus(points):
    return encode(combine([(1, decode(p)) for p in points]))


class Person:
    def __init__(self, j):
        self.seed, self.exchange = bytes([j]) * 32, 1000 + j
        self.sign, self.point = crypto_sign_seed_keypair(self.seed)[0], g(self.exchange)

    def signature(self, digest):
        return SigningKey(self.seed).sign(digest).signature

    @property
    def keys(self):
        return self.sign, self.point


def value(coefs, x):
    return sum(c * pow(x, m, ORDER) for m, c in enumerate(coefs)) % ORDER


def weight(i, all_, at=0):
    """lambda_i(at) of the page: the product of (m - at) / (m - i)."""
    top = bottom = 1
    for m in all_:
        if m != i:
            top, bottom = top * (m - at) % ORDER, bottom * (m - i) % ORDER
    return top * pow(bottom, -1, ORDER) % ORDER


def sealed(label, first, sender, to, ephemeral, person, share):
    """A share on its way: key from the route and Z, the route again as associated data."""
    key = T(label, first, sender, to, g(ephemeral), person.point, times(ephemeral, person.point))
    return encrypt(key, scalar_bytes(share), first + u64(sender) + u64(to))


# the group of old: 3 custodians, 2 needed, f(0) the key
f = [secret('key'), secret('slope')]
S, share = g(f[0]), {i: value(f, i) for i in (1, 2, 3)}
Y = {i: g(s) for i, s in share.items()}
old = {i: Person(i) for i in (1, 2, 3)}
out['s'], out['y'] = S, b''.join(Y[i] for i in (1, 2, 3))
out['share_2'] = scalar_bytes(share[2])

# resharing by 1 and 3 to four new people, three of whom are needed
dealers, N, K = (1, 3), 4, 3
new = {j: Person(10 + j) for j in range(1, N + 1)}
ctx = T('reshare/context', campaign, EPOCH + 1, 4, OLD_TH, S, 2, *(x for i in dealers for x in (i, *old[i].keys)), N, K,
        *(x for p in new.values() for x in p.keys))
out['reshare_ctx'] = ctx
poly, said = {}, []
for i in dealers:
    poly[i] = [share[i], secret('deal', i, 1), secret('deal', i, 2)]
    C = [g(a) for a in poly[i]]
    e, w = secret('deal', i, 'e'), secret('deal', i, 'w')
    c = number(T('reshare/possession', ctx, i, *C, g(e), g(w)))
    z_pop = scalar_bytes((w + c * share[i]) % ORDER)
    ct = [sealed('reshare/share-key', ctx, i, j, e, p, value(poly[i], j)) for j, p in new.items()]
    digest = T('reshare/deal', ctx, i, K, *C, g(w), z_pop, g(e), *ct)
    said += [digest, old[i].signature(digest)]
    out['reshare_deal_%d' % i] = (b'QBS1' + u32(i) + u32(N) + u32(K) + ctx + b''.join(C) + g(w) + z_pop + g(e) + b''.join(ct)
                                  + said[-1])
new_th = T('reshare/transcript', ctx, *said, S)
new_share = {j: sum(weight(i, dealers) * value(poly[i], j) for i in dealers) % ORDER for j in new}
out['reshare_th'] = new_th
out['reshare_shares'] = b''.join(scalar_bytes(s) for s in new_share.values())
out['reshare_y'] = b''.join(g(s) for s in new_share.values())
out['reshare_certificate'] = T('keygen/certificate', new_th, S, *(g(s) for s in new_share.values()))
assert sum(weight(j, (1, 2, 4)) * new_share[j] for j in (1, 2, 4)) % ORDER == f[0]

# repair of 2's share by 1 and 3; 2 has new keys
helpers, LOST, receiver = (1, 3), 2, Person(22)
ctx = T('repair/context', campaign, EPOCH, 6, OLD_TH, LOST, *receiver.keys, 2, *(x for i in helpers for x in (i, *old[i].keys)))
out['repair_ctx'] = ctx
part, said = {}, []
for i in helpers:
    first = secret('split', i)
    part[i] = [first, (weight(i, helpers, LOST) * share[i] - first) % ORDER]
    D, e = [g(d) for d in part[i]], secret('split', i, 'e')
    ct = [sealed('repair/summand-key', ctx, i, p, e, old[p], d) for p, d in zip(helpers, part[i])]
    digest = T('repair/split', ctx, i, 2, *D, g(e), *ct)
    said += [digest, old[i].signature(digest)]
    out['repair_split_%d' % i] = b'QBF1' + u32(i) + u32(2) + ctx + b''.join(D) + g(e) + b''.join(ct) + said[-1]
splits = T('repair/splits', ctx, *said)
for place, j in enumerate(helpers):
    e = secret('sum', j, 'e')
    ct = sealed('repair/sum-key', splits, j, LOST, e, receiver, sum(part[i][place] for i in helpers) % ORDER)
    digest = T('repair/sum', splits, j, g(e), ct)
    out['repair_sum_%d' % j] = b'QBG1' + u32(j) + splits + g(e) + ct + old[j].signature(digest)
assert sum(sum(p) for p in part.values()) % ORDER == share[2]


# paper and words
def crc(data):
    c = 0xffff
    for byte in data:
        for bit in range(7, -1, -1):
            c = (c << 1 ^ (0x1021 if (c >> 15 ^ byte >> bit) & 1 else 0)) & 0xffff
    return c


assert crc(b'123456789') == 0x29b1  # this form's usual check value, from memory


def letters(data):
    text = ''.join('ACDEFHJKMNPRTWXY'[h] for b in data for h in (b >> 4, b & 15))
    return ' '.join(text[i:i + 4] for i in range(0, len(text), 4))


copied = bytes((i * 37 + 11) % 256 for i in range(1190))
stream = bytes([1]) + len(copied).to_bytes(3, 'little') + copied + T('paper/whole', copied)[:8]
lines = []
for at in range(0, len(stream), 12):
    n, data = at // 12 + 1, stream[at:at + 12]
    lines.append('%02d  %s  %s' % (n, letters(data), letters(crc(n.to_bytes(2, 'big') + data).to_bytes(2, 'big'))))
page = open(os.path.join(here, '..', '..', 'docs', 'reference-custody.md')).read()
words = re.search(r'```words\n(.*?)```', page, re.S).group(1).split()
assert len(words) == 256 and words == sorted(words)
fingerprint = T('key/fingerprint', *receiver.keys)[:16]


def string(name, pieces):
    return 'static const char moves_%s[] =\n%s;' % (name, '\n'.join('\t"%s"' % p for p in pieces))


print('/*\n * Resharing, repair, paper and words as made by make_custody_moves.py, independently of server/. Hexadecimal but for the text.\n */')
print('#ifndef QB_VECTORS_CUSTODY_MOVES_H\n#define QB_VECTORS_CUSTODY_MOVES_H\n')
for name, b in out.items():
    print(string(name, [b.hex()[i:i + 96] for i in range(0, 2 * len(b), 96)]))
print(string('paper', [line + '\\n' for line in ['# a copy'] + lines]))
print(string('fingerprint_words', [' '.join(words[b] for b in fingerprint)]))
print(string('all_words', [' '.join(words[i:i + 12]) + (' ' if i + 12 < 256 else '') for i in range(0, 256, 12)]))
print('\n#endif')
