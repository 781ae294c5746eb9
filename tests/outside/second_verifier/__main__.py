"""The second verifier of a campaign's bundle: another program, in another language, from docs/protocol.md and
docs/reference-custody.md alone. Prints a checklist. Exit status 0: all holds, 1: something does not, 2: wrong use.
    /usr/bin/python3 tests/outside/second_verifier BUNDLE"""
import os
import sys

import properties
import redraw
from bundle import Bundle
from ristretto import Refused

PROTOCOL = os.path.join(os.path.dirname(os.path.abspath(__file__)), '..', '..', '..', 'docs', 'protocol.md')

CHECKS = [
    ('every entry stands in its place, signed by who may say it, in the order of a campaign\'s life',
     'frames, keys over time, Ed25519 signatures, the table of entry types, the state before each entry', properties.ledger),
    ('there is one ledger, which most custodians hold', 'root of all leaves, signatures on the head', properties.heads),
    ('the campaign was closed before it was opened', 'places of closing, request and shares', properties.life),
    ('the key belongs to all custodians together',
     'deals, proofs of possession, transcript and public shares computed again, certificates, canaries opened', properties.key),
    ('hidden entries are what was promised, all of them', 'commitments, promises, signatures, the count fixed at the closing',
     properties.hidden),
    ('no record was added, altered, exchanged or left out', 'proof, header and id of each against the ledger', properties.records),
    ('enough custodians opened every record', 'proof of each partial opening, combination, decryption, the announced hash',
     properties.opening),
    ('nobody chose the draw', 'the contributions in the seed record against their commitments', redraw.seed),
    ('what was opened is what was sealed', 'slot keys and records made again from the seed', redraw.reseal),
    ('recipes and first variates follow from the seed', 'one-time keys, hashes, both layers of each recipe made again, its '
     'fields against the truth; live or null, family and sky position of each slot', redraw.recipes),
]
NOT_CHECKED = ['the physics of each draw: masses, loudness, drives, weights', 'what people sealed in claims, guesses, notes, '
               'reports and milestones', 'fixed sentences of entries', 'that keys belong to the people they are said to be of']


def verify(path, say):
    """Whether all holds. `say` takes the lines of the checklist."""
    held = True
    try:
        w = properties.Work(Bundle(path, PROTOCOL), PROTOCOL)
        say('pass  the file is a bundle and nothing besides\n      by: tables word for word, size, form of every value')
    except Refused as e:
        say('FAIL  the file is a bundle and nothing besides\n      %s' % e)
        return False
    for text, how, check in CHECKS:
        if not held:
            say('-     %s\n      not judged, since it rests on what failed' % text)
            continue
        try:
            say('pass  %s\n      by: %s\n      %s' % (text, how, check(w)))
        except Refused as e:
            held = False
            say('FAIL  %s\n      by: %s\n      %s' % (text, how, e))
        except (KeyError, TypeError, ValueError, AttributeError, IndexError, OverflowError) as e:
            held = False
            say('FAIL  %s\n      by: %s\n      a value has a form that no bundle has (%s: %s)' % (text, how, type(e).__name__, e))
    say('not checked here: ' + '; '.join(NOT_CHECKED + sorted(set(w.notes))))
    return held


def main():
    if len(sys.argv) != 2:
        print(__doc__, file=sys.stderr)
        return 2
    held = verify(sys.argv[1], lambda line: print(line, flush=True))
    print('VERIFIED' if held else 'NOT VERIFIED')
    return 0 if held else 1


if __name__ == '__main__':
    sys.exit(main())
