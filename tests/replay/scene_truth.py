#!/usr/bin/python3
"""The demonstration scene through the whole chain (`hushwatch scan`) against the scene's own truth: every blow with its
time, exposure and peak, every call heard, nothing heard where nothing was. Prints TAP."""
import json
import os
import sqlite3
import subprocess
import sys

import numpy as np

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from watch import check as judge, finish, folder as folder_of_test  # noqa: E402

TOOL = os.path.join(os.environ.get("HUSHWATCH_BUILD", "build"), "hushwatch")
SCENE = os.path.abspath("config/scenes/demonstration.cfg")


def check(name, good, detail):
    print("# figure " + detail)
    judge(name, good)


SITE = """name = "demonstration"; ledger = "unused.ledger"; permit = "%s"; calls = "%s";
streams = ( { input = "scene"; path = "%s"; pace = "fast"; channels = (
  { role = "listen"; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; },
  { role = "measure"; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } ); } );
"""

with folder_of_test() as folder:
    site, ledger = os.path.join(folder, "site.cfg"), os.path.join(folder, "out.ledger")
    wav, out = os.path.join(folder, "out.wav"), os.path.join(folder, "out.json")
    with open(site, "w") as file:
        file.write(SITE % (os.path.abspath("config/permits/demonstration.cfg"), os.path.abspath("config/calls"), SCENE))
    for command in (["scan", "--config", site, "--ledger", ledger, "--start", "2026-03-01T12:00:00Z"],
                    ["render", SCENE, "--out", wav, "--truth", out]):
        done = subprocess.run([TOOL, *command], capture_output=True, text=True)
        if done.returncode != 0:
            sys.exit("hushwatch %s: %s" % (command[0], done.stderr))
    with open(out) as file:
        truth = json.load(file)
    rows = sqlite3.connect("file:%s?mode=ro" % ledger, uri=True)
    impulses = np.array(rows.execute("select time_s, sel_db, peak_db from impulse where channel = 2 order by time_s").fetchall())
    calls = rows.execute("select start_s, end_s from call where channel = 1 and coalesce(n_sounds, 0) = 0").fetchall()

blows = [b["heard"][1] for b in truth["blows"]]
starts = np.array([b["start_s"] for b in blows])
matched = len(impulses) == len(blows)
differences = np.array([[0, np.inf, np.inf]])
if matched:
    differences = np.column_stack([impulses[:, 0] - starts, impulses[:, 1] - [b["sel_db"] for b in blows],
                                   impulses[:, 2] - [b["peak_db"] for b in blows]])
check("every blow is an impulse, and every impulse a blow", matched and np.all(differences[:, 0] >= 0)
      and np.all(differences[:, 0] < 0.02), "%d blows, %d impulses" % (len(blows), len(impulses)))
# Exposure within 0.05 dB; the noise adds its own to a peak, 30 dB and more below the blow.
check("their exposure is the scene's within 0.05 dB", np.abs(differences[:, 1]).max() < 0.05,
      "largest difference: SEL %.3f dB, peak %.3f dB" % tuple(np.abs(differences[:, 1:]).max(axis=0)))
check("their peak is the scene's within 0.2 dB", np.abs(differences[:, 2]).max() < 0.2, "as above")

heard = [c["heard"][0] for c in truth["calls"]]
found = [any(min(e, h["end_s"]) - max(s, h["start_s"]) > 0.1 for s, e in calls) for h in heard]
real = [any(min(e, h["end_s"]) - max(s, h["start_s"]) > 0 for h in heard) for s, e in calls]
check("nine of ten calls are heard", np.mean(found) >= 0.9, "%d of %d calls heard" % (sum(found), len(found)))
check("what is heard as a call is one", len(calls) > 0 and np.mean(real) >= 0.95, "%d of %d found calls lie on true ones" % (
    sum(real), len(real)))
finish()
