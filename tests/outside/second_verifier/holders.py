"""Who holds the shares later: resharing to a new set, and repair of one share (docs/protocol.md, Who holds the shares, over time).
Part of Campaign, apart for its length."""
import base64
import binascii

from custody import CANARY, REHEARSAL, Deal, Group, Partial, Record, open_with
from primitives import Reader, T, check_signed, lagrange_at_zero, point
from ristretto import ORDER, Refused, combine, encode, is_zero


def unbase64(text, what):
    try:
        return base64.b64decode(text, validate=True)
    except binascii.Error:
        raise Refused('%s is not base64' % what) from None


class Holder:
    """A custodian in office in the present attempt."""

    def __init__(self, party):
        self.party, self.deal, self.certified, self.rehearsal = party, None, False, None


class Resharing:
    """One attempt: `dealers` are old numbers in ascending order, `members` the new set."""

    def __init__(self, k, members, dealers, ctx):
        self.k, self.members, self.dealers, self.ctx = k, members, dealers, ctx
        self.deals, self.group, self.canary = {}, None, None


class Later:
    """Handlers of entries after the sealing that concern the shares."""

    def __init__(self):
        self.resharing, self.reshare_attempt, self.epoch = None, 1, 1
        self.repairing, self.repair_attempt, self.former, self.outgoing = None, 1, set(), []

    def member(self, leaf, e):
        self.need(self.resharing is not None and e['attempt'] == self.reshare_attempt, leaf, 'no resharing runs')
        for j, m in enumerate(self.resharing.members):
            if m.party.name == e['by']:
                return j, m
        raise Refused('leaf %d: its custodian is not of the new set' % leaf.seq)

    def on_reshare_request(self, leaf, e):
        self.need(self.state in ('sealed', 'closed') and self.opening is None and self.resharing is None and
                  self.repairing is None, leaf, 'a resharing out of turn')
        members = [Holder(self.people.by_name[n]) for n in e['names']]
        dealers = sorted(self.place_of(n) + 1 for n in e['dealers'])
        self.need(len(set(e['names'])) == len(e['names']) and all(m.party.role == 'custodian' and not m.party.retired
                                                                  for m in members), leaf, 'a new set of others')
        self.need(len(dealers) == len(set(dealers)) == self.group.k and dealers[0] > 0 and
                  2 <= e['needed'] < len(members), leaf, 'a resharing by too few or for too few')
        fields = [len(dealers)]
        for i in dealers:
            fields += [i, self.holders[i - 1].party.signing, self.holders[i - 1].party.exchange]
        fields += [len(members), e['needed']] + [x for m in members for x in (m.party.signing, m.party.exchange)]
        ctx = T('reshare/context', self.id, self.epoch + 1, self.reshare_attempt, self.group.th, self.group.s, *fields)
        self.resharing = Resharing(e['needed'], members, dealers, ctx)

    def on_reshare_deal(self, leaf, e):
        i, h = self.holder(leaf, e)
        r = self.resharing
        self.need(r is not None and e['attempt'] == self.reshare_attempt and i + 1 in r.dealers and
                  i + 1 not in r.deals, leaf, 'no deal was due')
        d = Deal(unbase64(e['message'], 'a deal'), 'reshare', r.ctx, i + 1, len(r.members), r.k, h.party.signing)
        self.need(d.c_bytes[0] == self.group.y[i], leaf, "a dealer deals something else than the present share")
        r.deals[i + 1] = d
        if len(r.deals) == len(r.dealers):
            deals = [r.deals[i] for i in r.dealers]
            a = [combine([(lagrange_at_zero(d.sender, r.dealers), d.c[m]) for d in deals]) for m in range(r.k)]
            self.need(encode(a[0]) == self.group.s and not is_zero(a[-1]), leaf, 'the new shares are of another key')
            th = T('reshare/transcript', r.ctx, *[x for d in deals for x in (d.hash, d.signature)], self.group.s)
            r.group = Group(self.group.s, th, a, len(r.members), r.k, self.founding)

    def on_reshare_complaint(self, leaf, e):
        j, m = self.member(leaf, e)
        i = self.place_of(e['accused']) + 1
        self.need(i in self.resharing.deals, leaf, 'a complaint about no deal')
        self.resharing.deals[i].complaint_is_true(unbase64(e['complaint'], 'a complaint'), j + 1, m.party.exchange)
        self.end_resharing()

    def end_resharing(self):
        self.resharing, self.reshare_attempt = None, self.reshare_attempt + 1

    def on_reshare_failed(self, leaf, e):
        self.need(self.resharing is not None and e['attempt'] == self.reshare_attempt, leaf, 'no resharing to end')
        self.end_resharing()

    def on_reshare_certify(self, leaf, e):
        _, m = self.member(leaf, e)
        g = self.resharing.group
        self.need(g is not None and bytes.fromhex(e['certificate']) == g.certificate, leaf,
                  'a certificate of another key, or before it')
        check_signed(m.party.signing, g.certificate, bytes.fromhex(e['certificate_signature']), "the custodian's")
        m.certified = True

    def on_reshare_canary(self, leaf, e):
        r = self.resharing
        self.need(r is not None and r.canary is None and all(m.certified for m in r.members), leaf,
                  'a canary before all had certified')
        r.canary = self.new_canary(leaf, e)

    def on_reshare_rehearsal(self, leaf, e):
        j, m = self.member(leaf, e)
        r = self.resharing
        self.need(r.canary is not None and m.rehearsal is None and bytes.fromhex(e['record_id']) == r.canary[0].id, leaf,
                  'no canary to open')
        m.rehearsal = Partial(unbase64(e['share'], 'a rehearsal'), r.group, r.canary[0], REHEARSAL, r.canary[1])
        self.need(m.rehearsal.i == j + 1, leaf, "a rehearsal is another custodian's")

    def on_reshared(self, leaf, e):
        r = self.resharing
        self.need(r is not None and e['attempt'] == self.reshare_attempt and r.canary is not None and
                  all(m.rehearsal for m in r.members), leaf, 'a new set took office before it had opened a canary')
        open_with(r.group, r.canary[0], [m.rehearsal for m in r.members])
        names = {m.party.name for m in r.members}
        self.former |= {h.party.name for h in self.holders} - names
        self.former -= names
        self.holders, self.group, self.canary, self.epoch = r.members, r.group, r.canary, self.epoch + 1
        self.end_resharing()

    def on_share_erased(self, leaf, e):
        self.need(e['by'] in self.former or self.place_of(e['by']) >= 0, leaf, 'an erasure by somebody without a share')

    # ---- canaries, also of the present set ----

    def new_canary(self, leaf, e):
        record = Record(unbase64(e['record'], 'a canary'))
        self.need(record.type == CANARY and record.campaign == self.id and record.epoch == 1 and
                  record.author == self.people.service_id and record.index == self.attempt + self.canaries, leaf,
                  'a canary with a header of something else')
        record.check_proof(self.founding)
        self.canaries += 1
        return record, leaf.hash

    # ---- repair ----

    def on_repair_request(self, leaf, e):
        lost, h = self.holder(leaf, e)
        helpers = sorted(self.place_of(n) + 1 for n in e['helpers'])
        self.need(self.group is not None and self.state not in ('drafted', 'opened') and self.repairing is None and
                  self.resharing is None and len(set(helpers)) == len(helpers) == self.group.k and helpers[0] > 0 and
                  lost + 1 not in helpers, leaf, 'a repair out of turn')
        fields = [x for i in helpers for x in (i, self.holders[i - 1].party.signing, self.holders[i - 1].party.exchange)]
        ctx = T('repair/context', self.id, self.epoch, self.repair_attempt, self.group.th, lost + 1, h.party.signing,
                h.party.exchange, len(helpers), *fields)
        self.repairing = {'lost': lost + 1, 'helpers': helpers, 'ctx': ctx, 'splits': {}, 'sums': set()}

    def helper(self, leaf, e):
        i, h = self.holder(leaf, e)
        p = self.repairing
        self.need(p is not None and e['attempt'] == self.repair_attempt and i + 1 in p['helpers'], leaf, 'no repair runs')
        return i + 1, h, p

    def on_repair_split(self, leaf, e):
        i, h, p = self.helper(leaf, e)
        k = len(p['helpers'])
        r = Reader(unbase64(e['message'], 'a repair message'), 'a repair message')
        r.expect(b'QBF1' + i.to_bytes(4, 'little') + k.to_bytes(4, 'little') + p['ctx'])
        d, e_point = [r.take(32) for _ in range(k)], r.take(32)
        ciphers, signature = [r.take(48) for _ in range(k)], r.take(64)
        r.end()
        hash_ = T('repair/split', p['ctx'], i, k, *d, e_point, *ciphers)
        check_signed(h.party.signing, hash_, signature, "the helper's")
        weight = 1
        for m in p['helpers']:
            if m != i:
                weight = weight * (m - p['lost']) * pow(m - i, ORDER - 2, ORDER) % ORDER
        self.need(i not in p['splits'] and encode(combine([(1, point(x)) for x in d])) ==
                  encode(combine([(weight, point(self.group.y[i - 1]))])), leaf, "a helper split something else")
        p['splits'][i] = hash_, signature

    def on_repair_sum(self, leaf, e):
        i, h, p = self.helper(leaf, e)
        self.need(len(p['splits']) == len(p['helpers']) and i not in p['sums'], leaf, 'a sum before all splits')
        splits = T('repair/splits', p['ctx'], *[x for j in p['helpers'] for x in p['splits'][j]])
        r = Reader(unbase64(e['message'], 'a repair message'), 'a repair message')
        r.expect(b'QBG1' + i.to_bytes(4, 'little') + splits)
        e_point, cipher, signature = r.take(32), r.take(48), r.take(64)
        r.end()
        check_signed(h.party.signing, T('repair/sum', splits, i, e_point, cipher), signature, "the helper's")
        p['sums'].add(i)

    def on_repaired(self, leaf, e):
        p = self.repairing
        self.need(p is not None and e['attempt'] == self.repair_attempt and self.place_of(e['by']) + 1 == p['lost'] and
                  len(p['sums']) == len(p['helpers']), leaf, 'repaired before all had helped')
        self.repairing, self.repair_attempt = None, self.repair_attempt + 1

    def on_repair_failed(self, leaf, e):
        self.need(self.repairing is not None and e['attempt'] == self.repair_attempt, leaf, 'no repair to end')
        self.repairing, self.repair_attempt = None, self.repair_attempt + 1
