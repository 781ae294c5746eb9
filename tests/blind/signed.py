"""A party's signed requests, made without a line of the project's own code: the blind game moves the clock and looks at
slots through it many hundred times, which one command each would make slow. From docs/protocol.md and
docs/reference-custody.md."""
import base64, hashlib, http.client, json, os, struct, time

import nacl.bindings as sodium
import nacl.pwhash.argon2id as argon2
import nacl.signing

HEADER = 84
IDLE_S = 10  # after which the service may have closed a connection
PASSES, MEMORY = 2, 64 << 20  # of the interactive level, the only one that rehearsals use


def transcript(label, *fields):
    h = hashlib.blake2b(digest_size=64)
    for f in (label.encode(),) + fields:
        h.update(struct.pack('<Q', len(f)) + f)
    return h.digest()


def party_seed(home, passphrase):
    """The signing seed of a party's key file."""
    data = open(os.path.join(home, 'key.qbk'), 'rb').read()
    salt, nonce, commitment = data[8:24], data[24:48], data[48:80]
    length = struct.unpack('<I', data[80:84])[0]
    keys = argon2.kdf(64, passphrase.encode(), salt, opslimit=PASSES, memlimit=MEMORY)
    if transcript('quietbell/1/keyfile/commitment', keys[32:], data[:48])[:32] != commitment:
        raise ValueError('%s: a wrong passphrase, or a level that is not for rehearsals' % home)
    body = data[HEADER:HEADER + length + 16]
    return sodium.crypto_aead_xchacha20poly1305_ietf_decrypt(body, data[:HEADER], nonce, keys[:32])[:32]


class Party:
    """One keep-alive connection of one party."""

    def __init__(self, home, passphrase, port):
        self.key = nacl.signing.SigningKey(party_seed(home, passphrase))
        self.key_id = transcript('quietbell/1/key/id', self.key.verify_key.encode())[:16].hex()
        self.authority = '127.0.0.1:%d' % port
        self.link = http.client.HTTPConnection('127.0.0.1', port, timeout=60)
        self.used = time.monotonic()

    def _headers(self, method, target, body):
        path, _, query = target.partition('?')
        pairs = [('@method', method), ('@authority', self.authority), ('@path', path), ('@query', '?' + query)]
        headers = {'Host': self.authority}
        if body is not None:
            digest = 'sha-512=:%s:' % base64.b64encode(hashlib.sha512(body).digest()).decode()
            pairs += [('content-digest', digest), ('content-type', 'application/json')]
            headers.update({'Content-Digest': digest, 'Content-Type': 'application/json'})
        params = '(%s);created=%d;nonce="%s";keyid="%s";alg="ed25519";tag="quietbell/1"' % (
            ' '.join('"%s"' % k for k, _ in pairs), time.time(), os.urandom(16).hex(), self.key_id)
        base = ''.join('"%s": %s\n' % p for p in pairs) + '"@signature-params": ' + params
        signature = self.key.sign(base.encode()).signature
        headers['Signature-Input'] = 'qb=' + params
        headers['Signature'] = 'qb=:%s:' % base64.b64encode(signature).decode()
        return headers

    def ask(self, method, target, document=None):
        body = None if document is None else json.dumps(document).encode()
        if time.monotonic() - self.used > IDLE_S:
            self.link.close()
        self.used = time.monotonic()
        self.link.request(method, target, body, self._headers(method, target, body))
        answer = self.link.getresponse()
        text = answer.read()
        if answer.status >= 300:
            raise RuntimeError('%s %s: %d %s' % (method, target, answer.status, text[:300]))
        return text

    def get(self, target):
        return json.loads(self.ask('GET', target))

    def post(self, target, document):
        return json.loads(self.ask('POST', target, document))
