"""The recording proxy of the blind game: stands between the service and whoever talks to it (and between the sealer's
host and the client that carries its messages), passes every byte on unchanged, and writes down sizes and times, with
what the kernel shows every user of the machine about the processes at that moment: their processor time and page
faults."""
import multiprocessing, os, selectors, socket, struct, time

CHUNK = 1 << 18


def processor_ns(pid):
    """Processor time of a whole process, which any user may ask for; 0 once it is gone."""
    try:
        return time.clock_gettime_ns((~pid << 3) | 2)
    except OSError:
        return 0


def hurry(pid=0):
    """Whoever may run a process before others gets sharper times."""
    try:
        os.setpriority(os.PRIO_PROCESS, pid, -15)
    except OSError:
        pass


class Watched:
    """Processes whose consumption is noted at every message."""

    def __init__(self):
        self.pids, self.stat = {}, {}

    def set(self, name, pid):
        if name in self.stat:
            os.close(self.stat.pop(name))
        self.pids[name] = pid
        self.stat[name] = os.open('/proc/%d/stat' % pid, os.O_RDONLY)

    def look(self, name):
        pid = self.pids.get(name, 0)
        if pid == 0:
            return 0, 0
        try:
            faults = int(os.pread(self.stat[name], 1024, 0).rsplit(b')', 1)[1].split()[7])
        except OSError:
            faults = 0
        return processor_ns(pid), faults


class HttpPair:
    """One client's connection: requests and answers alternate, so that a turn of direction ends a message."""

    def __init__(self, label, log, watched):
        self.label, self.log, self.watched, self.now = label, log, watched, None

    def up(self, data, t):
        if self.now is None or self.now['answer_bytes'] > 0:
            self.flush()
            line = data.split(b'\r\n', 1)[0].decode('latin-1').split(' ')
            cpu, faults = self.watched.look(self.label)
            self.now = {'who': self.label, 'method': line[0], 'path': line[1] if len(line) > 1 else '',
                        'at': t, 'first': t, 'end': t, 'cpu': cpu, 'faults': faults,
                        'service_cpu': self.watched.look('service')[0], 'service_cpu_end': 0,
                        'request_bytes': 0, 'answer_bytes': 0, 'status': 0}
        self.now['request_bytes'] += len(data)

    def down(self, data, t):
        if self.now is None:
            return
        if self.now['answer_bytes'] == 0:
            self.now['first'] = t
            self.now['status'] = int(data[9:12])
        self.now['answer_bytes'] += len(data)
        self.now['end'] = t
        self.now['service_cpu_end'] = self.watched.look('service')[0]

    def flush(self):
        if self.now is not None:
            self.log.append(self.now)
        self.now = None


class FramePair:
    """The sealer's connection: frames of type u32, length u64, body."""

    def __init__(self, label, log, watched):
        self.label, self.log, self.watched, self.rest = label, log, watched, b''

    def up(self, data, t):
        pass

    def down(self, data, t):
        cpu, faults = self.watched.look(self.label)
        self.rest += data
        while len(self.rest) >= 12:
            kind, n = struct.unpack('<IQ', self.rest[:12])
            if len(self.rest) < 12 + n:
                break
            self.log.append({'who': self.label, 'kind': kind, 'bytes': n, 'end': t, 'cpu': cpu, 'faults': faults})
            self.rest = self.rest[12 + n:]

    def flush(self):
        pass


class Serving:
    def __init__(self, control):
        self.control, self.log, self.watched, self.pairs, self.upstream = control, [], Watched(), set(), {}
        self.wait = selectors.DefaultSelector()
        self.wait.register(control, selectors.EVENT_READ, self.command)

    def command(self, _):
        what = self.control.recv()
        if what[0] == 'listen':
            _, fd, label, upstream, frames = what
            if label not in self.upstream:
                listening = socket.socket(fileno=fd)
                listening.setblocking(False)
                self.wait.register(listening, selectors.EVENT_READ, lambda s: self.accept(s, label, frames))
            self.upstream[label] = upstream
        elif what[0] == 'watch':
            try:
                self.watched.set(what[1], what[2])
            except OSError:
                pass
        elif what[0] == 'take':
            for p in self.pairs:
                if isinstance(p, FramePair) or (p.now is not None and p.now['answer_bytes'] > 0):
                    p.flush()
            self.control.send(self.log)
            del self.log[:]
            return
        self.control.send(None)

    def accept(self, listening, label, frames):
        near, _ = listening.accept()
        far = socket.socket()
        # segments of an ordinary network, or loopback's huge ones would gather several messages
        far.setsockopt(socket.IPPROTO_TCP, socket.TCP_MAXSEG, 1448)
        far.connect(self.upstream[label])
        for s in (near, far):
            s.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        pair = (FramePair if frames else HttpPair)(label, self.log, self.watched)
        self.pairs.add(pair)
        self.wait.register(near, selectors.EVENT_READ, lambda s: self.pass_on(s, far, pair, pair.up))
        self.wait.register(far, selectors.EVENT_READ, lambda s: self.pass_on(s, near, pair, pair.down))

    def pass_on(self, source, target, pair, note):
        try:
            data = source.recv(CHUNK)
            source.setsockopt(socket.IPPROTO_TCP, socket.TCP_QUICKACK, 1)
        except OSError:
            data = b''
        if data:
            note(data, time.monotonic_ns())
            try:
                target.sendall(data)
                return
            except OSError:
                pass
        pair.flush()
        self.pairs.discard(pair)
        for s in (source, target):
            try:
                self.wait.unregister(s)
            except (KeyError, ValueError):
                pass
            s.close()

    def run(self):
        hurry()
        while True:
            for key, _ in self.wait.select():
                try:
                    key.data(key.fileobj)
                except EOFError:
                    return
                except (KeyError, ValueError, ConnectionError):
                    pass  # the other end of a pair that was closed in the same round


class Proxy:
    """The proxy as its owner sees it: a process of its own, so that nothing else delays what it times."""

    def __init__(self):
        self.context = multiprocessing.get_context('fork')
        self.listening = {}
        self.process = self.control = None

    def bind(self, label):
        """A port for this label, before anything is started: the service must be told its names first."""
        s = socket.create_server(('127.0.0.1', 0))
        self.listening[label] = s
        return s.getsockname()[1]

    def start(self):
        self.control, theirs = self.context.Pipe()

        def child():
            self.control.close()
            Serving(theirs).run()
        self.process = self.context.Process(target=child, daemon=True)
        self.process.start()
        theirs.close()

    def _tell(self, *what):
        self.control.send(what)
        return self.control.recv()

    def serve(self, label, upstream_port, frames=False):
        self._tell('listen', self.listening[label].fileno(), label, ('127.0.0.1', upstream_port), frames)

    def watch(self, label, pid):
        self._tell('watch', label, pid)

    def take(self):
        """Everything since the last time, and forgets it."""
        return self._tell('take')

    def stop(self):
        if self.control is not None:
            self.control.close()
            self.process.join(5)
