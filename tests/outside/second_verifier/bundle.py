"""The bundle's SQLite file, read strictly: the tables of docs/protocol.md word for word and nothing besides, every byte of
every page where SQLite expects it, the blobs and numbers of the types that the format fixes."""
import os
import re
import sqlite3

from ristretto import Refused


def schema_of(protocol):
    """The CREATE TABLE statements that docs/protocol.md prints, by the name of the table."""
    text = open(protocol, encoding='utf-8').read()
    block = re.search(r'^```bundle\n(.*?)^```', text, re.M | re.S).group(1)
    statements = [' '.join(line.split()) for line in re.sub(r'\n  +', ' ', block).strip().split('\n')]
    return {s.split()[2]: s for s in statements}


QUERIES = {
    'about': ('SELECT key, value FROM about ORDER BY key', (str, str)),
    'leaves': ('SELECT seq, frame FROM leaves ORDER BY seq', (int, bytes)),
    'heads': ('SELECT text FROM heads', (str,)),
    'hidden': ('SELECT commitment, seq, received, due, promise, nonce, entry, signature, author FROM hidden ORDER BY seq',
               (64, int, int, int, 64, 32, bytes, 64, 16)),
    'records': ('SELECT position, type, slot, station, author, record_id, record FROM records ORDER BY position',
                (int, int, int, str, 16, 64, bytes)),
    'recipes': ('SELECT slot, station, place, recipe FROM recipes ORDER BY slot, station, place', (int, str, int, bytes)),
    'prekeys': ('SELECT station, place, points FROM prekeys ORDER BY station, place', (str, int, bytes)),
    'shares': ('SELECT opening, custodian, shares FROM shares ORDER BY opening, custodian', (16, str, bytes)),
}


def fits(value, form):
    return isinstance(value, bytes) and len(value) == form if isinstance(form, int) else type(value) is form


class Bundle:
    def __init__(self, path, protocol):
        self.tables = schema_of(protocol)
        try:
            db = sqlite3.connect('file:%s?mode=ro' % path.replace('?', '%3f').replace('#', '%23'), uri=True)
            self._read(db, path)
            db.close()
        except sqlite3.Error as e:
            raise Refused('the file is damaged or no bundle (%s)' % e) from None
        about = dict(self.rows['about'])
        if set(about) != {'campaign', 'format', 'written-by'} or about['format'] != 'quietbell-bundle-1':
            raise Refused('the file is a bundle of another format')
        if not re.fullmatch('[0-9a-f]{32}', about['campaign']):
            raise Refused('the bundle does not name its campaign')
        self.campaign = bytes.fromhex(about['campaign'])
        if len(self.rows['heads']) != 1:
            raise Refused('the bundle has %d heads instead of one' % len(self.rows['heads']))
        self.head = self.rows['heads'][0][0]
        if [r[0] for r in self.rows['leaves']] != list(range(len(self.rows['leaves']))):
            raise Refused('the leaves are not numbered from 0 without a gap')
        if [r[0] for r in self.rows['records']] != list(range(len(self.rows['records']))):
            raise Refused('the records are not numbered from 0 without a gap')

    def _read(self, db, path):
        one = lambda sql: db.execute(sql).fetchone()[0]
        db.execute('PRAGMA trusted_schema=OFF')
        if one('PRAGMA application_id') != 0x51424e44:
            raise Refused('the file does not carry the mark of a bundle')
        if os.path.getsize(path) != one('PRAGMA page_count') * one('PRAGMA page_size'):
            raise Refused('the file is cut, or something was put behind it')
        if [r[0] for r in db.execute('PRAGMA integrity_check')] != ['ok']:
            raise Refused('SQLite finds the file damaged')
        if one('PRAGMA freelist_count') != 0:
            raise Refused('the file has pages that no table uses')
        found = [(r[0], r[1], r[2]) for r in db.execute('SELECT type, name, sql FROM sqlite_schema')
                 if not (r[0] == 'index' and r[1].startswith('sqlite_autoindex_') and r[2] is None)]
        if sorted(found) != sorted(('table', name, sql) for name, sql in self.tables.items()):
            raise Refused('the tables are not those of the format, word for word')
        self.rows = {}
        for name, (sql, forms) in QUERIES.items():
            rows = db.execute(sql).fetchall()
            for row in rows:
                if not all(fits(v, f) for v, f in zip(row, forms)):
                    raise Refused("the table '%s' holds a value of another form" % name)
            self.rows[name] = rows
