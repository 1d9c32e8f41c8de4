#!/usr/bin/python3
"""The range from positions. First a scan: a note says where the source is, levels at 750 m follow it, and without one there
are received levels only. Then the real daemon with a real gpsd: impulses carry the range of the moment, an old position gives
none, a silent feed is said and comes back. The scene and the people are invented; wanted ranges are plane geometry."""
import math
import os
import sys
import time

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from gps import GPSD, Receiver, metres_north  # noqa: E402
from watch import ROOT, ask, check, figure, finish, folder, scan, settings, skip, verify  # noqa: E402

LATITUDE, LONGITUDE = 54.0, 6.5
SCENE = """seed = 5; duration_s = %f; rate_hz = 24000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
hammers = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 4.0;
              steps = ( { duration_s = %f; blow_interval_s = 1.0; source_energy_level_db = 200.0; } ); } );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
          { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "pile 1"; answer = "open"; },
          { at_s = 3.0; kind = "source state"; person = "C. Crew"; source_state = "full power"; } );
"""
SOURCE = 'source = { form = "pile"; sound = "impulsive"; loss_n_db = 15.0; criteria = ["%s/config/criteria/nmfs-2024.cfg"]; %s };'


def make(place, name, seconds, stream="", source="", channel="[0.0, 0.0, 0.0]", more="", pace="fast"):
    with open(place + "/scene.cfg", "w") as file:
        file.write(SCENE % (seconds, seconds - 6))
    return settings(place + "/%s.cfg" % name, permit="tests/system/seconds-permit.cfg",
                    channels='{ role = "measure"; sensitivity_db = -170.0; full_scale_v = 10.0; place_m = %s; }' % channel,
                    stream='input = "scene"; path = "scene.cfg"; pace = "%s"; %s' % (pace, stream),
                    ledger="%s.ledger" % name, more=SOURCE % (ROOT, source) + "\n" + more)


def said_by_notes(place):
    """Hydrophones that stay; the source 750 m south of them, then (so a second note says) 1500 m."""
    stream = "latitude_deg = %.6f; longitude_deg = %.6f;" % (metres_north(LATITUDE, 750), LONGITUDE)
    config = make(place, "notes", 40.0, stream)
    with open(place + "/positions.cfg", "w") as file:
        file.write('notes = ( { at_s = 1.0; kind = "position"; latitude_deg = %.6f; longitude_deg = %.6f; },\n'
                   '          { at_s = 20.5; kind = "position"; latitude_deg = %.6f; longitude_deg = %.6f; } );\n' %
                   (LATITUDE, LONGITUDE, metres_north(LATITUDE, -750), LONGITUDE))
    without, told = place + "/without.ledger", place + "/told.ledger"
    check("the scene is scanned without a position", scan(config, without).returncode == 0)
    done = scan(config, told, "--notes", place + "/positions.cfg")
    check("and with notes that say where the source is", done.returncode == 0, done.stderr)

    rows = ask(without, "SELECT range_m, range_from, sel_db FROM impulse ORDER BY seq")
    check("nobody says where the source is: no impulse has a range", len(rows) > 25 and
          all(row[0] is None and row[1] == "no position of the source" for row in rows), rows[:3])
    source = ask(without, "SELECT sel_db, at_750_m_db, back_db, reason FROM source ORDER BY seq DESC LIMIT 1")[0]
    check("what was received is said, and nothing at 750 m", source[0] is not None and source[1] is None and source[2] is None, source)
    check("with the reason", "no position of the source" in source[3], source)
    exposure = ask(without, "SELECT count(level_db), count(at_750_m_db), count(distance_m) FROM exposure")[0]
    check("exposure is received only", exposure[0] > 0 and exposure[1:] == (0, 0), exposure)

    near = ask(told, "SELECT range_m, range_from, sel_db, time_s FROM impulse WHERE range_m < 1000 ORDER BY seq")
    far = ask(told, "SELECT range_m, range_from, sel_db, time_s FROM impulse WHERE range_m > 1000 ORDER BY seq")
    check("impulses carry the range of the note in force", near and far and all(abs(r[0] - 750) < 0.2 for r in near) and
          all(abs(r[0] - 1500) < 0.3 for r in far), (near[:2], far[:2]))
    # An impulse is known a second or so after it was heard; the range is the one that was known then.
    check("from the moment on at which it was known", near[-1][3] < 20.5 and 18.5 < far[0][3], (near[-1], far[0]))
    check("and say that it comes from positions", {r[1] for r in near + far} == {"positions"})
    check("levels received are the same with and without", [r[2] for r in rows] == [r[2] for r in near + far])
    # Moved to 750 m those of the first note stay as they are, those of the second rise by 15 lg 2 = 4.52 dB.
    moved = sorted([r[2] for r in near] + [r[2] + 15 * math.log10(2) for r in far])
    wanted = 0.5 * (moved[(len(moved) - 1) // 2] + moved[len(moved) // 2])
    source = ask(told, "SELECT at_750_m_db, range_m, n_impulses FROM source ORDER BY seq DESC LIMIT 1")[0]
    figure("median at 750 m %.2f dB, %.2f dB wanted, of %d impulses" % (source[0], wanted, source[2]))
    check("the level at 750 m is the median of the moved levels", abs(source[0] - wanted) < 0.05, (source, wanted))
    check("both ledgers verify", verify(told).returncode == 0 and verify(without).returncode == 0, verify(told).stdout)


def wait_until(what, limit_s):
    deadline = time.monotonic() + limit_s
    while time.monotonic() < deadline:
        if what():
            return True
        time.sleep(0.2)
    return False


def followed_by_gpsd(place):
    """A vessel with the hydrophone 100 m astern, north of the pile."""
    receiver = Receiver(metres_north(LATITUDE, 900), LONGITUDE, 0.0)
    config = make(place, "feed", 300.0, source="latitude_deg = %.6f; longitude_deg = %.6f;" % (LATITUDE, LONGITUDE),
                  channel="[-100.0, 0.0, 10.0]", pace="real",
                  more='position = { feed = "gpsd"; port = %d; moves = "array"; oldest_s = 5.0; };\n' % receiver.port +
                  "pages = { port = 0; };")
    ledger = place + "/feed.ledger"

    def count(sql):
        try:
            return ask(ledger, sql)[0][0]
        except Exception:  # not made yet, or being written
            return 0

    def near(wanted_m):
        return "SELECT count(*) FROM impulse WHERE range_from = 'positions' AND abs(range_m - %f) < 0.5" % wanted_m

    def faults(daemon):
        return " ".join(str(fault) for fault in daemon.state()["faults"])

    receiver.start()
    try:
        with Daemon(config) as daemon:
            check("impulses carry the range from the pile to the hydrophone astern",
                  wait_until(lambda: count(near(math.hypot(800, 10))) > 0, 20),
                  ask(ledger, "SELECT range_m, range_from FROM impulse"))
            receiver.latitude_deg = metres_north(LATITUDE, 1700)
            check("and follow the vessel", wait_until(lambda: count(near(math.hypot(1600, 10))) > 0, 10),
                  ask(ledger, "SELECT range_m, range_from FROM impulse"))
            receiver.heading_deg = 180.0
            check("and its heading", wait_until(lambda: count(near(math.hypot(1800, 10))) > 0, 10),
                  ask(ledger, "SELECT range_m, range_from FROM impulse"))
            entries = ask(ledger, "SELECT latitude_deg, longitude_deg, heading_deg, source, whose FROM position ORDER BY seq")
            check("positions are entries", len(entries) >= 3 and entries[0][3:] == ("feed", "vessel") and
                  abs(entries[0][0] - metres_north(LATITUDE, 900)) < 2e-6 and entries[0][1] == LONGITUDE and
                  entries[-1][2] == 180.0, entries)
            receiver.stop()
            check("an old position gives no range", wait_until(lambda: count(
                "SELECT count(*) FROM impulse WHERE range_from = 'position too old' AND range_m IS NULL") > 0, 12))
            check("a silent feed is shown", wait_until(lambda: "NO POSITION" in faults(daemon), 12), faults(daemon))
            check("and entered", wait_until(lambda: count("SELECT count(*) FROM health WHERE ok = 0 AND health LIKE 'gpsd%'") > 0, 5))
            figure(faults(daemon))
            receiver.start()
            check("it comes back by itself", wait_until(lambda: "NO POSITION" not in faults(daemon), 15), faults(daemon))
            check("and ranges with it", wait_until(lambda: count(near(math.hypot(1800, 10)) + " AND time_s > (SELECT max(time_s) FROM "
                                                                 "impulse WHERE range_from = 'position too old')") > 0, 10))
            seconds, code = daemon.terminate()
            figure("stopped in %.2f s" % seconds)
            check("the daemon ends as asked", code == 0 and seconds < 3, (seconds, code))
    finally:
        receiver.stop()
    n, seconds = ask(ledger, "SELECT count(*), max(occurred_s) FROM position")[0]
    figure("%d positions entered in %.0f s" % (n, seconds))
    check("few positions are entered", n <= 3 + seconds / 10 + 5, (n, seconds))
    check("the ledger verifies", verify(ledger).returncode == 0)
    # A second life: what the vessel's position was is in the ledger, and too old by now.
    with Daemon(config) as daemon:
        check("a restart goes on from the ledger; the old position gives no range", wait_until(lambda: count(
            "SELECT count(*) FROM impulse WHERE run = 2 AND range_from = 'position too old'") > 0, 20),
            ask(ledger, "SELECT run, range_m, range_from FROM impulse WHERE run = 2"))


with folder() as place_of_test:
    said_by_notes(place_of_test)
    if GPSD:
        followed_by_gpsd(place_of_test)
    else:
        skip("the daemon follows gpsd", "no gpsd")
finish()
