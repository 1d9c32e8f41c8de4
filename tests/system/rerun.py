#!/usr/bin/python3
"""Deriving a ledger again: the same to the byte, by the ledger alone, also over a kill and over a permit that changes between two
runs; anything that was altered is found and named. What another permit would have given, against counts that sqlite makes of
the ledger. The chain behind an entry, against the causes that sqlite reads. Scenes, permits and people are invented."""
import json
import os
import re
import shutil
import sqlite3
import subprocess
import sys
import time

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from watch import BUILD, ROOT, ask, check, figure, finish, folder, rerun, scan, settings, verify  # noqa: E402

SCENE = """seed = 5; duration_s = 60.0; rate_hz = 24000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
hammers = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 9.0;
              steps = ( { duration_s = 45.0; blow_interval_s = 1.0; source_energy_level_db = 200.0; } ); } );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
          { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "pile 1"; answer = "open"; },
          { at_s = 7.5; kind = "release"; person = "A. Eyes"; },
          { at_s = 8.5; kind = "source state"; person = "C. Crew"; source_state = "soft start"; },
          { at_s = 10.5; kind = "sighting"; person = "A. Eyes"; group = "porpoise"; distance_m = 123.4; } );
"""


def hushwatch(*arguments):
    return subprocess.run([BUILD + "/hushwatch"] + list(arguments), capture_output=True, text=True, timeout=300)


def the_same(ledger):
    """Only the ledger is there: settings, permit, criteria and scene are not beside it."""
    alone = os.path.dirname(ledger) + "/alone"
    os.makedirs(alone)
    shutil.copy(ledger, alone + "/copy.ledger")
    begin = time.monotonic()
    done = subprocess.run([BUILD + "/hushwatch", "rerun", "copy.ledger"], cwd=alone, capture_output=True, text=True)
    figure("a ledger of %d entries is derived again in %.2f s" %
           (ask(ledger, "SELECT count(*) FROM entry")[0][0], time.monotonic() - begin))
    check("a ledger is identical, by itself", done.returncode == 0 and "identical: " in done.stdout, done.stdout + done.stderr)
    said = dict((kind, int(n)) for n, kind in re.findall(r"(\d+) (\w+)", done.stdout.split("the same:")[1].split("\n")[0]))
    held = dict(ask(ledger, "SELECT kind, count(*) FROM entry WHERE kind IN ('permit', 'contact', 'phase', 'advice', 'finding', "
                            "'correction', 'exposure', 'source') GROUP BY kind"))
    check("every conclusion that the ledger holds is counted", said == held and held["advice"] > 10, (said, held))


def altered(ledger, name, sql, named, *parameters):
    """A copy with one thing changed: exit code 1, and the changed entry (or what follows from it) is named."""
    copy = os.path.join(os.path.dirname(ledger), "altered.copy")
    shutil.copy(ledger, copy)
    connection = sqlite3.connect(copy)
    n = connection.execute(sql, parameters).rowcount
    connection.commit()
    connection.close()
    done = rerun(copy, "--explain-differences", "500")
    os.unlink(copy)
    check("%s is found and named" % name, n == 1 and done.returncode == 1 and "NOT identical" in done.stdout and
          re.search(named, done.stdout), (n, done.returncode, done.stdout[-2000:], done.stderr))


def one(ledger, sql):
    return ask(ledger, sql)[0][0]


def any_change(ledger):
    change = "UPDATE entry SET body = replace(body, ?, ?) WHERE seq = "
    note = one(ledger, "SELECT seq FROM note WHERE note = 'source state' AND source_state = 'full power' LIMIT 1")
    known = one(ledger, "SELECT json_extract(body, '$.known_s') FROM entry WHERE seq = %d" % note)
    altered(ledger, "a note's time in its body", change + str(note), "entry %d, note" % note, '"known_s":%.6f' % known,
            '"known_s":%.6f' % (known - 1))
    utc = one(ledger, "SELECT utc FROM entry WHERE seq = %d" % note)
    later = utc[:-4] + "%03dZ" % (int(utc[-4:-1]) + 7)
    altered(ledger, "a note moved by 7 us, its body too", "UPDATE entry SET utc = ?, body = replace(body, ?, ?) WHERE seq = %d" % note,
            "phase", later, '%.6f' % known, '%.6f' % (known + 7e-6))
    permit = one(ledger, "SELECT seq FROM permit")
    altered(ledger, "a value that the permit's entry lists", change + str(permit), "entry %d, permit" % permit,
            '"key":"pre_watch.minutes","mark":"invented","source":"for demonstrations and tests","value":"1"',
            '"key":"pre_watch.minutes","mark":"invented","source":"for demonstrations and tests","value":"9"')
    altered(ledger, "a timer in the permit's text", change + str(permit), "advice",
            "minutes = { value = 1.0;", "minutes = { value = 2.0;")
    advice = one(ledger, "SELECT seq FROM advice WHERE advice = 'stop' AND station = 'crew' LIMIT 1")
    until = one(ledger, "SELECT until FROM advice WHERE seq = %d" % advice)
    altered(ledger, "an advice's until", change + str(advice), "entry %d, advice" % advice, until, until[:-2] + "0Z" if until[-2] != "0" else until[:-2] + "1Z")
    impulse = one(ledger, "SELECT seq FROM impulse WHERE whose = 'ours' ORDER BY seq LIMIT 1 OFFSET 20")
    sel = one(ledger, "SELECT sel_db FROM impulse WHERE seq = %d" % impulse)
    altered(ledger, "an impulse's level, 0.5 dB", change + str(impulse), "exposure", '"sel_db":%.2f' % sel, '"sel_db":%.2f' % (sel + 0.5))
    altered(ledger, "whose an impulse is", change + str(impulse), "entry %d, impulse" % impulse, '"whose":"ours"', '"whose":"other"')
    altered(ledger, "an impulse that was taken out", "DELETE FROM entry WHERE seq = %d" % impulse, "exposure|source")
    contact = one(ledger, "SELECT seq FROM contact ORDER BY seq LIMIT 1")
    altered(ledger, "a contact that was taken out", "DELETE FROM entry WHERE seq = %d" % contact, "contact 1.0.contact.1: follows, and")
    altered(ledger, "a setting of the run", change + "1", "exposure", "source.loss_n_db = 20", "source.loss_n_db = 21")
    last = one(ledger, "SELECT max(seq) FROM entry")
    altered(ledger, "a finding that was put in",
            "INSERT INTO entry SELECT seq + 1, utc, 'finding', ?, hash FROM entry WHERE seq = %d" % last,
            "1.0.finding.77: does not follow", '{"id":"1.0.finding.77"}')


def escaped(text):
    return json.dumps(text)[1:-1].replace("\\n", "\\u000a")


def every_timer(ledger):
    """Each time that the permit's text names, made 2 % longer, whether anything of this day depends on it or not."""
    permit = one(ledger, "SELECT seq FROM permit")
    text = one(ledger, "SELECT json_extract(body, '$.text') FROM entry WHERE seq = %d" % permit)
    timers = list(re.finditer(r"(\w*minutes|\w*_s) = \{ value = ([\d.]+);", text))
    check("the permit has its timers", len(timers) == 6, timers)
    for timer in timers:
        before, after = text[timer.start() - 40:timer.start(2)], text[timer.end(2):timer.end() + 5]
        altered(ledger, "%s of %s, 2 %% longer," % (timer.group(1), timer.group(2)),
                "UPDATE entry SET body = replace(body, ?, ?) WHERE seq = %d" % permit, "entry %d, permit" % permit,
                escaped(before + timer.group(2) + after), escaped(before + "%.3f" % (float(timer.group(2)) * 1.02) + after))
    # One that an instruction waits for: until a minute after its end.
    call = one(ledger, "SELECT c.seq FROM call AS c, advice AS a WHERE abs((julianday(a.until) - julianday('2026-03-01T12:00:00Z')) * "
                       "86400 - c.end_s - 60) < 0.01 ORDER BY c.seq LIMIT 1")
    end_s = one(ledger, "SELECT json_extract(body, '$.end_s') FROM entry WHERE seq = %d" % call)
    altered(ledger, "the end of a call, half a second", "UPDATE entry SET body = replace(body, ?, ?) WHERE seq = %d" % call,
            "contact|advice", '"end_s":%.6f' % end_s, '"end_s":%.6f' % (end_s - 0.5))
    group = one(ledger, "SELECT json_extract(body, '$.group') FROM entry WHERE seq = %d" % call)
    altered(ledger, "a call of another group", "UPDATE entry SET body = replace(body, ?, ?) WHERE seq = %d" % call, "contact",
            '"group":"%s"' % group, '"group":"%s"' % ("sperm whale" if group != "sperm whale" else "porpoise"))


def seconds_told(ledger, word):
    """(number, seconds) of a word in force for the crew, by sqlite alone."""
    return ask(ledger, "SELECT count(*), coalesce(sum(until - at), 0) FROM (SELECT advice, at, lead(at, 1, last) OVER (ORDER BY at, seq) "
                       "AS until FROM (SELECT seq, advice, julianday(utc) * 86400 AS at, lag(advice, 1, '') OVER (ORDER BY seq) AS before, "
                       "(SELECT max(julianday(utc)) * 86400 FROM entry) AS last FROM advice WHERE station = 'crew') WHERE advice <> before) "
                       "WHERE advice = ?", word)[0]


def rows(text):
    found = {}
    for line in text.splitlines():
        match = re.match(r"  (\S.*?)\s+(\d+)\s+([\d.]+)\s+(\d+)\s+([\d.]+)$", line)
        if match:
            found[match.group(1)] = (int(match.group(2)), float(match.group(3)), int(match.group(4)), float(match.group(5)))
    return found


def another_permit(ledger, place):
    done = rerun(ledger, "--permit", ROOT + "/config/permits/demonstration.cfg")
    same = rows(done.stdout)
    check("under the permit that it had, both columns are the same", done.returncode == 0 and same and
          all(row[0] == row[2] and row[1] == row[3] for row in same.values()), done.stdout)
    number, seconds = seconds_told(ledger, "stop")
    stop = same.get("stop", (0, 0, 0, 0))
    check("stops and their hours are those that sqlite counts", stop[0] == number > 0 and abs(stop[1] * 3600 - seconds) < 2.5,
          (stop, number, seconds))
    total = sum(row[1] for name, row in same.items() if name.startswith("phase"))
    length = one(ledger, "SELECT (julianday(max(utc)) - julianday(min(utc))) * 24 FROM entry")
    check("the phases together are the whole watch", abs(total - length) < 0.01, (total, length))

    done = rerun(ledger, "--permit", ROOT + "/config/permits/uk-piling-2010.cfg")
    other = rows(done.stdout)
    check("another permit gives other figures", done.returncode == 0 and "uk-piling-2010" in done.stdout and
          other["phase ready"][0] > 0 and other["phase ready"][2] == 0, done.stdout)
    check("with the words of what they cannot tell", "What this cannot tell" in done.stdout)

    with open(ROOT + "/config/permits/demonstration.cfg") as file:
        text = file.read()
    open_text = text.replace('minutes = { value = 1.0; mark = "invented"', 'minutes = { value = 1.0; mark = "to be filled"', 1)
    with open(place + "/open.cfg", "w") as file:
        file.write(open_text)
    check("a permit with an open value is refused, by name", open_text != text and
          (lambda d: d.returncode == 2 and "pre_watch.minutes" in d.stderr)(rerun(ledger, "--permit", place + "/open.cfg")))
    config = settings(place + "/fills.cfg", permit=place + "/open.cfg", more='permit_values = ( { key = "pre_watch.minutes"; value = 1.0; '
                      'who = "A. Lee"; source = "invented for a test"; } );')
    done = rerun(ledger, "--permit", place + "/open.cfg", "--config", config)
    filled = rows(done.stdout)
    check("filled by the settings it gives what it says", done.returncode == 0 and
          all(row[0] == row[2] and row[1] == row[3] for row in filled.values()) and filled, done.stdout + done.stderr)


def the_chain(ledger):
    stop = ask(ledger, "SELECT id, causes, clause, reason FROM advice WHERE advice = 'stop' AND station = 'crew' ORDER BY seq LIMIT 1")[0]
    done = hushwatch("explain", ledger, stop[0])
    lines = done.stdout.splitlines()
    check("the entry comes first, in words, with its clause", done.returncode == 0 and lines[0].startswith(stop[0] + " ") and
          "crew is told: stop" in lines[0] and stop[3] in lines[0] and stop[2] in lines[0], done.stdout + done.stderr)
    causes = json.loads(stop[1])
    check("its causes stand under it, one step in", len(causes) > 3 and all(any(line.startswith("   " + c + " ") for line in lines)
                                                                           for c in causes), (causes, done.stdout))
    contact = [c for c in causes if ".contact." in c][0]
    at = next(i for i, line in enumerate(lines) if line.startswith("   " + contact + " "))
    check("and under the contact the call that made it", ".call." in lines[at + 1] and lines[at + 1].startswith("      1."), lines)
    check("the permit's values under its clauses stand there with mark and source",
          "zones[0].radius_m = 500 (invented: for demonstrations and tests)" in done.stdout, done.stdout)
    check("and none of other clauses", "break." not in done.stdout, done.stdout)
    shallow = hushwatch("explain", ledger, stop[0], "--depth", "0")
    check("--depth 0 is the entry alone", shallow.returncode == 0 and "behind it" in shallow.stdout and contact not in shallow.stdout,
          shallow.stdout)
    unknown = hushwatch("explain", ledger, "1.0.advice.9999")
    check("an unknown id is told, and what ids look like", unknown.returncode == 2 and "run.stream.kind.counter" in unknown.stderr and
          "1.0.phase." in unknown.stderr, unknown.stderr)
    # Every entry of the watch can be explained.
    ids = [row[0] for row in ask(ledger, "SELECT json_extract(body, '$.id') FROM entry GROUP BY kind")]
    bad = [i for i in ids if hushwatch("explain", ledger, i).returncode != 0]
    check("an entry of every kind can be explained", not bad and len(ids) > 10, bad)


def a_new_permit(place):
    """The first run is killed in the middle of an order; the second has another permit, filled values and another silence_s."""
    with open(place + "/scene.cfg", "w") as file:
        file.write(SCENE)
    with open(ROOT + "/tests/system/seconds-permit.cfg") as file:
        text = file.read()
    with open(place + "/new.cfg", "w") as file:
        file.write(text.replace('id = "seconds-test"', 'id = "seconds-changed"').replace("minutes = { value = 0.15;", "minutes = { value = 0.4;"))

    def make(permit, silence, more=""):
        return settings(place + "/site.cfg", permit=permit, channels='{ role = "both"; sensitivity_db = -170.0; full_scale_v = 10.0; '
                        'place_m = [0.0, 750.0, 10.0]; }', stream='input = "scene"; path = "scene.cfg"; pace = "real";',
                        more='silence_s = %.1f; pages = { port = 0; }; %s source = { criteria = ["%s/config/criteria/nmfs-2024.cfg"]; };' %
                        (silence, more, ROOT))

    ledger = place + "/watch.ledger"
    config = make("tests/system/seconds-permit.cfg", 10)
    daemon = Daemon(config)
    with daemon:
        stop = daemon.wait_for(lambda s: (daemon.advice("crew", s) or {}).get("advice") == "stop" and s["watch_s"] > 13.5, 40)
        check("the crew is told to stop", stop)
        daemon.kill()
        first = ask(ledger, "SELECT count(*) FROM entry WHERE json_extract(body, '$.id') LIKE '1.%'")[0][0]
        done = rerun(ledger)
        check("a ledger that was killed is identical", done.returncode == 0, done.stdout + done.stderr)
        time.sleep(1)
        make(place + "/new.cfg", 8, 'permit_values = ( { key = "zones[0].radius_m"; value = 650.5; who = "A. Lee"; '
             'source = "invented for a test"; } );')
        daemon.start()
        after = daemon.advice("crew")
        check("under the new permit the stop is still in force", (after or {}).get("advice") == "stop", after)
        daemon.note(kind="sighting", person="A. Eyes", group="porpoise", distance_m=600)
        daemon.wait_for(lambda s: s["watch_s"] > 24, 30)
        daemon.terminate()
    lost = ask(ledger, "SELECT count(*) FROM entry WHERE json_extract(body, '$.id') LIKE '1.%'")[0][0] - first
    check("the restart judges the first run by its own permit: nothing of it is said anew", lost <= 3, (first, lost))
    permits = ask(ledger, "SELECT run, permit FROM permit ORDER BY seq")
    check("both permits are entries, each of its run", permits == [(1, "seconds-test"), (2, "seconds-changed")], permits)
    done = rerun(ledger)
    check("the whole is identical, each run by its own permit", done.returncode == 0 and "2 runs" in done.stdout and
          "2 permits in turn" in done.stdout, done.stdout + done.stderr)
    filled = ask(ledger, "SELECT json_extract(value, '$.value'), json_extract(value, '$.mark') FROM permit, json_each(\"values\") "
                         "WHERE run = 2 AND json_extract(value, '$.key') = 'zones[0].radius_m'")
    check("the filled value is in force: a sighting at 600 m is inside",
          filled == [("650.5", "filled")] and ask(ledger, "SELECT max(p_inside) FROM contact WHERE run = 2")[0][0] > 0.5, filled)
    check("the ledger verifies", verify(ledger).returncode == 0)


SHIP = """seed = 6; duration_s = 60.0; rate_hz = 24000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
ships = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; course_deg = 0.0; speed_m_s = 0.0; lines_hz = [ 200.0 ]; source_level_db = 190.0; } );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
          { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "hole 1"; answer = "open"; },
          { at_s = 2.5; kind = "source state"; person = "C. Crew"; source_state = "vibro"; } );
"""


def continuous_sound(place):
    """Drilling, with a kill between two jobs and a restart in the second: its sums follow from the seconds in the ledger."""
    os.makedirs(place)
    with open(place + "/scene.cfg", "w") as file:
        file.write(SHIP)
    config = settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg",
                      channels='{ role = "measure"; sensitivity_db = -170.0; full_scale_v = 10.0; place_m = [0.0, 750.0, 10.0]; }',
                      stream='input = "scene"; path = "scene.cfg"; pace = "real";',
                      more='pages = { port = 0; }; source = { sound = "continuous"; criteria = ["%s/config/criteria/behaviour-us.cfg"]; };'
                      % ROOT)
    ledger = place + "/watch.ledger"
    daemon = Daemon(config)
    with daemon:
        daemon.wait_for(lambda s: s["watch_s"] > 7, 20)
        daemon.note(kind="job", person="C. Crew", job="hole 1", answer="close")
        daemon.note(kind="job", person="C. Crew", job="hole 2", answer="open")
        daemon.wait_for(lambda s: s["watch_s"] > 10, 20)
        daemon.kill()
        daemon.start()
        daemon.wait_for(lambda s: s["watch_s"] > 16, 30)
        daemon.note(kind="job", person="C. Crew", job="hole 2", answer="close")
        daemon.terminate()
    done = rerun(ledger)
    sums = ask(ledger, "SELECT job, max(n) FROM exposure GROUP BY job ORDER BY job")
    seconds = one(ledger, "SELECT count(*) FROM level WHERE start_s >= 2")
    check("both jobs of continuous sound have sums, of the seconds that the ledger holds", [row[0] for row in sums if row[0]] ==
          ["hole 1", "hole 2"] and sum(row[1] for row in sums if row[0]) <= seconds and all(row[1] > 1 for row in sums if row[0]),
          (sums, seconds))
    said = re.search(r"the same:.* (\d+) exposure", done.stdout.replace("\n", " "))
    check("sums of continuous sound are the same, over a kill", done.returncode == 0 and "2 runs" in done.stdout and said and
          int(said.group(1)) == one(ledger, "SELECT count(*) FROM exposure"), done.stdout + done.stderr)
    level = one(ledger, "SELECT max(seq) FROM entry WHERE kind = 'level' AND seq < (SELECT min(seq) FROM entry WHERE "
                        "json_extract(body, '$.job') = 'hole 1' AND json_extract(body, '$.answer') = 'close')")
    spl = one(ledger, "SELECT max(spl_db) FROM level WHERE seq = %d" % level)
    altered(ledger, "a second's level, 0.5 dB", "UPDATE entry SET body = replace(body, ?, ?) WHERE seq = %d" % level, "exposure",
            "%.2f" % spl, "%.2f" % (spl + 0.5))
    altered(ledger, "a minute of levels that was taken out", "DELETE FROM entry WHERE seq = %d" % level, "exposure")


def wrong_use(place, ledger):
    with open(place + "/not.txt", "w") as file:
        file.write("no ledger")
    check("no ledger: exit code 1", rerun(place + "/not.txt").returncode == 1)
    check("no file: exit code 2", rerun(place + "/none").returncode == 2)
    check("no such option: exit code 2", rerun(ledger, "--permits", "x").returncode == 2)
    check("--help explains both", "usage" in hushwatch("rerun", "--help").stdout and "usage" in hushwatch("explain", "--help").stdout)


with folder() as place_of_test:
    demonstration = place_of_test + "/day.ledger"
    scanned = scan(ROOT + "/config/demonstration.cfg", demonstration, "--start", "2026-03-01T12:00:00Z")
    if check("the demonstration is scanned", scanned.returncode == 0, scanned.stderr):
        the_same(demonstration)
        any_change(demonstration)
        every_timer(demonstration)
        another_permit(demonstration, place_of_test)
        the_chain(demonstration)
        wrong_use(place_of_test, demonstration)
    a_new_permit(place_of_test)
    continuous_sound(place_of_test + "/drilling")
finish()
