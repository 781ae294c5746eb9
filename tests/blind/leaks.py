"""Three leaks that the service does not have, planted into what was observed, so that the game shows it would have
caught them: one byte too many, a small delay, and an order that depends on the secret. Each goes in before anything is
made a table of."""
import copy

import numpy as np

from observed import kind_of

# how strong: for the long run what a careless line of code would do; for a short one of few slots more of it
LONG = {'size': {'share': 0.2, 'bytes': 1}, 'timing': {'spreads': 0.3}, 'order': {'share': 0.6}}
SHORT = {'size': {'share': 1.0, 'bytes': 4}, 'timing': {'spreads': 3.0}, 'order': {'share': 1.0, 'null_share': 1.0}}


def live_slots(seen):
    return {i for i, s in enumerate(sorted(seen['truth'], key=lambda s: s['slot_id'])) if s['assignment'] == 'live'}


def some(rng, slots, share):
    return {n for n in sorted(slots) if rng.random() < share}


def size(seen, rng, share, bytes):
    """The answer with a live slot's key is longer, at one station."""
    chosen = some(rng, live_slots(seen), share)
    for e in seen['http']:
        kind, slot = kind_of(e)
        if e['who'] == 'tarn' and kind == 'key' and slot in chosen:
            e['answer_bytes'] += bytes


def timing(seen, rng, spreads):
    """One station's driver takes longer over a live slot's recipe, by so much of the usual spread (between the
    quartiles) of what it takes; all that it does later is later."""
    own = sorted((e for e in seen['http'] if e['who'] == 'tarn'), key=lambda e: e['at'])
    takes = [b['at'] - a['end'] for a, b in zip(own, own[1:]) if kind_of(a)[0] == 'key' and a['status'] == 200]
    delay_ns = int(spreads * np.subtract(*np.percentile(takes, [75, 25])))
    live, late = live_slots(seen), 0
    for e in own:
        for what in ('at', 'first', 'end'):
            e[what] += late
        kind, slot = kind_of(e)
        if kind == 'key' and slot in live and e['status'] == 200:
            late += delay_ns
    seen['planted'] = delay_ns


def order(seen, rng, share, null_share=0.0):
    """Of a live slot tarn's notes and report enter the ledger before heron's; of a null, if so wanted, after them."""
    leaves, at = seen['leaves'], {}
    for i, leaf in enumerate(leaves):
        entry = leaf['entry']
        if entry is not None and entry['type'] in ('play-note', 'play-report'):
            at.setdefault(entry['slot'], {}).setdefault(entry['type'], {}).setdefault(entry['station'], []).append(i)
    live = live_slots(seen)
    first = {n: 'tarn' for n in some(rng, live, share)}
    first.update({n: 'heron' for n in some(rng, set(at) - live, null_share)})
    for n, leader in first.items():
        for stations in at[n].values():
            for pair in zip(*stations.values()):
                a, b = sorted(pair)
                if leaves[a]['entry']['station'] != leader:
                    leaves[a], leaves[b] = leaves[b], leaves[a]


LEAKS = {'size': size, 'timing': timing, 'order': order}


def plant(seen, name, strength, rng):
    """A copy with the leak in it."""
    parts = {'truth': seen['truth'], 'http': copy.deepcopy(seen['http']), 'leaves': list(seen['leaves'])}
    out = dict(seen, **parts)
    LEAKS[name](out, rng, **strength[name])
    return out
