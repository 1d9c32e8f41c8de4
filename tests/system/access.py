#!/usr/bin/python3
"""Who may do what from another machine: no credentials, no pages; a password for a session; each role its own notes.

Runs in a network of its own (unshare; needs to be root, as CI is) whose loopback device also has 192.0.2.7, an address
for documentation (RFC 5737), so that a real daemon sees a visitor who is not at the machine. Cookies are those of RFC 6265,
codes those of RFC 9110; the certificate is made by openssl."""
import fcntl
import http.client
import json
import os
import re
import socket
import ssl
import struct
import subprocess
import sys
import time

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from watch import BUILD, ask, check, figure, finish, folder, settings  # noqa: E402

AWAY = "192.0.2.7"
SCENE = """seed = 3; duration_s = 120.0; rate_hz = 48000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 150.0; y_m = 0.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
"""
PASSWORDS = {"ears": "a quiet sea tonight", "cab": "hammer and pile 12", "office": "months afterwards", "client": "only to look at"}


def own_network():
    """Brings up lo and gives it the second address (netdevice(7): SIOCSIFFLAGS, SIOCSIFADDR)."""
    with socket.socket(socket.AF_INET, socket.SOCK_DGRAM) as s:
        fcntl.ioctl(s, 0x8914, struct.pack("16sH14x", b"lo", 0x49))
        address = struct.pack("16sHH4s8x", b"lo:1", socket.AF_INET, 0, socket.inet_aton(AWAY))
        fcntl.ioctl(s, 0x8916, address)


def user(config, *words, password=None):
    return subprocess.run([BUILD + "/hushwatch", "user", "--config", config] + list(words), text=True, capture_output=True,
                          input=password + "\n" if password else "", timeout=20)


class Visitor:
    def __init__(self, port, address=AWAY):
        self.port, self.address, self.cookie = port, address, None
        self.context = ssl._create_unverified_context()

    def ask(self, method, path, body=None, **headers):
        connection = http.client.HTTPSConnection(self.address, self.port, context=self.context, timeout=10,
                                                 source_address=(self.address, 0))
        headers = {name.replace("_", "-"): value for name, value in headers.items()}
        if self.cookie:
            headers["Cookie"] = self.cookie
        if body is not None:
            headers.setdefault("Content-Type", "application/json")
            body = body if isinstance(body, (str, bytes)) else json.dumps(body)
        connection.request(method, path, body, headers)
        answer = connection.getresponse()
        text = answer.read() if path != "/api/events" else b""
        connection.close()
        self.headers = answer.headers
        return answer.status, text

    def sign_in(self, name, password):
        status, text = self.ask("POST", "/api/sign-in", {"name": name, "password": password})
        if status == 200:
            self.cookie = self.headers["Set-Cookie"].split(";")[0]
        return status, text

    def note(self, **fields):
        return self.ask("POST", "/api/note", fields)[0]


def files(place):
    subprocess.run(["openssl", "req", "-x509", "-newkey", "ec", "-pkeyopt", "ec_paramgen_curve:prime256v1", "-nodes", "-days",
                    "2", "-subj", "/CN=" + AWAY, "-keyout", place + "/key.pem", "-out", place + "/cert.pem"],
                   check=True, capture_output=True)
    with open(place + "/scene.cfg", "w") as file:
        file.write(SCENE)


def site(place, name, pages):
    return settings(place + "/" + name, permit="tests/system/seconds-permit.cfg", ledger="watch.ledger",
                    stream='input = "scene"; path = "scene.cfg"; pace = "real";',
                    channels='{ role = "both"; sensitivity_db = -170.0; full_scale_v = 10.0; }',
                    more="pages = { port = 0; stations = [\"cab\"]; %s };" % pages)


def refusals(place, config):
    """An address that others reach, and no credentials: the daemon does not start."""
    def start(pages):
        done = subprocess.run([BUILD + "/hushwatchd", "--config", site(place, "bad.cfg", pages)], capture_output=True, text=True,
                              timeout=20)
        return done.returncode, done.stderr

    code, said = start('address = "0.0.0.0";')
    check("an open address without credentials is refused", code == 2 and "address" in said and "accounts" in said, said)
    tls = 'certificate = "cert.pem"; key = "key.pem";'
    code, said = start('address = "0.0.0.0"; accounts = "accounts"; ' + tls)
    check("and with an empty file of accounts", code == 2 and "hushwatch user add" in said, said)
    code, said = start('address = "0.0.0.0"; accounts = "accounts";')
    check("and with accounts but no certificate", code == 2 and "certificate" in said, said)
    code, said = start('certificate = "key.pem"; key = "cert.pem";')
    check("a certificate that does not fit its key is said", code == 2 and "belong together" in said, said)
    done = user(config, "add", "ears", "captain", password="long enough for it")
    check("a role that does not exist is refused", done.returncode == 2 and "observer, crew, auditor or client" in done.stderr, done.stderr)
    done = user(config, "add", "ears", "observer", password="short")
    check("a short password is refused", done.returncode == 2 and "10" in done.stderr, done.stderr)
    done = user(config, "add", "Ears!", "observer", password="long enough for it")
    check("a name with other letters is refused", done.returncode == 2 and "a to z" in done.stderr, done.stderr)


def accounts(place, config):
    for name, role in [("ears", "observer"), ("cab", "crew"), ("office", "auditor"), ("client", "client")]:
        done = user(config, "add", name, role, password=PASSWORDS[name])
        check("an account is added: " + role, done.returncode == 0, done.stderr)
    listed = user(config, "list").stdout
    check("accounts are listed with their roles", re.search(r"^cab +crew$", listed, re.M) and len(listed.splitlines()) == 4, listed)
    with open(place + "/accounts") as file:
        text = file.read()
    check("the file holds Argon2id and no password", text.count("$argon2id$v=19$m=65536,t=2,p=1$") == 4 and
          not any(word in text for word in PASSWORDS.values()), text)
    check("nobody else may read it", os.stat(place + "/accounts").st_mode & 0o777 == 0o600)


def strangers(port):
    stranger = Visitor(port)
    for path in ["/api/state", "/api/permit", "/api/events", "/api/sound?stream=1", "/api/who"]:
        status, text = stranger.ask("GET", path)
        check("a stranger gets nothing of " + path, status == 401 and b"watch_s" not in text, (status, text[:100]))
    status, text = stranger.ask("GET", "/crew?station=hammer%20cab")
    check("a page sends a stranger to the sign-in", status == 303 and
          stranger.headers["Location"] == "/sign-in#/crew?station=hammer%20cab" and text == b"", stranger.headers["Location"])
    check("the sign-in itself is open", stranger.ask("GET", "/sign-in")[0] == 200 and stranger.ask("GET", "/sign-in.js")[0] == 200)
    check("a stranger enters nothing", stranger.note(kind="remark", text="hello") == 401)
    for cookie in ["hushwatch=", "hushwatch=ears.9999999999." + "0" * 64, "hushwatch=ears", "hushwatch=..", "hushwatch=" + "x" * 4000]:
        stranger.cookie = cookie
        check("a made-up session is none: " + cookie[:30], stranger.ask("GET", "/api/state")[0] == 401)


def roles(port):
    wanted = {"ears": (200, 200, 200), "cab": (403, 200, 403), "office": (403, 403, 403), "client": (403, 403, 403)}
    visitors = {}
    for name, (remark, stopped, crew_release) in wanted.items():
        visitor = visitors[name] = Visitor(port)
        status, _ = visitor.sign_in(name, PASSWORDS[name])
        cookie = visitor.headers["Set-Cookie"] or ""
        check(name + " signs in", status == 200 and all(w in cookie for w in ["HttpOnly", "SameSite=Strict", "Secure", "Max-Age="]), cookie)
        status, text = visitor.ask("GET", "/api/state")
        check(name + " reads", status == 200 and b"watch_s" in text)
        who = json.loads(visitor.ask("GET", "/api/who")[1])
        check(name + " is who the server says", who["account"] == name, who)
        answers = (visitor.note(kind="remark", text="by " + name), visitor.note(kind="source state", source_state="off"),
                   visitor.note(kind="release", person="A. Ears"))
        check(name + " may enter what the role may", answers == (remark, stopped, crew_release), answers)
    return visitors


def notes_name_their_account(place):
    rows = ask(place + "/watch.ledger", "SELECT json_extract(body, '$.account'), json_extract(body, '$.text') FROM entry WHERE kind = 'note' AND json_extract(body, '$.note') = 'remark'")
    check("an entry says whose session it came by", ("ears", "by ears") in [tuple(row) for row in rows], rows)


def tries(port):
    tried = Visitor(port)
    unknown, known = [], []
    for i in range(3):
        start = time.monotonic()
        status, text = tried.sign_in("nobody" if i else "ears", "wrong password")
        (unknown if i else known).append(time.monotonic() - start)
        check("a wrong name or password is refused", status == 401 and b"name or password" in text, (status, text))
    figure("a try takes %.2f s with a name that exists, %.2f s with one that does not" % (min(known), min(unknown)))
    check("how long it takes does not tell which names exist", 0.3 < min(unknown) / min(known) < 3, (known, unknown))
    status = 401
    for _ in range(4):
        if status == 401:
            status, text = tried.sign_in("ears", "wrong password")
    check("after five that failed one must wait", status == 429 and b"try again in" in text, (status, text))
    check("and the right password does not help before", tried.sign_in("ears", PASSWORDS["ears"])[0] == 429)
    time.sleep(2.2)
    check("after the wait it does", tried.sign_in("ears", PASSWORDS["ears"])[0] == 200)


def endings(config, port, visitors):
    cab = visitors["cab"]
    check("a write from another site's page is refused", cab.ask("POST", "/api/note", {"kind": "source state", "source_state": "off"},
                                                                 Origin="https://evil.example")[0] == 403)
    user(config, "add", "cab", "crew", password="another password now")
    deadline = time.monotonic() + 4
    while cab.ask("GET", "/api/state")[0] == 200 and time.monotonic() < deadline:
        time.sleep(0.2)
    check("a new password ends the account's sessions", cab.ask("GET", "/api/state")[0] == 401)
    check("the others' go on", visitors["ears"].ask("GET", "/api/state")[0] == 200)
    user(config, "remove", "office")
    time.sleep(2)
    check("so does its removal", visitors["office"].ask("GET", "/api/state")[0] == 401)
    status, _ = visitors["client"].ask("POST", "/api/sign-out", {})
    check("signing out takes the cookie back", status == 200 and "Max-Age=0" in visitors["client"].headers["Set-Cookie"])
    check("at the machine itself nobody signs in", Visitor(port, "127.0.0.1").ask("GET", "/api/state")[0] == 200)
    with socket.create_connection((AWAY, port), timeout=5) as s:
        s.sendall(b"GET /api/state HTTP/1.1\r\nHost: 192.0.2.7\r\n\r\n")
        check("nothing is answered in the clear", b"watch_s" not in s.recv(4096))


def main():
    if os.environ.get("HUSHWATCH_NETWORK") != "own":
        environment = dict(os.environ, HUSHWATCH_NETWORK="own")
        sys.exit(subprocess.run(["unshare", "--net", sys.executable, os.path.abspath(__file__)], env=environment).returncode)
    own_network()
    with folder() as place:
        files(place)
        config = site(place, "site.cfg", 'address = "0.0.0.0"; accounts = "accounts"; certificate = "cert.pem"; key = "key.pem";')
        refusals(place, config)
        accounts(place, config)
        with Daemon(config) as daemon:
            strangers(daemon.port)
            visitors = roles(daemon.port)
            tries(daemon.port)
            daemon.kill()
            daemon.start()
            check("a restart signs nobody out", [visitor.__setattr__("port", daemon.port) or visitor.ask("GET", "/api/state")[0]
                                                 for visitor in visitors.values()] == [200] * 4)
            endings(config, daemon.port, visitors)
            daemon.terminate()
        notes_name_their_account(place)
    finish()


main()
