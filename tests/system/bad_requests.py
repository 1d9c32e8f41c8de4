#!/usr/bin/python3
"""Bad requests are refused and the service goes on: bodies, methods, paths, hosts, origins, slow and many senders.

Talks through sockets of its own, so that nothing is repaired on the way. The codes are those of RFC 9110."""
import json
import os
import select
import signal
import socket
import subprocess
import sys
import threading
import time

BUILD = os.environ.get("HUSHWATCH_BUILD", "build")
PROGRAM = os.path.join(BUILD, "tests/browser/board_server")
count = 0
failed = 0


def check(good, name, detail=""):
    global count, failed
    count += 1
    failed += not good
    print("%s %d - %s%s" % ("ok" if good else "not ok", count, name, "" if good else " (" + str(detail)[:300] + ")"), flush=True)


class Server:
    def __init__(self):
        self.process = subprocess.Popen([PROGRAM], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True, bufsize=1)
        self.port = int(self.process.stdout.readline().split()[1])
        self.lines = []
        threading.Thread(target=self.read, daemon=True).start()

    def read(self):
        for line in self.process.stdout:
            self.lines.append(line.rstrip("\n"))

    def say(self, word):
        self.process.stdin.write(word + "\n")

    def connect(self):
        return socket.create_connection(("127.0.0.1", self.port), timeout=10)


def send(server, data, wait=8):
    """The whole answer to raw bytes, until the other side closes or `wait` seconds are over."""
    with server.connect() as s:
        s.settimeout(wait)
        answer = b""
        try:
            s.sendall(data)
        except OSError:
            pass
        try:
            while True:
                piece = s.recv(65536)
                if not piece:
                    break
                answer += piece
        except OSError:
            pass
        return answer


def ask(server, method, path, body=None, headers=None, host=None):
    lines = {"Host": host or "127.0.0.1:%d" % server.port, "Connection": "close"}
    if body is not None:
        lines["Content-Length"] = str(len(body))
        lines["Content-Type"] = "application/json"
    lines.update(headers or {})
    text = "%s %s HTTP/1.1\r\n" % (method, path)
    text += "".join("%s: %s\r\n" % item for item in lines.items() if item[1] is not None) + "\r\n"
    answer = send(server, text.encode("latin-1") + (body or b""))
    head, _, rest = answer.partition(b"\r\n\r\n")
    code = int(head.split()[1]) if head.startswith(b"HTTP/1.1 ") else 0
    return code, head.decode("latin-1"), rest


def serves(server):
    start = time.monotonic()
    code, _, body = ask(server, "GET", "/api/state")
    return code == 200 and "watch_s" in json.loads(body) and time.monotonic() - start < 1.0


NOTE = b'{"kind":"remark","text":"all well"}'


def bodies(server):
    code, _, body = ask(server, "POST", "/api/note", NOTE)
    check(code == 200 and json.loads(body)["id"] == "1.0.note.1", "a good note is taken and has an id", (code, body))
    big = b'{"kind":"remark","text":"' + b"x" * 9000 + b'"}'
    check(ask(server, "POST", "/api/note", big)[0] == 413, "a body above 8 KiB is refused")
    chunked = send(server, b"POST /api/note HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
                   b"Transfer-Encoding: chunked\r\nConnection: close\r\n\r\n" + b"1000\r\n" + b"y" * 4096 + b"\r\n1000\r\n"
                   + b"y" * 4096 + b"\r\n1000\r\n" + b"y" * 4096 + b"\r\n0\r\n\r\n")
    check(chunked.startswith(b"HTTP/1.1 413"), "a chunked body above 8 KiB is refused", chunked)
    for bad in [b"", b"{", b"[]", b"null", b"[" * 8000, b'{"kind":"remark","text":"a"}{', b"\xff\xfe", b'{"kind":"remark","text":NaN}']:
        code, _, body = ask(server, "POST", "/api/note", bad)
        check(code == 400 and json.loads(body)["error"], "malformed: %r" % bad[:32], (code, body))
    code, _, body = ask(server, "POST", "/api/note", b'{"kind":"remark","text":"a","colour":"red"}')
    check(code == 400 and json.loads(body)["field"] == "colour", "an unknown field is named", (code, body))
    code, _, body = ask(server, "POST", "/api/note", b'{"kind":"sighting","person":"Ada","distance_m":"far"}')
    check(code == 400 and json.loads(body)["field"] == "distance_m" and "100000 m" in json.loads(body)["allowed"],
          "a wrong value is named with what is allowed", (code, body))
    code, _, body = ask(server, "POST", "/api/note", b'{"kind":"release"}')
    check(code == 400 and json.loads(body)["field"] == "person", "a missing field is named", (code, body))


def methods_and_paths(server):
    for method in ["PUT", "DELETE", "PATCH", "OPTIONS", "TRACE", "HEAD", "BREW"]:
        check(ask(server, method, "/api/state")[0] == 405, method + " is refused")
    check(ask(server, "GET", "/api/note")[0] == 405, "GET of a path for POST is refused")
    check(ask(server, "POST", "/api/state", NOTE)[0] == 405, "POST to a path for GET is refused")
    for path in ["/../etc/passwd", "/..%2f..%2fetc/passwd", "//etc/passwd", "/%2e%2e/%2e%2e/etc/passwd", "/index.html/..",
                 "/crew/", "/api", "/api/", "/.git/config", "/observer.js.bak", "/%00", "/crew%00.html", "\\windows"]:
        code, _, body = ask(server, "GET", path)
        check(code in (400, 404) or (path == "/%00" and b"root:" not in body) or path == "/crew%00.html" and code == 200,
              "path trick " + path, (code, body[:80]))
    check(ask(server, "GET", "/api/sound?stream=9")[0] == 400, "a stream that does not exist is refused")
    check(ask(server, "GET", "/api/sound?stream=1&from=nan")[0] == 400, "a time that is not a number is refused")
    code, head, _ = ask(server, "GET", "/" + "a" * 60000)
    check(code in (0, 400, 414, 431), "a path of 60 kB is refused", head)
    code, head, _ = ask(server, "GET", "/api/state", headers={"X-%d" % i: "y" * 500 for i in range(200)})
    check(code in (0, 400, 413, 431), "100 kB of headers are refused", head)


def origins(server):
    for host in ["evil.example", "evil.example:%d" % server.port, "127.0.0.1.evil.example", "10.0.0.1", "localhost.evil.example",
                 "[::2]", "127.0.0.1:80x", ""]:
        check(ask(server, "GET", "/api/state", host=host or " ")[0] in (400, 421), "Host %r is refused" % host)
    for host in ["localhost", "127.0.0.1", "LOCALHOST:%d" % server.port, "[::1]:%d" % server.port, "127.8.8.8"]:
        check(ask(server, "GET", "/api/state", host=host)[0] == 200, "Host %r is answered" % host)
    for headers in [{"Origin": "http://evil.example"}, {"Origin": "null"}, {"Origin": "http://127.0.0.1:1"},
                    {"Sec-Fetch-Site": "cross-site"}, {"Sec-Fetch-Site": "same-site"}]:
        check(ask(server, "POST", "/api/note", NOTE, headers)[0] == 403, "cross-site write refused: %s" % headers)
    good = {"Origin": "http://127.0.0.1:%d" % server.port, "Sec-Fetch-Site": "same-origin"}
    check(ask(server, "POST", "/api/note", NOTE, good)[0] == 200, "our own page's write is taken")
    for kind in ["text/plain", "application/x-www-form-urlencoded", "multipart/form-data", "application/jsonp", None]:
        check(ask(server, "POST", "/api/note", NOTE, {"Content-Type": kind})[0] == 415, "Content-Type %s is refused" % kind)
    code, head, _ = ask(server, "GET", "/api/state")
    check("no-store" in head and "default-src 'none'" in head and "nosniff" in head, "answers carry the policy headers", head)
    garbage = send(server, b"\x16\x03\x01\x02\x00\x01\x00" + bytes(range(256)), wait=7)
    check(not garbage or garbage.startswith(b"HTTP/1.1 4"), "a TLS greeting gets no page", garbage)


def slow_senders(server):
    def hold(sender, first):
        with server.connect() as s:
            start = time.monotonic()
            try:
                s.sendall(first)
                while time.monotonic() - start < 12:
                    ready, _, _ = select.select([s], [], [], 0.5)
                    if ready and not s.recv(4096):
                        break
                    s.sendall(sender)
            except OSError:
                pass
            return time.monotonic() - start

    host = b"Host: localhost\r\n"
    results = {}

    def run(name, sender, first):
        results[name] = hold(sender, first)

    cases = {"headers": (b"X-A: b\r\n", b"GET / HTTP/1.1\r\n" + host), "request line": (b"a", b"GET /"),
             "body": (b" ", b"POST /api/note HTTP/1.1\r\n" + host + b"Content-Type: application/json\r\nContent-Length: 4000\r\n\r\n{")}
    threads = [threading.Thread(target=run, args=(name,) + case) for name, case in cases.items()]
    for thread in threads:
        thread.start()
    good = serves(server)
    for thread in threads:
        thread.join()
    check(good, "others are served while slow senders hold on")
    for name in cases:
        check(4.5 < results[name] < 7.5, "a slow sender of the %s is cut after 5 s" % name, results[name])
    print("# figure slow senders cut after " + ", ".join("%s %.1f s" % item for item in results.items()))


def many(server):
    crowd = []
    try:
        for _ in range(300):
            s = socket.create_connection(("127.0.0.1", server.port), timeout=2)
            crowd.append(s)
    except OSError:
        pass
    time.sleep(0.3)
    ended = 0
    for s in crowd:
        s.setblocking(False)
        try:
            ended += s.recv(1) == b""
        except BlockingIOError:
            pass
        except OSError:
            ended += 1
    check(len(crowd) - ended <= 256, "no more than 256 connections wait", (len(crowd), ended))
    check(serves(server), "a newcomer is served all the same")
    time.sleep(6)
    check(serves(server), "after the deadline of the silent ones the service is there")
    for s in crowd:
        s.close()
    time.sleep(0.5)
    readers = []
    for _ in range(30):
        s = server.connect()
        s.sendall(b"GET /api/events HTTP/1.1\r\nHost: localhost\r\n\r\n")
        readers.append(s)  # never read: their buffers fill
    live = server.connect()
    live.sendall(b"GET /api/events HTTP/1.1\r\nHost: localhost\r\n\r\n")
    time.sleep(0.5)
    server.say("stop")
    start, seen, text = time.monotonic(), None, b""
    while time.monotonic() - start < 3 and seen is None:
        text += live.recv(65536)
        if b'"advice":"stop"' in text:
            seen = time.monotonic() - start
    check(seen is not None and seen < 0.2, "30 readers that do not read never hold up the one that does", seen)
    print("# figure a new advice reached a live reader among 30 stuck ones in %.0f ms" % (1000 * (seen or 9)))
    beats, text, start = 0, b"", time.monotonic()
    while time.monotonic() - start < 3.2:
        text += live.recv(65536)
    beats = text.count(b"event: beat")
    states = text.count(b"event: state")
    check(3 <= beats <= 4, "a beat comes each second", beats)
    check(states <= 3.2 * 11 + 2, "at most about ten states a second", states)
    for s in readers + [live]:
        s.close()


class Crowd(threading.Thread):
    """Keeps 1,000 connections from eight addresses open, each a sender of a byte now and then; comes back when cut."""

    def __init__(self, server):
        super().__init__(daemon=True)
        self.server, self.going, self.opened, self.held = server, True, 0, {}

    def run(self):
        while self.going:
            for i in range(1000):
                if i not in self.held:
                    self.held[i] = self.open(i)
                elif not self.trickle(self.held[i]):
                    self.held.pop(i).close()
                if not self.going:
                    break
        for s in self.held.values():
            s.close()

    def open(self, i):
        s = socket.socket()
        s.bind(("127.0.0.%d" % (2 + i % 8), 0))
        s.settimeout(0.05)
        self.opened += 1
        try:
            s.connect(("127.0.0.1", self.server.port))
            s.send(b"GET /")
        except OSError:
            pass
        s.setblocking(False)
        return s

    def trickle(self, s):
        try:
            s.send(b"a")
            return s.recv(1) != b""
        except BlockingIOError:
            return True
        except OSError:
            return False


def crowd_of_slow_senders(server):
    reader = server.connect()
    reader.sendall(b"GET /api/events HTTP/1.1\r\nHost: localhost\r\n\r\n")
    crowd = Crowd(server)
    crowd.start()
    time.sleep(3)
    good, times = 0, []
    for _ in range(200):
        start = time.monotonic()
        try:
            good += ask(server, "GET", "/api/state")[0] == 200
        except OSError:
            pass
        times.append(time.monotonic() - start)
        time.sleep(0.01)
    text, start = b"", time.monotonic()
    reader.settimeout(0.5)
    while b"event: beat" not in text[-2000:] and time.monotonic() - start < 3:
        try:
            text += reader.recv(65536)
        except socket.timeout:
            pass
    crowd.going = False
    crowd.join(20)
    print("# figure among 1,000 slow senders from 8 addresses (%d connections opened) %.1f %% of 200 requests answered, 99th percentile %.0f ms"
          % (crowd.opened, good / 2, 1000 * sorted(times)[197]))
    check(good >= 198, "a crowd of slow senders keeps out nobody but itself: 99 % of others' requests are answered", good)
    check(b"event: beat" in text, "an open event stream is not pushed out by them")
    reader.close()
    time.sleep(0.5)


def examples(server):
    """The curl lines of docs/http.md do what it says; those to the ledger are run by review.py, that of heard sound by sound.py."""
    with open(os.path.join(os.path.dirname(os.path.abspath(__file__)), "../../docs/http.md")) as file:
        text = file.read().replace("\\\n", "").split("## Questions to the ledger")[0]
    commands = [line.strip() for line in text.splitlines() if line.startswith("    curl ") and "/api/hear" not in line]
    check(len(commands) == 5, "docs/http.md has an example of each endpoint", commands)
    for command in commands:
        done = subprocess.run("timeout 2.5 " + command.replace(":8470", ":%d" % server.port), shell=True, capture_output=True, text=True)
        if "/api/events" in command:
            check("event: state\ndata: {" in done.stdout and "event: beat\ndata: {" in done.stdout, "example: " + command[:60], done.stdout[:200])
        else:
            check(done.returncode == 0 and "error" not in json.loads(done.stdout), "example: " + command[:60], done.stdout[:200])


def stream(server, last_id, seconds):
    with server.connect() as s:
        s.sendall(b"GET /api/events HTTP/1.1\r\nHost: localhost\r\nLast-Event-ID: " + last_id.encode() + b"\r\n\r\n")
        text, start = b"", time.monotonic()
        s.settimeout(0.2)
        while time.monotonic() - start < seconds:
            try:
                text += s.recv(65536)
            except socket.timeout:
                pass
        return text.decode("latin-1")


def resumes(server):
    server.say("freeze")
    time.sleep(0.3)
    state = json.loads(ask(server, "GET", "/api/state")[2])
    here = "%d-%d" % (state["run"], state["sequence"])
    for last_id, wanted in [(here, 0), ("%d-%d" % (state["run"], state["sequence"] - 1), 1), ("9-" + here[2:], 1), ("nonsense", 1), ("", 1)]:
        text = stream(server, last_id, 1.3)
        check(text.count("event: state") == wanted and text.count("event: beat") >= 1,
              "resumed after %r of %s: %d state" % (last_id, here, wanted), text[:300])
    server.say("thaw")


def watch_without_answer(server):
    server.say("no-answer")
    time.sleep(0.2)
    answers = []
    threads = [threading.Thread(target=lambda: answers.append(ask(server, "POST", "/api/note", NOTE))) for _ in range(2)]
    for thread in threads:
        thread.start()
    time.sleep(0.3)
    check(serves(server), "others are served while notes wait for the watch")
    for thread in threads:
        thread.join()
    check([code for code, _, _ in answers] == [503, 503] and b"look whether" in answers[0][2],
          "a note that the watch did not answer says so", answers)


def port_in_use(server):
    other = subprocess.run([PROGRAM, str(server.port)], stdin=subprocess.DEVNULL, capture_output=True, text=True, timeout=5)
    check(other.returncode == 1 and "127.0.0.1 port %d" % server.port in other.stderr and "another program" in other.stderr,
          "a port in use is named with its address", other.stderr)


def stops(server):
    streams = []
    for _ in range(20):
        s = server.connect()
        s.sendall(b"GET /api/events HTTP/1.1\r\nHost: localhost\r\n\r\n")
        streams.append(s)
    time.sleep(0.3)
    server.say("quit")
    server.process.wait(5)
    time.sleep(0.1)
    took = [float(line.split()[1]) for line in server.lines if line.startswith("stopped")]
    check(server.process.returncode == 0 and took and took[0] < 0.5, "it stops within 0.5 s with 20 open streams", took)
    print("# figure stopped with 20 open event streams in %.3f s" % (took[0] if took else -1))


def main():
    signal.alarm(150)
    server = Server()
    try:
        for part in (bodies, methods_and_paths, origins, slow_senders, many, crowd_of_slow_senders):
            part(server)
            check(serves(server), "the service goes on after: " + part.__name__)
        resumes(server)
        examples(server)
        watch_without_answer(server)
        port_in_use(server)
        stops(server)
    finally:
        server.process.kill()
    print("1..%d" % count)
    return 1 if failed else 0


sys.exit(main())
