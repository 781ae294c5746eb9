"""Whoever runs the service, as a proxy before the unmodified one: passes everything on but what the test alters. alter(method, path, status,
document) returns another document, (status, document), or None for no change; it runs in the proxy's threads."""
import http.server
import json
import threading
import urllib.error
import urllib.request


class Proxy:
    def __init__(self, url, alter):
        outer = self
        self.alter, self.seen, self.to = alter, [], url

        class Handler(http.server.BaseHTTPRequestHandler):
            protocol_version = 'HTTP/1.1'

            def log_message(self, *_):
                pass

            def answer(self):
                length = int(self.headers.get('Content-Length') or 0)
                body = self.rfile.read(length) if length else None
                headers = {k: v for k, v in self.headers.items() if k.lower() not in ('connection', 'content-length', 'host')}
                headers['Host'] = self.headers.get('Host')
                request = urllib.request.Request(outer.to + self.path, body, headers, method=self.command)
                try:
                    got = urllib.request.urlopen(request, timeout=60)
                except urllib.error.HTTPError as error:
                    got = error
                status, kind, data = got.status, got.headers.get('Content-Type', ''), got.read()
                outer.seen.append((self.command, self.path, status))
                if kind.startswith('application/') and 'json' in kind:
                    changed = outer.alter(self.command, self.path, status, json.loads(data))
                    if isinstance(changed, tuple):
                        status, changed = changed
                    if changed is not None:
                        data = json.dumps(changed).encode()
                self.send_response(status)
                self.send_header('Content-Type', kind)
                self.send_header('Content-Length', str(len(data)))
                self.end_headers()
                self.wfile.write(data)

            do_GET = do_POST = answer

        self.server = http.server.ThreadingHTTPServer(('127.0.0.1', 0), Handler)
        self.authority = '127.0.0.1:%d' % self.server.server_address[1]
        self.url = 'http://' + self.authority
        threading.Thread(target=self.server.serve_forever, daemon=True).start()

    def close(self):
        self.server.shutdown()
        self.server.server_close()
