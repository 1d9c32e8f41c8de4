#!/usr/bin/python3
"""Marks and listening on the observer's page, by keys alone, with the real daemon on a scene: a mark in one press, its line typed
and entered, a line that means nothing, undo, the reminder at a sign-off; a call picked from the list and a place in a strip are
heard (the audio element plays what the server made), in each form; strips scroll back; the sea live. Entries are compared with
the ledger; roles and names with the accessibility tree (WAI-ARIA 1.2)."""
import os
import signal
import sys
import time

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from browser import Browser, Tap  # noqa: E402
from daemon import Daemon  # noqa: E402
from watch import ask, folder, settings  # noqa: E402

from selenium.webdriver.common.action_chains import ActionChains  # noqa: E402
from selenium.webdriver.common.keys import Keys  # noqa: E402

tap = Tap()
check = tap.check
SCENE = """seed = 5; duration_s = 600.0; rate_hz = 96000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 150.0; y_m = 0.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
animals = ( { voice = "humpback song"; x_m = 300.0; y_m = 100.0; z_m = 15.0; start_s = 2.0; end_s = 400.0; } );
"""


def press(browser, *keys):
    for key in keys:
        ActionChains(browser.driver).send_keys(key).perform()


def active(browser):
    return browser.script("const a = document.activeElement; return [a.tagName, a.getAttribute('aria-label') || a.id || '', a.closest('li') ? a.closest('li').className : '']")


def tab_to(browser, what, limit=200):
    """Tabs until the focused element's name or id begins so."""
    for _ in range(limit):
        press(browser, Keys.TAB)
        if browser.script("const a = document.activeElement; return (a.getAttribute('aria-label') || a.id || a.textContent).startsWith(arguments[0])", what):
            return True
    return False


def playing(browser, seconds=8):
    good, _ = browser.until("const p = document.getElementById('player'); return p.currentTime > 0.2 && !p.error && p.duration > 0 ? p.duration : 0", seconds)
    return good


def marks(daemon, browser):
    browser.script("document.getElementById('person').value = 'B. Ears'; document.body.focus()")
    press(browser, "m")
    made = daemon.wait_for(lambda s: s["marks"], 3, 0.02)
    check(made and made["marks"][0]["state"] == "open", "one key makes a mark", made and made["marks"])
    focused, _ = browser.until("return document.activeElement.closest('#marks') !== null", 3)
    check(focused, "its line takes the keys", active(browser))
    press(browser, "porpose 320 m", Keys.ENTER)
    said, _ = browser.until("const n = document.querySelector('#marks [role=alert]'); return n.textContent.includes('porpose') ? n.textContent : ''", 3)
    check(said and "allowed" in said, "a line that means nothing says which word is at fault, and what is allowed", said)
    browser.picture("marks-wrong-line")
    check(browser.script("return document.activeElement.value") == "porpose 320 m", "and keeps what was typed")
    press(browser, *([Keys.BACKSPACE] * 13), "porpoise 320 m 045 closing", Keys.ENTER)
    done = daemon.wait_for(lambda s: s["marks"][0]["state"] == "completed", 3)
    check(done and done["marks"][0]["text"] == "porpoise 320 m 045 closing", "a good line completes it", done and done["marks"][0])
    focused, _ = browser.until("return document.activeElement.id === 'mark'", 2)
    check(focused, "the keys go back to the button that marks", active(browser))
    return made["marks"][0]["id"]


def undo_and_sign_off(daemon, browser):
    press(browser, Keys.ENTER)  # on 'Mark now'
    second = daemon.wait_for(lambda s: len(s["marks"]) == 2, 3)
    check(second, "the button marks too")
    browser.until("return document.activeElement.closest('#marks') !== null", 3)
    check(tab_to(browser, "Sign off B. Ears"), "the sign-off is reached by Tab")
    press(browser, Keys.ENTER)
    told, _ = browser.until("return document.getElementById('marked').textContent", 2)
    people = [p["name"] for p in daemon.state()["people"]]
    check(told.startswith("Open marks: 1") and people == ["B. Ears"], "signing off with an open mark asks for it first", (told, people))
    check(active(browser)[2].startswith("mark"), "and puts the keys there", active(browser))
    check(tab_to(browser, "Undo, mark of"), "its undo is reached by Tab")
    press(browser, Keys.ENTER)
    gone = daemon.wait_for(lambda s: s["marks"][0]["state"] == "withdrawn", 3)
    check(gone, "undo takes it back by a note", daemon.state()["marks"])
    listed, _ = browser.until("return document.querySelectorAll('#marks li').length === 1", 2)
    check(listed, "and it is no longer listed")
    check(tab_to(browser, "Sign off B. Ears"), "back at the sign-off")
    press(browser, Keys.ENTER)
    check(daemon.wait_for(lambda s: not s["people"], 3), "with no mark open it signs off at once")


def listen(daemon, browser):
    daemon.wait_for(lambda s: s["calls"] and s["calls"][-1]["end_s"] + 4 < s["watch_s"], 30)
    browser.until("return document.querySelectorAll('#calls button').length", 5)
    browser.script("document.querySelector('#calls').closest('details').open = true; [...document.querySelectorAll('#calls button')].pop().focus()")
    press(browser, Keys.ENTER)
    check(playing(browser), "a call is picked by a key and heard", browser.text("#hearing"))
    check("as it is" in browser.text("#hearing"), "and the page says what is heard", browser.text("#hearing"))
    plain = browser.script("return document.getElementById('player').duration")
    for word, factor in [("slowed", 10), ("shifted", 1)]:
        browser.script("const f = document.getElementById('form'); f.value = arguments[0]; f.dispatchEvent(new Event('change'))", word)
        browser.until("return document.getElementById('player').src.includes('form=%s')" % word, 2)
        browser.until("return document.getElementById('player').duration > 0", 5)
        time.sleep(0.5)
        length = playing(browser)
        check(length and abs(length / plain - factor) < 0.05 * factor, word + " is heard, of %.0f times the length" % factor, (length, plain))
    browser.picture("marks-listening")
    box = browser.script("const c = document.querySelector('#strips canvas'); c.scrollIntoView({block: 'center'}); const b = c.getBoundingClientRect(); return [b.left, b.top, b.width, b.height]")
    ActionChains(browser.driver).move_to_element_with_offset(browser.driver.find_element("css selector", "#strips canvas"), int(box[2] * 0.3), 0).click().perform()
    check(playing(browser), "a place in a strip is heard", browser.text("#hearing"))
    before = browser.text("#strips .time_axis")
    browser.script("[...document.querySelectorAll('#window button')].find(b => b.textContent === 'Earlier').focus()")
    press(browser, Keys.ENTER)
    moved, _ = browser.until("return document.getElementById('sound_stream').textContent.includes('back')", 2)
    check(moved and browser.text("#strips .time_axis") != before, "the strips scroll back", (before, browser.text("#strips .time_axis")))
    browser.script("[...document.querySelectorAll('#window button')].find(b => b.textContent === 'Now').click()")
    check(browser.text("#sound_stream") == "", "and come back to now")


def live(browser):
    browser.script("""window.pieces = []; const start = AudioBufferSourceNode.prototype.start;
        AudioBufferSourceNode.prototype.start = function (at) { window.pieces.push([at, this.buffer.duration, Math.max(...this.buffer.getChannelData(0))]); return start.call(this, at); };
        document.getElementById('form').value = 'as-is'; document.getElementById('live').focus()""")
    press(browser, Keys.ENTER)
    heard, _ = browser.until("return window.pieces.length >= 4 ? window.pieces : null", 15)
    gaps = [b[0] - a[0] - a[1] for a, b in zip(heard, heard[1:])] if heard else []
    check(heard and max(abs(g) for g in gaps) < 0.01, "the sea is heard live, piece after piece without a hole", (heard, gaps))
    check(heard and all(0.001 < p[2] <= 0.26 for p in heard), "never beyond the ceiling", heard)
    press(browser, Keys.ENTER)
    check(browser.script("return document.getElementById('live').getAttribute('aria-pressed')") == "false", "the same key ends it")


def tree(browser):
    nodes = browser.driver.execute_cdp_cmd("Accessibility.getFullAXTree", {})["nodes"]
    names = [(n.get("role", {}).get("value"), n.get("name", {}).get("value", "")) for n in nodes if not n.get("ignored")]
    nameless = [n for n in names if n[0] in ("button", "textbox", "combobox", "spinbutton") and not n[1]]
    check(("button", "Mark now") in names and any(r == "region" and n.startswith("Marks") for r, n in names), "a screen reader finds the marks by name", names[:5])
    check(not nameless, "no control is without a name", nameless)


with folder() as place:
    signal.alarm(170)
    with open(place + "/scene.cfg", "w") as file:
        file.write(SCENE)
    config = settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg", ledger=place + "/watch.ledger",
                      stream='input = "scene"; path = "scene.cfg"; pace = "real";',
                      channels='{ role = "both"; sensitivity_db = -170.0; full_scale_v = 10.0; place_m = [150.0, 0.0, 10.0]; }',
                      more="pages = { port = 0; }; sound = { leave_mib = 1; };")
    browser = Browser(1400, 1000)
    try:
        with Daemon(config) as daemon:
            daemon.note(kind="sign-on", person="B. Ears", watch="acoustic")
            browser.open(daemon.url())
            browser.until("return document.getElementById('words').textContent !== 'WAITING'", 5)
            mark = marks(daemon, browser)
            tree(browser)
            undo_and_sign_off(daemon, browser)
            listen(daemon, browser)
            live(browser)
            complaints = [c for c in browser.complaints() if "favicon" not in c]
            check(not [c for c in complaints if "400" not in c], "the browser complains of nothing but the line that was refused", complaints)
            daemon.terminate()
        row = ask(place + "/watch.ledger", 'SELECT note, "group", distance_m, bearing_deg, behaviour, mark, person FROM note WHERE mark IS NOT NULL')
        check(row == [("sighting", "porpoise", 320.0, 45.0, "closing", mark, "B. Ears")], "the ledger has the line by its fields", row)
        check(ask(place + "/watch.ledger", "SELECT count(*) FROM note WHERE note = 'correction'") == [(1,)], "and the correction")
    finally:
        browser.end()
sys.exit(tap.end())
