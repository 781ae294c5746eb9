"""What follows from the opened seed: the seed itself, every slot's secrets, the records sealed again, the recipes, and the
first variates of every slot. The physics of a draw is the other verifier's business and that of tests/outside/wave_*."""
import math
import struct

from custody import SEED, SLOT, seal_again
from ledger import gps_ns, strict_json
from primitives import H, Reader, T, decrypt, number, pad, point, encrypt, unpad
from ristretto import BASE, Refused, combine, encode

RECIPE_BYTES, RECIPE_CAPACITY, RECIPE_SIZE = 1024, 4096, 4188


def uniform(truth_bytes, m):
    x = int.from_bytes(T('draw/uniform', truth_bytes, m)[:8], 'little')
    return ((x >> 11) + 0.5) * 2.0**-53


def seed(w):
    doc = strict_json(w.content[0], 'the seed record')
    if set(doc) != {'version', 'sealing_attempt', 'first_slot', 'contributions'} or doc['version'] != 1:
        raise Refused('the seed record has other members than it should')
    given = [bytes.fromhex(x) for x in doc['contributions']]
    n = len(w.c.founders)
    if doc['sealing_attempt'] != w.c.sealing_attempt or doc['first_slot'] != 0 or len(given) != n + 1:
        raise Refused('the seed record is of another sealing')
    committed = [w.c.sealing['commitment']] + [w.c.draw_commitments[j] for j in range(1, n + 1)]
    for who, (x, commitment) in enumerate(zip(given, committed)):
        if len(x) != 32 or T('seal/contribution', w.c.ctx, w.c.sealing_attempt, who, x) != commitment:
            raise Refused('a contribution is not the committed one')
    w.seed = T('draw/seed', w.c.ctx, w.c.sealing_attempt, 0, *given)
    return '%d contributions against their commitments' % len(given)


def reseal(w):
    for position, (r, content) in enumerate(zip(w.records, w.content)):
        if r.type == SEED:
            scalar = number(T('draw/seed-record-scalar', w.seed))
        elif r.type == SLOT:
            scalar = number(T('slot/record-scalar', w.seed, r.index))
            slot_key = T('slot/key', w.seed, r.index)[:32]
            if T('slot/key-commitment', w.c.id, r.index, slot_key) != w.c.slot_entries[r.index][1]:
                raise Refused('the key of slot %d does not follow from the seed' % r.index)
        else:
            continue
        if seal_again(w.c.founding, r.header, scalar, content, r.capacity) != r.bytes:
            raise Refused('sealing the content of position %d again gives another record' % position)
    return '%d records made again byte for byte' % (1 + w.c.plan.n_slots)


def check_truth(w, slot, t, truth_bytes, empty):
    """Slot, drives and hashes of a truth record, and the variates that it states as they are."""
    p = w.c.plan
    start = p.start + slot * p.slot
    if (t['slot'], gps_ns(t['slot_start_gps']), gps_ns(t['slot_s'])) != (slot, start, p.slot):
        raise Refused('the truth of slot %d is about another slot' % slot)
    if [s['station'] for s in t['stations']] != p.stations:
        raise Refused('the truth of slot %d has other stations than the network' % slot)
    for s in t['stations']:
        if not start + p.guard <= gps_ns(s['drive_from_gps']) <= gps_ns(s['drive_to_gps']) <= start + p.slot - p.guard:
            raise Refused('a drive of slot %d does not keep its guard' % slot)
    live = uniform(truth_bytes, 0) < p.expected_live / p.n_slots and not empty
    if (t['assignment'], t['gain']) != (('live', 1) if live else ('null', 0)):
        raise Refused('whether slot %d is live does not follow from the seed' % slot)
    at, total = uniform(truth_bytes, 1) * sum(p.weights), 0.0
    for name, weight in zip(p.families, p.weights):
        total += weight
        if at < total:
            break
    if t['name'] != name:
        raise Refused('the family of slot %d does not follow from the seed' % slot)
    u = lambda m: uniform(truth_bytes, 64 * t['redraws'] + m)
    for key, want in (('right_ascension_rad', 2 * math.pi * u(3)), ('declination_rad', math.asin(2 * u(4) - 1)),
                      ('polarization_rad', math.pi * u(6))):
        if key not in p.set[name] and abs(t[key] - want) > 1e-6 * abs(want) + 1e-9:
            raise Refused('%s of slot %d does not follow from the seed' % (key, slot))
    return live


def text_field(b, what):
    text, _, rest = b.partition(b'\0')
    if any(rest) or len(text) == len(b):
        raise Refused('%s has an unclean name' % what)
    return text.decode('ascii')


def recipe_fields(plain, what):
    r = Reader(plain, what)
    r.expect(b'QBRP\1\0\1\0')
    f = {'campaign': r.take(16), 'slot': r.u64(), 'start': r.i64(), 'duration': r.i64(),
         'station': text_field(r.take(64), what)}
    f['rate'], f['gain'] = struct.unpack('<dd', r.take(16))
    f['from'], f['to'] = r.i64(), r.i64()
    f['family'], f['model'] = text_field(r.take(32), what), text_field(r.take(32), what)
    f['arrival'] = r.i64()
    f['place'] = struct.unpack('<dddd', r.take(32))
    n = r.u32()
    r.zeros(4)
    f['parameters'] = {}
    for _ in range(n):
        key = text_field(r.take(40), what)
        f['parameters'][key] = struct.unpack('<d', r.take(8))[0]
    r.zeros(48 * (16 - n))
    r.end()
    return f


def check_recipe(w, slot, station, place, prekey, wrapped, truth):
    """The layers are opened with the keys that follow from the seed, compared with the truth, and closed again."""
    what = 'the recipe of slot %d, station %s' % (slot, w.c.plan.stations[station])
    where = slot, station, place
    slot_key = T('slot/key', w.seed, slot)[:32]
    scalar = number(T('slot/recipe-scalar', w.seed, *where))
    r_bytes, z = encode(BASE.times(scalar)), encode(combine([(scalar, point(prekey))]))
    associated = w.c.ctx + b''.join(x.to_bytes(8, 'little') for x in where)
    head = b'QBY1' + place.to_bytes(4, 'little') + slot.to_bytes(8, 'little') + station.to_bytes(8, 'little')
    outer, inner = T('recipe/outer-key', w.c.ctx, *where, slot_key), T('recipe/key', w.c.ctx, *where, prekey, r_bytes, z)
    if len(wrapped) != RECIPE_SIZE or wrapped[:len(head)] != head:
        raise Refused('%s is not framed as it should be' % what)
    middle = decrypt(outer, wrapped[len(head):], associated, what)
    if middle[:32] != r_bytes:
        raise Refused('%s does not have the point that follows from the seed' % what)
    plain = unpad(decrypt(inner, middle[32:], associated, what), what)
    again = encrypt(inner, pad(plain, RECIPE_CAPACITY), associated)
    if len(plain) != RECIPE_BYTES or head + encrypt(outer, r_bytes + again, associated) != wrapped:
        raise Refused('%s is not the one that is made again' % what)
    f, s = recipe_fields(plain, what), truth['stations'][station]
    want = {'campaign': w.c.id, 'slot': slot, 'start': w.c.plan.start + slot * w.c.plan.slot, 'duration': w.c.plan.slot,
            'station': s['station'], 'rate': w.c.plan.rate_hz[station], 'gain': truth['gain'],
            'from': gps_ns(s['drive_from_gps']), 'to': gps_ns(s['drive_to_gps']), 'family': truth['family'],
            'model': truth['model'], 'arrival': gps_ns(truth['arrival_gps']),
            'place': tuple(truth[k] for k in ('right_ascension_rad', 'declination_rad', 'polarization_rad',
                                              'lowest_frequency_hz')),
            'parameters': truth['parameters']}
    for k in want:
        if f[k] != want[k]:
            raise Refused('%s says another %s than the truth' % (what, k))


def recipes(w):
    plan = w.c.plan
    w.given = {(slot, station, place): b for slot, station, place, b in w.bundle.rows['recipes']}
    points = {(station, place): b for station, place, b in w.bundle.rows['prekeys']}
    if {k: H(b) for k, b in points.items()} != w.c.prekeys or any(len(b) != 32 * plan.n_slots for b in points.values()):
        raise Refused('the one-time keys are not those that the drivers left')
    order = [(n, s, q) for n in range(plan.n_slots) for s in plan.stations for q in (0, 1) if (s, q) in points]
    if set(order) != set(w.given) or T('recipe/all', *[w.given[k] for k in order]) != w.c.sealed:
        raise Refused('the recipes are not those that were sealed')
    empty = uniform(T('draw/campaign', w.seed)[:32], 0) < plan.empty_chance
    live = 0
    for r, content in zip(w.records, w.content):
        if r.type != SLOT:
            continue
        n = r.index
        truth = strict_json(content, 'the truth of slot %d' % n)
        live += check_truth(w, n, truth, T('slot/truth', w.seed, n)[:32], empty)
        for i, name in enumerate(plan.stations):
            for place in (0, 1):
                given = w.given.get((n, name, place))
                hash_ = bytes.fromhex(truth['stations'][i]['recipe_hashes'][place])
                if hash_ != (bytes(64) if given is None else T('recipe/hash', given)):
                    raise Refused('a recipe of slot %d is not the one in the truth' % n)
                if given is not None:
                    check_recipe(w, n, i, place, points[name, place][32 * n:32 * n + 32], given, truth)
    return '%d recipes; %d slots live, %d null%s' % (len(w.given), live, plan.n_slots - live,
                                                     ', empty by design' if empty else '')
