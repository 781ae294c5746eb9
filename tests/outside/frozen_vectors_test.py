#!/usr/bin/python3
"""The vectors of our own formats are what their scripts make from the reference page: nobody edited them to fit the code."""
import os
import subprocess
import sys

vectors = os.path.join(os.path.dirname(os.path.abspath(__file__)), '..', 'vectors')
failed = 0
for count, name in enumerate(('custody_frozen', 'custody_moves'), 1):
    made = subprocess.run(['/usr/bin/python3', os.path.join(vectors, 'make_%s.py' % name)], stdout=subprocess.PIPE, check=True).stdout
    good = made.split() == open(os.path.join(vectors, name + '.h'), 'rb').read().split()  # whatever `make format` did to it
    failed += not good
    print('ok' if good else 'not ok', count, '%s.h is what make_%s.py makes' % (name, name))
print('1..%d' % count)
sys.exit(failed > 0)
