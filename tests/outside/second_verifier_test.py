#!/usr/bin/python3
"""The second verifier's own group against RFC 9496: multiples of the generator, encodings to refuse, the one-way map (the
values that the C library is held to as well, tests/vectors/rfc9496.h); and the table of bundle and entries in the docs."""
import os
import re
import sys

here = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, os.path.join(here, 'second_verifier'))
import bundle
import ledger
import ristretto

vectors = open(os.path.join(here, '..', 'vectors', 'rfc9496.h')).read()
protocol = os.path.join(here, '..', '..', 'docs', 'protocol.md')
failed = count = 0


def ok(good, text):
    global failed, count
    count += 1
    failed += not good
    print('ok' if good else 'not ok', count, text)


def part(name):
    return re.search(r'%s\[\] = \{(.*?)\n\};' % name, vectors, re.S).group(1)


def refused(b):
    try:
        ristretto.decode(b)
        return False
    except ristretto.Refused:
        return True


multiples = [bytes.fromhex(x) for x in re.findall('"([0-9a-f]{64})"', part('multiples'))]
base = ristretto.decode(multiples[1])
ok(len(multiples) == 16 and all(ristretto.encode(ristretto.BASE.times(i)) == m for i, m in enumerate(multiples)),
   'multiples of the generator from the table')
ok(all(ristretto.encode(ristretto.combine([(i, base)])) == m for i, m in enumerate(multiples)), 'and by doubling')
ok(all(ristretto.encode(ristretto.combine([(2, ristretto.decode(m)), (ristretto.ORDER - 1, base)])) ==
       ristretto.encode(ristretto.BASE.times(2 * i - 1)) for i, m in enumerate(multiples) if i > 0), 'sums of two products')
bad = [bytes.fromhex(x) for x in re.findall('"([0-9a-f]{64})"', part('invalid'))]
ok(len(bad) == 29 and all(map(refused, bad)) and refused(multiples[0]), '29 bad encodings and the identity are refused')
derived = re.findall(r'\{"([0-9a-f]{64})"\s*"([0-9a-f]{64})",\s*"([0-9a-f]{64})"\}', vectors)
ok(len(derived) == 11 and all(ristretto.encode(ristretto.from_hash(bytes.fromhex(a + b))).hex() == c for a, b, c in derived),
   'the one-way map')
ok(len(bundle.schema_of(protocol)) == len(bundle.QUERIES), 'the docs print the tables that are read')
types = ledger.EntryTypes(protocol).types
ok(len(types) > 50 and all(ledger.roles_of(t['by']) is None or ledger.roles_of(t['by']) for t in types.values()),
   'the docs say of every entry type who may author it (%d types)' % len(types))
sys.exit(failed > 0)
