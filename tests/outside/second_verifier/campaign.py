"""One campaign as its entries tell it: the plan, the life from drafted to opened in its order, who may say what. A new
entry type gets a method on_<type>; a type without one is counted in `unjudged`, and the checklist names it."""
import collections

import yaml

from custody import REHEARSAL, Deal, Partial, generate, keygen_context, open_with
from holders import Holder, Later, unbase64
from ledger import gps_ns, utc_ns
from primitives import T, check_signed
from ristretto import Refused

STATES = ('drafted', 'certified', 'rehearsed', 'sealing', 'sealed', 'closed', 'opened')
SILENCE_NS = 72 * 3600 * 10**9
UNITS = {'s': 1, 'min': 60, 'h': 3600, 'd': 86400}


def decimal_ns(number, unit):
    whole, _, part = number.partition('.')
    return (int(whole) * 10**9 + int(part.ljust(9, '0') or 0)) * UNITS[unit]


def duration_ns(text):
    number, unit = str(text).split()
    return decimal_ns(number, unit)


def instant_ns(text):
    return utc_ns(text) if isinstance(text, str) and 'T' in text else gps_ns(str(text))


class TextLoader(yaml.SafeLoader):
    """YAML without its own ideas about times."""


TextLoader.yaml_implicit_resolvers = {k: [x for x in v if x[0] != 'tag:yaml.org,2002:timestamp']
                                      for k, v in yaml.SafeLoader.yaml_implicit_resolvers.items()}


class Plan:
    """What the verifier needs of the plan (docs/plan.md)."""

    def __init__(self, text, files):
        p = yaml.load(text, TextLoader)
        network = yaml.load(files[p['network']], TextLoader)
        parties = p['parties']
        self.name = p['campaign']
        self.start, self.end = instant_ns(p['starts']), instant_ns(p['ends'])
        self.slot, self.lead = duration_ns(p['slot']), duration_ns(p.get('lead', '120 s'))
        self.guard = duration_ns(p['drills']['guard'])
        self.n_slots = (self.end - self.start) // self.slot
        self.stations = [s['name'] for s in network['stations']]
        self.rate_hz = [float(s['actuator']['rate_hz']) for s in network['stations']]
        self.custodians, self.k = parties['custodians'], parties['custodians_needed']
        families = p['drills']['families']
        self.families = [f['name'] for f in families]
        self.weights = [float(f.get('weight', 1)) for f in families]
        self.set = {f['name']: {k for k in f if k.endswith('_rad')} for f in families}
        self.expected_live, self.empty_chance = float(p['drills']['expected_live']), float(p['drills'].get('empty_chance', 0.1))
        host = p.get('sealer_host')
        self.sealer_host = bytes.fromhex(host) if host else None
        self.pipelines, self.drivers, self.spares = parties['pipelines'], parties['drivers'], parties.get('spare_drivers') or {}
        self.duty = {'custodian': list(self.custodians), 'reviewer': parties['reviewers'],
                     'operator': parties['operators'], 'liaison': parties.get('liaisons', []),
                     'driver': list(self.drivers.values()) + list(self.spares.values()), 'analyst': list(self.pipelines.values())}
        if (self.end - self.start) % self.slot or not 2 <= self.k < len(self.custodians) <= 32:
            raise Refused('the plan breaks its own rules')


class Campaign(Later):
    def __init__(self, leaf, e, people):
        super().__init__()
        self.id = T('campaign/id', leaf.body)[:16]
        self.people, self.plan, self.state = people, Plan(e['plan'], e['files']), 'drafted'
        self.holders = [Holder(people.by_name[n]) for n in self.plan.custodians]
        self.founders, self.attempt, self.sealing_attempt, self.since = None, 1, 1, leaf.received
        self.group = self.founding = self.ctx = None
        self.commitments, self.contributed = {}, set()
        self.canary = self.seed_entry = self.opening = self.closing = self.opened = self.summary = None
        self.canaries, self.slot_entries, self.freezes, self.prekeys = 0, [], {}, {}
        self.sealing = self.sealed = None
        self.controls = {'hold': {}, 'stop': {}}
        self.filed, self.share_sets, self.failures, self.judged = [], {}, [], collections.Counter()
        self.unjudged = collections.Counter()
        self.last_leaf = None
        owners = {}
        for duty, names in self.plan.duty.items():
            for n in names:
                party = people.by_name.get(n)
                if party is None or party.role != duty:
                    raise Refused("the plan names '%s' as %s, who is not enrolled as that" % (n, duty))
                if owners.setdefault(party.person, duty) != duty:
                    raise Refused("'%s' is on two sides of the campaign" % n)

    # ---- common rules ----

    def takes_part(self, party):
        names = self.plan.duty.get(party.role, [])
        if party.role == 'custodian' and self.group is not None:
            coming = self.resharing.members if self.resharing else []
            names = {h.party.name for h in self.holders + coming} | self.former
        return party.role == 'administrator' or party.name in names

    def need(self, good, leaf, what):
        if not good:
            raise Refused('leaf %d: %s' % (leaf.seq, what))

    def at_least(self, state):
        return STATES.index(self.state) >= STATES.index(state)

    def apply(self, leaf, e, party):
        self.need(party is None or self.takes_part(party), leaf, "'%s' has no part in the campaign" % e['by'])
        handler = getattr(self, 'on_' + e['type'].replace('-', '_'), None)
        if handler is None:
            self.unjudged[e['type']] += 1
        else:
            handler(leaf, e)
            self.judged[e['type']] += 1
        self.last_leaf = (leaf.seq, e['type'])

    def place_of(self, name):
        names = [h.party.name for h in self.holders]
        return names.index(name) if name in names else -1

    def holder(self, leaf, e):
        i = self.place_of(e['by'])
        self.need(i >= 0, leaf, 'its custodian holds no share')
        return i, self.holders[i]

    # ---- the key ----

    def context(self):
        return keygen_context(self.id, 1, self.attempt, self.plan.k,
                              [(h.party.signing, h.party.exchange) for h in self.holders])

    def next_attempt(self, out, leaf, why):
        self.failures.append((self.attempt, out, why))
        self.holders = [Holder(h.party) for h in self.holders if h.party.name != out]
        self.attempt, self.since, self.group, self.ctx = self.attempt + 1, leaf.received, None, None
        self.commitments = {}

    def on_deal(self, leaf, e):
        i, h = self.holder(leaf, e)
        n = len(self.holders)
        self.need(self.state == 'drafted' and e['attempt'] == self.attempt and h.deal is None and n > self.plan.k, leaf,
                  'no deal was due')
        ctx = self.context()
        self.need(self.ctx in (None, ctx), leaf, 'the custodians\' keys changed during the key generation')
        self.ctx = ctx
        h.deal = Deal(unbase64(e['message'], 'a deal'), 'keygen', ctx, i + 1, n, self.plan.k, h.party.signing)
        self.commitments[i + 1] = bytes.fromhex(e['contribution_commitment'])
        if all(x.deal for x in self.holders):
            self.group = generate(ctx, [x.deal for x in self.holders], self.plan.k)

    def on_keygen_failed(self, leaf, e):
        self.holder(leaf, e)
        self.need(self.state == 'drafted' and e['attempt'] == self.attempt, leaf, 'no attempt to abandon')
        self.next_attempt(None, leaf, 'abandoned')

    def on_complaint(self, leaf, e):
        i, h = self.holder(leaf, e)
        j = self.place_of(e['accused'])
        self.need(self.state == 'drafted' and e['attempt'] == self.attempt and j >= 0 and j != i and
                  self.holders[j].deal is not None, leaf, 'a complaint about no deal')
        guilty = self.holders[j].deal.complaint_is_true(unbase64(e['complaint'], 'a complaint'), i + 1,
                                                        h.party.exchange)
        self.next_attempt(e['accused'] if guilty else e['by'], leaf, 'bad share' if guilty else 'false complaint')

    def on_exclusion(self, leaf, e):
        j = self.place_of(e['name'])
        self.need(self.state == 'drafted' and j >= 0 and leaf.received - self.since >= SILENCE_NS, leaf,
                  'nobody could be left out')
        others = all(h.deal for i, h in enumerate(self.holders) if i != j)
        silent = self.holders[j].deal is None or (self.group is not None and not self.holders[j].certified)
        self.need(others and silent, leaf, 'somebody was left out who had not kept the others waiting')
        self.next_attempt(e['name'], leaf, 'silent')

    def on_certify(self, leaf, e):
        _, h = self.holder(leaf, e)
        self.need(self.state == 'drafted' and self.group is not None and e['attempt'] == self.attempt, leaf,
                  'a certificate before the key')
        self.need(bytes.fromhex(e['certificate']) == self.group.certificate, leaf,
                  'the certificate is of another key')
        check_signed(h.party.signing, self.group.certificate, bytes.fromhex(e['certificate_signature']),
                     "the custodian's")
        h.certified = True

    def on_canary(self, leaf, e):
        if self.state == 'drafted':
            self.need(self.group is not None and all(h.certified for h in self.holders), leaf,
                      'a canary before all had certified')
            self.state, self.founding = 'certified', self.group
            self.founders = [h.party.name for h in self.holders]
        for h in self.holders:
            h.rehearsal = None
        self.canary = self.new_canary(leaf, e)

    def on_rehearsal_request(self, leaf, e):
        self.holder(leaf, e)
        self.need(self.at_least('sealed'), leaf, 'a rehearsal was asked for too early')

    def on_rehearsal(self, leaf, e):
        i, h = self.holder(leaf, e)
        self.need(self.canary is not None and h.rehearsal is None, leaf, 'no canary to open')
        record, authority = self.canary
        self.need(bytes.fromhex(e['record_id']) == record.id, leaf, 'another canary was opened')
        h.rehearsal = Partial(unbase64(e['share'], 'a rehearsal'), self.group, record, REHEARSAL, authority)
        self.need(h.rehearsal.i == i + 1, leaf, "a rehearsal is another custodian's")

    def on_rehearsed(self, leaf, e):
        self.need(self.canary is not None and all(h.rehearsal for h in self.holders), leaf,
                  'a rehearsal was called done that was not')
        content = open_with(self.group, self.canary[0], [h.rehearsal for h in self.holders])
        self.need(content is not None and len(content) == 32, leaf, 'the canary does not hold 32 bytes')
        if self.state == 'certified':
            self.state = 'rehearsed'

    # ---- the sealing ----

    def on_prekeys(self, leaf, e):
        self.need((self.plan.drivers, self.plan.spares)[e['place']].get(e['station']) == e['by'] and e['place'] in (0, 1) and
                  e['count'] == self.plan.n_slots, leaf, 'one-time keys of another station')
        self.need(not self.at_least('sealing') and (e['station'], e['place']) not in self.prekeys, leaf,
                  'one-time keys too late or twice')
        self.prekeys[e['station'], e['place']] = bytes.fromhex(e['points_hash'])

    def on_seal_request(self, leaf, e):
        self.need(self.state == 'rehearsed', leaf, 'a sealing before the rehearsal')
        self.need(all((s, 0) in self.prekeys for s in self.plan.stations), leaf, 'a sealing without all one-time keys')

    def on_sealing(self, leaf, e):
        self.need(self.state == 'rehearsed' and e['sealing_attempt'] == self.sealing_attempt, leaf,
                  'a sealing out of turn')
        self.need(sorted(self.commitments) == list(range(1, len(self.holders) + 1)), leaf,
                  'a sealer started before all had committed to their contributions')
        self.state, self.contributed, self.draw_commitments = 'sealing', set(), dict(self.commitments)
        self.sealing = {'key': bytes.fromhex(e['sealer_key']), 'commitment': bytes.fromhex(e['service_commitment'])}
        if self.plan.sealer_host:
            check_signed(self.plan.sealer_host, T('seal/key', self.ctx, self.sealing_attempt, self.sealing['key']),
                         bytes.fromhex(e['host_signature']), "the sealer host's")

    def on_contribution(self, leaf, e):
        i, _ = self.holder(leaf, e)
        self.need(self.state == 'sealing' and e['sealing_attempt'] == self.sealing_attempt and
                  i not in self.contributed, leaf, 'a contribution out of turn')
        self.contributed.add(i)

    def on_contribution_commitment(self, leaf, e):
        i, _ = self.holder(leaf, e)
        self.need(self.state == 'rehearsed' and e['sealing_attempt'] == self.sealing_attempt and
                  i + 1 not in self.commitments, leaf, 'a commitment out of turn')
        self.commitments[i + 1] = bytes.fromhex(e['contribution_commitment'])

    def on_sealing_failed(self, leaf, e):
        self.need(self.state == 'sealing' and e['sealing_attempt'] == self.sealing_attempt, leaf, 'no sealing to end')
        self.state, self.sealing_attempt, self.commitments = 'rehearsed', self.sealing_attempt + 1, {}
        self.seed_entry, self.slot_entries = None, []

    def on_record(self, leaf, e):
        self.need(self.state == 'sealing' and len(self.contributed) == len(self.holders) and
                  e['sealing_attempt'] == self.sealing_attempt, leaf, 'a record before all had contributed')
        pair = bytes.fromhex(e['record_id']), bytes.fromhex(e['slot_key_commitment'])
        if e['slot'] == -1:
            self.need(self.seed_entry is None and not any(pair[1]), leaf, 'a second seed record')
            self.seed_entry = pair
        else:
            self.need(self.seed_entry is not None and e['slot'] == len(self.slot_entries), leaf,
                      'a record out of its order')
            self.slot_entries.append(pair)

    def on_sealed(self, leaf, e):
        self.need(self.state == 'sealing' and e['sealing_attempt'] == self.sealing_attempt and
                  e['slots'] == self.plan.n_slots == len(self.slot_entries), leaf, 'sealed without all records')
        self.state, self.sealed = 'sealed', bytes.fromhex(e['recipes_hash'])
        if self.plan.sealer_host:
            said = [x for pair in [self.seed_entry] + self.slot_entries for x in pair]
            check_signed(self.plan.sealer_host, T('seal/output', self.ctx, self.sealing_attempt, self.sealing['key'],
                                                  *said, self.sealed), bytes.fromhex(e['host_signature']),
                         "the sealer host's")

    # ---- the run ----

    def on_freeze(self, leaf, e):
        start = self.plan.start + e['slot'] * self.plan.slot
        self.need(self.state == 'sealed' and 0 <= e['slot'] < self.plan.n_slots and e['slot'] not in self.freezes, leaf,
                  'a slot was frozen twice or out of turn')
        self.need(leaf.received >= start - self.plan.lead and set(e['going']) <= set(e['ready']) <=
                  set(self.plan.stations), leaf, 'a slot was frozen too early, or names others than the stations')
        self.freezes[e['slot']] = e['going']

    def _control(self, leaf, e, kind):
        self.need(e['station'] in self.plan.stations + ['all'], leaf, 'no such station')
        self.controls[kind][leaf.seq] = True

    def _lift(self, leaf, e, kind):
        self.need(self.controls[kind].pop(e[kind], False), leaf, 'nothing to lift')

    def on_hold(self, leaf, e):
        self._control(leaf, e, 'hold')

    def on_stop(self, leaf, e):
        self._control(leaf, e, 'stop')

    def on_hold_lift(self, leaf, e):
        self._lift(leaf, e, 'hold')

    def on_stop_lift(self, leaf, e):
        self._lift(leaf, e, 'stop')

    def on_segments(self, leaf, e):
        self.need(e['station'] in self.plan.stations, leaf, 'no such station')

    on_witness_statement = on_segments

    def on_play_note(self, leaf, e):
        self.need(self.at_least('sealed') and e['by'] in (self.plan.drivers.get(e['station']), self.plan.spares.get(e['station'])) and
                  0 <= e['slot'] < self.plan.n_slots, leaf, 'a note or report of another station or of no slot')
        self.filed.append(bytes.fromhex(e['record_id']))

    on_play_report = on_play_note

    # ---- the end ----

    def on_hidden_summary(self, leaf, e):
        self.need(self.state == 'sealed' and self.summary is None, leaf, 'hidden entries were fixed out of turn')
        self.summary = e['count'], bytes.fromhex(e['commitments_hash'])

    def on_closing(self, leaf, e):
        self.need(self.state == 'sealed' and self.last_leaf == (leaf.seq - 1, 'hidden-summary'), leaf,
                  'closed before the sealing, or without fixing the hidden entries right before')
        self.state, self.closing = 'closed', leaf

    def on_early_closing(self, leaf, e):
        self.need(e['why'] != '-', leaf, 'ended before its time without a reason')
        self.on_closing(leaf, e)

    def on_abandonment(self, leaf, e):
        self.need(e['why'] != '-' and self.state not in ('closed', 'opened', 'abandoned'), leaf,
                  'abandoned without a reason, or after the end')
        if self.state == 'sealed':
            self.need(e['by'] in self.plan.duty['reviewer'], leaf, 'what is sealed is a reviewer\'s to abandon')
            self.on_closing(leaf, e)
        else:
            self.state = 'abandoned'

    def on_opening_request(self, leaf, e):
        self.need(self.state == 'closed', leaf, 'an opening was asked for before the closing')
        self.opening, self.share_sets = leaf, {}
        if self.resharing is not None:
            self.end_resharing()

    def on_opening_shares(self, leaf, e):
        i, _ = self.holder(leaf, e)
        self.need(self.state == 'closed' and self.opening is not None and
                  bytes.fromhex(e['opening']) == self.opening.hash[:16] and e['by'] not in self.share_sets, leaf,
                  'partial openings that nobody asked for')
        self.share_sets[e['by']] = i + 1, e['count'], bytes.fromhex(e['shares_hash'])

    def on_opened(self, leaf, e):
        self.need(self.state == 'closed' and self.opening is not None and len(self.share_sets) >= self.group.k and
                  bytes.fromhex(e['opening']) == self.opening.hash[:16], leaf, 'opened without enough custodians')
        self.state, self.opened = 'opened', bytes.fromhex(e['plaintexts_hash'])

    def on_audit_signature(self, leaf, e):
        self.need(self.state == 'opened', leaf, 'an audit before the opening')
