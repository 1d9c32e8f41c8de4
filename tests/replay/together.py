#!/usr/bin/python3
"""A second hammer that the settings name, through the whole chain (`hushwatch scan`); and a continuous source, which is
judged by the criteria of continuous sound. Scenes, permit of seconds and people are invented."""
import os
import statistics
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from watch import ROOT, ask, check, figure, finish, folder, scan, settings  # noqa: E402

HAMMERS = """hammers = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 10.0;
    steps = ( { duration_s = 75.0; blow_interval_s = 2.0; source_energy_level_db = 215.0; } ); } );"""
# Strong enough to reach beyond the 20 m within which a pile is no point. Below: a steady line of 200 Hz, 190 dB re 1 uPa m, at the source's place.
SHIP = """ships = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; course_deg = 0.0; speed_m_s = 0.0; lines_hz = [ 200.0 ]; source_level_db = 190.0; } );"""
SCENE = """seed = 3; duration_s = 90.0; rate_hz = 24000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
%s
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
          { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "pile 1"; answer = "open"; },
          { at_s = 8.0; kind = "release"; person = "A. Eyes"; },
          { at_s = 9.5; kind = "source state"; person = "C. Crew"; source_state = "soft start"; },
          { at_s = 60.0; kind = "source state"; person = "C. Crew"; source_state = "full power"; } );
"""
# As loud at 750 m as ours is heard there: ours is measured first. At the same place, so that the law of distance has a closed
# form: N lg r, with next to no absorption at these frequencies.
OTHER = """others = ( { name = "hammer B"; place_m = [ %s, 0.0, 0.0 ]; sound = "impulsive"; sounds_per_s = 0.5; level_db = %.2f;
    at_m = 750.0; low_hz = 63.0; high_hz = 630.0; } );"""


def hear(place, name, sources, sound, more="", criteria="nmfs-2024", form="pile"):
    with open(place + "/scene.cfg", "w") as file:
        file.write(SCENE % sources)
    channel = '{ role = "measure"; sensitivity_db = -170.0; full_scale_v = 10.0; place_m = [ 0.0, 750.0, 10.0 ]; }'
    source = 'source = { form = "%s"; sound = "%s"; criteria = ["%s/config/criteria/%s.cfg"]; %s };'
    config = settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg", channels=channel,
                      stream='input = "scene"; path = "scene.cfg"; pace = "fast";',
                      more=source % (form, sound, ROOT, criteria, more))
    ledger = "%s/%s.ledger" % (place, name)
    done = scan(config, ledger, "--start", "2026-03-01T12:00:00Z")
    check("%s: scanned" % name, done.returncode == 0, done.stderr)
    return ledger


LAST = ("SELECT criterion, level_db, distance_m, together_m, islands, at_750_m_db, value_db, n, metric FROM exposure WHERE seq IN"
        " (SELECT max(seq) FROM exposure GROUP BY criterion)")

with folder() as place_of_test:
    alone = hear(place_of_test, "alone", HAMMERS, "impulsive")
    sel = ask(alone, "SELECT sel_db FROM source ORDER BY seq DESC LIMIT 1")[0][0]
    rows = ask(alone, LAST)
    check("alone nothing is said of others", rows and all(row[3] is None and row[4] is None for row in rows), rows)
    both = {row[0]: row for row in ask(hear(place_of_test, "second", HAMMERS, "impulsive", OTHER % ("0.0", sel)), LAST)}
    lf = both["LF injury, impulsive, SEL"]
    figure("SEL %.2f dB at 750 m; LF injury: %s m alone, %s m with a hammer as loud" % (sel, lf[2], lf[3]))
    # 3 dB more at N = 15 is 1.58 times as far; the other's spectrum is set flat and so weighs otherwise than ours
    check("with a second hammer it is met farther away", 1.3 < lf[3] / lf[2] < 2.2, lf)
    check("it is one island", lf[4] == 1, lf)
    check("peaks do not add", all(row[3] is None for row in both.values() if row[8] == "peak"), both)
    far = {row[0]: row for row in ask(hear(place_of_test, "far", HAMMERS, "impulsive", OTHER % ("30000.0", sel)), LAST)}
    lf = far["LF injury, impulsive, SEL"]
    check("30 km away it is an island of its own", lf[4] == 2 and lf[3] > 30000, lf)

    steady = hear(place_of_test, "steady", SHIP, "continuous", criteria="behaviour-us")
    rows = {row[0]: row for row in ask(steady, LAST)}
    figure("continuous: %s" % rows)
    check("a continuous source is judged by the criteria of continuous sound alone", list(rows) == ["behaviour, continuous"], rows)
    row = rows.get("behaviour, continuous")
    # said to sound from 9.5 s on: seconds 9 to 89
    check("only seconds in which it was said to sound count", row and row[7] == 81, row)
    numbers = ask(steady, "SELECT n_seconds, n_impulses, spl_db, sel_db, at_750_m_db, back_db, reason FROM source ORDER BY seq DESC LIMIT 1")
    heard = statistics.median(x[0] for x in ask(steady, "SELECT spl_db FROM level WHERE start_s >= 9"))
    check("a continuous source has its numbers of SPL", numbers and numbers[0][:2] == (81, 0) and abs(numbers[0][2] - heard) < 0.02 and
          numbers[0][3] is None and abs(numbers[0][4] - heard) < 0.05, (numbers, heard))
    check("a pile under a vibro hammer has no level of a point source", numbers[0][5] is None and "line source" in numbers[0][6], numbers)
    point = hear(place_of_test, "point", SHIP, "continuous", criteria="behaviour-us", form="point", more="loss_n_db = 20.0;")
    numbers = ask(point, "SELECT back_db, back_low_db, back_high_db, reason FROM source ORDER BY seq DESC LIMIT 1")[0]
    figure("source level worked back from 750 m by 20 lg r: %s dB (%s to %s), set 190" % numbers[:3])
    # the scene spreads by 20 lg r from a point of 190 dB re 1 uPa m, over sea noise 25 dB below
    check("a point source has its source level", abs(numbers[0] - 190) < 0.1 and numbers[1] < 190 < numbers[2], numbers)
    loudest = ask(steady, "SELECT max(spl_db) FROM level")[0][0]
    check("its SPL is the loudest second's", row and abs(row[1] - loudest) < 0.02, (row, loudest))
    # N lg r without absorption to speak of: R = 750 10^((L - T) / 15)
    wanted = 750 * 10 ** ((row[5] - row[6]) / 15)
    check("it is met where N lg r says", abs(row[2] / wanted - 1) < 0.03, (row[2], wanted))
finish()
