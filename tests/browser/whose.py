#!/usr/bin/python3
"""Whose impulses are, from the observer's page: a simulated scene, the real daemon. A neighbour's hammer, louder than ours,
begins in the middle of our job; the observer names one of its impulses on the page. Beside the channel that measures there is
one that does both and clips too near the expected peak: the page names it, and says when it clips. Scene, people and permit of
seconds are invented."""
import os
import signal
import socket
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from browser import Browser  # noqa: E402
from daemon import Daemon  # noqa: E402
from watch import ROOT, ask, check, figure, finish, folder, settings, verify  # noqa: E402

from selenium.webdriver.common.by import By  # noqa: E402
from selenium.webdriver.support.ui import Select  # noqa: E402

# The first hydrophone clips at 170 dB; our blows have peaks of some 180 dB there.
SCENE = """seed = 9; duration_s = 80.0; rate_hz = 24000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 150.0; y_m = 0.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 1.0; },
                { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
hammers = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 3.0;
    steps = ( { duration_s = 72.0; blow_interval_s = 1.6; source_energy_level_db = 200.0; } ); },
  { x_m = 0.0; y_m = 3000.0; z_m = 10.0; start_s = 14.0;
    steps = ( { duration_s = 60.0; blow_interval_s = 2.3; source_energy_level_db = 215.0; } ); } );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "pile 1"; answer = "open"; },
          { at_s = 2.5; kind = "source state"; person = "C. Crew"; source_state = "full power"; } );
"""
TWO = '{ role = "both"; sensitivity_db = -170.0; full_scale_v = 1.0; expected_peak_db = 185.0; place_m = [150.0, 0.0, 10.0]; }, ' \
      '{ role = "measure"; sensitivity_db = -170.0; full_scale_v = 10.0; expected_peak_db = 180.0; place_m = [0.0, 750.0, 10.0]; }'


def free_port():
    with socket.socket() as s:
        s.bind(("127.0.0.1", 0))
        return s.getsockname()[1]


def find(browser, selector):
    return browser.driver.find_element(By.CSS_SELECTOR, selector)


def refused_is_named(observer):
    told, _ = observer.until("return document.getElementById('faults').innerText.includes('IMPULSE LEVELS REFUSED')", 10)
    faults = observer.text("#faults")
    check("the channel that does both and clips too near the expected peak is named",
          told and "channel 1, clips less than 6 dB over the expected peak" in faults and "2" not in faults.split("channel")[1], faults)
    clipped, _ = observer.until("return document.getElementById('unheard').textContent.includes('clipping, channel 1.1')", 20)
    check("when it clips, that is said with its number", clipped, observer.text("#unheard"))
    check("the channel that measures has no such stretch", "channel 1.2" not in observer.text("#unheard"), observer.text("#unheard"))


def loud(state, ours_db):
    return [i for i in state["impulses"] if i["sel_db"] is not None and i["sel_db"] > ours_db + 4]


def name_the_neighbour(daemon, observer):
    state = daemon.wait_for(lambda s: len(s["impulses"]) >= 5, 20)
    ours_db = sorted(i["sel_db"] for i in state["impulses"])[len(state["impulses"]) // 2]
    state = daemon.wait_for(lambda s: len([i for i in loud(s, ours_db) if i["whose"] == "ours"]) >= 8, 50)
    check("the neighbour, %.1f dB and more, counts as ours" % (ours_db + 4), state is not None, daemon.state()["impulses"])
    curve_db = max(point[1] for point in daemon.state()["curve"])
    find(observer, "#person").send_keys("B. Ears")
    [button] = [b for b in observer.driver.find_elements(By.CSS_SELECTOR, "#kinds button") if b.text == "Whose"]
    button.click()
    chosen = Select(find(observer, "#entry select[name=impulse]"))
    wanted = loud(daemon.state(), ours_db)[1]
    labels = {option.get_attribute("value"): option.text for option in chosen.options}
    check("the form names the last impulses by time, level and whose", labels.get(wanted["id"], "").endswith("%.1f dB, ours" % wanted["sel_db"]), labels)
    observer.picture("whose-1-form")
    chosen.select_by_value(wanted["id"])
    Select(find(observer, "#entry select[name=answer]")).select_by_value("other")
    find(observer, "#entry button").click()
    taken, took = observer.until("return document.getElementById('entered').textContent.startsWith('Entered: whose')", 3)
    check("the note is taken", taken, observer.text("#entered"))
    left, took = observer.until("return document.getElementById('left_out').innerText.includes('of another project')", 5)
    check("and what is left out of the sums is said", left, observer.text("#left_out"))
    figure("entered, and seen in the sums, in %.2f s" % took)
    state = daemon.state()
    check("the impulses that were heard are marked other", loud(state, ours_db) and all(i["whose"] == "other" for i in loud(state, ours_db)),
          loud(state, ours_db))
    check("ours stay ours", sum(i["whose"] == "ours" for i in state["impulses"]) >= 10, state["impulses"])
    check("the curve drops the neighbour", max(point[1] for point in state["curve"]) < min(curve_db, ours_db + 4), (curve_db, state["curve"]))
    row, _ = observer.until("return [...document.querySelectorAll('#impulses tbody tr')].some((row) => row.textContent.includes('other'))", 5)
    check("the table of impulses says so", row, observer.text("#impulses"))
    observer.picture("whose-2-corrected")
    state = daemon.wait_for(lambda s: loud(s, ours_db) and loud(s, ours_db)[0]["time_s"] > wanted["time_s"] + 8, 20)
    later = [i for i in loud(state, ours_db) if i["time_s"] > wanted["time_s"] + 4] if state else []
    check("what comes of that train afterwards is another's too", later and all(i["whose"] == "other" for i in later), later)


def main():
    signal.alarm(160)
    browser = Browser(1600, 1100)
    with folder() as place:
        with open(place + "/scene.cfg", "w") as file:
            file.write(SCENE)
        config = settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg", channels=TWO,
                          stream='input = "scene"; path = "scene.cfg"; pace = "real";',
                          more='pages = { port = %d; }; source = { form = "pile"; sound = "impulsive"; '
                               'criteria = ["%s/config/criteria/nmfs-2024.cfg"]; };' % (free_port(), ROOT))
        try:
            with Daemon(config) as daemon:
                browser.open(daemon.url("/"))
                refused_is_named(browser)
                name_the_neighbour(daemon, browser)
                complaints = browser.complaints()
                check("the page has nothing to complain of", not complaints, complaints)
                daemon.terminate()
            ledger = place + "/watch.ledger"
            rows = ask(ledger, "SELECT channel, whose, causes FROM correction")
            check("the ledger has the corrections", rows and {row[1] for row in rows} == {"other"}, rows)
            told = ask(ledger, "SELECT health FROM health WHERE health LIKE '%refused%'")
            check("and one entry of the channel that is refused", len(told) == 1 and "channel 1" in told[0][0], told)
            check("the ledger verifies", verify(ledger).returncode == 0)
        finally:
            browser.end()
    finish()


main()
