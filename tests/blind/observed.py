"""From what one campaign showed to a table: one row a slot, one column an observable. Nothing here knows the truth but
the last lines of rows(); columns are chosen without a look at what they might mean, since a leak is where nobody
expected it."""
import base64, re

import numpy as np

STATIONS = ('tarn', 'heron')
RECORDS = (1, 4, 5)  # types of records that belong to a slot: its own, play reports, play notes
RECORD = 7  # a frame of the sealer with one slot's output
AHEAD = 8   # slots whose recipes a driver fetches in advance


class Table:
    def __init__(self, slots):
        self.slots, self.columns = slots, {}

    def put(self, name, slot, value):
        if 0 <= slot < self.slots:
            self.columns.setdefault(name, np.full(self.slots, np.nan))[slot] = value

    def add(self, name, slot, value):
        if 0 <= slot < self.slots:
            column = self.columns.setdefault(name, np.zeros(self.slots))
            column[slot] += value


def kind_of(event):
    """(kind, slot) of a driver's request that belongs to a slot; polls of clock and slot have none."""
    m = re.search(r'/recipes/(\d+)(/key|/notes|/report)?$', event['path'])
    if m is None:
        return None, -1
    kind = {'/key': 'key', '/notes': 'note', '/report': 'report', None: 'fetch'}[m.group(2)]
    return kind, int(m.group(1)) - (AHEAD if kind == 'fetch' else 0)


def number(times, name, slot):
    """A slot has several notes: which one this is."""
    times[name, slot] = times.get((name, slot), -1) + 1
    return '.%d' % times[name, slot]


def exchange(t, name, slot, e):
    t.put(name + '.request_bytes', slot, e['request_bytes'])
    t.put(name + '.answer_bytes', slot, e['answer_bytes'])
    t.put(name + '.status', slot, e['status'])
    t.put(name + '.wait', slot, e['first'] - e['at'])
    t.put(name + '.whole', slot, e['end'] - e['at'])
    t.put(name + '.service_cpu', slot, e['service_cpu_end'] - e['service_cpu'])


def gap(t, name, slot, before, after):
    """What a driver did between the end of one exchange and the start of the next."""
    t.put(name + '.gap', slot, after['at'] - before['end'])
    t.put(name + '.cpu', slot, after['cpu'] - before['cpu'])
    t.put(name + '.faults', slot, after['faults'] - before['faults'])


def traffic(t, events):
    merged = {}
    for station in STATIONS:
        own = sorted((e for e in events if e['who'] == station), key=lambda e: e['at'])
        window, notes = {}, {}
        for i, e in enumerate(own):
            kind, slot = kind_of(e)
            if kind is None or slot < 0 or e['status'] >= 400:
                continue
            if kind == 'note':
                kind += number(notes, kind, slot)
            name = station + '.' + kind
            exchange(t, name, slot, e)
            if i > 0:
                gap(t, name + '.before', slot, own[i - 1], e)
            if i + 1 < len(own):
                gap(t, name + '.after', slot, e, own[i + 1])
            merged.setdefault(slot, []).append((e['at'], station, kind))
            window.setdefault(slot, {})[kind] = i
        for slot, at in window.items():
            if 'key' not in at or 'report' not in at:
                continue
            part = own[at['key']:at['report'] + 1]
            t.put(station + '.slot.exchanges', slot, len(part))
            t.put(station + '.slot.up', slot, sum(e['request_bytes'] for e in part))
            t.put(station + '.slot.down', slot, sum(e['answer_bytes'] for e in part))
            gap(t, station + '.slot', slot, part[0], part[-1])
    for slot, list_ in merged.items():
        for rank, (_, station, kind) in enumerate(sorted(list_)):
            t.put('order.%s.%s' % (station, kind), slot, rank)


def sealer(t, frames):
    last = None
    n = -1  # the seed's record comes first
    for f in frames:
        if f['kind'] == RECORD:
            t.put('sealer.bytes', n, f['bytes'])
            t.put('sealer.gap', n, f['end'] - last['end'])
            if f['cpu'] > 0:  # else it has ended
                t.put('sealer.cpu', n, f['cpu'] - last['cpu'])
                t.put('sealer.faults', n, f['faults'] - last['faults'])
            n += 1
        last = f


def place_of(path):
    parts = path.split('/')
    return parts[0] + '.' + parts[1] if len(parts) > 1 else parts[0]


def between(t, looks):
    """Files and processes between two looks. The look before a slot's end lies between its note and its report, so that
    each slot is part of two stretches."""
    for i in range(len(looks) - 1):
        a, b = looks[i], looks[i + 1]
        for where, slot in (('ending', i), ('starting', i + 1)):
            newest = {}
            for path in b['files']:
                size, blocks, changed = b['files'][path]
                newest[place_of(path)] = max(changed, newest.get(place_of(path), 0))
                was = a['files'].get(path, (0, 0, 0))
                t.add('%s.files.%s.bytes' % (where, place_of(path)), slot, size - was[0])
                t.add('%s.files.%s.blocks' % (where, place_of(path)), slot, blocks - was[1])
            for place, changed in newest.items():
                t.put('%s.files.%s.age' % (where, place), slot, b['wall'] - changed if changed > 0 else 0)
            t.put(where + '.files', slot, len(b['files']))
            for name, now in b['processes'].items():
                was = a['processes'].get(name, (0, 0, 0, 0))
                for k, what in enumerate(('cpu', 'faults', 'switches', 'pages')):
                    t.put('%s.%s.%s' % (where, name, what), slot, now[k] - was[k])
            t.put(where + '.metrics.bytes', slot, b['metrics'][0] - a['metrics'][0])
            t.put(where + '.metrics.sum', slot, b['metrics'][1] - a['metrics'][1])


def files(t, last):
    """Each slot's own files at the stations."""
    for station in STATIONS:
        for n in range(t.slots):
            samples = last.get('drive/%s/slot-%06d.npy' % (station, n))
            side = last.get('drive/%s/slot-%06d.json' % (station, n))
            if samples is None or side is None:
                continue
            t.put(station + '.samples.bytes', n, samples[0])
            t.put(station + '.samples.blocks', n, samples[1])
            t.put(station + '.side.bytes', n, side[0])
            t.put(station + '.side.after', n, side[2] - samples[2])


def logs(t, text):
    for station in STATIONS:
        last = {}
        for line in text[station].split('\n'):
            m = re.match(r'time=\S+T(\d+):(\d+):([\d.]+)Z .*event=(\S+) slot=(\d+)', line)
            if m is None:
                continue
            at = int(m.group(1)) * 3600 + int(m.group(2)) * 60 + float(m.group(3))
            event, slot = m.group(4), int(m.group(5))
            t.add(station + '.log.lines', slot, 1)
            t.add(station + '.log.bytes', slot, len(re.sub(r'^time=\S+', '', line)))
            if slot in last:
                t.put('%s.log.%s' % (station, event), slot, (at - last[slot]) * 1e9)
            last[slot] = at


def look_of_bytes(t, name, slot, data):
    values = np.frombuffer(data, np.uint8).astype(float)
    t.put(name + '.bytes', slot, len(data))
    t.put(name + '.mean', slot, values.mean())
    t.put(name + '.spread', slot, values.var())


def stored(t, seen):
    for (n, station), data in seen['recipes'].items():
        look_of_bytes(t, 'recipe.' + station, n, data)
    times = {}
    for r in seen['records']:
        if r['type'] in RECORDS:
            name = 'record.%s.%s' % (r['type'], r.get('station', '-'))
            name += number(times, name, r['slot'])
            look_of_bytes(t, name, r['slot'], base64.b64decode(r['record']))


def ledger(t, leaves):
    rank, times, hidden = {}, {}, 0
    for leaf in leaves:
        entry = leaf['entry']
        hidden += leaf['hidden']
        if entry is None or not isinstance(entry.get('slot'), int):
            continue
        n, name = entry['slot'], 'leaf.%s.%s' % (entry['type'], entry.get('station', '-'))
        name += number(times, name, n)
        t.put(name + '.bytes', n, leaf['size'])
        t.put(name + '.received', n, leaf['received'] % 5000000000)
        t.put(name + '.hidden', n, hidden)
        t.put(name + '.rank', n, rank.get(n, 0))
        rank[n] = rank.get(n, 0) + 1


def rows(seen):
    """(column names, table of slots x columns, live or not)."""
    t = Table(seen['slots'])
    traffic(t, seen['http'])
    sealer(t, seen['sealer'])
    between(t, seen['looks'])
    files(t, seen['looks'][-1]['files'])
    logs(t, seen['log'])
    stored(t, seen)
    ledger(t, seen['leaves'])
    live = np.array([s['assignment'] == 'live' for s in sorted(seen['truth'], key=lambda s: s['slot_id'])])
    return list(t.columns), np.column_stack(list(t.columns.values())), live
