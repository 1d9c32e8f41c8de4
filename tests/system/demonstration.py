#!/usr/bin/python3
"""The demonstration scene: pre-watch, delay by an animal, release, soft start, stop, acknowledgement, clearance and a new start,
in the ledger in the right order at the right scene times. As fast as possible here; the long run plays it through the real
daemon in real time (eight minutes), killed and started again in the middle."""
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from watch import LENGTH, ROOT, ask, check, figure, finish, folder, scan, verify  # noqa: E402

# What the scene's timetable and animals ask for: (phase, earliest, latest) in scene seconds.
PHASES = [("pre-watch", 3.0, 3.0), ("delay", 36.0, 75.0), ("ready", 80.0, 80.0), ("soft start", 108.0, 110.6),
          ("full power", 190.0, 190.0), ("shutdown", 252.0, 252.0), ("ready", 310.0, 335.0), ("soft start", 348.0, 350.6),
          ("full power", 424.0, 424.0), ("post-watch", 461.0, 461.0)]


def look_at(ledger, name):
    zero = ask(ledger, "SELECT min(utc) FROM entry")[0][0]
    rows = ask(ledger, "SELECT phase, (julianday(utc) - julianday(?)) * 86400, reason FROM phase ORDER BY seq", zero)
    # After an outage the pre-watch may have to be kept again before a start is possible.
    seen = [row for i, row in enumerate(rows) if not (row[0] == "pre-watch" and i > 0) and
            not (row[0] == "ready" and i > 0 and rows[i - 1][0] == "ready")]
    seen = [row for row in seen if row[0] != "off"]
    right = len(seen) >= len(PHASES) and all(
        row[0] == word and low - 0.05 <= row[1] <= high + 0.05 for row, (word, low, high) in zip(seen, PHASES))
    check(name + ": the phases come in order, at the scene's times", right, rows)
    advice = [row[0] for row in ask(ledger, "SELECT advice FROM advice WHERE station = 'crew' ORDER BY seq")]
    wanted = ["do not start", "may start", "carry on", "stop", "may start", "carry on", "do not start"]
    at = 0
    for word in advice:
        at += at < len(wanted) and word == wanted[at]
    check(name + ": the crew is told to wait, start, stop and start again", at == len(wanted), advice)
    stop = ask(ledger, "SELECT reason, causes FROM advice WHERE advice = 'stop' AND station = 'crew' ORDER BY seq LIMIT 1")
    check(name + ": the stop names the dolphins and their calls", stop and "delphinid" in stop[0][0] and
          ".call." in stop[0][1], stop)
    notes = [row[0] for row in ask(ledger, "SELECT json_extract(body, '$.note') FROM entry WHERE kind = 'note'")]
    check(name + ": the acknowledgement is in the ledger", "acknowledgement" in notes, notes)
    blows = ask(ledger, "SELECT count(*) FROM impulse WHERE whose = 'ours'")[0][0]
    figure("%s: %d blows of 139, %d calls" % (name, blows, ask(ledger, "SELECT count(*) FROM call")[0][0]))
    check(name + ": the ledger verifies", verify(ledger).returncode == 0)


def fast(place):
    done = scan(ROOT + "/config/demonstration.cfg", place + "/fast.ledger", "--start", "2026-03-01T12:00:00Z")
    check("the demonstration is scanned", done.returncode == 0, done.stderr)
    look_at(place + "/fast.ledger", "fast")


def real(place):
    with open(ROOT + "/config/demonstration.cfg") as file:
        text = file.read()
    text = text.replace("../build/demonstration.ledger", place + "/real.ledger").replace("port = 8470", "port = 0")
    for folder_name in ("permits/", "scenes/", "criteria/"):
        text = text.replace('"' + folder_name, '"' + ROOT + "/config/" + folder_name)
    text = text.replace('"calls"', '"' + ROOT + '/config/calls"')
    with open(place + "/real.cfg", "w") as file:
        file.write(text)
    daemon = Daemon(place + "/real.cfg")
    with daemon:
        daemon.wait_for(lambda s: s["watch_s"] > 270, 300, 1)
        before = daemon.state()
        daemon.kill()
        daemon.start()
        after = daemon.advice("crew")
        check("killed in the shutdown and started again, the stop is in force", (after or {}).get("advice") == "stop",
              (before["advice"][:2], after))
        daemon.wait_for(lambda s: s["watch_s"] > 478, 300, 1)
        seconds, code = daemon.terminate()
        check("SIGTERM ends it in under 1 s", seconds < 1 and code == 0, (seconds, code))
    look_at(place + "/real.ledger", "real pace")


with folder() as place_of_test:
    fast(place_of_test)
    if LENGTH == "long":
        real(place_of_test)
finish()
