#!/usr/bin/python3
"""The real daemon through a whole watch in real time: pre-watch, delay by an animal, release, soft start, stop,
acknowledgement, kill and restart in the middle, clearance, restart of the work, and an end by SIGTERM. The scene, the permit
of seconds and the people are invented."""
import os
import sys
import time

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from watch import ROOT, ask, check, figure, finish, folder, settings, verify  # noqa: E402

SCENE = """seed = 5; duration_s = 120.0; rate_hz = 48000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 150.0; y_m = 0.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; },
                { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
animals = ( { voice = "delphinid whistle"; members = 3; x_m = 300.0; y_m = 50.0; z_m = 5.0; start_s = 1.5; end_s = 6.0; },
            { voice = "delphinid whistle"; members = 3; x_m = 200.0; y_m = 50.0; z_m = 5.0; start_s = 17.0; end_s = 24.0; } );
hammers = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 10.0;
    steps = ( { duration_s = 6.0; blow_interval_s = 1.0; source_energy_level_db = 190.0; },
              { duration_s = 9.0; blow_interval_s = 1.0; source_energy_level_db = 200.0; },
              { duration_s = 18.0; },
              { duration_s = 20.0; blow_interval_s = 1.0; source_energy_level_db = 190.0; } ); } );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
          { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.7; kind = "sign-on"; person = "C. Crew"; watch = "crew"; station = "crew"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "pile 1"; answer = "open"; },
          { at_s = 8.0; kind = "sighting"; person = "A. Eyes"; group = "delphinid"; contact = 1; distance_m = 2500.0; },
          { at_s = 9.0; kind = "release"; person = "A. Eyes"; },
          { at_s = 9.5; kind = "source state"; person = "C. Crew"; source_state = "soft start"; },
          { at_s = 16.0; kind = "source state"; person = "C. Crew"; source_state = "full power"; },
          { at_s = 25.5; kind = "source state"; person = "C. Crew"; source_state = "stopped"; },
          { at_s = 42.0; kind = "source state"; person = "C. Crew"; source_state = "soft start"; } );
"""


def clearance(state):
    """Watch time at which the clearance of an open contact ends, by its timer."""
    for timer in state["timers"]:
        if "clearance" in timer["name"]:
            return state["watch_s"] - timer["elapsed_s"] + timer["needed_s"]
    return None


def live(place):
    with open(place + "/scene.cfg", "w") as file:
        file.write(SCENE)
    two = '{ role = "listen"; sensitivity_db = -170.0; full_scale_v = 10.0; }, ' \
          '{ role = "measure"; sensitivity_db = -170.0; full_scale_v = 10.0; }'
    config = settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg", channels=two,
                      stream='input = "scene"; path = "scene.cfg"; pace = "real";',
                      more='silence_s = 10.0; pages = { port = 0; }; contact = { gap_s = 6.0; act_evidence = 1.5; };'
                      'source = { criteria = ["%s/config/criteria/nmfs-2024.cfg"]; };' % ROOT)
    daemon = Daemon(config)
    with daemon:
        stop = daemon.wait_for(lambda s: (daemon.advice("crew", s) or {}).get("advice") == "stop", 40)
        check("the crew is told to stop", stop, daemon.state()["advice"][:4])
        advice = daemon.advice("crew")
        status, answer = daemon.note(kind="acknowledgement", person="C. Crew", station="crew", advice=advice["id"],
                                     answer="seen")
        check("the acknowledgement is taken", status == 200, (status, answer))
        check("the page then shows it as acknowledged", daemon.wait_for(
            lambda s: (daemon.advice("crew", s) or {}).get("acknowledged"), 3), daemon.advice("crew"))
        before = daemon.wait_for(lambda s: s["phase"]["phase"] == "shutdown", 15)
        check("the source stops: shutdown", before, daemon.state()["phase"])
        end_before = clearance(before)
        daemon.kill()
        time.sleep(0.7)
        daemon.start()
        after = daemon.state()
        restored = daemon.advice("crew", after) or {}
        check("killed and started again, the stop is still in force and acknowledged",
              restored.get("advice") == "stop" and restored.get("acknowledged") and restored["id"] == advice["id"], restored)
        end_after = clearance(after)
        check("its clearance ends at the same watch time", end_before is not None and end_after is not None and
              abs(end_before - end_after) < 0.005, (end_before, end_after))
        ready = daemon.wait_for(lambda s: s["phase"]["release_possible"], 25)
        check("the clearance ends and a release becomes possible", ready, daemon.state()["phase"])
        status, answer = daemon.note(kind="release", person="A. Eyes")
        check("the release is taken", status == 200, (status, answer))
        again = daemon.wait_for(lambda s: s["phase"]["phase"] == "soft start" and s["phase"]["source_heard"], 15)
        check("the work starts again with a soft start", again, daemon.state()["phase"])
        seconds, code = daemon.terminate()
        figure("SIGTERM to the end: %.2f s" % seconds)
        check("SIGTERM ends it in under 1 s", seconds < 1.0 and code == 0, (seconds, code, daemon.errors()))
    return place + "/watch.ledger", end_before


def in_order(ledger, end_s):
    words = [row[0] for row in ask(ledger, "SELECT phase FROM phase ORDER BY seq")]
    # An outage as long as a break breaks the watch: then the pre-watch begins again. The clearance runs on either way.
    wanted = ["pre-watch", "delay", "ready", "soft start", "full power", "shutdown", "ready", "soft start"]
    if words[6:7] == ["pre-watch"]:
        del words[6]
    check("the phases are in the ledger in the right order", words == wanted, words)
    zero = ask(ledger, "SELECT min(utc) FROM entry")[0][0]
    rows = ask(ledger, "SELECT phase, (julianday(utc) - julianday(?)) * 86400 FROM phase ORDER BY seq", zero)
    times = dict(rows[:6])
    expected = {"pre-watch": (0.6, 0.6), "delay": (2.0, 7.0), "ready": (8.0, 8.0), "soft start": (9.5, 9.5),
                "full power": (16.0, 16.0), "shutdown": (25.5, 25.5)}
    check("at the right scene times", all(low - 0.01 <= times[w] <= high + 0.01 for w, (low, high) in expected.items()), rows)
    check("the shutdown ends when the clearance ends", abs(rows[6][1] - end_s) < 0.02, (rows, end_s))
    stops = ask(ledger, "SELECT station, utc, causes FROM advice WHERE advice = 'stop' ORDER BY seq")
    check("stop goes to the observer first, unanswered to the crew", [s[0] for s in stops[:2]] == ["observer", "crew"], stops)
    notes = [row[0] for row in ask(ledger, "SELECT json_extract(body, '$.note') FROM entry WHERE kind = 'note' ORDER BY seq")]
    check("the acknowledgement is in the ledger, once", notes.count("acknowledgement") == 1, notes)
    check("two runs, and the outage between them is told", len(ask(ledger, "SELECT seq FROM run")) == 2)
    blows = ask(ledger, "SELECT count(*) FROM impulse WHERE whose = 'ours'")[0]
    said = ask(ledger, "SELECT n_impulses FROM source ORDER BY seq DESC LIMIT 1")
    check("the job's sum goes on over the restart", said and said[0][0] == blows[0] > 15, (said, blows))
    done = verify(ledger)
    check("the ledger verifies", done.returncode == 0, done.stdout)


with folder() as place_of_test:
    in_order(*live(place_of_test))
finish()
