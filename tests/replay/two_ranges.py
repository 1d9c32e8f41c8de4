#!/usr/bin/python3
"""A soft start heard at 750 and 3,000 m through the whole chain (`hushwatch scan`): every blow is found on both channels and
counts once, the N of the job's own blows is that of the scene's sea, and moves levels to 750 m within its interval. What is
right is the truth that `hushwatch render` writes: levels measured on the waveform that reaches each hydrophone, without noise;
the scene spreads sound spherically and absorbs it. Times and steps of the soft start: common practice, no source."""
import json
import math
import os
import statistics
import subprocess
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from watch import BUILD, LENGTH, ROOT, ask, check, figure, finish, folder, scan, settings, verify  # noqa: E402

STEP_S = {"short": 20.0, "check": 45.0, "long": 300.0}[LENGTH]
STEPS = ((3.0, 182.0), (2.0, 188.0), (1.5, 194.0), (1.0, 200.0))
END_S = 10.0 + len(STEPS) * STEP_S
PLACES = {"near and far": (750.0, 3000.0), "neither at 750 m": (400.0, 1700.0)}
# A neighbour who drives a pile elsewhere: the paths' lengths differ from ours, so his blows do not pair as ours do.
NEIGHBOUR = """, { x_m = -9000.0; y_m = 3000.0; z_m = 10.0; start_s = 2.0;
    steps = ( { duration_s = %f; blow_interval_s = 2.7; source_energy_level_db = 196.0; } ); }"""


def scene(ranges, neighbour):
    steps = ", ".join("{ duration_s = %f; blow_interval_s = %f; source_energy_level_db = %f; }" % (STEP_S, interval, level)
                      for interval, level in STEPS)
    hydrophones = ", ".join("{ x_m = %f; y_m = 0.0; z_m = 12.0; sensitivity_db = -200.0; gain_db = 0.0; full_scale_v = 1.0; }"
                            % r for r in ranges)
    return """seed = 7; duration_s = %f; rate_hz = 24000.0;
sea = { temperature_c = 10.0; salinity = 35.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( %s );
hammers = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 10.0; steps = ( %s ); }%s );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
          { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "pile 1"; answer = "open"; },
          { at_s = 9.0; kind = "release"; person = "A. Eyes"; },
          { at_s = 9.5; kind = "source state"; person = "C. Crew"; source_state = "soft start"; } );
""" % (END_S + 5, hydrophones, steps, NEIGHBOUR % (END_S - 2) if neighbour else "")


def hear(place, ranges, neighbour=False):
    """Scans the scene; gives the ledger and the scene's truth."""
    name = place + "/%g%s" % (ranges[0], " neighbour" if neighbour else "")
    with open(place + "/scene.cfg", "w") as file:
        file.write(scene(ranges, neighbour))
    channels = ", ".join('{ role = "measure"; sensitivity_db = -200.0; full_scale_v = 1.0; place_m = [ %f, 0.0, 12.0 ]; }' % r
                         for r in ranges)
    more = ('silence_s = 10.0; source = { form = "pile"; sound = "impulsive"; criteria = ["%s/config/criteria/nmfs-2024.cfg"]; };'
            % ROOT)
    config = settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg", channels=channels,
                      stream='input = "scene"; path = "scene.cfg"; pace = "fast";', more=more)
    done = scan(config, name + ".ledger", "--start", "2026-03-01T12:00:00Z")
    check("the scene is scanned", done.returncode == 0, done.stderr)
    wav = name + ".wav"
    made = subprocess.run([BUILD + "/hushwatch", "render", place + "/scene.cfg", "--out", wav, "--truth", name + ".json"],
                          capture_output=True, text=True, timeout=120)
    check("the truth is written", made.returncode == 0, made.stderr)
    os.remove(wav)
    with open(name + ".json") as file:
        blows = [blow for blow in json.load(file)["blows"] if blow["source"] == 1]
    return name + ".ledger", blows


def found(ledger, channel):
    return ask(ledger, "SELECT time_s, sel_db, whose, beside FROM impulse WHERE channel = ? ORDER BY time_s", channel)


def check_blows(ledger, truth, reference):
    for channel in (1, 2):
        heard = found(ledger, channel)
        hits = [[row for row in heard if blow["heard"][channel - 1]["start_s"] - 0.02 <= row[0] <=
                 blow["heard"][channel - 1]["end_s"]] for blow in truth]
        check("channel %d: every blow is found, none besides" % channel, all(len(rows) == 1 for rows in hits) and
              len(heard) == len(truth), (len(heard), len(truth)))
        check("channel %d: each is ours" % channel, all(row[2] == "ours" for row in heard), [row for row in heard if row[2] != "ours"])
        check("channel %d says whether it counts" % channel, all(row[3] == (channel != reference) for row in heard))
        off = [rows[0][1] - blow["heard"][channel - 1]["sel_db"] for rows, blow in zip(hits, truth) if rows]
        figure("channel %d: %d blows, SEL off by %+.3f dB (median), at most %.3f dB" %
               (channel, len(heard), statistics.median(off), max(map(abs, off))))


def check_counts(ledger, n, reference):
    rows = ask(ledger, "SELECT stream, whose, impulses FROM impulse_count")
    check("the job counts each blow once", rows == [(1, "ours", n)], rows)
    last = ask(ledger, "SELECT channel, n FROM exposure WHERE metric LIKE '%SEL cum%' GROUP BY criterion HAVING seq = max(seq)")
    check("the sums are of the reference channel's blows", last and all(row == (reference, n) for row in last), last)
    check("both channels have their numbers", dict(ask(ledger, "SELECT channel, max(n_impulses) FROM source GROUP BY channel")) ==
          {1: n, 2: n})


def check_law(ledger, truth, ranges):
    """Of both channels; 0.3: of the level at 750 m."""
    slant = [math.hypot(r, 12 - 10) for r in ranges]
    columns = "channel, sel_db, at_750_m_db, at_750_m_low_db, at_750_m_high_db, n_db, n_low_db, n_high_db, fitted, range_low_m, range_high_m, model"
    for row in ask(ledger, "SELECT %s FROM source WHERE seq IN (SELECT max(seq) FROM source GROUP BY channel)" % columns):
        source = dict(zip(columns.split(", "), row))
        check("channel %d: the law is fitted" % source["channel"], source["fitted"] == 1, source)
        check("it says between which ranges", abs(source["range_low_m"] - ranges[0]) < 1 and abs(source["range_high_m"] - ranges[1]) < 1, source)
        # the scene's own: spherical and absorbed, as the truth's levels fall from one to the other; 0.1 to 0.2 dB of
        # absorption go to the water's, the rest to N
        fall = statistics.median(blow["heard"][0]["sel_db"] - blow["heard"][1]["sel_db"] for blow in truth)
        absorbed = fall - 20 * math.log10(slant[1] / slant[0])
        figure("channel %d: N %.2f (%.2f to %.2f) fitted; the scene: 20, and %.2f dB absorbed; level at 750 m %.2f (%.2f to %.2f)" %
               (source["channel"], source["n_db"], source["n_low_db"], source["n_high_db"], absorbed, source["at_750_m_db"],
                source["at_750_m_low_db"], source["at_750_m_high_db"]))
        check("N is that of the scene within 0.3", abs(source["n_db"] - 20) <= 0.3, source)
        check("its interval holds it", source["n_low_db"] <= 20 <= source["n_high_db"], source)
        here = statistics.median(blow["heard"][source["channel"] - 1]["sel_db"] for blow in truth)
        r = slant[source["channel"] - 1]
        there = here + 20 * math.log10(r / 750) + absorbed * (r - 750) / (slant[1] - slant[0])
        check("the interval at 750 m holds the truth", source["at_750_m_low_db"] <= there <= source["at_750_m_high_db"], (source, there))
        check("the level at 750 m is within 0.3 dB of the truth", abs(source["at_750_m_db"] - there) <= 0.3, (source, there))
    first = ask(ledger, "SELECT fitted, n_db, range_low_m FROM source ORDER BY seq LIMIT 1")
    figure("the first word on the source: fitted %s, N %s, from %s m" % first[0])


with folder() as place_of_test:
    for name, ranges in PLACES.items():
        ledger, truth = hear(place_of_test, ranges)
        figure("%s: %g and %g m, %d blows" % ((name,) + ranges + (len(truth),)))
        reference = 1  # 750 m is nearest, and 400 m is nearer in ratio than 1,700 m
        check_blows(ledger, truth, reference)
        check_counts(ledger, len(truth), reference)
        check_law(ledger, truth, ranges)
        check("the ledger is good", verify(ledger).returncode == 0)
    ledger, truth = hear(place_of_test, PLACES["near and far"], neighbour=True)
    whose = {channel: dict(ask(ledger, "SELECT whose, count(*) FROM impulse WHERE channel = ? GROUP BY whose", channel)) for channel in (1, 2)}
    figure("with a neighbour: %s" % whose)
    check("the neighbour is heard", all(sum(counts.values()) > len(truth) + 10 for counts in whose.values()), whose)
    # at 3,000 m he is as loud as the first blows of ours: some of his count there, which moves the median of that channel
    check_law(ledger, truth, PLACES["near and far"])
finish()
