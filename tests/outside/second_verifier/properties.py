"""What must hold of a bundle, one function a property, in the order in which one rests on another. Each returns a text with
counts, or raises Refused."""
import collections

from campaign import Campaign
from custody import (CANARY, CLAIM, GUESS, NOTE, RECORD_TYPES, REPORT, SEED, SLOT, Partial, Record, open_with)
from ledger import EntryTypes, Head, People, gps_ns, parse_entry, read_leaves, roles_of, tree_root
from primitives import H, T, check_signed, signed
from ristretto import Refused

SEALED_BY_ENTRY = {'claim': CLAIM, 'guess': GUESS, 'milestone': 7, 'incident': 8}
HIDDEN_BATCH = 16


class Work:
    """What the checks hand on to each other."""

    def __init__(self, bundle, protocol):
        self.bundle, self.types = bundle, EntryTypes(protocol).types
        self.people, self.campaigns, self.notes = People(), {}, []


def ledger(w):
    hidden = []

    def may_vouch(by, p):
        running = [c for c in w.campaigns.values() if c.state != 'opened' and c.takes_part(p)]
        return all(c.takes_part(by) and by.role != 'administrator' for c in running)

    def on_entry(leaf, e, party):
        if w.people.apply(e, leaf, may_vouch) or e['type'] == 'service-start':
            return
        if e['type'] == 'plan':
            c = Campaign(leaf, e, w.people)
            w.campaigns[c.id] = c
        elif e.get('campaign') and bytes.fromhex(e['campaign']) in w.campaigns:
            w.campaigns[bytes.fromhex(e['campaign'])].apply(leaf, e, party)
        elif 'campaign' in e:
            raise Refused('leaf %d is about no campaign of this ledger' % leaf.seq)
        else:
            w.notes.append("entries of type '%s'" % e['type'])
    w.leaves = read_leaves(w.bundle.rows['leaves'], w.types, w.people, on_entry, hidden.append)
    w.c = w.campaigns.get(w.bundle.campaign)
    if w.c is None:
        raise Refused("the ledger does not have the bundle's campaign")
    run = 0
    for leaf in w.leaves + [None]:
        if leaf is not None and leaf.hidden:
            run += 1
        elif run % HIDDEN_BATCH:
            raise Refused('hidden leaves do not stand in batches of %d' % HIDDEN_BATCH)
        else:
            run = 0
    w.notes += ["entries of type '%s'" % t for t in w.c.unjudged]
    return '%d leaves, %d of them hidden, %d parties' % (len(w.leaves), len(hidden), len(w.people.by_name))


def heads(w):
    head = Head(w.bundle.head)
    if head.origin != w.people.service_id or head.service[0] != head.origin:
        raise Refused('the head is of another service')
    check_signed(w.people.service, head.signed, head.service[1], "the service's")
    if head.size != len(w.leaves) or head.root != tree_root([x.hash for x in w.leaves]):
        raise Refused('the leaves do not have the root of the signed head')
    names = set()
    for id_, signature in head.cosigners:
        party, key = w.people.ever(id_)
        if party is None or not signed(key, head.signed, signature):
            raise Refused('a cosignature is false')
        names.add(party.name)
    holders = [h.party.name for h in w.c.holders]
    have = len(names & set(holders))
    if have < len(holders) // 2 + 1:
        raise Refused('%d of %d custodians cosigned the head' % (have, len(holders)))
    return 'root of %d leaves, cosigned by %d of %d custodians' % (head.size, have, len(holders))


def life(w):
    if w.c.state != 'opened':
        raise Refused('the campaign is %s, not opened' % w.c.state)
    return 'closing at leaf %d, opening request at leaf %d' % (w.c.closing.seq, w.c.opening.seq)


def key(w):
    g = w.c.founding
    return '%d deals with proofs, certified by %d, %d needed; %d attempts before it, %d resharings after it' % (
        g.n, g.n, g.k, len(w.c.failures), w.c.epoch - 1)


def hidden(w):
    by_seq = {leaf.seq: leaf for leaf in w.leaves if leaf.hidden}
    w.hidden, w.filed_hidden, sequences = [], {}, set()
    asked, claims = set(), {}
    for commitment, seq, received, due, promise, nonce, body, signature, author in w.bundle.rows['hidden']:
        what = 'the hidden entry of leaf %d' % seq
        leaf = by_seq.pop(seq, None)
        if leaf is None or leaf.body != commitment or T('ledger/hidden', nonce, body) != commitment:
            raise Refused('%s is not what its commitment hides' % what)
        check_signed(w.people.service, T('ledger/promise', w.c.id, commitment, received, due), promise, "the service's")
        party, signing = w.people.ever(author)
        if party is None:
            raise Refused('%s has no author' % what)
        check_signed(signing, T('ledger/entry', body), signature, "its author's")
        e = parse_entry(body, w.types, what)
        form = w.types.get(e['type'])
        if form is None:
            w.notes.append("hidden entries of type '%s'" % e['type'])
        elif not form['hidden'] or party.role not in (roles_of(form['by']) or [party.role]):
            raise Refused('%s is of a type that its author may not hide' % what)
        if e['by'] != party.name or not w.c.takes_part(party) or e.get('campaign') != w.c.id.hex():
            raise Refused('%s is not said by its author about this campaign' % what)
        if not 0 <= received <= due or leaf.received < received or abs(gps_ns(e['when_gps']) - received) > 300 * 10**9:
            raise Refused('the times of %s do not fit' % what)
        if seq >= w.c.closing.seq:
            raise Refused('%s came after the closing' % what)
        if 'record_id' in e:
            w.filed_hidden[bytes.fromhex(e['record_id'])] = e, author, received
        if 'sequence' in e:
            if (author, e['sequence']) in sequences:
                raise Refused('%s has a number that its author used before' % what)
            sequences.add((author, e['sequence']))
        if e['type'] == 'claim':
            if w.c.plan.pipelines.get(e['pipeline']) != e['by']:
                raise Refused("%s is for somebody else's pipeline" % what)
            claims[commitment[:16].hex()] = e['by']
        if e['type'] == 'guess' and not (0 <= e['slot'] < w.c.plan.n_slots and
                                         received < w.c.plan.start + e['slot'] * w.c.plan.slot):
            raise Refused('%s is a guess about no slot, or came after its start' % what)
        if e['type'] == 'spot-request':
            asked.add(commitment[:16].hex())
        w.hidden.append((e, commitment, received))
    for e, _, _ in w.hidden:
        if e['type'] in ('spot-shares', 'spot-answer') and e['opening'] not in asked:
            raise Refused('a spot opening was answered that nobody asked for')
        if e['type'] in ('milestone', 'claim-withdrawal') and claims.get(e['claim']) != e['by']:
            raise Refused('a %s is about no claim of its author' % e['type'])
    count, summary = w.c.summary
    if count != len(w.hidden) or summary != T('ledger/hidden-all', *[c for _, c, _ in w.hidden]):
        raise Refused('the hidden entries are not those that were fixed at the closing')
    kinds = collections.Counter(e['type'] for e, _, _ in w.hidden)
    return ', '.join('%d %s' % (n, t) for t, n in sorted(kinds.items())) or 'none'


def check_header(w, r, slot, station):
    """The header's index, times and author by the record's type (docs/protocol.md, Sealed records)."""
    p, start = w.c.plan, w.c.plan.start + slot * w.c.plan.slot
    own = [w.people.service_id]
    if r.type == SEED:
        want, where = (0, p.start, p.end - p.start), (-1, '')
    elif r.type == SLOT:
        want, where = (slot, start, p.slot), (slot, '')
    elif r.type in (NOTE, REPORT):
        at, number = r.index // 16 % 16, r.index % 16
        if at >= len(p.stations) or (number == 15) != (r.type == REPORT):
            raise Refused('a note or report is of no station, or bears a number of the other kind')
        where, want = (r.index // 256, p.stations[at]), (r.index, start, p.slot)
        e = w.filed_public.get(r.id)
        own = [e[1]] if e and (e[0]['slot'], e[0]['station']) == where and \
            e[0]['type'] == ('play-report' if r.type == REPORT else 'play-note') else []
    else:
        e = w.filed_hidden.get(r.id)
        if e is None or SEALED_BY_ENTRY.get(e[0]['type']) not in (r.type, None):
            raise Refused('a record was never entered in the ledger, or as something else')
        own, where, times = [e[1]], (-1, ''), (0, 0)
        if r.type == GUESS:
            times = (p.start + e[0]['slot'] * p.slot, p.slot)
        want = (e[0].get('sequence', r.index),) + times
    if (slot, station) != where or (r.index, r.start, r.duration) != want or r.author not in own:
        raise Refused('a %s record stands under a place, number, time or author that is not its own' % r.name)


def records(w):
    w.records, seen_r, filed = [], set(), set()
    w.filed_public = {bytes.fromhex(x.entry['record_id']): (x.entry, x.author, x.received) for x in w.leaves
                      if not x.hidden and x.entry['type'] in ('play-note', 'play-report') and
                      x.entry['campaign'] == w.c.id.hex()}
    last = -1
    for position, type_, slot, station, author, id_, b in w.bundle.rows['records']:
        r = Record(b)
        what = 'the record at position %d' % position
        if (r.type, r.author, r.id, r.campaign, r.epoch) != (type_, author, id_, w.c.id, 1) or r.type == CANARY:
            raise Refused('%s is not what the table says' % what)
        if r.r in seen_r:
            raise Refused('%s repeats the point R of another' % what)
        seen_r.add(r.r)
        check_header(w, r, slot, station)
        if (position == 0) != (r.type == SEED) or (1 <= position <= w.c.plan.n_slots) != (r.type == SLOT):
            raise Refused('%s is out of its order' % what)
        fixed_ids = [w.c.seed_entry] + w.c.slot_entries
        if position < len(fixed_ids):
            if r.id != fixed_ids[position][0] or (r.type == SLOT and (r.index != position - 1 or
                                                  r.auxiliary != fixed_ids[position][1][:32])):
                raise Refused('%s is not the one that was fixed at the sealing' % what)
        else:
            received = (w.filed_public.get(r.id) or w.filed_hidden.get(r.id))[2]
            if received < last or any(r.auxiliary):
                raise Refused('%s does not stand in order of receipt' % what)
            last = received
            filed.add(r.id)
        r.check_proof(w.c.founding)
        w.records.append(r)
    missing = (set(w.filed_public) | set(w.filed_hidden)) - filed
    if missing or len(w.records) < 1 + w.c.plan.n_slots:
        raise Refused('%d records that the ledger fixed are missing' % max(1, len(missing)))
    kinds = collections.Counter(r.name for r in w.records)
    return ', '.join('%d %s' % (n, t) for t, n in sorted(kinds.items()))


def opening(w):
    authority = w.c.opening.hash
    sets = []
    for opening_id, name, b in w.bundle.rows['shares']:
        entered = w.c.share_sets.get(name)
        if opening_id != authority[:16] or entered is None or entered[1:] != (len(w.records), H(b)) or \
           len(b) != Partial.SIZE * len(w.records):
            raise Refused("%s's partial openings are not those that were entered" % name)
        sets.append((entered[0], b))
    if len(sets) != len(w.c.share_sets) or len(sets) < w.c.group.k:
        raise Refused('partial openings are missing')
    w.content, hashes = [], []
    for n, r in enumerate(w.records):
        partials = []
        for i, b in sets:
            p = Partial(b[n * Partial.SIZE:(n + 1) * Partial.SIZE], w.c.group, r, RECORD_TYPES[r.type][2], authority)
            if p.i != i:
                raise Refused("a partial opening is another custodian's")
            partials.append(p)
        w.content.append(open_with(w.c.group, r, partials))
        hashes += [r.id, bytes(64) if w.content[-1] is None else H(w.content[-1])]
    if T('opening/plaintexts', *hashes) != w.c.opened:
        raise Refused('the contents are not those that were announced')
    return '%d partial openings by %d custodians, %d needed' % (len(sets) * len(w.records), len(sets), w.c.group.k)
