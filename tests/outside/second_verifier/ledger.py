"""The ledger: frames, the tree of RFC 9162, the signed head, the form of entries and who may author them (docs/protocol.md,
docs/reference-custody.md)."""
import datetime
import hashlib
import json
import re

from primitives import Reader, T, check_signed, key_id
from ristretto import Refused

NAME = re.compile(r'[a-z][a-z0-9-]*\Z')
GPS = re.compile(r'(0|[1-9][0-9]*)(\.[0-9]{1,9})?\Z')
COMMON = ('type', 'by', 'when_gps', 'when_utc', 'what', 'why', 'meaning')
GPS_EPOCH = datetime.datetime(1980, 1, 6, tzinfo=datetime.timezone.utc)
LEAP_SECONDS = 18  # GPS - UTC since 2017-01-01; no campaign is older


def gps_ns(text):
    if not isinstance(text, str) or not GPS.match(text):
        raise Refused('a time is not a decimal number of GPS seconds')
    whole, _, part = text.partition('.')
    return int(whole) * 10**9 + int(part.ljust(9, '0') or 0)


def utc_ns(text):
    m = re.match(r'(\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d)(\.\d{1,9})?Z\Z', text)
    if not m:
        raise Refused('a time is not UTC')
    t = datetime.datetime.strptime(m.group(1) + '+0000', '%Y-%m-%dT%H:%M:%S%z')
    whole = int((t - GPS_EPOCH).total_seconds()) + LEAP_SECONDS
    return whole * 10**9 + int((m.group(2) or '.0')[1:].ljust(9, '0'))


def strict_json(text, what):
    def no_twins(pairs):
        if len({k for k, _ in pairs}) != len(pairs):
            raise ValueError('a key twice')
        return dict(pairs)

    def no_constant(word):
        raise ValueError(word)
    try:
        return json.loads(bytes(text).decode('utf-8'), object_pairs_hook=no_twins, parse_constant=no_constant)
    except ValueError:
        raise Refused('%s is not JSON' % what) from None


class EntryTypes:
    """The table of entry types that docs/protocol.md prints: who may author one, hidden or not, its members."""

    def __init__(self, protocol):
        self.types = {}
        text = open(protocol, encoding='utf-8').read().split('## Entry types')[1].split('\n## ')[0]
        for line in text.split('\n'):
            cells = [c.strip() for c in line.strip().strip('|').split('|')]
            if len(cells) < 4 or not cells[0].startswith('`'):
                continue
            members = re.sub(r'\([^)]*\)', '', cells[3])
            keys = [w for w in re.findall(r'`([a-z_]+)`', members)]
            for name in re.findall(r'`([a-z-]+)`', cells[0]):
                self.types[name] = {'by': cells[1], 'hidden': cells[2] == 'yes', 'members': keys,
                                    'campaign': '(no `campaign`)' not in cells[3]}


class Leaf:
    def __init__(self, seq, frame, what='a leaf'):
        r = Reader(frame, what)
        r.expect(b'QBL1')
        self.hidden = r.take(1)[0]
        r.zeros(3)
        self.seq, self.received, self.author = r.u64(), r.i64(), r.take(16)
        self.body = r.take(r.u64())
        self.signature = r.take(64)
        r.end()
        if self.hidden > 1 or self.seq != seq or self.received < 0 or not self.body:
            raise Refused('leaf %d is not framed as it should be' % seq)
        if self.hidden and len(self.body) != 64:
            raise Refused('hidden leaf %d is no commitment' % seq)
        self.digest = T('ledger/entry', self.body)
        self.hash = hashlib.sha256(b'\0' + frame).digest()
        self.entry = None


def tree_root(hashes):
    """RFC 9162, 2.1.1."""
    if not hashes:
        return hashlib.sha256(b'').digest()
    if len(hashes) == 1:
        return hashes[0]
    k = 1
    while 2 * k < len(hashes):
        k *= 2
    return hashlib.sha256(b'\1' + tree_root(hashes[:k]) + tree_root(hashes[k:])).digest()


def parse_entry(body, types, what):
    e = strict_json(body, what)
    if not isinstance(e, dict) or not all(isinstance(e.get(k), str) for k in COMMON):
        raise Refused('%s lacks a common member' % what)
    if utc_ns(e['when_utc']) != gps_ns(e['when_gps']):
        raise Refused('the two times of %s differ' % what)
    if not NAME.match(e['by']) or '\n' in e['why'] or not e['why']:
        raise Refused('%s has no author or no reason' % what)
    form = types.get(e['type'])
    if form is not None:
        want = set(form['members']) | set(COMMON) | ({'campaign'} if form['campaign'] else set())
        if set(e) != want:
            raise Refused("%s of type '%s' has other members than it should" % (what, e['type']))
    if 'campaign' in e and not re.fullmatch('[0-9a-f]{32}', str(e['campaign'])):
        raise Refused('%s names no campaign' % what)
    return e


class Head:
    def __init__(self, text):
        m = re.fullmatch(r'(quietbell/1/head\norigin ([0-9a-f]{32})\nsize (0|[1-9][0-9]*)\nroot ([0-9a-f]{64})\n'
                         r'time ([0-9.]+)\n\n)service ([0-9a-f]{32}) ([0-9a-f]{128})\n'
                         r'((?:cosigner [0-9a-f]{32} [0-9a-f]{128}\n)*)', text)
        if not m:
            raise Refused('the head does not have its form')
        self.signed = m.group(1).encode()
        self.origin, self.size, self.root = bytes.fromhex(m.group(2)), int(m.group(3)), bytes.fromhex(m.group(4))
        gps_ns(m.group(5))
        self.service = (bytes.fromhex(m.group(6)), bytes.fromhex(m.group(7)))
        self.cosigners = [(bytes.fromhex(a), bytes.fromhex(b))
                          for a, b in re.findall(r'cosigner (\S+) (\S+)\n', m.group(8))]
        if len({a for a, _ in self.cosigners}) != len(self.cosigners):
            raise Refused('a cosigner stands twice in the head')


class Party:
    def __init__(self, name, role, signing, exchange):
        self.name, self.role, self.person = name, role, name
        self.signing, self.exchange, self.id = signing, exchange, key_id(signing)
        self.retired, self.pending, self.vouchers = False, None, []

    def take(self, signing, exchange):
        self.signing, self.exchange, self.id = signing, exchange, key_id(signing)
        self.retired, self.pending, self.vouchers = False, None, []


class People:
    """Parties and their keys over time. `may_vouch(voucher, party)` is the campaigns' say about a vouch."""

    def __init__(self):
        self.by_name, self.by_key, self.invitations = {}, {}, {}
        self.service = self.service_id = self.administrator = None

    def start(self, e):
        self.service = bytes.fromhex(e['service_key'])
        self.service_id = key_id(self.service)
        self.administrator = bytes.fromhex(e['administrator_key'])

    def acting(self, id_):
        """The party whose key with this id counts now, or None."""
        p = self.by_key.get(id_, (None, None))[0]
        return p if p is not None and p.id == id_ and not p.retired else None

    def ever(self, id_):
        """(party, signing key) of a present or former key, or (None, None)."""
        return self.by_key.get(id_, (None, None))

    def _add_key(self, p):
        self.by_key[p.id] = (p, p.signing)

    def apply(self, e, leaf, may_vouch):
        t = e['type']
        if t == 'invitation':
            self.invitations[leaf.seq] = e
        elif t == 'enrolment':
            self._enrol(e, leaf)
        elif t == 'key-rotation':
            p, fresh = self.by_name[e['by']], bytes.fromhex(e['signing_key'])
            check_signed(fresh, T('party/rotation', p.id, fresh, bytes.fromhex(e['exchange_key'])),
                         bytes.fromhex(e['proof']), "the new key's own")
            p.take(fresh, bytes.fromhex(e['exchange_key']))
            self._add_key(p)
        elif t == 'vouch':
            p, by = self.by_name[e['name']], self.by_name[e['by']]
            given = (bytes.fromhex(e['signing_key']), bytes.fromhex(e['exchange_key']))
            if p.pending is None or given != p.pending or by.person == p.person or not may_vouch(by, p) or \
               by.person in p.vouchers:
                raise Refused('leaf %d vouches where it may not' % leaf.seq)
            p.vouchers.append(by.person)
            if len(p.vouchers) == 2:
                p.take(*p.pending)
                self._add_key(p)
        elif t == 'retirement':
            p, by = self.by_name[e['name']], self.by_name[e['by']]
            if by is not p and by.role != 'administrator':
                raise Refused('leaf %d retires somebody else' % leaf.seq)
            p.retired, p.pending = True, None
        elif t == 'same-person':
            self.by_name[e['name']].person = e['person']
        else:
            return False
        return True

    def _enrol(self, e, leaf):
        keys = (bytes.fromhex(e['signing_key']), bytes.fromhex(e['exchange_key']))
        if leaf.seq == 1:
            if e['by'] != 'service' or e['role'] != 'administrator' or keys[0] != self.administrator:
                raise Refused('the second leaf does not enrol the administrator')
        else:
            fitting = [s for s, i in self.invitations.items() if (i['name'], i['role']) == (e['name'], e['role']) and
                       e['invitation'] in (-1, s)]
            if not fitting or e['by'] != e['name']:
                raise Refused('leaf %d enrols somebody who was not invited' % leaf.seq)
            del self.invitations[fitting[0]]
            if key_id(keys[0]) in self.by_key:
                raise Refused('leaf %d enrols a key that was there before' % leaf.seq)
        p = self.by_name.get(e['name'])
        if p is not None:
            if p.role != e['role']:
                raise Refused('leaf %d gives a party another role' % leaf.seq)
            p.pending, p.vouchers = keys, []
        else:
            p = self.by_name[e['name']] = Party(e['name'], e['role'], *keys)
            self._add_key(p)


ROLES = ('administrator', 'custodian', 'reviewer', 'operator', 'liaison', 'driver', 'analyst', 'service')


def roles_of(by):
    """The roles that a cell of the table names; None when anybody may who has a part."""
    found = {r for r in ROLES if re.search(r'\b%s\b' % r, by)}
    return None if 'party' in by or 'anybody' in by else found


def read_leaves(rows, types, people, on_entry, on_hidden):
    """Every leaf in order: framed, signed by its author's key of that time, of its type's form, said by who may say it."""
    leaves, last = [], 0
    for seq, frame in rows:
        leaf = Leaf(seq, frame)
        leaves.append(leaf)
        if leaf.received < last:
            raise Refused('leaf %d is older than the one before it' % seq)
        last = leaf.received
        if leaf.hidden:
            if leaf.author != people.service_id:
                raise Refused('hidden leaf %d is not the service\'s' % seq)
            check_signed(people.service, leaf.digest, leaf.signature, "the service's (leaf %d)" % seq)
            on_hidden(leaf)
            continue
        e = leaf.entry = parse_entry(leaf.body, types, 'leaf %d' % seq)
        if seq == 0:
            if e['type'] != 'service-start' or e['by'] != 'service':
                raise Refused('the ledger does not begin with the service')
            people.start(e)
        if abs(gps_ns(e['when_gps']) - leaf.received) > 300 * 10**9:
            raise Refused('leaf %d was received long before or after it was made' % seq)
        p = None
        if leaf.author == people.service_id:
            key, role = people.service, 'service'
        elif (p := people.acting(leaf.author)) is not None:
            key, role = p.signing, p.role
        elif e['type'] == 'enrolment' and key_id(bytes.fromhex(e['signing_key'])) == leaf.author:
            key, role = bytes.fromhex(e['signing_key']), e['role']
        else:
            raise Refused('leaf %d has no author whose key counted' % seq)
        check_signed(key, leaf.digest, leaf.signature, "its author's (leaf %d)" % seq)
        if e['by'] != (p.name if p else 'service' if role == 'service' else e['name']):
            raise Refused('leaf %d was not said by who signed it' % seq)
        form = types.get(e['type'])
        allowed = roles_of(form['by']) if form else None
        if form and form['hidden']:
            raise Refused('leaf %d shows what should be hidden' % seq)
        if allowed is not None and role not in allowed and not (seq == 1 and e['type'] == 'enrolment'):
            raise Refused("leaf %d: a %s may not say '%s'" % (seq, role, e['type']))
        on_entry(leaf, e, p)
    return leaves
