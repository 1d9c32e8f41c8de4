#!/usr/bin/python3
"""A neighbour's hammer in the sound of ours, through the whole chain (`hushwatch scan`): the job's sums are the same with and
without it within 0.1 dB, there is no finding, and our silence is not hidden by it. The scene, the permit of seconds and the
people are invented; intervals, jitter of 1 % and steps of 6 dB are common practice, no source."""
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from watch import ROOT, ask, check, figure, finish, folder, scan, settings  # noqa: E402

OURS = """{ x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 10.0;
    steps = ( { duration_s = 20.0; blow_interval_s = 2.4; source_energy_level_db = 194.0; },
              { duration_s = 30.0; blow_interval_s = 2.0; source_energy_level_db = 200.0; },
              { duration_s = 120.0; blow_interval_s = 1.6; source_energy_level_db = 206.0; } ); }"""
# Four times as far from the hydrophone and as strong as ours at full power: 12 dB weaker there.
NEIGHBOUR = """{ x_m = 0.0; y_m = 3750.0; z_m = 10.0; start_s = 70.0;
    steps = ( { duration_s = 140.0; blow_interval_s = 2.3; source_energy_level_db = 206.0; } ); }"""
SCENE = """seed = %d; duration_s = 210.0; rate_hz = 24000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
hammers = ( %s );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
          { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "pile 1"; answer = "open"; },
          { at_s = 8.0; kind = "release"; person = "A. Eyes"; },
          { at_s = 9.5; kind = "source state"; person = "C. Crew"; source_state = "soft start"; },
          { at_s = 59.5; kind = "source state"; person = "C. Crew"; source_state = "full power"; },
          { at_s = 183.0; kind = "source state"; person = "C. Crew"; source_state = "stopped"; } );
"""


def hear(place, name, seed, hammers):
    """Scans the scene; returns what its ledger says."""
    with open(place + "/scene.cfg", "w") as file:
        file.write(SCENE % (seed, ", ".join(hammers)))
    channel = '{ role = "measure"; sensitivity_db = -170.0; full_scale_v = 10.0; place_m = [ 0.0, 750.0, 10.0 ]; }'
    more = 'silence_s = 10.0; source = { form = "pile"; sound = "impulsive"; criteria = ["%s/config/criteria/nmfs-2024.cfg"]; };'
    config = settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg", channels=channel,
                      stream='input = "scene"; path = "scene.cfg"; pace = "fast";', more=more % ROOT)
    ledger = "%s/%s.ledger" % (place, name)
    done = scan(config, ledger, "--start", "2026-03-01T12:00:00Z")
    check("%s is scanned" % name, done.returncode == 0, done.stderr)
    return {"findings": ask(ledger, "SELECT code, detail FROM finding ORDER BY seq"),
            "whose": dict(ask(ledger, "SELECT whose, count(*) FROM impulse GROUP BY whose")),
            "source": ask(ledger, "SELECT n_impulses, sel_db FROM source ORDER BY seq DESC LIMIT 1"),
            "phases": [row[0] for row in ask(ledger, "SELECT phase FROM phase ORDER BY seq")],
            "sums": dict(ask(ledger, "SELECT criterion, level_db FROM exposure WHERE metric LIKE '%SEL%' AND level_db IS NOT NULL"
                             " ORDER BY seq"))}


with folder() as place_of_test:
    for seed in range(1, 9 if os.environ.get("HUSHWATCH_LENGTH") == "long" else 3):
        alone = hear(place_of_test, "ours alone, seed %d" % seed, seed, [OURS])
        both = hear(place_of_test, "ours and the neighbour's, seed %d" % seed, seed, [OURS, NEIGHBOUR])
        figure("alone %s, source %s; with the neighbour %s, source %s" %
               (alone["whose"], alone["source"], both["whose"], both["source"]))
        n = sum(both["whose"].values()) - sum(alone["whose"].values())
        check("the neighbour is heard, where ours does not drown it", n > 20, n)
        check("alone every blow is ours", set(alone["whose"]) == {"ours"}, alone["whose"])
        check("there is no finding", not alone["findings"] and not both["findings"], both["findings"])
        check("the phases are the same", alone["phases"] == both["phases"] and "break" in both["phases"],
              (alone["phases"], both["phases"]))
        check("the same criteria have sums", alone["sums"] and set(alone["sums"]) == set(both["sums"]),
              (alone["sums"], both["sums"]))
        differences = [both["sums"][name] - value for name, value in alone["sums"].items() if name in both["sums"]]
        figure("cumulative levels of %d criteria: %+.3f to %+.3f dB" % (len(differences), min(differences), max(differences)))
        check("the job's cumulative levels change by at most 0.1 dB", max(map(abs, differences)) <= 0.1, differences)
        change = both["source"][0][1] - alone["source"][0][1]
        figure("median SEL of the job: %+.3f dB" % change)
        check("the job's median level changes by at most 0.1 dB", abs(change) <= 0.1, change)
finish()
