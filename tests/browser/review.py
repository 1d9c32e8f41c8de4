#!/usr/bin/python3
"""The auditor's page in Debian's chromium, over ledgers ashore (hushwatch review) and of a running watch. The ledger is the
demonstration's, heard by the scan, with one verdict turned into a dismissal whose reason holds markup. Pictures go to
build/pictures, the printed page to build/pictures/review.pdf."""
import base64
import hashlib
import json
import math
import os
import re
import shutil
import signal
import socket
import sqlite3
import struct
import subprocess
import sys
import time

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from browser import Browser  # noqa: E402
from daemon import Daemon  # noqa: E402
from watch import BUILD, ROOT, ask, check, figure, finish, folder, scan, settings  # noqa: E402

from selenium.webdriver.common.by import By  # noqa: E402
from selenium.webdriver.common.keys import Keys  # noqa: E402

MARKUP = "<img src=x onerror='window.owned=1'><b>bold</b>"
SCREENS = ["survey", "steps", "sounds", "dismissed", "sample", "permit"]


class Review:
    def __init__(self, ledger):
        self.process = subprocess.Popen([BUILD + "/hushwatch", "review", ledger], stdout=subprocess.PIPE, text=True)
        self.url = re.search(r"http://\S+", self.process.stdout.readline()).group(0)

    def end(self):
        self.process.send_signal(signal.SIGTERM)
        self.process.wait(timeout=10)
        self.process.stdout.close()


def flac(samples, rate):
    """A FLAC stream of verbatim subframes of 4,096 samples of 16 bits (RFC 9639, sections 8 and 9)."""
    def crc(data, polynomial, bits):
        value = 0
        for byte in data:
            value ^= byte << (bits - 8)
            for _ in range(8):
                value = (value << 1) ^ polynomial if value >> (bits - 1) & 1 else value << 1
            value &= (1 << bits) - 1
        return value
    n = len(samples) // 4096
    out = b"fLaC" + struct.pack(">BBH", 0x80, 0, 34) + struct.pack(">HH", 4096, 4096) + bytes(6) + \
        struct.pack(">Q", rate << 44 | 0 << 41 | 15 << 36 | n * 4096) + bytes(16)
    for i in range(n):
        head = struct.pack(">HBBB", 0xfff8, 0xc0, 0x08, i)
        frame = head + bytes([crc(head, 0x07, 8), 0x02]) + struct.pack(">4096h", *samples[4096 * i:4096 * (i + 1)])
        out += frame + struct.pack(">H", crc(frame, 0x8005, 16))
    return out


def make_ledger(place):
    """The demonstration with a dismissal, then a sound that was kept of it, chained on as the daemon would."""
    with open(ROOT + "/config/demonstration.cfg") as file:
        text = file.read()
    with open(ROOT + "/config/scenes/demonstration.cfg") as file:
        scene = file.read()
    scene = re.sub(r'verdict = "confirm";\s*text = "whistles of several animals"', 'verdict = "dismiss"; text = "%s"' % MARKUP, scene)
    with open(place + "/scene.cfg", "w") as file:
        file.write(scene)
    text = text.replace('"scenes/demonstration.cfg"', '"%s/scene.cfg"' % place).replace("../build/demonstration.ledger", place + "/x.ledger")
    for name in ("permits/", "criteria/"):
        text = text.replace('"' + name, '"' + ROOT + "/config/" + name)
    with open(place + "/site.cfg", "w") as file:
        file.write(text.replace('"calls"', '"' + ROOT + '/config/calls"'))
    ledger = place + "/demo.ledger"
    done = scan(place + "/site.cfg", ledger, "--start", "2026-03-01T12:00:00Z")
    check("the demonstration is scanned, with a dismissal", done.returncode == 0 and MARKUP in scene and
          ask(ledger, "SELECT count(*) FROM contact WHERE state = 'dismissed'")[0][0] > 0, done.stderr)
    kept = shutil.copy(ledger, place + "/kept.sqlite")
    os.makedirs(kept + ".sound/clips")
    data = flac([int(9000 * math.sin(2 * math.pi * 600 * i / 48000)) for i in range(12 * 4096)], 48000)
    with open(kept + ".sound/clips/1.flac", "wb") as file:
        file.write(data)
    cause = ask(ledger, "SELECT id FROM contact WHERE state = 'dismissed' ORDER BY seq LIMIT 1")[0][0]
    body = json.dumps({"causes": [cause], "channel": 1, "end_s": 228.024, "file": "1.flac", "id": "1.1.sound.9", "reason": "dismissed",
                       "sha256": hashlib.sha256(data).hexdigest(), "start_s": 227.0, "stream": 1}, sort_keys=True, separators=(",", ":"))
    connection = sqlite3.connect(kept)
    seq, before = connection.execute("SELECT seq, hash FROM entry ORDER BY seq DESC LIMIT 1").fetchone()
    utc = "2026-03-01T12:08:01.000000Z"
    new = hashlib.sha256("\n".join((before, str(seq + 1), utc, "sound", body)).encode()).hexdigest()
    connection.execute("INSERT INTO entry VALUES (?, ?, 'sound', ?, ?)", (seq + 1, utc, body, new))
    connection.commit()
    connection.close()
    return ledger, kept


def to(browser, screen):
    browser.script("location.hash = arguments[0]", screen)
    browser.until("return !document.getElementById(%s).hidden" % json.dumps(screen.split("=")[0]), 3)


def find(browser, selector):
    return browser.driver.find_element(By.CSS_SELECTOR, selector)


def survey(browser, ledger):
    browser.until("const n = document.querySelectorAll('#picture > svg > text'); return [...n].some((t) => t.textContent === 'unheard: own source')", 15)
    names = browser.script("return [...document.querySelectorAll('#picture > svg > text')].map((t) => t.textContent)")
    for name in ("visual watch", "acoustic watch", "phase", "job", "contacts", "advice", "findings", "SEL ours", "SPL 1.1", "full power", "pile 7"):
        check("the survey shows: " + name, name in names, names)
    links = browser.script("return [...document.querySelectorAll('#picture a')].map((a) => a.getAttribute('href')).filter(Boolean)")
    for kind in ("phase", "advice", "finding"):
        wanted = sorted(row[0] for row in ask(ledger, "SELECT id FROM %s" % kind))
        got = sorted({link.split("=")[1] for link in links if ".%s." % kind in link})
        check("every %s of the ledger is in the picture" % kind, got == wanted, (got, wanted))
    rows = browser.script("return document.querySelectorAll('#list tr').length")
    wanted = ask(ledger, "SELECT count(*) FROM entry WHERE kind IN ('phase', 'advice', 'finding', 'note')")[0][0]
    check("and in words in the table", rows == wanted, (rows, wanted))
    browser.picture("review-survey")
    box = browser.script("const r = document.querySelector('#picture svg').getBoundingClientRect(); return [r.left, r.top, r.width]")
    from selenium.webdriver.common.action_chains import ActionChains
    chain = ActionChains(browser.driver)
    chain.move_to_element_with_offset(find(browser, "#picture svg"), int(-box[2] / 2 + 140 + 0.45 * (box[2] - 146)), -90)
    chain.click_and_hold().move_by_offset(int(0.1 * (box[2] - 146)), 0).release().perform()
    moved, _ = browser.until("return document.querySelector('[name=from]').value > '2026-03-01 12:03:30'", 3)
    ends = browser.script("return ['from', 'to'].map((n) => document.querySelector(`[name=${n}]`).value)")
    check("dragging over a tenth shows that tenth", moved and "12:03:3" in ends[0] and "12:04:2" in ends[1], ends)
    browser.until("return [...document.querySelectorAll('#picture > svg > text')].some((t) => t.textContent === 'unheard: own source')", 10)
    browser.picture("review-zoomed")
    for name, value in (("from", "2026-03-01 12:05:00"), ("to", "2026-03-01 12:06:00"), ("job", "pile 7")):
        find(browser, "#filter [name=%s]" % name).clear()
        find(browser, "#filter [name=%s]" % name).send_keys(value)
    find(browser, "#filter button").click()
    wanted = ask(ledger, "SELECT count(*) FROM entry WHERE kind IN ('phase', 'advice', 'finding', 'note') AND utc BETWEEN '2026-03-01T12:05:00' "
                 "AND '2026-03-01T12:06:00.000000Z' AND json_extract(body, '$.job') = 'pile 7'")[0][0]
    narrow, _ = browser.until("return document.querySelectorAll('#list tr').length === %d" % wanted, 5)
    check("a time and a job typed in", narrow and wanted > 2, (browser.text("#list"), wanted))
    find(browser, "#filter [name=job]").clear()
    find(browser, "#zoom button:last-child").click()
    back, _ = browser.until("return document.querySelector('[name=from]').value.endsWith('12:00:00')", 3)
    check("one button shows all again", back)


def stepping(browser, ledger):
    to(browser, "steps")
    browser.until("return document.querySelectorAll('#chain li').length > 0", 5)
    ids = [row[0] for row in ask(ledger, "SELECT json_extract(body, '$.id') FROM entry WHERE kind IN ('advice', 'finding') ORDER BY seq")]
    first = browser.script("return document.querySelector('#chain a').textContent")
    check("stepping begins with the first advice", first == ids[0], first)
    seen = [first]
    for i in range(1, 4):
        find(browser, "body").send_keys("n")
        browser.until("return document.querySelector('#chain a').textContent === %s" % json.dumps(ids[i]), 3)
        seen.append(browser.script("return document.querySelector('#chain a').textContent"))
    find(browser, "body").send_keys("b")
    browser.until("return document.querySelector('#chain a').textContent === %s" % json.dumps(ids[2]), 3)
    check("by keyboard, forwards and back", seen == ids[:4] and browser.text("#at") == "3 of %d" % len(ids), (seen, browser.text("#at")))
    identity = ask(ledger, "SELECT id FROM finding LIMIT 1")[0][0]
    to(browser, "steps=" + identity)
    browser.until("return document.querySelector('#chain a').textContent === %s" % json.dumps(identity), 3)
    printed = subprocess.run([BUILD + "/hushwatch", "explain", ledger, identity], capture_output=True, text=True).stdout
    wanted = [m.group(1) for m in re.finditer(r"^ *(\d+\.\d+\.\w+\.\d+)[ :]", printed, re.M)]
    got = browser.script("return [...document.querySelectorAll('#chain a')].map((a) => a.textContent)")
    check("the chain behind a finding is what explain prints", got == wanted and len(got) > 5, (got, wanted))
    check("with the permit's values under its clauses", "zones[0].radius_m" in browser.text("#clauses") and "CHECK" in browser.text("#clauses"))
    browser.picture("review-steps")


def sounds(browser, kept):
    to(browser, "sounds")
    browser.until("return document.querySelector('#kept button')", 5)
    for n, seconds in ((1, 12 * 4096 / 48000), (2, 120 * 4096 / 48000)):  # as it is; ten times slower
        find(browser, "#kept button:nth-of-type(%d)" % n).click()
        long, _ = browser.until("const a = document.querySelector('#kept audio'); return a && Math.abs(a.duration / %f - 1) < 0.05 && a.duration" % seconds, 8)
        check("a sound that was kept is played: " + ("as it is", "slowed")[n - 1], long, browser.script("const a = document.querySelector('#kept audio'); return a && [a.src, a.duration, a.error && a.error.message]"))
    browser.picture("review-sounds")
    to(browser, "dismissed")
    browser.until("return document.querySelector('#cards button')", 5)
    said = browser.text("#cards")
    check("a dismissed act contact, with who, why and its sound", "delphinid" in said and MARKUP in said and browser.script("return document.querySelectorAll('#cards button').length") == 3, said)
    browser.picture("review-dismissed")
    state = browser.script("return [window.owned === undefined, document.querySelectorAll('main img').length, document.querySelectorAll('main b > b').length]")
    check("markup in a reason is text and does nothing", state == [True, 0, 0], state)
    with open(kept + ".sound/clips/1.flac", "r+b") as file:
        file.seek(9000)
        file.write(b"\0\0\1\1")
    to(browser, "sounds")
    browser.driver.refresh()
    browser.until("return document.querySelector('#kept button')", 5)
    find(browser, "#kept button").click()
    told, _ = browser.until("return document.getElementById('kept').textContent.includes('NOT THE ONE OF THE LEDGER')", 5)
    check("a sound whose file was changed is not played, and the page says so", told, browser.text("#kept"))


def sample(browser):
    to(browser, "sample")
    find(browser, "#draw [name=person]").send_keys("X. Ears")
    find(browser, "#draw button").click()
    browser.until("return document.querySelectorAll('#items li').length > 1", 5)
    said = browser.text("#sample")
    check("a sample is drawn without what it was taken for", not re.search("delphinid|whale|dismissed|act contact|" + re.escape(MARKUP), browser.text("#items")), said)
    check("ashore nothing can be entered", not browser.shown("#enter") and browser.shown("#save"), said)
    browser.picture("review-sample")
    for item, n in ((1, 1), (2, 2)):
        find(browser, "#items li:nth-child(%d) label:nth-child(%d) input" % (item, n)).click()
    find(browser, "#items li:nth-child(1) [name=remark]").send_keys('clear "whistles"')
    browser.script("window.blobs = []; const make = URL.createObjectURL; URL.createObjectURL = (blob) => { blob.text().then((t) => window.blobs.push(t)); return make(blob); }")
    find(browser, "#save").click()
    text, _ = browser.until("return window.blobs[0]", 3)
    saved = json.loads(text or "{}")
    check("the answers are saved as a file, with seed, listener and last hash", saved.get("listener") == "X. Ears" and saved["seed"] == 1 and len(saved["last_hash"]) == 64
          and [a.get("answer") for a in saved["answers"]] [:2] == ["animal", "no animal"] and saved["answers"][0]["remark"] == 'clear "whistles"', saved)
    find(browser, "#reveal").click()
    told, _ = browser.until("return document.getElementById('items').textContent.includes('dismissed')", 3)
    check("afterwards it says what they were", told, browser.text("#items"))


def permit(browser, ledger):
    to(browser, "permit")
    browser.until("return document.querySelector('#permits table')", 5)
    values = json.loads(ask(ledger, 'SELECT "values" FROM permit')[0][0])
    doubtful = [v["key"] for v in values if v["mark"] != "read" and not v.get("who")]
    shown = browser.script("return [...document.querySelectorAll('#permits .doubtful td:first-child')].map((n) => n.textContent)")
    check("the permit's unverified values are marked and counted", sorted(shown) == sorted(doubtful) and "%d of %d values" % (len(doubtful), len(values)) in browser.text("#permits"), shown)


def printed(browser):
    to(browser, "steps")
    time.sleep(1)
    data = base64.b64decode(browser.driver.execute_cdp_cmd("Page.printToPDF", {"paperWidth": 8.27, "paperHeight": 11.69, "preferCSSPageSize": True})["data"])
    with open(os.path.join(BUILD, "pictures", "review.pdf"), "wb") as file:
        file.write(data)
    browser.size(760, 1075)
    browser.driver.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": "print"})
    to(browser, "survey")
    browser.until("return [...document.querySelectorAll('#picture > svg > text')].some((t) => t.textContent === 'unheard: own source')", 10)
    hidden = browser.script("return ['nav', '#filter', '.controls', '#zoom'].filter((s) => document.querySelector(s).offsetParent)")
    foot = browser.script("const n = document.getElementById('check'), r = n.getBoundingClientRect(); return [getComputedStyle(n).position, innerHeight - r.bottom, n.textContent]")
    check("printed: no controls, and the ledger's state at the foot of each page", hidden == [] and foot[0] == "fixed" and abs(foot[1]) < 2 and "LEDGER GOOD" in foot[2], (hidden, foot))
    browser.picture("review-printed")
    browser.driver.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": ""})


def sizes(browser):
    for width, height in [(683, 384), (3840, 2160), (600, 900)]:  # 683 x 384: 1366 x 768 at 200 %
        browser.size(width, height)
        for screen in SCREENS:
            to(browser, screen)
            time.sleep(0.2)
            wide = browser.script("return [document.documentElement.scrollWidth, innerWidth]")
            if wide[0] > wide[1]:
                check("%s, %d x %d: no sideways scrolling" % (screen, width, height), False, wide)
        check("%d x %d: no screen scrolls sideways" % (width, height), True)
        to(browser, "survey")
        time.sleep(1)
        browser.picture("review-%dx%d" % (width, height))
    browser.size(1366, 900)


RATIO = """
const lin = (c) => { c /= 255; return c <= 0.04045 ? c / 12.92 : ((c + 0.055) / 1.055) ** 2.4; };
const probe = document.createElement('i'); document.body.append(probe);
const light = (name) => { probe.style.color = `var(${name})`; const [r, g, b] = getComputedStyle(probe).color.match(/[0-9.]+/g).slice(0, 3).map(Number).map(lin); return 0.2126 * r + 0.7152 * g + 0.0722 * b; };
const ratio = (a, b) => { const [x, y] = [light(a), light(b)]; return (Math.max(x, y) + 0.05) / (Math.min(x, y) + 0.05); };
const result = arguments[0].map(([a, b]) => ratio(a, b)); probe.remove(); return result;"""


def palettes(browser):
    """WCAG 2.2, 1.4.3 and 1.4.11; formula of its definition of contrast ratio."""
    for palette in ("day", "dusk", "night"):
        browser.script("document.documentElement.dataset.palette = arguments[0]", palette)
        text = browser.script(RATIO, [("--accent", "--panel"), ("--ink", "--panel"), ("--soft", "--panel"), ("--calm-ink", "--calm"), ("--fault-ink", "--fault")])
        shapes = browser.script(RATIO, [("--act", "--panel"), ("--look", "--panel"), ("--edge", "--panel")])
        check(palette + ": text at least 4.5 to 1, shapes at least 3 to 1", min(text) >= 4.5 and min(shapes) >= 3, (text, shapes))
        browser.picture("review-" + palette)
    browser.script("document.documentElement.dataset.palette = 'day'")


def state_on_every_screen(browser, ledger, place):
    bad = shutil.copy(ledger, place + "/bad.sqlite")
    connection = sqlite3.connect(bad)
    connection.execute("UPDATE entry SET body = replace(body, 'never acknowledged', 'acknowledged at once') WHERE kind = 'finding'")
    connection.commit()
    connection.close()
    review = Review(bad)
    browser.open(review.url)
    browser.until("return document.getElementById('check').dataset.state === 'faults'", 15)
    for screen in SCREENS:
        to(browser, screen)
        browser.script("scrollTo(0, 99999)")
        seen = browser.script("const n = document.getElementById('check'), r = n.getBoundingClientRect(); return r.top >= 0 && r.bottom <= innerHeight && r.height > 10 && n.innerText")
        check("a ledger that was tampered with is said: " + screen, seen and "NOT AS IT WAS WRITTEN" in seen and "Entry" in seen, seen)
    browser.picture("review-tampered")
    review.end()
    os.remove(bad)


SCENE = """seed = 9; duration_s = 60.0; rate_hz = 48000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 150.0; y_m = 0.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
animals = ( { voice = "delphinid whistle"; members = 3; x_m = 300.0; y_m = 50.0; z_m = 5.0; start_s = 3.0; end_s = 7.0; } );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; } );
"""


def live(browser, place):
    with open(place + "/live-scene.cfg", "w") as file:
        file.write(SCENE)
    with socket.socket() as s:
        s.bind(("127.0.0.1", 0))
        port = s.getsockname()[1]
    config = settings(place + "/live.cfg", permit="tests/system/seconds-permit.cfg", channels='{ role = "listen"; sensitivity_db = -170.0; full_scale_v = 10.0; }',
                      stream='input = "scene"; path = "live-scene.cfg"; pace = "real";', ledger="live.ledger", more="pages = { port = %d; };" % port)
    with Daemon(config) as daemon:
        daemon.wait_for(lambda s: s["contacts"], 30)
        browser.open(daemon.url("/review"))
        good, _ = browser.until("return document.getElementById('check').dataset.state === 'good'", 10)
        check("of a running watch the page says whether its ledger is good, and follows it", good, browser.text("#check"))
        to(browser, "sample")
        find(browser, "#draw [name=person]").send_keys("X. Ears")
        find(browser, "#draw button").click()
        browser.until("return document.querySelectorAll('#items li').length > 0", 5)
        find(browser, "#items label:nth-child(3) input").click()
        find(browser, "#enter").click()
        told, _ = browser.until("return document.getElementById('items').textContent.includes('Entered: 1.0.note.')", 5)
        check("the second listener's answer is entered as a note", told, browser.text("#items"))
        daemon.terminate()
    rows = ask(place + "/live.ledger", "SELECT person, text FROM note WHERE note = 'remark'")
    check("and stands in the ledger", len(rows) == 1 and rows[0][0] == "X. Ears" and "second listener, seed 1" in rows[0][1] and "contact 1: cannot tell" in rows[0][1], rows)


def main():
    signal.alarm(240)
    browser = Browser(1366, 900)
    with folder() as place:
        try:
            ledger, kept = make_ledger(place)
            review = Review(ledger)
            browser.open(review.url)
            good, _ = browser.until("return document.getElementById('check').dataset.state === 'good'", 15)
            check("the ledger is said to be good, with its last hash", good and ask(ledger, "SELECT hash FROM entry ORDER BY seq DESC LIMIT 1")[0][0] in browser.text("#check"), browser.text("#check"))
            survey(browser, ledger)
            stepping(browser, ledger)
            permit(browser, ledger)
            printed(browser)
            browser.size(1366, 900)
            palettes(browser)
            sizes(browser)
            review.end()
            state_on_every_screen(browser, ledger, place)
            review = Review(kept)
            browser.open(review.url)
            sounds(browser, kept)
            sample(browser)
            review.end()
            live(browser, place)
            said = [text for text in browser.complaints() if not any(part in text for part in ("409", "ERR_", "/api/clip"))]
            check("the browser has nothing to complain about", said == [], said)
        finally:
            browser.end()
    size = sum(os.path.getsize("%s/web/%s" % (ROOT, name)) for name in ("review.html", "review.js", "review.css", "survey.js"))
    figure("the review's page, script and style: %.1f KiB" % (size / 1024))
    finish()


main()
