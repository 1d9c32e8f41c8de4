#!/usr/bin/python3
"""A limit of noise that is passed, and what the permit asks for then: heard by the real chain, told to the crew, the same in a
rerun and after a restart. Scene, permit, people and the action are invented; the limit is Belgium's 185 dB zero to peak at 750 m."""
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from watch import ROOT, ask, check, finish, folder, rerun, scan, settings, verify  # noqa: E402

# 225 dB less 57 dB (20 lg 750) is an SEL of 168 dB at 750 m, 188 dB at its peak; after 80 s the hammer strikes 25 dB more softly.
SCENE = """seed = 5; duration_s = %g; rate_hz = 24000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -200.0; gain_db = 0.0; full_scale_v = 10.0; } );
hammers = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 9.0;
              steps = ( { duration_s = 71.0; blow_interval_s = 1.0; source_energy_level_db = 225.0; },
                        { duration_s = 40.0; blow_interval_s = 1.0; source_energy_level_db = 200.0; } ); } );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
          { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "pile 1"; answer = "open"; },
          { at_s = 7.5; kind = "release"; person = "A. Eyes"; },
          { at_s = 8.5; kind = "source state"; person = "C. Crew"; source_state = "soft start"; },
          { at_s = 20.0; kind = "source state"; person = "C. Crew"; source_state = "full power"; },
          { at_s = 80.0; kind = "source state"; person = "C. Crew"; source_state = "reduced"; },
          { at_s = 100.0; kind = "source state"; person = "C. Crew"; source_state = "full power"; },
          { at_s = 120.0; kind = "source state"; person = "C. Crew"; source_state = "stopped"; } );
"""


def site(place, name, action, seconds, more="", pace=""):
    with open("%s/%s-scene.cfg" % (place, name), "w") as file:
        file.write(SCENE % seconds)
    with open(ROOT + "/tests/system/seconds-permit.cfg") as file, open("%s/%s-permit.cfg" % (place, name), "w") as out:
        out.write(file.read() + 'limits = { criteria = { value = ["belgium-2018"]; mark = "invented"; source = "x"; }; %s };\n' %
                  ('action = { value = "%s"; mark = "invented"; source = "x"; };' % action if action else ""))
    return settings("%s/%s.cfg" % (place, name), permit="%s/%s-permit.cfg" % (place, name), ledger="%s.ledger" % name,
                    channels='{ role = "both"; sensitivity_db = -200.0; full_scale_v = 10.0; place_m = [0.0, 750.0, 10.0]; }',
                    stream='input = "scene"; path = "%s-scene.cfg"; %s' % (name, pace), more=more +
                    'silence_s = 20.0; source = { criteria = ["%s/config/criteria/belgium-2018.cfg"]; };' % ROOT)


def crew(ledger):
    return ask(ledger, "SELECT advice, reason, causes, (julianday(utc) - julianday((SELECT min(utc) FROM entry))) * 86400 "
                       "FROM advice WHERE station = 'crew' ORDER BY seq")


def reduced(place):
    ledger = place + "/reduce.ledger"
    done = scan(site(place, "reduce", "reduce", 124), ledger)
    check("the day is scanned", done.returncode == 0, done.stderr)
    found = ask(ledger, "SELECT id, detail FROM finding WHERE code = 'limit passed' ORDER BY seq")
    check("the limit is found passed", found and "185.0 dB" in found[0][1], found)
    told = [(row[0], round(row[3])) for row in crew(ledger)]
    orders = [row for row in crew(ledger) if row[0] == "reduce power"]
    check("the crew is told to reduce power, because of that finding", len(orders) == 2 and
          all("a limit is passed" in row[1] and found[0][0] in row[2] for row in orders), crew(ledger))
    check("until it has, and again when it raises the power again", [w for w, at in told if at >= 60] ==
          ["reduce power", "carry on", "reduce power", "resume"], told)
    check("the rerun is identical", rerun(ledger).returncode == 0, rerun(ledger).stdout)
    check("the ledger verifies", verify(ledger).returncode == 0)


def only_found(place):
    ledger = place + "/log.ledger"
    check("a permit without an action is scanned", scan(site(place, "log", None, 75), ledger).returncode == 0)
    check("the limit is found passed, and nothing is asked for", ask(ledger, "SELECT count(*) FROM finding WHERE code = "
          "'limit passed'")[0][0] > 0 and "reduce power" not in [row[0] for row in crew(ledger)], crew(ledger))


def restarted(place):
    ledger = place + "/again.ledger"
    check("a scan ends while the stop is in force", scan(site(place, "again", "stop", 75), ledger).returncode == 0 and
          crew(ledger)[-1][0] == "stop", crew(ledger))
    with Daemon(site(place, "again", "stop", 75, "pages = { port = 0; };", 'pace = "real";')) as daemon:
        told = daemon.advice("crew") or {}
        check("after a restart it is still in force, for the same reason", told.get("advice") == "stop" and
              "a limit is passed" in told.get("reason", ""), told)
        daemon.wait_for(lambda s: False, 2)
        daemon.terminate()
    check("the whole is identical", rerun(ledger).returncode == 0, rerun(ledger).stdout)


with folder() as place_of_test:
    reduced(place_of_test)
    only_found(place_of_test)
    restarted(place_of_test)
finish()
