#!/usr/bin/python3
"""hushwatch scan --explain: why sounds were not calls. A recording at 8 kHz of Gaussian noise in which a steady tone of
300 Hz sets in: no rate carries what lies above half of it (Nyquist), a tone that never changes is a machine's line, and it
is no blow either, unlike the three that fall from 0 to 0.03 of themselves in 0.1 s.
The recording is made here, seed 3."""
import math
import os
import random
import re
import struct
import sys
import wave

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from watch import ROOT, ask, check, figure, finish, folder, scan, settings  # noqa: E402

RATE, SECONDS, BLOWS = 8000, 40, (20, 24, 28)


def record(path):
    noise = random.Random(3)
    values = [noise.gauss(0, 300) + (2500 * math.sin(2 * math.pi * 300 * i / RATE) if i > 5 * RATE else 0) for i in range(RATE * SECONDS)]
    for blow in BLOWS:
        for i in range(RATE // 5):
            values[blow * RATE + i] += 15000 * math.exp(-35 * i / RATE) * math.sin(2 * math.pi * 150 * i / RATE)
    with wave.open(path, "wb") as file:
        file.setnchannels(1)
        file.setsampwidth(2)
        file.setframerate(RATE)
        file.writeframes(struct.pack("<%dh" % len(values), *(int(v) for v in values)))


def classes():
    """Name to lowest frequency, from the catalogue's files."""
    found = {}
    for path in sorted(os.listdir(ROOT + "/config/calls")):
        with open(os.path.join(ROOT, "config/calls", path)) as file:
            text = file.read()
        name, low_hz = (re.search(pattern, text, re.MULTILINE) for pattern in (r'^name\s*=\s*"([^"]+)"', r"^low_hz\s*=\s*([0-9.]+)"))
        if name:  # certainty.cfg holds no class
            found[name.group(1)] = float(low_hz.group(1))
    return found


def rows(output):
    """Class to (found, rest of its line)."""
    lines = [re.match(r"  (.{28}) +(\d+|-)  (.+)$", line) for line in output.splitlines()]
    return {m.group(1).strip(): (m.group(2), m.group(3)) for m in lines if m and m.group(1).strip() != "class"}


def main():
    with folder() as place:
        record(place + "/line.wav")
        config, ledger = settings(place + "/site.cfg"), place + "/line.ledger"
        done = scan(config, ledger, "--explain", "--start", "2026-03-01T12:00:00Z", place + "/line.wav")
        check("the scan ends well", done.returncode == 0, done.stderr)
        check("the last line says where the ledger is", done.stdout.rstrip().splitlines()[-1] == ledger, done.stdout)
        table, known = rows(done.stdout), classes()
        found, why = table.pop("impulse", ("", ""))
        check("the blows were found, and the tone's onset was none", found == str(len(BLOWS)) and "like a call" in why, (found, why))
        check("what it says of impulses is what the ledger has", ask(ledger, "SELECT count(*) FROM impulse") == [(len(BLOWS),)])
        check("one more row a class of the catalogue", sorted(table) == sorted(known), (sorted(table), sorted(known)))
        deaf = [name for name, row in table.items() if row == ("-", "cannot be heard at this rate")]
        too_high = [name for name, low_hz in known.items() if low_hz >= RATE / 2]
        check("a class above half of the rate cannot be heard, and is said so", too_high and set(too_high) <= set(deaf), (too_high, deaf))
        deaf_groups = dict(re.findall(r"^  (\S.{27}) +group  (.+)$", done.stdout, re.MULTILINE))
        deaf_groups = {name.strip(): why for name, why in deaf_groups.items()}
        check("groups that cannot be heard are named: a porpoise clicks above 100 kHz (Villadsgaard et al. 2007), and no call of a turtle is proof",
              deaf_groups.get("porpoise") == "not carried by the rate" and deaf_groups.get("turtle") == "visual only"
              and "baleen whale" not in deaf_groups, deaf_groups)
        carried = [name for name in table if name not in deaf]
        check("some classes can", len(carried) > 0, table)
        lines = sum(int(n) for name in carried for n in re.findall(r"steady line (\d+)", table[name][1]))
        check("the tone that never changes was rejected as a steady line", lines > 0, table)
        calls = dict(ask(ledger, "SELECT class, SUM(COALESCE(n_sounds, 1)) FROM call GROUP BY class"))
        check("what it says was found is what the ledger has", {n: int(table[n][0]) for n in carried if table[n][0] != "0"} == calls, (table, calls))
        figure("rejected as a steady line: %d" % lines)
        plain = scan(config, place + "/plain.ledger", "--start", "2026-03-01T12:00:00Z", place + "/line.wav")
        check("without --explain the path alone is printed", plain.stdout == place + "/plain.ledger\n", plain.stdout)
    finish()


main()
