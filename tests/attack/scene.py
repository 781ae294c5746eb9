"""A service of its own for a hostile party to attack: the unmodified programs on loopback, parties whose rehearsal keys this side can
derive, signed requests that can be spoilt in every part, and one printed line for each attack.

Two states are built once and copied from then on: `enrolled` (everybody is there, nothing is drafted) and `sealed` (the short campaign of
deploy/demo, sealed, its slots still to come)."""
import base64
import fcntl
import hashlib
import http.client
import json
import os
import re
import shutil
import signal
import sqlite3
import subprocess
import sys
import tempfile
import time

from group import T
from ledger import Leaf, b64, compose, gps_ns, hide, leaf_hash, sign_entry, top
from sealed import Group, Keys

build = os.path.realpath(os.environ.get('QB_BUILD', os.path.join(top, 'build')))
SEED = 7
PEOPLE = [('custodian', n) for n in ('ines', 'okoro', 'marchetti')] + [('operator', n) for n in ('lund', 'petrov')] + \
         [('analyst', n) for n in ('noor', 'diego', 'wei')] + [('driver', n) for n in ('hosta', 'hostb', 'hostc')] + \
         [('reviewer', 'asha'), ('liaison', 'mbeki'), ('auditor', 'varga'), ('custodian', 'sato')]
CUSTODIANS = ('ines', 'okoro', 'marchetti')
STATIONS = (('hosta', 'tarn'), ('hostb', 'heron'), ('hostc', 'skerry'))
CAMPAIGN = 'fells-short'
START, END = 1487894418, 1487894448  # its stretch, GPS seconds

count, failed = 0, 0


def ok(good, text, more=''):
    """One line a check; what went wrong below it."""
    global count, failed
    count += 1
    failed += not good
    print(('ok' if good else 'not ok'), count, text, flush=True)
    if not good and more != '':
        print('    ' + str(more).replace('\n', '\n    ')[:2000], flush=True)
    return bool(good)


def finish():
    sys.exit(failed > 0)


class Answer:
    """Status, headers and document of an HTTP answer."""

    def __init__(self, status, headers, raw):
        self.status, self.headers, self.raw = status, headers, raw
        try:
            self.doc = json.loads(raw)
        except ValueError:
            self.doc = {}

    @property
    def word(self):
        return str(self.doc.get('type', '')).replace('urn:quietbell:problem:', '')

    @property
    def detail(self):
        return str(self.doc.get('detail', ''))

    def __repr__(self):
        return '%d %s: %s' % (self.status, self.word or '-', self.detail or self.raw[:300].decode(errors='replace'))


class Run:
    """Exit status and output of a client: `said` on standard output, `out` everything."""

    def __init__(self, status, said, errors):
        self.status, self.said, self.out = status, said, errors + said

    @property
    def one_line(self):
        return len(self.out.strip().split('\n')) == 1

    def __repr__(self):
        return 'exit %d: %s' % (self.status, self.out.strip())


class Scene:
    def __init__(self, number, stage=None):
        self.work = tempfile.mkdtemp(prefix='qb-%s-' % number)
        self.home = os.path.join(self.work, 'home')
        self.service_pid, self.children, self.authority = None, [], None
        if stage:
            cached(stage)
            shutil.copytree(os.path.join(build, 'attack', stage), self.work, dirs_exist_ok=True)
        os.makedirs(self.home, exist_ok=True)
        with open(os.path.join(self.work, 'passphrase'), 'w') as f:
            os.fchmod(f.fileno(), 0o600)
            f.write('rehearsal only\n')
        self.env = {**os.environ, 'QUIETBELL_PASSPHRASE_FILE': os.path.join(self.work, 'passphrase'), 'NO_COLOR': '1'}
        self.party = {n: Keys(n, SEED) for n in ['admin'] + [n for _, n in PEOPLE]}

    def __enter__(self):
        return self

    def __exit__(self, kind, value, trace):
        if kind is not None and kind is not SystemExit:
            ok(False, 'the test itself: %s: %s' % (kind.__name__, value))
        for p in self.children + ([self.service_pid] if self.service_pid else []):
            if p.poll() is None:
                try:
                    os.kill(p.pid, signal.SIGCONT)
                except ProcessLookupError:
                    pass
                p.terminate()
        for p in self.children + ([self.service_pid] if self.service_pid else []):
            p.wait(30)
        if failed and os.environ.get('QB_KEEP'):
            print('# kept: ' + self.work)
        else:
            shutil.rmtree(self.work, ignore_errors=True)
        return False

    # ---- the programs ----

    @property
    def data(self):
        return os.path.join(self.work, 'service')

    @property
    def url(self):
        return 'http://' + self.authority

    def start(self, *settings, clock='rehearsal'):
        if not os.path.isdir(self.data):
            self.client('admin', 'key', 'new', '--name', 'admin', '--rehearsal-seed', str(SEED), expect=0)
            subprocess.run([os.path.join(build, 'quietbelld'), 'init', '--data', self.data, '--admin', os.path.join(self.home, 'admin', 'key.pub'),
                            '--clock', clock], check=True, stdout=subprocess.DEVNULL, stdin=subprocess.DEVNULL)
        config = os.path.join(self.work, 'q.yaml')
        with open(config, 'w') as f:
            f.write('data: %s\nlisten: 127.0.0.1:0\nclock: %s\n' % (self.data, clock) + ''.join(s + '\n' for s in settings))
        port = os.path.join(self.data, 'port')
        if os.path.exists(port):
            os.remove(port)
        log = open(os.path.join(self.work, 'service.log'), 'a')
        self.service_pid = subprocess.Popen([os.path.join(build, 'quietbelld'), '--config', config], stdin=subprocess.DEVNULL, stdout=log, stderr=log)
        until(30, lambda: os.path.exists(port) and open(port).read().strip() != '')
        self.authority = '127.0.0.1:' + open(port).read().strip()
        return self

    def stop(self):
        self.service_pid.terminate()
        status = self.service_pid.wait(30)
        self.service_pid = None
        return status

    def client(self, who, *arguments, expect=None, url=None, timeout=120):
        """Runs the client as a party."""
        address = url or (self.url if self.authority else None)
        command = [os.path.join(build, 'quietbell'), *arguments, '--home', os.path.join(self.home, who)]
        command += ['--service', address] if address else []
        p = subprocess.run(command, env=self.env, stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, stderr=subprocess.PIPE, timeout=timeout)
        r = Run(p.returncode, p.stdout.decode(errors='replace'), p.stderr.decode(errors='replace'))
        if expect is not None and r.status != expect:
            raise RuntimeError('%s as %s: %s' % (' '.join(arguments), who, r))
        return r

    def client_behind(self, who, *arguments, url=None):
        """The same, going on in the background."""
        log = open(os.path.join(self.work, 'client-%s.log' % who), 'a')
        p = subprocess.Popen([os.path.join(build, 'quietbell'), *arguments, '--home', os.path.join(self.home, who), '--service', url or self.url],
                             env=self.env, stdin=subprocess.DEVNULL, stdout=log, stderr=log)
        self.children.append(p)
        return p

    def driver(self, host, station, url=None, campaign=CAMPAIGN):
        drive = os.path.join(self.work, 'drive', station)
        os.makedirs(drive, exist_ok=True)
        log = open(os.path.join(self.work, 'driver-%s.log' % station), 'a')
        p = subprocess.Popen([os.path.join(build, 'quietbell-driver'), campaign, '--station', station, '--sink', 'file:' + drive, '--home',
                              os.path.join(self.home, host), '--service', url or self.url], env=self.env, stdin=subprocess.DEVNULL, stdout=log, stderr=log)
        self.children.append(p)
        return p

    def log(self, name):
        path = os.path.join(self.work, name)
        return open(path, errors='replace').read() if os.path.exists(path) else ''

    def enrol(self, role, name):
        self.client(name, 'key', 'new', '--name', name, '--rehearsal-seed', str(SEED), expect=0)
        code = json.loads(self.client('admin', 'party', 'invite', role, name, '--json', expect=0).said)['code']
        self.client(name, 'party', 'enrol', code, expect=0)

    def clock(self, utc):
        return self.client('admin', 'service', 'clock', '--to', utc, expect=0)

    def clock_gps(self, gps):
        """At once, without waiting for drivers as our client does. The short campaign runs from START to END."""
        answer = self.request('admin', 'POST', '/v1/clock', {'to_gps': str(gps)})
        if answer.status != 200:
            raise RuntimeError('clock: %s' % answer)

    def draft(self, name=CAMPAIGN, edit=None, expect=0):
        shutil.copy(os.path.join(top, 'deploy', 'demo', 'short-network.yaml'), self.work)
        text = open(os.path.join(top, 'deploy', 'demo', 'short-plan.yaml')).read().replace('fells-short', name)
        path = os.path.join(self.work, name + '.yaml')
        open(path, 'w').write(edit(text) if edit else text)
        return self.client('admin', 'campaign', 'draft', path, '--rehearsal-seed', str(SEED), expect=expect)

    def state(self, campaign=CAMPAIGN):
        return self.request('lund', 'GET', '/v1/campaigns/' + campaign).doc.get('state')

    # ---- signed requests ----

    def request(self, who, method, path, body=None, raw=None, nonce=None, created=None, change=None, keys=None, headers=None):
        """One request, signed by `who` (a name, Keys, or None: unsigned). `change(message)` may alter method, path, raw and headers of the
        signed message before it is sent."""
        raw = raw if raw is not None else json.dumps(body).encode() if body is not None else b''
        head = {'Host': self.authority}
        if raw:
            head['Content-Type'] = 'application/json'
        if who is not None:
            head.update(self.signature(keys or self.party[who], method, path, raw, nonce, created))
        head.update(headers or {})
        message = {'method': method, 'path': path, 'raw': raw, 'headers': head}
        if change:
            change(message)
        return self.send(message)

    def signature(self, keys, method, path, raw, nonce=None, created=None):
        bare, _, query = path.partition('?')
        components = ['"@method"', '"@authority"', '"@path"', '"@query"'] + (['"content-digest"', '"content-type"'] if raw else [])
        params = '(%s);created=%d;nonce="%s";keyid="%s";alg="ed25519";tag="quietbell/1"' % (
            ' '.join(components), created or time.time(), nonce or os.urandom(16).hex(), keys.id.hex())
        digest = 'sha-512=:%s:' % b64(hashlib.sha512(raw).digest())
        lines = ['"@method": ' + method, '"@authority": ' + self.authority, '"@path": ' + bare, '"@query": ?' + query]
        lines += ['"content-digest": ' + digest, '"content-type": application/json'] if raw else []
        base = '\n'.join(lines + ['"@signature-params": ' + params])
        out = {'Signature-Input': 'qb=' + params, 'Signature': 'qb=:%s:' % b64(keys.signing.sign(base.encode()).signature)}
        if raw:
            out['Content-Digest'] = digest
        return out

    def send(self, message):
        c = http.client.HTTPConnection(self.authority, timeout=60)
        c.putrequest(message['method'], message['path'], skip_host=True, skip_accept_encoding=True)
        for name, value in message['headers'].items():
            c.putheader(name, value)
        if message['raw'] or message['method'] == 'POST':
            c.putheader('Content-Length', str(len(message['raw'])))
        c.endheaders()
        try:
            if message['raw']:
                c.send(message['raw'])
        except (BrokenPipeError, ConnectionResetError):
            pass
        r = c.getresponse()
        out = Answer(r.status, dict(r.getheaders()), r.read())
        c.close()
        return out

    def get(self, who, path):
        return self.request(who, 'GET', path)

    def now(self):
        d = self.request(None, 'GET', '/v1/service').doc
        return d['now_gps'], d['now_utc']

    def entry(self, who, kind, campaign=None, why='-', keys=None, by=None, now=None, **extra):
        """{"entry", "signature"} as that party would send it."""
        keys = keys or self.party[who]
        text = compose(kind, by or keys.name, now or self.now(), campaign, why, **extra)
        return {'entry': text, 'signature': sign_entry(keys.signing, text).hex()}

    def post(self, who, path, kind, campaign=None, more=None, **extra):
        return self.request(who, 'POST', path, {**self.entry(who, kind, campaign, **extra), **(more or {})})

    # ---- what the ledger says ----

    def leaves(self):
        out, at = [], 0
        while True:
            page = self.request(None, 'GET', '/v1/ledger/entries?from=%d&limit=500' % at).doc['entries']
            out += [base64.b64decode(f) for f in page]
            at = len(out)
            if len(page) < 500:
                return out

    def size(self):
        text = self.request(None, 'GET', '/v1/ledger/head').doc['head']
        return int(re.search(r'\nsize (\d+)\n', text).group(1))

    def entries(self, kind=None, campaign=None):
        """(leaf, entry) of every public leaf of that type."""
        out = []
        for f in self.leaves():
            leaf = Leaf.parse(f)
            e = leaf.entry()
            if (kind is None or e['type'] == kind) and (campaign is None or e.get('campaign') == campaign.hex()):
                out.append((leaf, e))
        return out

    def campaign_id(self, name=CAMPAIGN):
        for leaf, e in self.entries('plan'):
            if re.search(r'^campaign: %s$' % re.escape(name), e['plan'], re.M):
                return T('campaign/id', leaf.body)[:16]
        raise LookupError(name)

    def keys_of(self, names):
        return [(self.party[n].public, self.party[n].point) for n in names]

    def group(self, name=CAMPAIGN, custodians=CUSTODIANS, k=2, attempt=1):
        campaign = self.campaign_id(name)
        deals = {e['by']: base64.b64decode(e['message']) for _, e in self.entries('deal', campaign) if e['attempt'] == attempt}
        have = [deals[c] for c in custodians if c in deals]
        return Group(campaign, self.keys_of(custodians), len(custodians), k, have if len(have) == len(custodians) else [], attempt=attempt)

    def store(self):
        return sqlite3.connect('file:%s/store.sqlite?mode=ro' % self.data, uri=True)

    # ---- hidden entries of analysts ----

    def claim(self, who, pipeline, group, record, sequence=None, declared=None, **about):
        raw = record if isinstance(record, bytes) else record.encode()
        sequence = int.from_bytes(raw[32:40], 'little') if sequence is None else sequence
        body = {**self.entry(who, 'claim', group.campaign, pipeline=pipeline, sequence=sequence,
                             record_id=(declared or record_id(raw)).hex()), 'nonce': os.urandom(32).hex(), 'record': b64(raw)}
        return self.request(who, 'POST', '/v1/campaigns/%s/claims' % about.pop('campaign', CAMPAIGN), body, **about)


def record_id(raw):
    return T('record/id', raw[:128], raw[128:160], raw[160:192], raw[192:224], raw[224:256], raw[256:])


def until(seconds, condition):
    end = time.monotonic() + seconds
    while not condition():
        if time.monotonic() > end:
            raise TimeoutError('gave up waiting')
        time.sleep(0.05)


# ---- the states that are built once ----


def newest_program():
    return max(os.stat(os.path.join(build, p)).st_mtime for p in ('quietbell', 'quietbelld', 'quietbell-driver'))


def new_enough(path):
    made = os.path.join(path, 'made')
    return os.path.exists(made) and os.stat(made).st_mtime > max(newest_program(), os.stat(__file__).st_mtime)


def cached(stage):
    """Builds build/attack/STAGE unless it is there and newer than the programs and this file."""
    where = os.path.join(build, 'attack')
    os.makedirs(where, exist_ok=True)
    with open(os.path.join(where, 'lock'), 'w') as lock:
        fcntl.flock(lock, fcntl.LOCK_EX)
        path = os.path.join(where, stage)
        if new_enough(path):
            return
        shutil.rmtree(path, ignore_errors=True)
        {'enrolled': build_enrolled, 'sealed': build_sealed}[stage](path)
        open(os.path.join(path, 'made'), 'w').close()


def keep(scene, path):
    scene.stop()
    for p in scene.children:
        p.terminate()
        p.wait(30)
    os.makedirs(path)
    for name in ('service', 'home', 'drive'):
        if os.path.isdir(os.path.join(scene.work, name)):
            shutil.copytree(os.path.join(scene.work, name), os.path.join(path, name))


def build_enrolled(path):
    with Scene('enrolled') as s:
        s.start()
        for role, name in PEOPLE:
            s.enrol(role, name)
        s.clock('2027-02-28T23:50:00Z')
        keep(s, path)


def build_sealed(path):
    enrolled = os.path.join(build, 'attack', 'enrolled')
    if not new_enough(enrolled):
        shutil.rmtree(enrolled, ignore_errors=True)
        build_enrolled(enrolled)
        open(os.path.join(enrolled, 'made'), 'w').close()
    with Scene('sealed') as s:
        shutil.copytree(os.path.join(build, 'attack', 'enrolled'), s.work, dirs_exist_ok=True)
        s.start('rehearsal_seed: %d' % SEED)
        seal_here(s)
        keep(s, path)


def seal_here(s, name=CAMPAIGN):
    """Drafts the short campaign and brings it to `sealed`, with the real programs in every part."""
    s.draft(name)
    joins = [s.client_behind(c, 'campaign', 'keygen', name, '--wait', '--rehearsal-seed', str(SEED)) for c in CUSTODIANS]
    for host, station in STATIONS:
        s.driver(host, station, campaign=name)
    until(60, lambda: s.state(name) == 'rehearsed')
    until(60, lambda: s.client('admin', 'campaign', 'seal', name).status == 0)
    for p in joins:
        if p.wait(60) != 0:
            raise RuntimeError('key generation failed')
    until(30, lambda: s.state(name) == 'sealed')
