#!/usr/bin/python3
"""What is measured of the source, on the observer's page: the real daemon hears a simulated soft start, and blows behind a
quieting measure, as fast as it can. Scenes, people, the permit of seconds and two criteria are invented."""
import json
import os
import signal
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from browser import Browser  # noqa: E402
from daemon import Daemon  # noqa: E402
from watch import ROOT, ask, check, figure, finish, folder, settings, verify  # noqa: E402

SCENE = """seed = 9; duration_s = %g; rate_hz = 48000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
hammers = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 12.0; steps = ( %s ); } );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
          { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "pile 1"; answer = "open"; },
          { at_s = 9.0; kind = "release"; person = "A. Eyes"; },
          { at_s = 10.0; kind = "source state"; person = "C. Crew"; source_state = "soft start"; }%s );
"""
ONE = '{ role = "measure"; sensitivity_db = -170.0; full_scale_v = 10.0; place_m = [0.0, 750.0, 10.0]; }'
CRITERIA = """id = "invented"; title = "Invented for a test"; document = "none"; year = 2026;
criteria = ( { name = "hardly audible"; effect = "behaviour"; meaning = "invented"; sound = "impulsive"; metric = "SEL single";
               weighting = "none"; unit = "dB"; reference = "1 uPa2 s"; value = { value = 60; mark = "read"; source = "invented"; }; },
             { name = "push"; effect = "injury"; meaning = "invented"; sound = "impulsive"; metric = "positive impulse";
               weighting = "none"; unit = "Pa s"; reference = "none"; value = { value = 30; mark = "read"; source = "invented"; }; } );
"""


def steps(*levels):
    return ", ".join("{ duration_s = %g; blow_interval_s = 1.0; source_energy_level_db = %g; }" % pair for pair in levels)


def heard(place, name, duration_s, levels, notes, port_words="pages = { port = 0; };"):
    """A daemon that has heard a scene to its end, not started yet, and its ledger."""
    with open(place + "/%s-scene.cfg" % name, "w") as file:
        file.write(SCENE % (duration_s, steps(*levels), "".join(", { %s }" % note for note in notes)))
    config = settings(place + "/%s.cfg" % name, permit=place + "/permit.cfg", channels=ONE, ledger="%s.ledger" % name,
                      stream='input = "scene"; path = "%s-scene.cfg"; pace = "fast";' % name,
                      more='silence_s = 100.0; %s source = { form = "pile"; sound = "impulsive"; loss_n_db = 20.0; loss_n_spread_db = 1.0; '
                      'criteria = ["%s/config/criteria/nmfs-2024.cfg", "%s/config/criteria/germany-2008.cfg", "invented.cfg"]; };' % (port_words, ROOT, ROOT))
    return Daemon(config), place + "/%s.ledger" % name


def count(browser, selector):
    return browser.script("return document.querySelectorAll(arguments[0]).length", selector)


def fits(browser, name):
    """At three sizes nothing is wider than the window; pictures for people."""
    for width, height in ((800, 600), (1280, 800), (1920, 1080)):
        browser.size(width, height)
        browser.until("return document.getElementById('curve').getAttribute('viewBox').split(' ')[2] == document.getElementById('curve').clientWidth", 3)
        wide = browser.script("return document.documentElement.scrollWidth")
        cut = browser.script("""return [...document.querySelectorAll('.sums p, .sums dd, .sums dt, .sums h3, .sums td, .sums li, .sums figcaption')]
            .filter((n) => n.offsetParent && n.scrollWidth > n.clientWidth + 1 && getComputedStyle(n).display !== 'inline').map((n) => n.textContent)""")
        over = browser.script("""return [...document.querySelectorAll('.sums svg text')].filter((n) => n.ownerSVGElement.clientWidth &&
            (n.getBBox().x < -1 || n.getBBox().x + n.getBBox().width > n.ownerSVGElement.clientWidth + 1)).map((n) => n.textContent)""")
        check("%s: nothing is cut off at %d x %d" % (name, width, height), wide <= width and not cut and not over, (wide, cut, over))
        browser.script("document.getElementById('sums').scrollIntoView()")
        browser.picture("%s-%d" % (name, width))


def soft_start(browser, daemon, ledger):
    browser.open(daemon.url("/"))
    said, took = browser.until("return document.getElementById('warnings').textContent.includes('will pass the limit of 160.0 dB')", 30)
    check("a soft start that rises towards the limit: the page warns", said, browser.text("#warnings"))
    browser.until("return Number(document.getElementById('numbers').textContent.match(/median of (\\d+)/)?.[1]) >= 30", 30)
    check("the warning is shown as words in the panel", "EARLY WARNING" in (browser.shown("#warnings") or ""), browser.shown("#warnings"))
    first = ask(ledger, "SELECT min(seq), warning FROM source WHERE warning IS NOT NULL")[0]
    passed = ask(ledger, "SELECT count(*), max(sel_db) FROM impulse WHERE whose = 'ours' AND sel_db > 160")[0]
    highest = ask(ledger, "SELECT max(sel_db) FROM impulse WHERE seq < ?", first[0])[0][0]
    findings = ask(ledger, "SELECT code FROM finding WHERE code = 'limit passed'")
    check("it came before any blow was over the limit, and is no finding", first[0] and passed[0] == 0 and not findings, (first, passed, findings))
    figure("early warning when the highest blow had %.1f dB of the limit's 160: %s" % (highest, first[1]))
    check("the curves of SEL and peak have blows, their limit as a line and the soft start's beginning",
          all(count(browser, "#%s %s" % (curve, part)) for curve in ("curve", "peak_curve") for part in (".blow", ".limit", ".since")))
    check("the limits are named with their place", "limit 160 dB at 750 m" in browser.text("#curve") and "limit 190 dB at 750 m" in browser.text("#peak_curve"), browser.text("#curve"))
    numbers = browser.shown("#numbers")
    check("three numbers, each with its own words, and why there is none", all(word in numbers for word in ("Received", "At 750 m", "Energy source level", "90 %", "line source")), numbers)
    browser.script("document.getElementById('more_criteria').click()")
    rows = dict(browser.script("return [...document.querySelectorAll('#criteria tbody tr')].map((row) => [row.cells[0].firstChild.textContent, row.innerText])"))
    check("a positive impulse is said in Pa s, not in dB", rows.get("push", "").count("Pa s") == 2 and "dB" not in rows["push"], rows.get("push"))
    check("a distance that is not computed any more has a word", "beyond 1000 km" in rows.get("hardly audible", ""), rows.get("hardly audible"))
    in_ledger = ask(ledger, "SELECT distance, distance_m FROM exposure WHERE criterion = 'hardly audible' ORDER BY seq DESC")[0]
    check("the same word in the ledger", "beyond 1000 km" in in_ledger[0] and in_ledger[1] is None, in_ledger)
    check("criteria against the zone on one axis", count(browser, "#distances .zone") == 1 and "stop zone 500 m" in browser.text("#distances_zones"), browser.text("#distances_zones"))
    browser.script("document.getElementById('research').parentElement.open = true")
    remark = browser.text("#research")
    check("kurtosis is a remark, marked as research", "Research" in browser.text(".panel.source summary") and "Kurtosis of the last minute (60 s" in remark and "No rule reads" in remark, remark)
    stored = ask(ledger, "SELECT research_kurtosis FROM level ORDER BY start_s LIMIT 1")[0][0]
    check("and the number is the ledger's", "%.1f" % stored in remark, (stored, remark))
    fits(browser, "sums-1-soft-start")


def quieting(browser, daemon, ledger):
    browser.size(1280, 800)
    browser.open(daemon.url("/"))
    said, took = browser.until("return document.getElementById('warnings').textContent.includes('QUIETING FALLS')", 40)
    check("a quieting measure that falls is said on the page", said, browser.text("#warnings"))
    browser.until("return Number(document.getElementById('numbers').textContent.match(/median of (\\d+)/)?.[1]) >= 100", 30)
    words = browser.shown("#quieting") or ""
    check("what it takes off, with its interval and how many impulses that rests on", "off the SEL (90 %" in words and "without it and" in words, words)
    check("and what that is for each hearing group", all("NMFS 2024 " + group in words for group in ("LF", "HF", "VHF", "PW", "OW")), words)
    stored = ask(ledger, "SELECT insertion_bands_db, insertion_bands_low_db, insertion_bands_high_db, reductions, insertion_db FROM source ORDER BY seq DESC LIMIT 1")[0]
    bands, low, high, groups = (json.loads(text) for text in stored[:4])
    known = [i for i in range(len(bands)) if bands[i] is not None]
    check("by decidecade, with its interval, in the ledger and as bars on the page", len(bands) == len(low) == len(high) and len(groups) == 5 and
          known and all(low[i] <= bands[i] <= high[i] for i in known) and count(browser, "#quieting .interval") == len(known), (stored, count(browser, "#quieting .interval")))
    check("the page's bars can be read aloud", "Insertion loss by decidecade: 10 Hz" in browser.script("return document.querySelector('#quieting svg').getAttribute('aria-label')"))
    fits(browser, "sums-2-quieting")
    complaints = [text for text in browser.complaints() if "/api/" not in text]  # the first daemon's end breaks its link
    check("no page complained", not complaints, complaints)


def main():
    signal.alarm(170)
    browser = Browser(1280, 800)
    with folder() as place:
        with open(ROOT + "/tests/system/seconds-permit.cfg") as file:
            permit = file.read()
        with open(place + "/permit.cfg", "w") as file:
            file.write(permit.replace("least_minutes = { value = 0.15", "least_minutes = { value = 0.9"))
        with open(place + "/invented.cfg", "w") as file:
            file.write(CRITERIA)
        try:
            rising = [(8, 206), (8, 209), (8, 212), (8, 215)]
            daemon, ledger = heard(place, "rising", 75, rising, [])
            with daemon:
                soft_start(browser, daemon, ledger)
            check("the ledger verifies", verify(ledger).returncode == 0, ledger)
            daemon, ledger = heard(place, "quiet", 155, [(30, 212), (60, 203), (40, 208)], [
                'at_s = 22.0; kind = "source state"; person = "C. Crew"; source_state = "full power";',
                'at_s = 41.5; kind = "quieting"; person = "C. Crew"; answer = "on"; text = "bubble curtain";'])
            with daemon:
                quieting(browser, daemon, ledger)
        finally:
            browser.end()
    finish()


main()
