"""The ledger's formats a second time: frames, the tree of RFC 9162, heads, entries. The fixed sentences of entry types are read from the
table in server/wire/entries.c, since they are words and not checks."""
import base64
import hashlib
import json
import os
import re
import struct

from group import T

top = os.path.realpath(os.path.join(os.path.dirname(__file__), '..', '..'))


def sentences():
    source = open(os.path.join(top, 'server', 'wire', 'entries.c')).read()
    table = source[source.index('types[] = {'):source.index('#define N_TYPES')]
    found = re.findall(r'\{"([a-z-]+)",\s*([A-Z_ |]+),\s*(true|false),\s*(true|false),\s*((?:"(?:[^"\\]|\\.)*"\s*)+),\s*((?:"(?:[^"\\]|\\.)*"\s*)+),',
                       table)
    join = lambda s: ''.join(re.findall(r'"((?:[^"\\]|\\.)*)"', s))
    return {t: (hidden == 'true', needs == 'true', join(what), join(meaning)) for t, _, hidden, needs, what, meaning in found}


SENTENCES = sentences()


def compose(kind, by, now, campaign=None, why='-', **extra):
    """The exact text of an entry. `now` is (gps, utc) as the service says them."""
    _, needs, what, meaning = SENTENCES[kind]
    e = {'type': kind, 'by': by, 'when_gps': now[0], 'when_utc': now[1], 'what': what, 'why': why, 'meaning': meaning}
    if needs:
        e['campaign'] = campaign.hex()
    e.update(extra)
    return json.dumps(e, separators=(',', ':'))


def sign_entry(signing, text):
    return signing.sign(T('ledger/entry', text.encode() if isinstance(text, str) else text)).signature


def hide(nonce, text):
    return T('ledger/hidden', nonce, text.encode())


class Leaf:
    def __init__(self, seq, author, body, signature, received_ns, kind=0):
        self.seq, self.author, self.body, self.signature, self.received_ns, self.kind = seq, author, body, signature, received_ns, kind

    def frame(self):
        return (b'QBL1' + bytes([self.kind, 0, 0, 0]) + struct.pack('<Qq', self.seq, self.received_ns) + self.author +
                struct.pack('<Q', len(self.body)) + self.body + self.signature)

    @staticmethod
    def parse(f):
        seq, received = struct.unpack_from('<Qq', f, 8)
        n = struct.unpack_from('<Q', f, 40)[0]
        return Leaf(seq, f[24:40], f[48:48 + n], f[48 + n:], received, f[4])

    def entry(self):
        return json.loads(self.body) if self.kind == 0 else {'type': 'hidden'}


def leaf_hash(frame):
    return hashlib.sha256(b'\0' + frame).digest()


def node(a, b):
    return hashlib.sha256(b'\1' + a + b).digest()


def root(hashes):
    if len(hashes) == 0:
        return hashlib.sha256().digest()
    if len(hashes) == 1:
        return hashes[0]
    k = 1 << (len(hashes) - 1).bit_length() - 1
    return node(root(hashes[:k]), root(hashes[k:]))


def inclusion(m, hashes):
    if len(hashes) <= 1:
        return []
    k = 1 << (len(hashes) - 1).bit_length() - 1
    return inclusion(m, hashes[:k]) + [root(hashes[k:])] if m < k else inclusion(m - k, hashes[k:]) + [root(hashes[:k])]


def consistency(m, hashes, whole=True):
    if m == len(hashes):
        return [] if whole else [root(hashes)]
    k = 1 << (len(hashes) - 1).bit_length() - 1
    if m <= k:
        return consistency(m, hashes[:k], whole) + [root(hashes[k:])]
    return consistency(m - k, hashes[k:], False) + [root(hashes[:k])]


def gps_text(ns):
    s = '%d.%09d' % (ns // 10**9, ns % 10**9)
    return s.rstrip('0').rstrip('.')


def gps_ns(text):
    whole, _, part = text.partition('.')
    return int(whole) * 10**9 + int((part + '0' * 9)[:9])


def head_text(service, hashes, time_ns):
    """A head as the holder of the service's signing key makes it."""
    from sealed import key_id
    origin = key_id(bytes(service.verify_key)).hex()
    text = 'quietbell/1/head\norigin %s\nsize %d\nroot %s\ntime %s\n\n' % (origin, len(hashes), root(hashes).hex(), gps_text(time_ns))
    return text + 'service %s %s\n' % (origin, service.sign(text.encode()).signature.hex())


def b64(b):
    return base64.b64encode(b).decode()
