#!/usr/bin/python3
"""A disk that fills while the watch is kept: advice still reaches the pages and is marked as not recorded, health says so, and
what was kept in memory goes in when there is room again. A real small file system (tmpfs; needs to be root, as CI is)."""
import os
import subprocess
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from watch import ask, check, derive_again, figure, finish, folder, settings, verify  # noqa: E402

SCENE = """seed = 9; duration_s = 300.0; rate_hz = 48000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 150.0; y_m = 0.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
"""


def fill(path):
    """Takes all the room there is."""
    with open(path, "wb", buffering=0) as out:
        try:
            while True:
                out.write(bytes(4096))
        except OSError:
            pass


def live(place, disk):
    with open(place + "/scene.cfg", "w") as file:
        file.write(SCENE)
    config = settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg", ledger=disk + "/watch.ledger",
                      stream='input = "scene"; path = "scene.cfg"; pace = "real";',
                      channels='{ role = "both"; sensitivity_db = -170.0; full_scale_v = 10.0; }',
                      more="pages = { port = 0; };")
    with Daemon(config) as daemon:
        daemon.note(kind="sign-on", person="A. Eyes", watch="visual")
        daemon.note(kind="sign-on", person="B. Ears", watch="acoustic")
        check("a pre-watch begins", daemon.wait_for(lambda s: s["phase"]["phase"] == "pre-watch", 3))
        fill(disk + "/filler")
        ids = []
        for i in range(40):
            status, answer = daemon.note(kind="remark", person="A. Eyes", text="remark %d, %s" % (i, "x" * 200))
            ids.append(answer.get("id") if status == 200 else None)
        status, answer = daemon.note(kind="sighting", person="A. Eyes", group="porpoise", distance_m=80)
        check("notes are taken while the disk is full", status == 200 and all(ids), (status, answer))
        seen = daemon.wait_for(lambda s: "contact 1" in (daemon.advice("crew", s) or {}).get("reason", ""), 6)
        advice = daemon.advice("crew") or {}
        check("the advice is on the pages all the same", seen and advice.get("advice") == "do not start", advice)
        check("marked as not yet recorded", advice.get("recorded") is False, advice)
        state = daemon.wait_for(lambda s: s["recording"]["recording"] is False and s["faults"], 5)
        check("health says that entries do not reach the disk", state, daemon.state()["recording"])
        os.unlink(disk + "/filler")
        again = daemon.wait_for(lambda s: s["recording"]["recording"] and (daemon.advice("crew", s) or {}).get("recorded"), 6)
        check("with room again, everything is recorded", again, daemon.state()["recording"])
        daemon.terminate()
    kept = {row[0] for row in ask(disk + "/watch.ledger", "SELECT json_extract(body, '$.id') FROM entry")}
    figure("a full disk: %d notes entered meanwhile, %d lost" % (len(ids), sum(i not in kept for i in ids)))
    check("no note was lost", all(i in kept for i in ids))
    check("the ledger tells of it", ask(disk + "/watch.ledger",
                                        "SELECT 1 FROM entry WHERE kind = 'health' AND body LIKE '%disk%'"))
    done = verify(disk + "/watch.ledger")
    check("the ledger verifies", done.returncode == 0, done.stdout)
    derive_again(disk)  # before the disk goes


with folder() as place_of_test:
    small = place_of_test + "/disk"
    os.mkdir(small)
    mounted = subprocess.run(["mount", "-t", "tmpfs", "-o", "size=600k", "tmpfs", small], capture_output=True, text=True)
    if check("a small disk is there", mounted.returncode == 0, mounted.stderr):
        try:
            live(place_of_test, small)
        finally:
            subprocess.run(["umount", "-l", small])
finish()
