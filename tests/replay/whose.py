#!/usr/bin/python3
"""The note 'whose' in a notes file of `hushwatch scan`: a neighbour's hammer, louder than ours, begins in the middle of our
job and counts; the note, with one of its impulses, takes its train out. The sums are then those of the impulses that
are left: all of the scene without it, but for the blows of ours that fell together with one of the neighbour's, which were one
impulse with it. With `occurred_ns` it takes out no more than from then on. The scene and the people are invented; intervals, jitter of
1 % and the energies are common practice, no source."""
import json
import math
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from watch import ROOT, ask, check, figure, finish, folder, scan, settings, verify  # noqa: E402

OURS = """{ x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 10.0;
    steps = ( { duration_s = 110.0; blow_interval_s = 1.6; source_energy_level_db = 200.0; } ); }"""
# Three times as far from the hydrophone and 15 dB stronger: about 8 dB louder there.
NEIGHBOUR = """{ x_m = 0.0; y_m = 3000.0; z_m = 10.0; start_s = 50.0;
    steps = ( { duration_s = 70.0; blow_interval_s = 2.3; source_energy_level_db = 215.0; } ); }"""
SCENE = """seed = 5; duration_s = 130.0; rate_hz = 24000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
hammers = ( %s );
notes = ( { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "pile 1"; answer = "open"; },
          { at_s = 9.5; kind = "source state"; person = "C. Crew"; source_state = "full power"; } );
"""
AT_S, SINCE_S = 125.0, 90.0


def hear(place, name, hammers, note=None):
    """Scans the scene; returns its ledger."""
    with open(place + "/scene.cfg", "w") as file:
        file.write(SCENE % ", ".join(hammers))
    channel = '{ role = "measure"; sensitivity_db = -170.0; full_scale_v = 10.0; place_m = [ 0.0, 750.0, 10.0 ]; }'
    more = 'source = { form = "pile"; sound = "impulsive"; criteria = ["%s/config/criteria/fish-popper-2014.cfg"]; };'
    config = settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg", channels=channel,
                      stream='input = "scene"; path = "scene.cfg"; pace = "fast";', more=more % ROOT)
    options = ["--start", "2026-03-01T12:00:00Z"]
    if note:
        with open(place + "/notes.cfg", "w") as file:
            file.write('notes = ( { at_s = %.1f; kind = "whose"; person = "B. Ears"; %s } );\n' % (AT_S, note))
        options += ["--notes", place + "/notes.cfg"]
    ledger = "%s/%s.ledger" % (place, name)
    done = scan(config, ledger, *options)
    check("%s is scanned" % name, done.returncode == 0, done.stderr)
    return ledger


def sums(ledger):
    return dict(ask(ledger, "SELECT criterion, level_db FROM exposure WHERE metric = 'SEL cumulative' AND level_db IS NOT NULL ORDER BY seq"))


def last_source(ledger):
    return ask(ledger, "SELECT n_impulses, sel_db, n_other FROM source ORDER BY seq DESC LIMIT 1")[0]


def corrected(ledger):
    return [i for row in ask(ledger, "SELECT impulses FROM correction ORDER BY seq") for i in json.loads(row[0])]


def differences(a, b):
    return [b[name] - value for name, value in a.items() if name in b]


with folder() as place:
    alone = hear(place, "ours alone", [OURS])
    both = hear(place, "ours and the neighbour's", [OURS, NEIGHBOUR])
    n_alone, sel_alone, _ = last_source(alone)
    theirs = ask(both, "SELECT id, time_s FROM impulse WHERE sel_db > ? ORDER BY seq", sel_alone + 4)
    counted = [row[0] for row in ask(both, "SELECT id FROM impulse WHERE sel_db > ? AND whose = 'ours'", sel_alone + 4)]
    figure("ours %d impulses, median SEL %.1f dB; %d of the neighbour's, of which %d count as ours" %
           (n_alone, sel_alone, len(theirs), len(counted)))
    check("the neighbour counts, as nobody has said otherwise", len(counted) > 20, counted)
    excess = max(differences(sums(alone), sums(both)))
    check("and the sums are too great", excess > 3, excess)

    said = hear(place, "with the note", [OURS, NEIGHBOUR], 'impulse = "%s"; answer = "other";' % theirs[-1][0])
    change = differences(sums(alone), sums(said))
    n, sel, n_other = last_source(said)
    left = [row[0] for row in ask(said, "SELECT sel_db FROM impulse WHERE whose = 'ours' AND id NOT IN "
                                  "(SELECT value FROM correction, json_each(correction.impulses))")]
    left_db = 10 * math.log10(sum(10 ** (sel_db / 10) for sel_db in left))  # of fish the SEL has no weighting
    figure("sums with the neighbour %+.2f dB; with the note %+.3f to %+.3f dB, with %d of %d blows" %
           (excess, min(change), max(change), n, n_alone))
    check("with the note the sums are those of the impulses that are left", len(left) == n and
          max(abs(level_db - left_db) for level_db in sums(said).values()) <= 0.02, (sums(said), left_db))
    check("which lack less than a dB of ours", max(map(abs, change)) < 1, change)
    check("and less than a fifth of the blows", n >= 0.8 * n_alone, (n, n_alone))
    check("so is the median", abs(sel - sel_alone) < 0.1 and n_other >= len(theirs), (sel, sel_alone, n_other))
    check("each impulse that is corrected is in a correction entry once", set(corrected(said)) == set(counted) and
          len(corrected(said)) == len(counted), (len(corrected(said)), len(counted)))
    notes = ask(said, "SELECT id, impulse, answer, person, occurred_s, known_s FROM note WHERE note = 'whose'")
    check("the note is an entry, and the cause of its corrections",
          [row[1:] for row in notes] == [(theirs[-1][0], "other", "B. Ears", AT_S, AT_S)] and
          {row[0] for row in ask(said, "SELECT causes FROM correction")} == {json.dumps([notes[0][0]])}, notes)
    check("what was said of each impulse when it was heard stands", ask(said, "SELECT id, whose FROM impulse") ==
          ask(both, "SELECT id, whose FROM impulse"))
    check("the ledger verifies", verify(said).returncode == 0)

    since = hear(place, "since", [OURS, NEIGHBOUR],
                 'impulse = "%s"; answer = "other"; occurred_ns = %dL;' % (theirs[-1][0], SINCE_S * 1e9))
    late = [row[0] for row in ask(both, "SELECT id FROM impulse WHERE sel_db > ? AND whose = 'ours' AND time_s >= ?",
                                  sel_alone + 4, SINCE_S)]
    check("with a time, what was heard since then is corrected", 0 < len(late) < len(counted) and set(corrected(since)) == set(late),
          (len(late), len(corrected(since))))
    check("and the note has both times", ask(since, "SELECT occurred_s, known_s FROM note WHERE note = 'whose'") == [(SINCE_S, AT_S)])

    unknown = hear(place, "unknown", [OURS, NEIGHBOUR], 'impulse = "1.1.impulse.99999"; answer = "other";')
    found = ask(unknown, "SELECT code, detail FROM finding WHERE code = 'note without effect'")
    check("an impulse that nobody heard is said to be none", len(found) == 1 and "1.1.impulse.99999" in found[0][1], found)
finish()
