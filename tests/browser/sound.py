#!/usr/bin/python3
"""The pages' alert: heard within 1 s of a new stop, again within 30 s until it is acknowledged where it sounds, then silent
(IMO MSC.302(87): an audible alert repeats at most 30 s apart until it is acknowledged). Chromium's AudioContext is wrapped in
the page: every oscillator's start is counted, and what reaches the loudspeaker is measured by an AnalyserNode (Web Audio)."""
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
REPEAT_S = 30.0
STOP_HZ = 523  # the stop's pulses; its harmonics and the other alerts are told apart by it

WRAP = """
window.starts = []; window.loud = [];
const Own = window.AudioContext;
window.AudioContext = class extends Own {
  createOscillator() {
    const tone = super.createOscillator(), start = tone.start.bind(tone);
    tone.start = (at = 0) => {
      window.starts.push([Date.now() / 1000 + Math.max(0, at - this.currentTime), tone.frequency.value]);
      return start(at);
    };
    return tone;
  }
};
const connect = AudioNode.prototype.connect;
AudioNode.prototype.connect = function (target, ...rest) {
  if (target instanceof AudioDestinationNode) {
    const context = this.context;
    if (!context.ear) {
      context.ear = context.createAnalyser();
      const samples = new Float32Array(context.ear.fftSize);
      setInterval(() => {
        context.ear.getFloatTimeDomainData(samples);
        if (Math.max(...samples) > 0.01) window.loud.push(Date.now() / 1000);
      }, 20);
    }
    connect.call(this, context.ear);
  }
  return connect.call(this, target, ...rest);
};"""


def open_page(browser, url):
    browser.driver.execute_cdp_cmd("Page.addScriptToEvaluateOnNewDocument", {"source": WRAP})
    browser.open(url)


def crew_url(server, station):
    return server.base + "/crew?" + urllib.parse.urlencode({"station": station})


def find(browser, selector):
    return browser.driver.find_element(By.CSS_SELECTOR, selector)


def stops(browser, since=0.0):
    """When the stop's alert began: a pulse with none in the 5 s before it."""
    begun, last = [], -1e9
    for at, hz in browser.script("return window.starts"):
        if hz == STOP_HZ:
            if at - last > 5:
                begun.append(at)
            last = at
    return [at for at in begun if at >= since]


def wait_for(browsers, n, since, seconds):
    until = time.time() + seconds
    while time.time() < until and any(len(stops(browser, since)) < n for browser in browsers):
        time.sleep(0.05)
    return [stops(browser, since) for browser in browsers]


def loud_after(browser, since, seconds=1.5):
    """Seconds from a moment until sound really came out; None where none did."""
    until = time.time() + seconds
    while time.time() < until:
        found = [at - since for at in browser.script("return window.loud") if at > since]
        if found:
            return found[0]
        time.sleep(0.02)
    return None


def acknowledge(browser, person):
    find(browser, "#person").send_keys(person, Keys.ENTER)
    return browser.until("return document.getElementById('answered').textContent.startsWith('Acknowledged by %s')" % person, 3)[0]


def arm(pages):
    for name, browser in pages.items():
        check(browser.script("return window.starts.length") == 0, name + ": nothing sounds before it is armed")
        find(browser, "#sound").click()
        armed, _ = browser.until("return document.getElementById('sound').textContent === 'Sound on'", 3)
        check(armed and loud_after(browser, 0) is not None, name + ": one press arms the sound, and it is heard")
    time.sleep(1.5)  # what arming plays has ended


def new_alert(server, pages):
    said = time.time()
    server.say("stop")
    first = wait_for(pages.values(), 1, said, 3)
    delays = [loud_after(browser, said) for browser in pages.values()]
    check(all(found and found[0] - said <= 1.0 for found in first), "a new stop sounds within 1 s on each page", (said, first))
    check(all(delay is not None and delay <= 1.0 for delay in delays), "and is heard within 1 s", delays)
    print("# figure a new stop was heard after %s s" % ", ".join("%.2f" % (delay or 99) for delay in delays))
    pulses = [sum(1 for at, hz in browser.script("return window.starts") if hz == STOP_HZ and at >= said) for browser in pages.values()]
    check(pulses == [6, 6, 6], "six pulses each", pulses)
    again = wait_for(pages.values(), 2, said, REPEAT_S + 1)
    gaps = [found[1] - found[0] if len(found) > 1 else 99 for found in again]
    check(max(gaps) <= REPEAT_S, "unanswered, it sounds again within 30 s", gaps)
    print("# figure sounded again after %.1f s at most" % max(gaps))


def silence(server, observer, cab, bridge):
    check(acknowledge(cab, "Bo Sand"), "the hammer cab acknowledges")
    time.sleep(2.5)  # the alert that is under way ends
    start = time.time()
    time.sleep(REPEAT_S)
    check(stops(cab, start) == [] and not [at for at in cab.script("return window.loud") if at > start],
          "acknowledged at the hammer cab, nothing sounds there for 30 s", (start, cab.script("return window.loud")))
    check(len(stops(bridge, start)) >= 1, "at the bridge, which has not acknowledged, it sounds on", stops(bridge))
    check(stops(observer, start) == [], "at the observer's the crew's answer has ended it", stops(observer))
    said = time.time()
    server.say("stop")
    anew = wait_for([cab], 1, said, 3)[0]
    check(anew and anew[0] - said <= 1.0, "a new stop sounds where the one before was acknowledged", (said, anew))
    cab.driver.refresh()
    cab.until("return document.getElementById('words').textContent === 'STOP.'", 3)
    check(stops(cab) == [] and "SOUND OFF" in cab.text("#sound"), "after a reload the page says that its sound is off")
    pressed = time.time()
    find(cab, "#sound").click()
    anew = wait_for([cab], 1, pressed, 3)[0]
    check(anew and anew[0] - pressed <= 1.0, "armed while an alert waits, it sounds within 1 s", (pressed, anew))


def main():
    signal.alarm(150)
    server, browsers = PageServer(), []
    try:
        for _ in range(3):
            browsers.append(Browser(1280, 800))
        observer, cab, bridge = browsers
        open_page(observer, server.base + "/")
        open_page(cab, crew_url(server, "hammer cab"))
        open_page(bridge, crew_url(server, "bridge"))
        for browser in browsers:
            browser.until("return document.getElementById('words').textContent !== 'WAITING'", 3)
        pages = {"observer": observer, "hammer cab": cab, "bridge": bridge}
        arm(pages)
        new_alert(server, pages)
        silence(server, observer, cab, bridge)
    finally:
        for browser in browsers:
            browser.end()
        server.end()
    return tap.end()


sys.exit(main())
