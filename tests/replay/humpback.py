#!/usr/bin/python3
"""A real recording of humpback song through the whole chain: calls, one contact, advice, an end by people's notes; and
noise of the same length and level, which must do nothing of the sort.

The recording (64.8 s, Glacier Bay, US National Park Service, C. Gabriele, public domain) is not part of the project. The
intervals are rough labels, read off a spectrogram of 186 ms frames above 14 dB; they are no expert's."""
import os
import sys
import wave

import numpy

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from watch import SHARED, ask, body, check, figure, finish, folder, scan, settings, skip, verify  # noqa: E402

RECORDING = SHARED + "/data/glacier-bay-humpback.hq.ogg"
LABELS = [(0.05, 0.6), (1.0, 3.0), (4.4, 7.9), (8.7, 10.5), (12.0, 17.1), (18.7, 20.5), (21.9, 23.6), (24.9, 26.9),
          (27.8, 29.4), (31.5, 32.6), (37.3, 38.3), (42.8, 47.0), (47.9, 48.9), (54.2, 54.4), (55.9, 56.5), (58.9, 61.4),
          (63.2, 63.7)]
NOTES = """notes = (
  { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
  { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
  %s
  { at_s = 62.5; kind = "release"; person = "A. Eyes"; } );
"""
SIGHTING = ('{ at_s = 45.0; kind = "sighting"; person = "A. Eyes"; group = "baleen whale"; contact = 1; '
            'distance_m = 2500.0; },')


def matches(label, call):
    overlap = min(label[1], call[1]) - max(label[0], call[0])
    union = max(label[1], call[1]) - min(label[0], call[0])
    return overlap >= 0.3 * union if label[1] - label[0] >= 1.0 else overlap >= 0.1


def most_pairs(calls):
    """The largest one-to-one matching of labels and calls (augmenting paths, Berge 1957)."""
    owner = {}

    def place(label, seen):
        for i, call in enumerate(calls):
            if i not in seen and matches(LABELS[label], call):
                seen.add(i)
                if i not in owner or place(owner[i], seen):
                    owner[i] = label
                    return True
        return False

    return sum(place(label, set()) for label in range(len(LABELS)))


def song(place):
    ledger = place + "/song.ledger"
    config = settings(place + "/site.cfg", permit="tests/replay/recording-permit.cfg")
    with open(place + "/notes.cfg", "w") as file:
        file.write(NOTES % SIGHTING)
    done = scan(config, ledger, "--notes", place + "/notes.cfg", "--start", "2026-03-01T12:00:00Z", RECORDING)
    check("the recording is scanned", done.returncode == 0, done.stderr)
    calls = ask(ledger, "SELECT start_s, end_s FROM call ORDER BY start_s")
    found = most_pairs(calls)
    figure("humpback song: %d of %d intervals matched, %d rows in the view call" % (found, len(LABELS), len(calls)))
    check("at least 12 of the 17 intervals are found", found >= 12)
    check("at most 40 calls are given", len(calls) <= 40)
    impulses = ask(ledger, "SELECT time_s, t90_s, rms90_db, whose FROM impulse")
    figure("song taken for an impulse: %s" % impulses)
    check("at most one unit of song passes for an impulse, and for nobody's", len(impulses) <= 1 and all(row[3] == "unknown" for row in impulses), impulses)
    check_contact_and_advice(ledger)
    check("the ledger verifies", verify(ledger).returncode == 0)


def check_contact_and_advice(ledger):
    acts = ask(ledger, 'SELECT DISTINCT contact, "group" FROM contact WHERE grade = ?', "act")
    check("exactly one contact of grade act, a baleen whale", acts == [(1, "baleen whale")], acts)
    contact_ids = {row[0] for row in ask(ledger, "SELECT json_extract(body, '$.id') FROM entry WHERE kind = 'contact'")}
    stops = [body(row[0]) for row in ask(ledger, "SELECT body FROM entry WHERE kind = 'advice' ORDER BY seq")]
    named = [a for a in stops if a["advice"] == "do not start" and "contact 1, baleen whale" in a["reason"] and
             contact_ids & set(a["causes"])]
    check("an advice not to start has a reason and causes that name that contact", named, stops)
    phases = ask(ledger, "SELECT phase, causes, utc FROM phase ORDER BY seq")
    words = [row[0] for row in phases]
    after = phases[words.index("delay") + 1] if "delay" in words[:-1] else ("", "", "")
    check("the sighting outside the zone ends the delay, then and for good",
          after[0] in ("pre-watch", "ready") and after[2] == "2026-03-01T12:00:45.000000Z" and
          words.count("delay") == 1 and words[-1] == "ready", phases)
    check("what follows the delay names the sighting as its cause", ".note.3" in after[1], after)
    last = [a for a in stops if a["station"] == "crew"][-1]
    check("the release then gives 'may start'", last["advice"] == "may start" and "A. Eyes" in last["reason"], last)


def noise(place):
    """Gaussian noise of the recording's length and mean square."""
    level = float(ask(place + "/song.ledger", "SELECT avg(spl_db) FROM level")[0][0])
    full_scale = numpy.sqrt(10 ** ((level - 180.0) / 10))  # 1.0 is 1000 Pa: 180 dB re 1 uPa
    seed = 20260301
    samples = numpy.random.default_rng(seed).normal(0, full_scale, int(64.8 * 44100))
    with wave.open(place + "/noise.wav", "wb") as out:
        out.setnchannels(1)
        out.setsampwidth(2)
        out.setframerate(44100)
        out.writeframes((numpy.clip(samples, -1, 1) * 32767).astype("<i2").tobytes())
    with open(place + "/notes.cfg", "w") as file:
        file.write(NOTES % "")
    ledger = place + "/noise.ledger"
    done = scan(place + "/site.cfg", ledger, "--notes", place + "/notes.cfg", "--start", "2026-03-01T12:00:00Z",
                place + "/noise.wav")
    check("noise of the same length and level is scanned (seed %d)" % seed, done.returncode == 0, done.stderr)
    check("noise gives no contact of grade act", not ask(ledger, "SELECT 1 FROM contact WHERE grade = 'act'"))
    check("noise gives 'may start'", ask(ledger, "SELECT 1 FROM advice WHERE advice = 'may start' AND station = 'crew'"))


if not os.path.exists(RECORDING):
    skip("humpback song through the whole chain", "skipped: no recording")
else:
    with folder() as place_of_test:
        song(place_of_test)
        noise(place_of_test)
finish()
