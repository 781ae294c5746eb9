"""A service that shows two histories: a proxy before two services that have the same keys and went different ways. Requests
of some parties go to the second, all others to the first.

    liar.py PORT PORT-FILE FIRST-URL SECOND-URL CONTROL-FILE

The control file holds words, read at every request: the key ids (hex) of parties that are shown the second history; `relay`,
and each side is told what the other side's clients cosigned; `hide`, and nobody is told of any cosigned head."""
import http.server
import json
import re
import sys
import urllib.error
import urllib.request

port, port_file, first, second, control = sys.argv[1:]


def ask(url, method, path, body, headers):
    request = urllib.request.Request(url + path, body, headers, method=method)
    try:
        answer = urllib.request.urlopen(request, timeout=60)
    except urllib.error.HTTPError as error:
        answer = error
    return answer.status, answer.headers.get('Content-Type', ''), answer.read()


class Liar(http.server.BaseHTTPRequestHandler):
    protocol_version = 'HTTP/1.1'

    def log_message(self, *_):
        pass

    def answer(self):
        words = open(control).read().split()
        length = int(self.headers.get('Content-Length') or 0)
        body = self.rfile.read(length) if length else None
        keyid = re.search('keyid="([0-9a-f]+)"', self.headers.get('Signature-Input', ''))
        other = keyid is not None and keyid.group(1) in words
        headers = {k: v for k, v in self.headers.items() if k.lower() not in ('connection', 'content-length')}
        url = second if other else first
        status, kind, data = ask(url, self.command, self.path, body, headers)
        if self.path == '/v1/ledger/head' and status == 200:
            doc = json.loads(data)
            if 'relay' in words:
                doc['cosigned'] += json.loads(ask(first if other else second, 'GET', self.path, None, {'Host': headers['Host']})[2])['cosigned']
            if 'hide' in words:
                doc['cosigned'] = []
            data = json.dumps(doc).encode()
        self.send_response(status)
        self.send_header('Content-Type', kind)
        self.send_header('Content-Length', str(len(data)))
        self.end_headers()
        self.wfile.write(data)

    do_GET = do_POST = answer


server = http.server.ThreadingHTTPServer(('127.0.0.1', int(port)), Liar)
with open(port_file, 'w') as f:
    f.write('%d\n' % server.server_address[1])
server.serve_forever()
