#!/usr/bin/python3
"""Two crew stations and the observer in three browsers, fed by board_server (filled structures, invented figures): each
station acknowledges for itself (IMO MSC.302(87): acknowledging silences an alert where it was acknowledged)."""
import os
import signal
import sys
import time
import urllib.parse

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from browser import Browser, PageServer, Tap  # noqa: E402

from selenium.webdriver.common.by import By  # noqa: E402
from selenium.webdriver.common.keys import Keys  # noqa: E402

tap = Tap()
check = tap.check


def crew_url(server, station):
    return server.base + "/crew?" + urllib.parse.urlencode({"station": station})


def find(browser, selector):
    return browser.driver.find_element(By.CSS_SELECTOR, selector)


def words_are(browser, wanted, seconds=3.0):
    return browser.until("return document.getElementById('words').textContent === '%s'" % wanted, seconds)[0]


def says(browser, selector, text, seconds=3.0):
    return browser.until("return document.querySelector('%s').innerText.includes('%s')" % (selector, text), seconds)[0]


def acknowledge(browser, person):
    name = find(browser, "#person")
    name.clear()
    name.send_keys(person, Keys.ENTER)
    return says(browser, "#answered", "Acknowledged by " + person)


def each_for_itself(server, observer, cab, bridge):
    server.say("stop")
    check(all(words_are(browser, "STOP.") for browser in (observer, cab, bridge)), "observer and both stations see the stop")
    check(says(observer, "#crew", "hammer cab: NOT ACKNOWLEDGED") and says(observer, "#crew", "bridge: NOT ACKNOWLEDGED"),
          "the observer sees that no station has acknowledged", observer.text("#crew"))
    check(acknowledge(bridge, "Cy Reef"), "the bridge acknowledges", bridge.text(".answer"))
    check(says(observer, "#crew", "bridge: acknowledged by Cy Reef (seen)") and says(observer, "#crew", "hammer cab: NOT ACKNOWLEDGED"),
          "the observer sees who has and who has not", observer.text("#crew"))
    other = says(cab, "#answered", "bridge acknowledged; hammer cab has not yet")
    check(other and cab.shown("#acknowledge") and cab.script("return document.getElementById('instruction').classList.contains('unanswered')"),
          "the hammer cab still asks for its own", cab.text(".answer"))
    check(bridge.shown("#acknowledge") is None and not bridge.script("return document.getElementById('instruction').classList.contains('unanswered')"),
          "the bridge asks no more")
    cab.driver.refresh()
    check(words_are(cab, "STOP.") and cab.until("return !document.getElementById('acknowledge').hidden", 3)[0],
          "a reload of the hammer cab's page asks again", cab.text(".answer"))
    observer.picture("stations-one-of-two")
    check(acknowledge(cab, "Bo Sand") and says(observer, "#crew", "hammer cab: acknowledged by Bo Sand (seen)"),
          "the hammer cab acknowledges", observer.text("#crew"))
    check("Cy Reef" in bridge.text("#answered") and "NOT ACKNOWLEDGED" not in observer.text("#crew"), "and the bridge keeps its own", bridge.text("#answered"))
    notes = [note for note in server.notes() if note.startswith("acknowledgement")]
    check(len(notes) == 2 and [note.split("|")[1] for note in notes] == ["bridge", "hammer cab"], "each arrived once, with its station", notes)


def a_new_alert(server, cab, bridge):
    server.say("hold")
    asks = [browser.until("return !document.getElementById('acknowledge').hidden", 3)[0] for browser in (cab, bridge)]
    check(asks == [True, True], "a new alert asks both again", asks)


def main():
    signal.alarm(100)
    server, browsers = PageServer(), []
    try:
        for _ in range(3):
            browsers.append(Browser(1280, 800))
        observer, cab, bridge = browsers
        observer.open(server.base + "/")
        cab.open(crew_url(server, "hammer cab"))
        bridge.open(crew_url(server, "bridge"))
        each_for_itself(server, observer, cab, bridge)
        a_new_alert(server, cab, bridge)
    finally:
        for browser in browsers:
            browser.end()
        server.end()
    return tap.end()


sys.exit(main())
