#!/usr/bin/python3
"""Notes that make no sense, through the real parts: each has a defined outcome that stands in the ledger, and the report. A scene,
a permit and people that are invented."""
import os
import subprocess
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from watch import BUILD, ROOT, ask, check, finish, folder, rerun, settings, verify  # noqa: E402


def findings(ledger, code):
    return [row[0] for row in ask(ledger, "SELECT detail FROM finding WHERE code = ? ORDER BY seq", code)]


def refused(daemon):
    """What cannot be meant is refused before it becomes an entry, with what would be allowed."""
    for name, fields, word in (
            ("an unknown group", dict(kind="sighting", person="Ann", group="mermaid", distance_m=100), "porpoise"),
            ("an unknown kind", dict(kind="sightings", person="Ann"), "sighting"),
            ("a distance below 0", dict(kind="sighting", person="Ann", group="porpoise", distance_m=-5), "distance_m"),
            ("a time before the watch began", dict(kind="remark", text="x", occurred_ns=-1), "watch time"),
            ("a sighting by nobody", dict(kind="sighting", group="porpoise"), "person")):
        status, answer = daemon.note(**fields)
        check("%s is refused, with what is allowed" % name, status == 400 and word in str(answer), (status, answer))


def taken(daemon, ledger):
    """What is entered and makes no sense now is an entry all the same, with a finding that names it."""
    def enter(**fields):
        status, answer = daemon.note(**fields)
        check("it is taken: %s" % " ".join(str(v) for v in fields.values()), status == 200, (status, answer))

    for job, answer in (("A1", "open"), ("A1", "close"), ("A1", "close"), ("A1", "open"), ("A1", "open"), ("B2", "open")):
        enter(kind="job", job=job, answer=answer, person="Cleo")
    enter(kind="sign-on", person="Ann", watch="visual")
    enter(kind="sign-on", person="Ann", watch="visual")
    enter(kind="sign-off", person="Bo", watch="visual")
    enter(kind="sighting", person="Ann", group="porpoise", distance_m=100)
    enter(kind="distance", person="Ann", contact=1, distance_m=3000)
    enter(kind="verdict", person="Ann", contact=7, verdict="dismiss", text="a buoy")
    enter(kind="release", person="Dora")
    enter(kind="sighting", person="Ann", group="porpoise", distance_m=100, occurred_ns=1000000)
    enter(kind="sighting", person="Ann", group="porpoise", distance_m=100, occurred_ns=3600 * 10 ** 9)
    enter(kind="deterrent", person="Cleo", answer="off")
    daemon.wait_for(lambda s: False, 0.5)


def stands(ledger):
    nothing = findings(ledger, "note without effect")
    for part in ("job A1 is not open", "job A1 is open already", "Bo signs off", "contact 7", "Dora is not on watch",
                 "the deterrent is off already"):
        check("found, once: %s" % part, sum(part in text for text in nothing) == 1, nothing)
    check("a job that another ends is found", any("B2" in t and "A1" in t for t in findings(ledger, "job not closed")))
    ahead = findings(ledger, "note ahead of time")
    check("a time ahead is found, once", len(ahead) == 1 and "counts from now" in ahead[0], ahead)
    times = ask(ledger, "SELECT occurred_s, known_s FROM note WHERE note = 'sighting' ORDER BY seq")
    check("what the person said of the time stands in the note", len(times) == 3 and abs(times[1][0] - 0.001) < 1e-9 and
          times[1][1] > 0.1 and abs(times[2][0] - 3600) < 1e-9 and times[2][1] < 3600, times)
    inside = ask(ledger, "SELECT max(p_inside) FROM contact WHERE contact = 1")[0][0]
    last = ask(ledger, "SELECT p_inside FROM contact WHERE contact = 1 ORDER BY seq LIMIT 1 OFFSET 1")[0][0]
    check("of two distances the later one holds, and both stand", inside > 0.9 and last < 0.1, (inside, last))


def report(ledger, place):
    done = subprocess.run([BUILD + "/hushwatch", "report", ledger, "--sheet", place + "/report.html"], capture_output=True,
                          text=True, timeout=60)
    with open(place + "/report.html") as file:
        page = file.read()
    check("the report names both permits, and from which run each holds", done.returncode == 0 and
          "seconds-test</td>" in page and "seconds-changed</td>" in page, done.stderr)
    check("and what was found", all(word in page for word in ("note ahead of time", "job A1 is not open", "s ahead)")))
    done = rerun(ledger)
    check("rerun judges each run by its own", done.returncode == 0 and "2 permits in turn" in done.stdout, done.stdout)
    check("the ledger verifies", verify(ledger).returncode == 0)


with folder() as place:
    with open(ROOT + "/tests/system/seconds-permit.cfg") as file:
        text = file.read()
    with open(place + "/new.cfg", "w") as file:
        file.write(text.replace('id = "seconds-test"', 'id = "seconds-changed"'))
    stream = 'input = "scene"; path = "%s/config/scenes/quiet.cfg"; pace = "real";' % ROOT

    def site(permit):
        return settings(place + "/site.cfg", permit=permit, stream=stream, more="pages = { port = 0; };")

    with Daemon(site("tests/system/seconds-permit.cfg")) as daemon:
        daemon.wait_for(lambda s: s["watch_s"] > 0.5, 10)
        refused(daemon)
        taken(daemon, place + "/watch.ledger")
        daemon.terminate()
        site(place + "/new.cfg")
        daemon.start()
        daemon.wait_for(lambda s: s["watch_s"] > 2, 10)
        daemon.terminate()
    stands(place + "/watch.ledger")
    report(place + "/watch.ledger", place)
finish()
