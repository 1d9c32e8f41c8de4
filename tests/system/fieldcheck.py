#!/usr/bin/python3
"""Calibration from the settings to the ledger: `hushwatch fieldcheck` against a tone of known level, an overdue
certificate, a sensitivity that varies with frequency, and impulse levels refused for want of room. Prints TAP."""
import json
import os
import sqlite3
import subprocess
import sys
import tempfile

import numpy
from scipy.io import wavfile

BUILD = os.environ.get("HUSHWATCH_BUILD", "build")
HERE = os.getcwd()
RATE = 48000
results = []


def check(name, good, detail=""):
    results.append(bool(good))
    if not good:
        print("# " + str(detail).replace("\n", "\n# "))
    print("%s %d - %s" % ("ok" if good else "not ok", len(results), name))


def tool(*arguments):
    return subprocess.run([BUILD + "/hushwatch", *arguments], capture_output=True, text=True)


def settings(path, channel):
    with open(path, "w") as file:
        file.write("""name = "Trial"; ledger = "unused.ledger"; permit = "%s/config/permits/demonstration.cfg";
calls = "%s/config/calls";
streams = ( { input = "recording"; files = [ "unused.wav" ]; channels = ( { serial = "H-7"; %s } ); } );
""" % (HERE, HERE, channel))


def sound(path, pascals, full_scale_pa=1000.0):
    """-180 dB re 1 V/uPa, 0 dB, 1 V: 1.0 is 1000 Pa (IEC 60565 conventions: 180 dB re 1 uPa)."""
    wavfile.write(path, RATE, (pascals / full_scale_pa).astype(numpy.float32))


def ask(ledger, sql):
    database = sqlite3.connect("file:%s?mode=ro" % ledger, uri=True)
    rows = database.execute(sql).fetchall()
    database.close()
    return rows


def tone(level_db, hz, seconds, seed):
    """SPL of a sine: 20 lg(rms / 1 uPa)."""
    t = numpy.arange(int(seconds * RATE)) / RATE
    noise = numpy.random.default_rng(seed).normal(0, 0.01, len(t))
    return 1e-6 * 10 ** (level_db / 20) * numpy.sqrt(2) * numpy.sin(2 * numpy.pi * hz * t) + noise


def field_checks(folder):
    config, ledger = folder + "/site.cfg", folder + "/checks.ledger"
    settings(config, "sensitivity_db = -180.0; full_scale_v = 1.0;")
    options = ["fieldcheck", "--config", config, "--stream", "1", "--channel", "1", "--level", "145.02",
               "--frequency", "250", "--ledger", ledger]
    for name, level in (("first", 145.32), ("second", 144.92)):
        # a pistonphone's frequency is right to about 1 %
        sound(folder + "/%s.wav" % name, tone(level, 251.3, 12, 5))
        done = tool(*options, folder + "/%s.wav" % name)
        check("the %s check ends well" % name, done.returncode == 0, done.stdout + done.stderr)
        print("# " + done.stdout.replace("\n", "\n# "))
    rows = ask(ledger, "SELECT channel, serial, tone_hz, tone_db, measured_db, difference_db, change_db, seconds, "
                       "sensitivity_db FROM calibration WHERE what = 'field check'")
    check("both are in the ledger with level and difference within 0.05 dB",
          len(rows) == 2 and rows[0][:4] == (1, "H-7", 250.0, 145.02) and abs(rows[0][4] - 145.32) < 0.05 and
          abs(rows[0][5] - 0.30) < 0.05 and abs(rows[1][5] + 0.10) < 0.05 and rows[0][8] == -180.0, rows)
    check("the second says how far it moved", rows[0][6] is None and abs(rows[1][6] + 0.40) < 0.05, rows)
    check("each is a run of its own", [row[0] for row in ask(ledger, "SELECT command FROM run")] == ["fieldcheck"] * 2)
    done = tool("verify", ledger)
    check("the ledger is good", done.returncode == 0, done.stdout + done.stderr)
    done = tool("report", ledger, "--sheet", folder + "/sheet.html")
    page = open(folder + "/sheet.html").read() if done.returncode == 0 else done.stderr
    check("a report shows both", all(word in page for word in ("Field checks", "+0.30", "-0.10", "-0.40")), page[:2000])
    sound(folder + "/noise.wav", numpy.random.default_rng(6).normal(0, 10, 12 * RATE))
    done = tool(*options, folder + "/noise.wav")
    check("noise is no tone", done.returncode == 1 and "no steady and clear tone" in done.stderr, done.stderr)
    done = tool(*options[:-2], folder + "/missing.wav")
    check("a missing recording is said", done.returncode == 2 and "missing.wav" in done.stderr, done.stderr)
    check("nothing was written for either", len(ask(ledger, "SELECT 1 FROM calibration")) == 2)
    done = tool("fieldcheck", "--config", config, "--stream", "1")
    check("wrong use has its exit code", done.returncode == 2, done.stderr)


def blows(seconds, peak_pa):
    x = numpy.random.default_rng(7).normal(0, 0.05, seconds * RATE)
    t = numpy.arange(RATE // 2) / RATE
    for at in range(3, seconds - 2, 2):
        x[at * RATE:at * RATE + len(t)] += peak_pa * numpy.exp(-t / 0.03) * numpy.sin(2 * numpy.pi * 180 * t)
    return x


def settings_reach_the_ledger(folder):
    config, recording = folder + "/scan.cfg", folder + "/blows.wav"
    sound(recording, blows(20, 100.0))
    common = "role = \"measure\"; full_scale_v = 1.0; self_noise_db = 60.0; certificate_date = \"2025-03-01\"; "
    for name, more in (("refused", "sensitivity_db = -180.0; expected_peak_db = 175.0; due_date = \"2026-02-28\";"),
                       ("given", "sensitivity_db = -180.0; expected_peak_db = 174.0; due_date = \"2026-03-01\";"),
                       ("table", "sensitivity_points_hz = [10.0, 100.0, 1000.0, 10000.0]; "
                                 "sensitivity_points_db = [-183.0, -180.0, -180.0, -177.0];")):
        settings(config, common + more)
        done = tool("scan", "--config", config, "--ledger", folder + "/%s.ledger" % name, "--start",
                    "2026-03-01T12:00:00Z", recording)
        check("the recording is scanned (%s)" % name, done.returncode == 0, done.stderr)
    refused, given, table = ([folder + "/%s.ledger" % name for name in ("refused", "given", "table")])
    check("clip level, self-noise, dates and expected peak are in the calibration entry",
          ask(refused, "SELECT clip_db, self_noise_db, certificate_date, due_date, expected_peak_db, what, serial, "
                       "sensitivity_points FROM calibration") ==
          [(180.0, 60.0, "2025-03-01", "2026-02-28", 175.0, "stated", "H-7", None)])
    says = [row[0] for row in ask(refused, "SELECT health FROM health WHERE stream = 1")]
    check("a certificate overdue by a day is said, and levels refused for want of room",
          any("due on 2026-02-28" in line for line in says) and any("levels are refused" in line for line in says), says)
    says = [row[0] for row in ask(given, "SELECT health FROM health WHERE stream = 1")]
    check("on the due day, and with 6 dB of room, neither is said",
          not any("due on" in line or "refused" in line for line in says), says)
    wanted = ask(given, "SELECT time_s, t90_s, sel_db, bands FROM impulse ORDER BY time_s")
    got = ask(refused, "SELECT time_s, t90_s, sel_db, peak_db, rms90_db, peak_to_peak_db, positive_impulse_pa_s, "
                       "refused, bands FROM impulse ORDER BY time_s")
    check("refused impulses keep their times and have no levels",
          len(got) == len(wanted) == 8 and [row[:2] for row in got] == [row[:2] for row in wanted] and
          all(row[2:7] == (None,) * 5 and row[7] == 1 and set(json.loads(row[8])) == {None} for row in got), got)
    # A full-scale sine of 100 Pa x exp(-t / 30 ms) at 180 Hz: E = A^2 tau / 4 x w^2 tau^2 / (1 + w^2 tau^2).
    w = 2 * numpy.pi * 180 * 0.03
    sel = 10 * numpy.log10(100 ** 2 * 0.03 / 4 * w * w / (1 + w * w) / 1e-12)
    check("given ones have the closed form's SEL within 0.05 dB", all(abs(row[2] - sel) < 0.05 for row in wanted),
          (sel, wanted))
    count = ask(given, "SELECT impulses, per_minute FROM impulse_count")
    # With no source said to be on, the first blows are nobody's and the rest another's: a row each.
    check("their count and rate have a view", sum(row[0] for row in count) == 8 and all(row[1] == 30.0 for row in count),
          count)
    plain = numpy.array([json.loads(row[0]) for row in ask(given, "SELECT bands FROM level")], float)
    corrected = numpy.array([json.loads(row[0]) for row in ask(table, "SELECT bands FROM level")], float)
    difference = numpy.nanmean(corrected - plain, axis=0)
    # Linear in lg f: 3 dB a decade below 100 Hz and above 1 kHz, none between. Less sensitive there: louder.
    n = numpy.arange(-20, -20 + len(difference))
    wanted_db = numpy.where(n < -10, (-10 - n) * 0.3, numpy.where(n > 0, -n * 0.3, 0)).clip(-3, 3)
    check("a sensitivity against frequency corrects each band within 0.02 dB",
          numpy.nanmax(abs(difference - wanted_db)) < 0.02, difference - wanted_db)
    points = json.loads(ask(table, "SELECT sensitivity_points FROM calibration")[0][0])
    check("and its points are in the entry", points == [[10, -183], [100, -180], [1000, -180], [10000, -177]], points)
    first, second = (numpy.array([json.loads(row[0]) for row in ask(ledger, "SELECT bands FROM impulse")], float)
                     for ledger in (given, table))
    check("the bands of impulses are corrected alike", numpy.nanmax(abs((second - first) - wanted_db)) < 0.02)


def bad_settings(folder):
    config = folder + "/bad.cfg"
    settings(config, "sensitivity_points_hz = [100.0, 10.0]; sensitivity_points_db = [-180.0, -180.0]; "
                     "full_scale_v = 1.0; due_date = \"1.3.2026\";")
    done = tool("scan", "--config", config, "--ledger", folder + "/bad.ledger", folder + "/blows.wav")
    check("falling frequencies and a date of another form are refused with their lines", done.returncode == 2 and
          "rising frequencies" in done.stderr and "a date like" in done.stderr, done.stderr)


with tempfile.TemporaryDirectory() as place:
    field_checks(place)
    settings_reach_the_ledger(place)
    bad_settings(place)
print("1..%d" % len(results))
sys.exit(not all(results))
