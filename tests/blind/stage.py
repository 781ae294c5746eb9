"""The stage of the blind game: a service, its people and one campaign after the other, run by the real programs on
loopback, with everything written down that somebody short of the custodians can observe. Whether a slot was live is
learned last, from the opened bundle, as any reviewer would."""
import base64, json, os, re, shutil, sqlite3, struct, subprocess, time

from proxy import Proxy, hurry, processor_ns
from signed import Party

CUSTODIANS = ('ines', 'okoro', 'marchetti')
PEOPLE = [('custodian', p) for p in CUSTODIANS] + [('reviewer', 'asha'), ('operator', 'lund'), ('analyst', 'noor'),
                                                   ('driver', 'hosta'), ('driver', 'hostb')]
STATIONS = {'tarn': 'hosta', 'heron': 'hostb'}
SLOT_S = 5
FIRST_GPS = 1487894418  # 2027-03-01T00:00:00Z
PLAN = """# A plan of the blind game. Everything in it is invented.
campaign: {name}
phase: rehearsal
starts: {starts}
ends: {ends}
slot: 5 s
lead: 1 s
network: network.yaml
sealer_host: {host}
parties:
  custodians: [ines, okoro, marchetti]
  custodians_needed: 2
  reviewers: [asha]
  operators: [lund]
  drivers: {{tarn: hosta, heron: hostb}}
  pipelines: {{amber: noor}}
drills:
  expected_live: {live}
  empty_chance: 0
  guard: 0.5 s
  families:
    - name: glints
      family: sine-gaussian
      frequency_hz: {{log-uniform: {{from: 100, to: 400}}}}
      quality: {{uniform: {{from: 4, to: 9}}}}
      network_snr: {{inverse-power: {{index: 2, from: 8, to: 30}}}}
stations_needed: 1
batch: 25 s
audit:
  match_base_s: 0.1
  match_max_s: 0.25
"""


class Stage:
    def __init__(self, build, top, work):
        self.build, self.top, self.work = build, top, work
        self.children, self.campaigns, self.next_leaf = [], 0, 0
        os.makedirs(work + '/home', exist_ok=True)
        fd = os.open(work + '/passphrase', os.O_CREAT | os.O_WRONLY, 0o600)
        os.write(fd, b'rehearsal only\n')
        os.close(fd)
        self.env = dict(os.environ, QUIETBELL_PASSPHRASE_FILE=work + '/passphrase', NO_COLOR='1')
        network = open(top + '/deploy/demo/short-network.yaml').read()
        open(work + '/network.yaml', 'w').write(network[:network.index('  - name: skerry')])

    # ---- processes ----

    def start(self, log, *argv):
        out = open(os.path.join(self.work, log), 'ab')
        p = subprocess.Popen(argv, stdin=subprocess.DEVNULL, stdout=out, stderr=out, env=self.env)
        out.close()
        self.children.append(p)
        return p

    def as_(self, who, *verb, port='people', background=False):
        argv = [self.build + '/quietbell', *verb, '--home', '%s/home/%s' % (self.work, who)]
        if port:
            argv += ['--service', self.url(port)]
        if background:
            return self.start('people.log', *argv)
        done = subprocess.run(argv, stdin=subprocess.DEVNULL, capture_output=True, env=self.env, timeout=120)
        if done.returncode != 0:
            raise RuntimeError('%s: %s: %s' % (who, ' '.join(verb), (done.stderr + done.stdout).decode()[-400:]))
        return done.stdout.decode()

    def url(self, label):
        return 'http://127.0.0.1:%d' % self.ports[label]

    def until(self, what, test, seconds=60):
        end = time.monotonic() + seconds
        while time.monotonic() < end:
            got = test()
            if got:
                return got
            time.sleep(0.004)
        raise RuntimeError('waited in vain for ' + what)

    # ---- the service and its people ----

    def open(self):
        w = self.work
        self.proxy = Proxy()
        self.ports = {label: self.proxy.bind(label) for label in ('people', 'stage', 'tarn', 'heron', 'sealer')}
        self.as_('admin', 'key', 'new', '--name', 'admin', '--rehearsal', port=None)
        subprocess.run([self.build + '/quietbelld', 'init', '--data', w + '/service', '--admin',
                        w + '/home/admin/key.pub', '--clock', 'rehearsal'], check=True, stdout=subprocess.DEVNULL)
        names = ', '.join("'127.0.0.1:%d'" % p for p in self.ports.values())
        with open(w + '/q.yaml', 'w') as f:
            f.write('data: %s/service\nlisten: 127.0.0.1:0\nclock: rehearsal\nauthority: [%s]\n' % (w, names))
        self.proxy.start()
        self.service = self.start('service.log', self.build + '/quietbelld', '--config', w + '/q.yaml')
        at = w + '/service/port'
        port = self.until('the service', lambda: os.path.exists(at) and open(at).read().strip())
        for label in ('people', 'stage', 'tarn', 'heron'):
            self.proxy.serve(label, int(port))
        self.proxy.watch('service', self.service.pid)
        for role, name in PEOPLE:
            self.as_(name, 'key', 'new', '--name', name, '--rehearsal', port=None)
            code = json.loads(self.as_('admin', 'party', 'invite', role, name, '--json'))['code']
            self.as_(name, 'party', 'enrol', code)
        out = subprocess.run([self.build + '/quietbelld', 'sealer-host-init', '--data', w + '/host'], check=True,
                             capture_output=True)
        self.host_key = re.search(r'[0-9a-f]{64}', out.stdout.decode()).group(0)
        self.admin = Party(w + '/home/admin', 'rehearsal only', self.ports['stage'])

    def close(self):
        for p in self.children:
            if p.poll() is None:
                p.terminate()
        for p in self.children:
            try:
                p.wait(10)
            except subprocess.TimeoutExpired:
                p.kill()
        self.proxy.stop()

    # ---- looking ----

    def files(self):
        """Sizes, blocks and times of every file of service and drivers."""
        seen = {}
        for place in ('service', 'home/hosta', 'home/hostb', 'drive'):
            for root, _, names in os.walk(os.path.join(self.work, place)):
                for name in names:
                    path = os.path.join(root, name)
                    try:
                        s = os.stat(path)
                    except FileNotFoundError:
                        continue
                    seen[os.path.relpath(path, self.work)] = (s.st_size, s.st_blocks, s.st_mtime_ns)
        for log in ('service.log', 'driver-tarn.log', 'driver-heron.log'):
            seen[log] = (os.path.getsize(os.path.join(self.work, log)), 0, 0)
        return seen

    def processes(self):
        """Processor time, page faults and changes of context of service and drivers."""
        out = {}
        for name, p in [('service', self.service)] + list(self.drivers.items()):
            try:
                stat = open('/proc/%d/stat' % p.pid).read().rsplit(')', 1)[1].split()
                status = open('/proc/%d/status' % p.pid).read()
                switches = sum(int(v) for v in re.findall(r'ctxt_switches:\s+(\d+)', status))
                out[name] = (processor_ns(p.pid), int(stat[7]), switches, int(stat[21]))
            except (OSError, IndexError):
                out[name] = (0, 0, 0, 0)
        return out

    def look(self):
        metrics = self.admin.ask('GET', '/metrics').decode()
        numbers = [float(v) for v in re.findall(r'^\w[^#\n]* ([0-9.e+-]+)$', metrics, re.M)]
        return {'at': time.monotonic_ns(), 'wall': time.time_ns(), 'files': self.files(), 'processes': self.processes(),
                'metrics': (len(metrics), sum(numbers))}

    # ---- one campaign ----

    def clock(self, gps):
        self.admin.post('/v1/clock', {'to_gps': str(gps)})

    def slot(self, name, n):
        return self.admin.get('/v1/campaigns/%s/slots/%d' % (name, n))['stations'].values()

    def seal(self, name):
        host = self.start('host.log', self.build + '/quietbelld', 'sealer-host', '--data', self.work + '/host',
                          '--listen', '127.0.0.1:0')
        log = os.path.join(self.work, 'host.log')
        hurry(host.pid)
        waiting = re.compile(r'.*^waiting on 127.0.0.1:(\d+)$', re.M | re.S)
        port = self.until('the sealer host', lambda: waiting.match(open(log).read()))
        self.proxy.serve('sealer', int(port.group(1)), frames=True)
        open(self.work + '/host.yaml', 'w').write('address: 127.0.0.1:%d\n' % self.ports['sealer'])
        sealing = self.as_('admin', 'campaign', 'seal', name, '--on', self.work + '/host.yaml', background=True)
        children = '/proc/%d/task/%d/children' % (host.pid, host.pid)
        child = self.until('the sealer', lambda: open(children).read().split())
        self.proxy.watch('sealer', int(child[0]))
        if sealing.wait(120) != 0 or host.wait(10) != 0:
            raise RuntimeError('the sealing of %s failed' % name)
        open(log, 'w').close()

    def gather(self, name, start, slots, live):
        """Drafts a campaign, and everybody sets to work on it; the custodians' commands are returned."""
        w = self.work
        with open(w + '/plan.yaml', 'w') as f:
            f.write(PLAN.format(name=name, starts=start, ends=start + slots * SLOT_S, host=self.host_key, live=live))
        self.as_('admin', 'campaign', 'draft', w + '/plan.yaml')
        parts = [self.as_(p, 'campaign', 'keygen', name, '--wait', background=True) for p in CUSTODIANS]
        shutil.rmtree(w + '/drive', ignore_errors=True)
        self.drivers = {}
        for station, who in STATIONS.items():
            open(w + '/driver-%s.log' % station, 'w').close()
            os.makedirs(w + '/drive/' + station)
            p = self.start('driver-%s.log' % station, self.build + '/quietbell-driver', name, '--station', station,
                           '--sink', 'file:%s/drive/%s' % (w, station), '--home', '%s/home/%s' % (w, who), '--service',
                           self.url(station))
            self.drivers[station] = p
            self.proxy.watch(station, p.pid)
        return parts

    def play(self, seen, name, start):
        """Every slot: freeze and start, the notes, a look, the end, the reports."""
        def all_of(n, test):
            self.until('slot %d' % n, lambda: all(test(s) for s in self.slot(name, n)))
        self.clock(start - 1)
        self.clock(start)
        for n in range(seen['slots']):
            all_of(n, lambda s: s['notes'] > 0 or s['reported'])
            seen['looks'].append(self.look())
            self.clock(start + (n + 1) * SLOT_S)
            all_of(n, lambda s: s['reported'])
        seen['looks'].append(self.look())

    def campaign(self, slots, live):
        """Runs one campaign and returns everything observed, and the truth."""
        name, start = 'game-%d' % self.campaigns, FIRST_GPS + self.campaigns * (slots * SLOT_S + 100)
        self.campaigns += 1
        self.clock(start - 80)
        parts = self.gather(name, start, slots, live)
        self.until('the rehearsal', lambda: self.admin.get('/v1/campaigns/' + name)['state'] == 'rehearsed')
        self.seal(name)
        if any(p.wait(60) != 0 for p in parts):
            raise RuntimeError('a custodian of %s failed' % name)
        self.until('the drivers', lambda: all(s['ready'] for s in self.slot(name, 0)))
        seen = {'slots': slots, 'sealer': [e for e in self.proxy.take() if e['who'] == 'sealer'], 'looks': []}
        self.play(seen, name, start)
        seen['http'] = [e for e in self.proxy.take() if e['who'] in STATIONS]
        for station, p in self.drivers.items():
            if p.wait(30) != 0:
                raise RuntimeError('the driver of %s failed' % station)
        self.stored(seen, name)
        seen['truth'] = self.truth(name)
        self.listed(seen, name)
        return seen

    def stored(self, seen, name):
        """What lies in the service's store and in the logs, as its administrator finds it before the opening."""
        db = sqlite3.connect('file:%s/service/store.sqlite?mode=ro' % self.work, uri=True)
        own = bytes.fromhex(self.admin.get('/v1/campaigns/' + name)['id'])
        recipes = db.execute('select slot, station, recipe from recipes where campaign = ?', (own,)).fetchall()
        db.close()
        seen['recipes'] = {(n, s): bytes(r) for n, s, r in recipes}
        seen['log'] = {s: open('%s/driver-%s.log' % (self.work, s)).read() for s in STATIONS}

    def listed(self, seen, name):
        """Ledger and records as everybody may list them after the closing."""
        records, at = [], 0
        while at is not None:
            page = self.admin.get('/v1/campaigns/%s/records?from=%d&limit=200' % (name, at))
            records += page['records']
            at = page['next']
        seen['records'] = records
        seen['leaves'], at = [], self.next_leaf
        while at is not None:
            page = self.admin.get('/v1/ledger/entries?from=%d&limit=500' % at)
            for text in page['entries']:
                frame = base64.b64decode(text)
                seq, received = struct.unpack('<Qq', frame[8:24])
                body = frame[48:48 + struct.unpack('<Q', frame[40:48])[0]]
                seen['leaves'].append({'size': len(frame), 'hidden': frame[4], 'received': received,
                                       'entry': None if frame[4] else json.loads(body)})
                self.next_leaf = seq + 1
            at = page['next']

    def truth(self, name):
        w = self.work
        self.as_('asha', 'campaign', 'close', name, '--reason', 'the game is over')
        opening = self.as_('asha', 'opening', 'request', name, '--all', '--reason', 'the truth').split('\n')[0]
        for verb in (('opening', 'join', name, opening, '--yes'), ('ledger', 'head')):
            for p in CUSTODIANS[:2]:
                self.as_(p, *verb)
        shutil.rmtree(w + '/set', ignore_errors=True)
        if os.path.exists(w + '/bundle'):
            os.remove(w + '/bundle')
        self.as_('asha', 'bundle', 'export', name, w + '/bundle')
        self.as_('asha', 'bundle', 'unpack', w + '/bundle', w + '/set', port=None)
        return [json.loads(line) for line in open(w + '/set/slots.jsonl')]
