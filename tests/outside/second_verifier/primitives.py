"""Hashes, signatures, encryption and the two forms of proof of docs/reference-custody.md. SHA-2 and BLAKE2b come from
Python, Ed25519 and XChaCha20-Poly1305 from PyNaCl, the group from ristretto.py."""
import hashlib
from functools import lru_cache

import nacl.bindings
import nacl.exceptions

import ristretto
from ristretto import ORDER, Refused


def T(purpose, *fields):
    """T(label, f1, f2, ...) of the reference; an integer field is 8 bytes, little-endian."""
    h = hashlib.blake2b(digest_size=64)
    for f in (b'quietbell/1/' + purpose.encode(),) + fields:
        f = (f % 2**64).to_bytes(8, 'little') if isinstance(f, int) else bytes(f)
        h.update(len(f).to_bytes(8, 'little') + f)
    return h.digest()


def H(b):
    return hashlib.blake2b(b, digest_size=64).digest()


def number(t):
    """A T taken as a scalar: reduced modulo the order."""
    return int.from_bytes(t, 'little') % ORDER


def scalar_bytes(s):
    return s.to_bytes(32, 'little')


def key_id(signing_key):
    return T('key/id', signing_key)[:16]


def signed(key, message, signature):
    try:
        nacl.bindings.crypto_sign_open(bytes(signature) + bytes(message), bytes(key))
        return True
    except (nacl.exceptions.BadSignatureError, nacl.exceptions.ValueError, ValueError):
        return False


def check_signed(key, message, signature, who):
    if not signed(key, message, signature):
        raise Refused('a signature is not %s' % who)


def encrypt(t, plain, associated):
    return nacl.bindings.crypto_aead_xchacha20poly1305_ietf_encrypt(plain, associated, t[32:56], t[:32])


def decrypt(t, cipher, associated, what):
    try:
        return nacl.bindings.crypto_aead_xchacha20poly1305_ietf_decrypt(bytes(cipher), associated, t[32:56], t[:32])
    except nacl.exceptions.CryptoError:
        raise Refused('%s does not decrypt' % what) from None


def unpad(b, what):
    n = int.from_bytes(b[:4], 'little')
    if len(b) < 4 or n > len(b) - 4 or any(b[4 + n:]):
        raise Refused('%s is not padded as it should be' % what)
    return b[4:4 + n]


def pad(content, size):
    return len(content).to_bytes(4, 'little') + content + bytes(size - len(content))


@lru_cache(maxsize=4096)
def point(b):
    return ristretto.decode(b)


@lru_cache(maxsize=256)
def fixed(b):
    """A point that occurs in many proofs."""
    return ristretto.BASE if b == ristretto.BASE_BYTES else ristretto.Fixed(ristretto.decode(b))


def equal_logarithms(challenge_of, c, z, b1, y1, b2, y2, what):
    """A proof (c, z) that log_b1 y1 = log_b2 y2: b and y are points or Fixed, challenge_of(A, A') the T that gives c."""
    c, z = ristretto.scalar(c), ristretto.scalar(z)
    a1 = ristretto.encode(ristretto.combine([(z, b1), (-c, y1)]))
    a2 = ristretto.encode(ristretto.combine([(z, b2), (-c, y2)]))
    if number(challenge_of(a1, a2)) != c:
        raise Refused('the proof of %s is false' % what)


def lagrange_at_zero(i, others):
    """The weight of number i when the numbers in `others` (i among them) are combined."""
    top = bottom = 1
    for m in others:
        if m != i:
            top, bottom = top * m % ORDER, bottom * (m - i) % ORDER
    return top * pow(bottom, ORDER - 2, ORDER) % ORDER


class Reader:
    """Fields out of a message of fixed layout."""

    def __init__(self, b, what):
        self.b, self.at, self.what = bytes(b), 0, what

    def take(self, n):
        if self.at + n > len(self.b):
            raise Refused('%s is too short' % self.what)
        self.at += n
        return self.b[self.at - n:self.at]

    def u32(self):
        return int.from_bytes(self.take(4), 'little')

    def u64(self):
        return int.from_bytes(self.take(8), 'little')

    def i64(self):
        return int.from_bytes(self.take(8), 'little', signed=True)

    def zeros(self, n):
        if any(self.take(n)):
            raise Refused('%s holds something where nothing should be' % self.what)

    def expect(self, b):
        if self.take(len(b)) != b:
            raise Refused('%s does not begin as it should' % self.what)

    def end(self):
        if self.at != len(self.b):
            raise Refused('%s is too long' % self.what)
