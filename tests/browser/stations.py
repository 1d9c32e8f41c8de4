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
    check(says(observer, "#crew", "bridge: acknowledged by Cy Reef") and says(observer, "#crew", "hammer cab: NOT ACKNOWLEDGED"),
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
    check(acknowledge(cab, "Bo Sand") and says(observer, "#crew", "hammer cab: acknowledged by Bo Sand"),
          "the hammer cab acknowledges", observer.text("#crew"))
    check("Cy Reef" in bridge.text("#answered") and "NOT ACKNOWLEDGED" not in observer.text("#crew"), "and the bridge keeps its own", bridge.text("#answered"))
    notes = [note for note in server.notes() if note.startswith("acknowledgement")]
    check(len(notes) == 2 and [note.split("|")[1] for note in notes] == ["bridge", "hammer cab"], "each arrived once, with its station", notes)


def what_became_of_it(server, observer, cab, bridge):
    """Seen, passed, stopped and declined are separate entries, each with who said it."""
    find(cab, "#stopped").click()
    check(says(cab, "#answered", "SOURCE STOPPED, said by Bo Sand") and says(observer, "#crew", "hammer cab: SOURCE STOPPED, said by Bo Sand"),
          "the hammer cab says that the source has stopped", (cab.text("#answered"), observer.text("#crew")))
    find(bridge, "#cannot").click()
    check(bridge.script("return document.activeElement.name") == "rank", "declining asks for rank and reason")
    bridge.driver.switch_to.active_element.send_keys("master", Keys.TAB, "tug alongside", Keys.ENTER)
    check(says(observer, "#crew", "bridge: DECLINED by Cy Reef"), "the bridge declines", observer.text("#crew"))
    notes = [note for note in server.notes() if note.startswith("acknowledgement")]
    check([note.split("|")[3] for note in notes[2:]] == ["stopped", "declined"] and "tug alongside" in notes[3], "each is an entry of its own", notes)


def by_voice(server, observer, cab):
    """A crew without a page is told by voice: name and channel once, then one key."""
    server.say("hold")
    check(observer.until("return !document.getElementById('voice').hidden", 3)[0], "while an advice asks, the observer can say it was passed by voice")
    person = find(observer, "#person")
    person.clear()
    person.send_keys("Ann Ears")
    name = find(observer, "#voice input[name=name]")
    name.send_keys("Bo Sand", Keys.ENTER)
    check(says(observer, "#crew", "passed by voice"), "it is said at the station's line", observer.text("#crew"))
    check(cab.until("return !document.getElementById('acknowledge').hidden", 2)[0], "the station's own page still asks for its own answer")
    server.say("stop")
    words_are(observer, "STOP.")
    before = len(server.notes())
    find(observer, "h1").click()
    observer.script("document.activeElement.blur()")
    find(observer, "body").send_keys("v")
    check(says(observer, "#crew", "passed by voice"), "the next one takes one key", observer.text("#crew"))
    last = server.notes()[before:]
    check(len(last) == 1 and last[0].split("|")[3:] == ["passed", "to Bo Sand on channel 16, read back"], "with name and channel", last)


def a_new_alert(server, cab, bridge):
    server.say("hold")
    asks = [browser.until("return !document.getElementById('acknowledge').hidden", 3)[0] for browser in (cab, bridge)]
    check(asks == [True, True], "a new alert asks both again", asks)


def start_of_watch(server, observer):
    """Each check is an entry; at hand-over both sign what stands open."""
    observer.script("document.getElementById('start_of_watch').open = true")
    check(observer.until("return document.querySelectorAll('#checks > li').length === 9", 3)[0], "the checks of a start of watch, two of them for each station",
          observer.text("#checks"))
    form = "#checks > li:nth-child(2)"
    find(observer, form + " input[name=cable_m]").send_keys("350")
    find(observer, form + " button[value=good]").click()
    check(says(observer, form, "good, Ann Ears"), "a check is said with who made it", observer.text(form))
    find(observer, "#checks > li:nth-child(1) button[value=bad]").click()
    check(says(observer, "#checks > li:nth-child(1)", "NOT GOOD"), "what is not good is said in words")
    check(says(observer, "#start_of_watch summary", "2 of 9 checked"), "how many are done is said", observer.text("#start_of_watch summary"))
    find(observer, "#start_of_watch [data-answer=gives]").click()
    arrived = observer.until("return document.getElementById('entered').textContent.includes('hand-over')", 3)[0]
    notes = [note for note in server.notes() if note.startswith("hand-over")]
    check(arrived and "gives|Phase" in notes[-1] and "open contacts" in notes[-1], "the hand-over is signed with what stands open", notes)
    observer.picture("stations-start-of-watch")


def main():
    signal.alarm(200)
    server, browsers = PageServer(), []
    try:
        for _ in range(3):
            browsers.append(Browser(1280, 800))
        observer, cab, bridge = browsers
        observer.open(server.base + "/")
        cab.open(crew_url(server, "hammer cab"))
        bridge.open(crew_url(server, "bridge"))
        each_for_itself(server, observer, cab, bridge)
        what_became_of_it(server, observer, cab, bridge)
        a_new_alert(server, cab, bridge)
        by_voice(server, observer, cab)
        start_of_watch(server, observer)
    finally:
        for browser in browsers:
            browser.end()
        server.end()
    return tap.end()


sys.exit(main())
