#!/usr/bin/python3
"""Questions to a ledger ashore: hushwatch review on a copy of the demonstration's ledger, opened read-only, without settings.
What it answers is compared with what Python's sqlite3 reads from the same file; the examples of docs/http.md are run; texts
with markup, wrong values, a kept sound whose file was changed, and a ledger that was tampered with."""
import collections
import datetime
import hashlib
import json
import os
import re
import shutil
import signal
import sqlite3
import subprocess
import sys
import threading
import time
import urllib.error
import urllib.parse
import urllib.request

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from watch import BUILD, ROOT, ask, check, figure, finish, folder, scan, settings  # noqa: E402

ZERO = datetime.datetime(2026, 3, 1, 12, tzinfo=datetime.timezone.utc).timestamp()


class Review:
    """The verb, serving."""

    def __init__(self, ledger, *arguments):
        self.process = subprocess.Popen([BUILD + "/hushwatch", "review", ledger] + list(arguments), stdout=subprocess.PIPE, text=True)
        self.base = re.search(r"http://127\.0\.0\.1:\d+", self.process.stdout.readline()).group(0)

    def get(self, path, **query):
        """(code, bytes)"""
        try:
            with urllib.request.urlopen(self.base + path + ("?" + urllib.parse.urlencode(query) if query else ""), timeout=10) as answer:
                return answer.status, answer.read()
        except urllib.error.HTTPError as error:
            return error.code, error.read()

    def ask(self, path, **query):
        code, body = self.get(path, **query)
        return json.loads(body) if code == 200 else (code, body)

    def state(self, wanted, seconds=20):
        end = time.monotonic() + seconds
        while True:
            said = self.ask("/api/ledger")
            if said["state"] == wanted or time.monotonic() > end:
                return said
            time.sleep(0.1)

    def pages(self, path, key, **query):
        """Everything, page by page."""
        found, after, n = [], 0, 0
        while True:
            answer = self.ask(path, after=after, **query)
            found += answer[key]
            n += 1
            if answer["next"] is None:
                return found, n
            after = answer["next"]

    def end(self):
        start = time.monotonic()
        self.process.send_signal(signal.SIGTERM)
        code = self.process.wait(timeout=10)
        self.process.stdout.close()
        return code, time.monotonic() - start


def same_as_the_file(review, ledger):
    rows = ask(ledger, "SELECT seq, utc, kind, body FROM entry WHERE kind IN ('advice', 'finding', 'phase') ORDER BY seq")
    found, n = review.pages("/api/entries", "entries", kind="advice,finding,phase", limit=7)
    same = [(e["seq"], e["utc"], e["kind"], e["body"]) for e in found] == [(r[0], r[1], r[2], json.loads(r[3])) for r in rows]
    check("entries come page by page, all of them, in order", same and n == -(-len(rows) // 7), (len(found), len(rows), n))
    some = review.ask("/api/entries", kind="note", **{"from": ZERO + 80, "to": ZERO + 110})["entries"]
    wanted = [r[0] for r in ask(ledger, "SELECT id FROM note WHERE utc >= '2026-03-01T12:01:20' AND utc < '2026-03-01T12:01:50'")]
    check("a span of time", [e["body"]["id"] for e in some] == wanted and len(wanted) == 3, (some, wanted))
    lead = review.ask("/api/entries", kind="phase", lead=1, **{"from": ZERO + 200, "to": ZERO + 210})["entries"]
    check("the phase that held before it", [e["body"]["phase"] for e in lead] == ["full power"], lead)
    said = review.ask("/api/entries", kind="advice,finding,note", words="PASSED by voice")["entries"]
    check("words, whatever their case", [e["kind"] for e in said] == ["finding"], said)
    of_job = review.ask("/api/entries", kind="advice", job="pile 7", limit=500)["entries"]
    wanted = ask(ledger, "SELECT count(*) FROM advice WHERE job = 'pile 7'")[0][0]
    check("a job's advice", len(of_job) == wanted > 0 and all(e["body"]["job"] == "pile 7" for e in of_job), len(of_job))


def sums(review, ledger):
    query = {"from": ZERO, "to": ZERO + 480, "steps": 48}
    counts, loudest = collections.Counter(), {}
    for at, level in ask(ledger, "SELECT time_s, sel_db FROM impulse WHERE whose = 'ours' AND beside IS NOT 1"):
        counts[int(at // 10)] += 1
        loudest[int(at // 10)] = max(loudest.get(int(at // 10), -999), level)
    rows = review.ask("/api/timeline", kind="impulse", **query)["rows"]["ours"]
    check("impulses: how many and the loudest of each step", rows == [[s, counts[s], loudest[s]] for s in sorted(counts)], rows)
    pieces = sorted(ask(ledger, "SELECT start_s, end_s FROM unheard WHERE cause = 'own source' ORDER BY seq"))
    covered, total = 0.0, 0.0
    for start, end in pieces:  # their union
        total += max(0.0, end - max(start, covered))
        covered = max(covered, end)
    row = review.ask("/api/timeline", kind="unheard", **query)["rows"]["own source"]
    check("unheard time: what overlaps counts once", abs(sum(r[1] for r in row) - total) < 0.05 and all(r[1] <= 10.001 for r in row),
          (sum(r[1] for r in row), total))
    figure("unheard %.3f s by the page, %.3f s by a union of the pieces" % (sum(r[1] for r in row), total))
    minutes = ask(ledger, "SELECT json_extract(body, '$.minute.mean_db') FROM entry WHERE kind = 'level' AND "
                  "json_extract(body, '$.stream') = 1 AND json_extract(body, '$.channel') = 2")
    row = review.ask("/api/timeline", kind="level", **query)["rows"]["1.2"]
    # A job's begin or end closes the entry of a minute, and another one follows: both may begin in one step.
    check("levels: the mean of each minute", max(r[2] for r in row) == max(m[0] for m in minutes if m[0] is not None)
          and sum(r[1] for r in row) == len(minutes) and len(minutes) >= 8, (row, minutes))


def the_picture(review, ledger):
    """Each row of the survey against the entries."""
    span = {"from": ZERO + 100, "to": ZERO + 300}
    rows = {row: review.pages("/api/survey", "items", row=row, limit=3, **span)[0]
            for row in ("visual watch", "phase", "job", "contacts", "advice", "findings")}
    wanted = [r[0] for r in ask(ledger, "SELECT id FROM phase WHERE utc >= '2026-03-01T12:01:20' AND utc <= '2026-03-01T12:05:00.000000Z' ORDER BY seq")]
    check("phases, from the one that held before on, each until the next", [i[4] for i in rows["phase"]] == wanted and
          all(a[1] == b[0] for a, b in zip(rows["phase"], rows["phase"][1:])), (rows["phase"], wanted))
    check("where the source worked is said", [i[2] for i in rows["phase"]] == ["full" if i[3] in ("soft start", "full power") else "open" for i in rows["phase"]])
    for row, kind in (("advice", "advice"), ("findings", "finding")):
        wanted = [r[0] for r in ask(ledger, "SELECT id FROM %s WHERE utc BETWEEN '2026-03-01T12:01:40' AND '2026-03-01T12:05:00.000000Z' ORDER BY seq" % kind)]
        check(row + " of the span", [i[4] for i in rows[row]] == wanted and wanted and all(i[0] == i[1] for i in rows[row]), (rows[row], wanted))
    check("contacts that were open in it", [(i[3].split(",")[0], i[2]) for i in rows["contacts"]] == [("contact 1", "act"), ("contact 2", "act")], rows["contacts"])
    check("who watched", [i[3] for i in rows["visual watch"]] == ["M. Lind"] and rows["visual watch"][0][:2] == [ZERO + 2, ZERO + 471], rows["visual watch"])
    group = review.ask("/api/survey", row="contacts", group="delphinid", **span)["items"]
    check("of one group", [i[3].split(",")[0] for i in group] == ["contact 2"], group)


def chains(review, ledger):
    for kind in ("finding", "advice", "phase"):
        identity = ask(ledger, "SELECT id FROM %s ORDER BY seq DESC LIMIT 1" % kind)[0][0]
        printed = subprocess.run([BUILD + "/hushwatch", "explain", ledger, identity], capture_output=True, text=True).stdout
        answer = review.ask("/api/explain", id=identity)
        lines = [line for line in printed.splitlines() if re.match(r" *\d+\.\d+\.\w+\.\d+(  |:)", line)]
        said = ["%s%s" % (" " * 3 * e["level"], e["id"]) for e in answer["entries"]]
        check("%s: what is behind it is what explain prints" % kind, [re.split("  (?! )|:", l.rstrip())[0] if l[0] != " " else
              re.match(r" *[^ :]+", l).group(0) for l in lines] == said and all(e["words"] in printed for e in answer["entries"] if not e["above"]),
              (said[:5], lines[:5]))
        check("%s: with the permit's values" % kind, all(v["key"] + " = " + v["value"] in printed for v in answer["values"]) and answer["values"],
              answer["values"][:2])
    check("an id that is not there is 404", review.get("/api/explain", id="9.9.advice.9")[0] == 404)


def a_sample(review):
    one, again, other = (review.ask("/api/sample", seed=seed, limit=20) for seed in (7, 7, 8))
    text = json.dumps(one)
    check("a seed always draws the same", one == again and one["population"] == len(one["sample"]) == 2, one)
    check("each contact once, whatever the seed", sorted(s["contact"] for s in other["sample"]) == [1, 2], other)
    check("and nothing says what it was taken for", not re.search("group|grade|state|verdict|class|whale|delphinid", text), text)
    first = next(s for s in one["sample"] if s["contact"] == 2)["sounds"][0]
    check("it says when and where to listen", first["stream"] == 1 and first["channel"] == 1 and
          ZERO + 225 < first["start_unix_s"] < first["end_unix_s"] < ZERO + 230, first)


def wrong_questions(review):
    for path, query in [("/api/entries", {"kind": "entry"}), ("/api/entries", {}), ("/api/entries", {"kind": "advice' OR 1=1 --"}),
                        ("/api/entries", {"kind": "advice", "limit": "501"}), ("/api/entries", {"kind": "advice", "from": "nan"}),
                        ("/api/entries", {"kind": "advice", "after": "-1"}), ("/api/entries", {"kind": "advice", "words": "x" * 200}),
                        ("/api/timeline", {"kind": "run", "from": "1", "to": "2"}),
                        ("/api/timeline", {"kind": "impulse", "from": "5", "to": "5"}), ("/api/sample", {"seed": "1e99"}),
                        ("/api/explain", {"id": "1' OR '1"}), ("/api/explain", {}), ("/api/clip", {"id": "../../etc/passwd"})]:
        code, body = review.get(path, **query)
        good = code in (400, 404) and "error" in json.loads(body) or (path == "/api/timeline" and code == 200 and not json.loads(body)["rows"])
        check("refused: %s %s" % (path, query), good, (code, body[:200]))
    for path in ("/api/state", "/api/note", "/api/events", "/crew", "/index.html", "/observer.js.html", "/review/../api/state"):
        check("ashore there is no %s" % path, review.get(path)[0] == 404, review.get(path))
    request = urllib.request.Request(review.base + "/api/note", data=b'{"kind":"remark","text":"x"}', headers={"Content-Type": "application/json"})
    try:
        code = urllib.request.urlopen(request, timeout=5).status
    except urllib.error.HTTPError as error:
        code = error.code
    check("and nothing can be entered", code == 404, code)


def examples(review):
    with open(ROOT + "/docs/http.md") as file:
        part = file.read().split("## Questions to the ledger")[1]
    commands = [line.strip() for line in part.splitlines() if line.startswith("    curl ")]
    check("docs/http.md has an example of each question", len(commands) == 7, commands)
    for command in commands:
        done = subprocess.run("timeout 5 " + command.replace("http://127.0.0.1:8470", review.base), shell=True, capture_output=True, text=True)
        check("example: " + command[:70], done.returncode == 0 and "error" not in json.loads(done.stdout), done.stdout[:200])


def chained(ledger, sql, *parameters):
    """Changes the ledger, as somebody would who knows how, and makes every hash anew."""
    connection = sqlite3.connect(ledger)
    connection.execute(sql, parameters)
    before = "0" * 64
    for seq, utc, kind, body in connection.execute("SELECT seq, utc, kind, body FROM entry ORDER BY seq").fetchall():
        before = hashlib.sha256("\n".join((before, str(seq), utc, kind, body)).encode()).hexdigest()
        connection.execute("UPDATE entry SET hash = ? WHERE seq = ?", (before, seq))
    connection.commit()
    connection.close()


def sounds(place, ledger):
    """A sound that was kept: an entry with its file's digest, added in the form that docs/ledger.md gives."""
    clips = place + "/kept.ledger.sound/clips"
    os.makedirs(clips)
    kept = shutil.copy(ledger, place + "/kept.ledger")
    data = b"fLaC" + os.urandom(3000)
    with open(clips + "/1.flac", "wb") as file:
        file.write(data)
    contact = ask(ledger, "SELECT id FROM contact WHERE contact = 2 ORDER BY seq LIMIT 1")[0][0]
    bodies = [json.dumps({"causes": [contact], "file": name, "id": "1.1.sound.%d" % n, "sha256": hashlib.sha256(data).hexdigest()}, sort_keys=True,
                         separators=(",", ":")) for n, name in enumerate(["1.flac", "gone.flac", "../clips/1.flac"], 1)]
    chained(kept, "INSERT INTO entry VALUES (NULL, '2026-03-01T12:08:01.000000Z', 'sound', ?, '')", bodies[0])
    for body in bodies[1:]:
        chained(kept, "INSERT INTO entry VALUES (NULL, '2026-03-01T12:08:01.000000Z', 'sound', ?, '')", body)
    review = Review(kept)
    code, got = review.get("/api/clip", id="1.1.sound.1")
    check("a sound kept whose file is the ledger's", code == 200 and json.loads(got)["sha256"] == hashlib.sha256(data).hexdigest(), (code, got[:100]))
    code, got = review.get("/clip/1.1.sound.1", form="file")
    check("is given byte for byte", code == 200 and got == data, (code, got[:100]))
    check("one whose file is not there is said", review.get("/api/clip", id="1.1.sound.2")[0] == 404)
    code, got = review.get("/api/clip", id="1.1.sound.3")
    check("a name that leads out of the folder is refused", code == 409, (code, got[:100]))
    of = {c["contact"]: c["clips"] for c in review.ask("/api/contacts")["contacts"]}
    check("sounds are told with their contact", of[2][0] == "1.1.sound.1" and of[1] == [], of)
    drawn = next(s for s in review.ask("/api/sample", seed=1)["sample"] if s["contact"] == 2)
    check("and in the sample", "1.1.sound.1" in drawn["clips"], drawn)
    with open(clips + "/1.flac", "r+b") as file:
        file.seek(1000)
        file.write(b"other")
    code, got = review.get("/api/clip", id="1.1.sound.1")
    check("a file that was changed is said", code == 409 and b"digest" in got, (code, got[:100]))
    review.end()
    os.remove(kept)


def tampered(place, ledger):
    bad = shutil.copy(ledger, place + "/bad.ledger")
    review = Review(bad)
    check("the copy is good at first", review.state("good")["state"] == "good")
    connection = sqlite3.connect(bad)
    connection.execute("UPDATE entry SET body = replace(body, 'stopped', 'stoppeD') WHERE kind = 'note'")
    [first] = connection.execute("SELECT min(seq) FROM entry WHERE kind = 'contact'").fetchone()
    connection.execute("UPDATE entry SET body = '{\"id\":' WHERE seq = ?", (first,))
    connection.commit()
    connection.close()
    said = review.state("faults")
    check("what is changed while it is looked at is found", said["state"] == "faults" and first in [f["seq"] for f in said["faults"]], said)
    found = review.ask("/api/entries", kind="contact", limit=1)["entries"][0]
    check("a body that is no JSON is given as text", found["body"] == '{"id":', found)
    answers = [review.get(path, **query)[0] for path, query in [("/api/contacts", {}), ("/api/sample", {}), ("/api/explain", {"id": "1.0.finding.1"}),
                                                                ("/api/timeline", {"kind": "unheard", "from": ZERO, "to": ZERO + 480})]]
    check("and the other questions are answered all the same", answers == [200] * 4, answers)
    review.end()
    os.remove(bad)


def read_only(place, ledger):
    """A folder that may not be written, as on a medium ashore (root may write anywhere: then only the file's bytes are compared)."""
    medium = place + "/medium"
    os.makedirs(medium)
    copy = shutil.copy(ledger, medium + "/copy.ledger")
    with open(copy, "rb") as file:
        before = hashlib.sha256(file.read()).hexdigest()
    os.chmod(copy, 0o444)
    os.chmod(medium, 0o555)
    review = Review(copy)
    good = review.state("good")
    code, took = review.end()
    with open(copy, "rb") as file:
        after = hashlib.sha256(file.read()).hexdigest()
    os.chmod(medium, 0o755)
    check("a read-only copy is served, and not a byte of it changes", good["state"] == "good" and not good["live"] and before == after, good)
    check("SIGTERM ends it well in under 1 s", code == 0 and took < 1, (code, took))
    shutil.rmtree(medium)


def times_of_advice(daemon, n):
    """Seconds from a note until the advice that follows from it is shown, in order of size."""
    took = []
    for i in range(n):
        before = daemon.state()["advice"][0]["id"] if daemon.state()["advice"] else ""
        start = time.monotonic()
        daemon.note(kind="source state", source_state="full power" if i % 2 == 0 else "off")  # nobody watches: stop, do not start
        shown = daemon.wait_for(lambda s: s["advice"] and s["advice"][0]["id"] != before, 5, 0.005)
        took.append(time.monotonic() - start if shown else 99)
        time.sleep(0.2)
    return sorted(took)


def under_load(place):
    """A running watch whose review is asked by 12 clients at once, all the time, for what takes long."""
    with open(place + "/scene.cfg", "w") as file:
        file.write("""seed = 3; duration_s = 120.0; rate_hz = 48000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 150.0; y_m = 0.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
""")
    config = settings(place + "/load.cfg", permit="tests/system/seconds-permit.cfg", channels='{ role = "listen"; sensitivity_db = -170.0; full_scale_v = 10.0; }',
                      stream='input = "scene"; path = "scene.cfg"; pace = "real";', ledger="load.ledger", more="pages = { port = 0; };")
    stop, codes = threading.Event(), collections.Counter()

    def press(daemon, n):
        while not stop.is_set():
            path = ["/api/entries?kind=note,phase,advice,unheard,call,level&words=nowhere&limit=500", "/api/contacts", "/api/sample?seed=%d" % n,
                    "/api/timeline?kind=level&from=1&to=9000000000&steps=1000", "/api/explain?id=1.0.advice.1&depth=20"][n % 5]
            try:
                with urllib.request.urlopen(daemon.url(path), timeout=10) as answer:
                    answer.read()
                    codes[answer.status] += 1
            except urllib.error.HTTPError as error:
                codes[error.code] += 1
    with Daemon(config) as daemon:
        quiet = times_of_advice(daemon, 16)
        threads = [threading.Thread(target=press, args=(daemon, n)) for n in range(12)]
        for thread in threads:
            thread.start()
        busy = times_of_advice(daemon, 16)
        stop.set()
        for thread in threads:
            thread.join()
        unheard = daemon.state()["streams"][0]["unheard_s"]
        daemon.terminate()
    figure("note to advice shown: %.0f ms (median), at most %.0f ms; with %d questions answered meanwhile %.0f and %.0f ms" %
           (1e3 * quiet[8], 1e3 * quiet[-1], codes[200], 1e3 * busy[8], 1e3 * busy[-1]))
    check("no question delays an advice: shown within 1 s though 12 clients ask all the time", busy[-1] < 1.0 and codes[200] > 50, (quiet, busy, codes))
    check("and no sound is lost", unheard == 0, unheard)


def wrong_use(place):
    with open(place + "/text", "w") as file:
        file.write("no ledger\n" * 200)
    for arguments in ([], [place + "/none"], [place + "/text"], ["x", "--port", "70000"], ["x", "y"]):
        done = subprocess.run([BUILD + "/hushwatch", "review"] + arguments, capture_output=True, text=True, timeout=10)
        check("wrong use %s is exit 2 with a sentence" % [os.path.basename(a) for a in arguments], done.returncode == 2 and done.stderr, done)
    done = subprocess.run([BUILD + "/hushwatch", "review", "--help"], capture_output=True, text=True)
    check("--help", done.returncode == 0 and "review LEDGER" in done.stdout)


def main():
    signal.alarm(160)
    with folder() as place:
        ledger = place + "/demo.ledger"
        done = scan(ROOT + "/config/demonstration.cfg", ledger, "--start", "2026-03-01T12:00:00Z")
        check("the demonstration is scanned", done.returncode == 0, done.stderr)
        review = Review(ledger)
        check("its check says good, and what verify says", review.state("good")["last_hash"] ==
              ask(ledger, "SELECT hash FROM entry ORDER BY seq DESC LIMIT 1")[0][0])
        for part in (same_as_the_file, the_picture, sums, chains):
            part(review, ledger)
        for part in (a_sample, wrong_questions, examples):
            part(review)
        review.end()
        sounds(place, ledger)
        tampered(place, ledger)
        read_only(place, ledger)
        under_load(place)
        wrong_use(place)
    finish()


main()
