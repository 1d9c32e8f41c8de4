#!/usr/bin/python3
"""The observer's and the crew's page in Debian's chromium, fed by board_server (filled structures, invented figures).

Pictures go to build/pictures. Contrast: WCAG 2.2 success criteria 1.4.3 and 1.4.11, formula of its definition of
contrast ratio; 7:1 for the instruction and at most 15:1 at night after IMO MSC/Circ.982."""
import json
import os
import signal
import sys
import time
import urllib.parse
import urllib.request

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from browser import Browser, PageServer, Tap  # noqa: E402

from selenium.webdriver.common.by import By  # noqa: E402
from selenium.webdriver.common.keys import Keys  # noqa: E402

tap = Tap()
check = tap.check
STATION = "hammer cab"
WORDS = "return document.getElementById('words').textContent"
FAULTS = "return document.getElementById('faults').innerText"


def crew_url(server):
    return server.base + "/crew?" + urllib.parse.urlencode({"station": STATION})


def words_are(browser, wanted, seconds=3.0):
    return browser.until("return document.getElementById('words').textContent === %s" % json.dumps(wanted), seconds)[0]


def find(browser, selector):
    return browser.driver.find_element(By.CSS_SELECTOR, selector)


def observer_shows(server, observer):
    server.say("delay")
    check(words_are(observer, "DO NOT START."), "the observer sees the advice in force", observer.script(WORDS))
    label = observer.script("return document.querySelector('#ladder svg').getAttribute('aria-label')")
    check("contact 3, porpoise, act: range unknown" in label and "contact 1, baleen whale" in label and "about 640 m" in label,
          "the range ladder names each contact and its range", label)
    spans = observer.script("""
        const rows = [...document.querySelectorAll('#ladder .row')].map((row) => [row.dataset.contact, row.querySelector('.bar').getBBox()]);
        const rail = document.querySelector('#ladder .rail').getBBox();
        return rows.map(([n, box]) => [n, box.x, box.width, rail.width])""")
    by_number = {row[0]: row[1:] for row in spans}
    check(by_number["3"][1] > 0.9 * by_number["3"][2], "an unknown range spans the axis", by_number)
    # p05 and p95 of a log-normal with median 640 m and spread 0.35: 640 exp(-+1.6449 * 0.35), axis log(1 + d / (500 / 3))
    check(0.1 < by_number["1"][1] / by_number["1"][2] < 0.4, "a known range is a bar from nearest to farthest", by_number)
    zones = observer.script("return [...document.querySelectorAll('#ladder .zone_name')].map((n) => n.textContent)")
    check(zones == ["500 m mitigation zone", "2 km watch zone"], "zones are ticks with radius and name", zones)
    check("the crew is told in" in observer.text("#contacts"), "an act contact asks for a verdict with its countdown", observer.text("#contacts"))
    check("Held: contact 3 is still heard" in observer.text("#timers"), "a timer says what holds it", observer.text("#timers"))
    painted, _ = observer.until("""
        const canvas = document.querySelector('#strips canvas');
        if (!canvas || !canvas.width) return 0;
        const data = canvas.getContext('2d').getImageData(0, 0, canvas.width, canvas.height).data;
        const tones = new Set(); for (let i = 0; i < data.length; i += 4) tones.add(data[i]);
        return tones.size > 20 && document.querySelectorAll('#strips canvas').length""", 5)
    check(painted == 3, "three strips of sound are painted", painted)
    check("1.2" in observer.text("#levels") and "rel." in observer.text("#levels"), "levels of an uncalibrated channel are marked relative")
    check("3 of 4 values are unverified" in observer.text("#permit_values"), "the permit's unverified values are counted")
    plan = observer.text("#plan")
    check("It slips by 10:00" in plan and "done or under way" in plan and "TOO LATE" in plan and "day ends at" in plan,
          "the plan says what it needs by when, and what a delay costs", plan)
    told = observer.text("#not_by_ear")
    check("not by ear: phocid." in told and "Visual only, no call of theirs is proof: sperm whale, beaked whale, delphinid, otariid," in told
          and "Of porpoise only the porpoise click train." in told, "it says of which groups silence means nothing", told)
    check(not observer.shown("#classes"), "why sounds were not calls is closed until it is asked for")
    find(observer, "#explain summary").click()
    told, _ = observer.until("return document.querySelectorAll('#classes li').length === 4", 3)
    check(told and "porpoise click train: 2 found; rejected: no rhythm 7,310, too weak 1,204." in observer.text("#classes")
          and "sonar above the rate: cannot be heard at 384 kHz." in observer.text("#classes"),
          "it says of each class what was rejected and what cannot be heard", observer.text("#classes"))
    find(observer, "#explain summary").click()
    check("Acoustic silence does not prove absence" in observer.text("main"), "the cautions are on the page")
    observer.picture("observer-delay-day")


def nameless(server, observer):
    """Every button that needs a name says so beside itself, and sends nothing."""
    find(observer, "#person").clear()
    server.say("ready")
    observer.until("return !document.getElementById('release').hidden", 3)
    before = len(server.notes())
    uses = [("release", "#release", None), ("sign on", "#sign button", None), ("sighting", "#entry button", None)]
    for name in ("confirm", "dismiss", "distance", "left"):
        uses.append((name, "#contacts [data-key='3'] form button", name))
    for name, button, form in uses:
        if form:
            find(observer, "#contacts [data-key='3'] [data-form=%s]" % form).click()
            field = find(observer, "#contacts [data-key='3'] form input")
            field.clear()
            field.send_keys("300")
        find(observer, button).click()
        beside = observer.script("const n = document.querySelector(arguments[0]).nextElementSibling; return n && n.className === 'asks' ? [n.innerText, n.getBoundingClientRect().top - document.querySelector(arguments[0]).getBoundingClientRect().bottom] : null", button)
        check(beside and "your name is needed" in beside[0] and -40 < beside[1] < 40, name + " without a name: said beside the button", beside)
    observer.picture("observer-nameless")
    check(len(server.notes()) == before, "and nothing was sent", server.notes())
    find(observer, "#contacts [data-key='3'] .asks button").click()
    active = observer.driver.switch_to.active_element
    active.send_keys("Ada Lind")
    check(active.get_attribute("id") == "person" and observer.script("return document.querySelectorAll('.asks').length") == 0, "a name ends the question everywhere")
    active.send_keys(Keys.ENTER)
    back = observer.script("const n = document.activeElement; return n.textContent")
    check(back == "It has left" and len(server.notes()) == before, "and Enter goes back to what was to be entered, and enters nothing", (back, server.notes()))
    find(observer, "#contacts [data-key='3'] [data-form=left]").click()
    server.say("delay")


def enter(server, observer):
    card = "#contacts [data-key='3'] "
    find(observer, card + "[data-form=distance]").click()
    field = find(observer, card + "input[name=distance_m]")
    field.send_keys("-5")
    observer.script("arguments[0].form.noValidate = true", field)
    field.send_keys(Keys.ENTER)
    said, _ = observer.until("return document.getElementById('entered').textContent.includes('allowed: 0 to 100000 m')", 3)
    check(said, "a refused value says what is allowed", observer.text("#entered"))
    field.clear()
    field.send_keys("320", Keys.ENTER)
    moved, _ = observer.until("return document.querySelector('#ladder svg').getAttribute('aria-label').includes('porpoise, act: 230 m')", 3)
    check(moved, "a distance from a person becomes a bar", observer.script("return document.querySelector('#ladder svg').getAttribute('aria-label')"))
    find(observer, "#contacts [data-key='2'] [data-form=dismiss]").click()
    reason = find(observer, "#contacts [data-key='2'] input[name=text]")
    reason.send_keys("our own sounder", Keys.ENTER)
    gone, _ = observer.until("return !document.querySelector('#ladder [data-contact=\"2\"]')", 3)
    check(gone and "verdict Ada Lind||||our own sounder" in server.notes(), "a dismissal needs a reason and arrives with it", server.notes())
    find(observer, "body").send_keys("s")
    observer.until("return document.activeElement.name === 'group'")
    active = observer.driver.switch_to.active_element
    active.send_keys("po", Keys.TAB, "410", Keys.ENTER)
    taken, _ = observer.until("return document.getElementById('entered').textContent.startsWith('Entered: sighting')", 3)
    check(taken, "a sighting is entered by keyboard alone", observer.text("#entered"))
    find(observer, "#sign button").click()
    there, _ = observer.until("return document.getElementById('people').textContent.includes('Ada Lind, visual')", 3)
    check(there, "a person signs on", observer.text("#people"))
    server.say("ready")
    observer.until("return !document.getElementById('release').hidden", 3)
    find(observer, "#release").click()
    observer.until("return document.getElementById('entered').textContent.startsWith('Entered: release')", 3)
    check("release Ada Lind||||" in server.notes(), "a release carries the observer's name", server.notes())
    server.say("delay")
    observer.until("return document.getElementById('release').hidden", 3)
    check(observer.shown("#release") is None, "a release cannot be entered when it is not possible")


def crew_answers(server, crew):
    server.say("stop")
    check(words_are(crew, "STOP."), "the crew sees the instruction", crew.script(WORDS))
    check(crew.text("#marker") == "INSTRUCTION" and crew.text("#plain") == "Stop piling now.", "marker and plain words", crew.text("#plain"))
    check("500 m zone" in crew.text("#reason") and "UTC" in crew.text("#since") and "UTC" in crew.text("#until")
          and "new soft start" in crew.text("#requires"), "why, since, earliest restart, what it requires", crew.text(".facts"))
    check("not yet confirmed" in crew.text("#tags"), "an unconfirmed advice says so")
    server.say("unrecorded")
    marked, _ = crew.until("return document.getElementById('tags').textContent.includes('not yet recorded')", 2)
    check(marked, "an advice that is not on the disk says so")
    server.say("recorded")
    check("SOUND OFF" in crew.text("#sound"), "the sound is said to be off until it is armed")
    find(crew, "#sound").click()
    armed, _ = crew.until("return document.getElementById('sound').textContent === 'Sound on'", 3)
    check(armed, "one press arms the sound", crew.text("#sound"))
    crew.script("document.getElementById('person').value = ''")
    find(crew, "#acknowledge").click()
    check("name" in crew.text("#answered") and not any(n.startswith("acknowledgement") for n in server.notes()), "an acknowledgement needs a name")
    crew.driver.switch_to.active_element.send_keys("Bo Sand", Keys.TAB, Keys.ENTER)
    done, took = crew.until("return document.getElementById('answered').textContent.startsWith('Acknowledged by Bo Sand')", 3)
    notes = [note for note in server.notes() if note.startswith("acknowledgement")]
    check(done and len(notes) == 1 and notes[0].startswith("acknowledgement Bo Sand|hammer cab|1.0.advice."),
          "the acknowledgement arrives once, with person, station and advice", notes)
    check(crew.shown("#acknowledge") is None, "an acknowledged alert has no button")
    print("# figure acknowledgement entered and shown in %.0f ms" % (1000 * took))
    crew.picture("crew-stop-acknowledged")


def reload_keeps(server, observer, crew):
    kept = "return ['#words', '#reason', '#since', '#answered'].map((s) => (document.querySelector(s) || {}).textContent || '').map((t) => t.replace(/, [0-9: s]+ ago/, ''))"
    for browser, name in [(observer, "observer"), (crew, "crew")]:
        before = browser.script(kept)
        start = time.monotonic()
        browser.driver.refresh()
        browser.until("return document.getElementById('words').textContent !== 'WAITING'", 3)
        took = time.monotonic() - start
        time.sleep(0.3)
        check(browser.script(kept) == before and "STOP." in before, "a reload loses nothing: " + name, (before, browser.script(kept)))
        print("# figure %s page loaded and filled in %.0f ms" % (name, 1000 * took))
    check(crew.script("return document.getElementById('person').value") == "Bo Sand", "the person's name is remembered")


def times_beside(server, observer, crew):
    """What the time beside an advice means is said: a time to resume by is no earliest restart, and carry on has none."""
    for word, title in [("stop", "Earliest restart"), ("pre-watch", "Earliest start"), ("hold", "Earliest end"), ("resume", "Resume before"),
                        ("carry-on", None), ("soft-start", None)]:
        server.say(word)
        crew.until("return document.getElementById('%s').hidden === %s" % ("ends", "false" if title else "true"), 2)
        time.sleep(0.4)
        shown = [crew.shown("#until_title"), observer.shown("#until_title")]
        check(shown == [title, title], word + ": " + (title or "no time to wait for"), shown)
        if not title:
            page = crew.script("return document.body.innerText") + observer.script("return document.body.innerText")
            check("Earliest" not in page, word + ": no 'Earliest' on either page")
        if word == "resume":
            check("left" in crew.text("#requires") and "left" in observer.text("#until"), "and how much of it is left", crew.text("#requires"))
    server.say("stop")


def agree(server, observer, crew):
    watch = """
        window.changes = [];
        new MutationObserver(() => window.changes.push([performance.timeOrigin + performance.now(), document.getElementById('words').textContent]))
            .observe(document.getElementById('words'), { childList: true, characterData: true, subtree: true })"""
    for browser in (observer, crew):
        browser.script(watch)
    gaps, delays = [], []
    for word, wanted in [("may-start", "YOU MAY START."), ("hold", "HOLD POWER."), ("carry-on", "CARRY ON."), ("stop", "STOP."),
                         ("pre-watch", "DO NOT START."), ("stop", "STOP.")]:
        said = time.time() * 1000
        server.say(word)
        time.sleep(0.7)
        seen = [next((t for t, text in browser.script("return window.changes") if text == wanted and t >= said), None) for browser in (observer, crew)]
        if None in seen:
            check(False, "both pages show " + wanted, seen)
            return
        gaps.append(abs(seen[0] - seen[1]))
        delays.append(max(seen) - said)
    check(max(gaps) < 200, "two browsers show the same within 0.2 s", gaps)
    print("# figure two browsers differ by at most %.0f ms; publish to both pages at most %.0f ms" % (max(gaps), max(delays)))


def faults(server, observer, crew):
    server.say("stop")
    words_are(crew, "STOP.")
    time.sleep(0.5)
    os.kill(server.process.pid, signal.SIGSTOP)
    start = time.monotonic()
    seen = {}
    while time.monotonic() - start < 5 and len(seen) < 2:
        for name, browser in (("crew", crew), ("observer", observer)):
            if name not in seen and "NO CONTACT since" in (browser.script(FAULTS) or ""):
                seen[name] = time.monotonic() - start
    check(len(seen) == 2 and max(seen.values()) <= 3.0, "a lost heartbeat is said within 3 s on both pages", seen)
    print("# figure a lost heartbeat was said after %.1f s" % max(seen.values(), default=99))
    check("STOP REMAINS" in crew.script(FAULTS) and crew.shown("#words") == "STOP." and crew.script("return document.getElementById('instruction').dataset.level") == "stop",
          "no contact: the stop stays on the crew's page", crew.script(FAULTS))
    crew.picture("crew-stop-no-contact")
    os.kill(server.process.pid, signal.SIGCONT)
    back, took = crew.until("return document.getElementById('faults').children.length === 0", 6)
    check(back and crew.shown("#words") == "STOP.", "contact comes back by itself", crew.script(FAULTS))
    server.say("freeze")
    still, took = crew.until("return document.getElementById('faults').innerText.includes('CANNOT HEAR. STOP REMAINS.')", 5)
    check(still and took <= 3.0, "a watch that stands still is said within 3 s, and the stop remains", (took, crew.script(FAULTS)))
    print("# figure a watch that stands still was said after %.1f s" % took)
    server.say("thaw", "deaf", "disk-full")
    both, _ = crew.until("const t = document.getElementById('faults').innerText; return t.includes('CANNOT HEAR. STOP REMAINS.') && t.includes('NOT RECORDING. STOP REMAINS.')", 3)
    check(both and crew.shown("#words") == "STOP.", "deaf and not recording: both said, the stop remains", crew.script(FAULTS))
    boxes = crew.script("return ['#faults', '#instruction', '#reason', '#acknowledge'].map((s) => { const r = document.querySelector(s).getBoundingClientRect(); return [r.top, r.bottom] })")
    check(boxes[0][1] <= boxes[1][0] + 1 and boxes[1][1] <= boxes[2][0] and boxes[3][1] <= 1080, "the faults cover nothing", boxes)
    crew.picture("crew-stop-faults")
    for word, text in [("may-start", "You may start"), ("carry-on", "Carry on")]:
        server.say(word)
        told, _ = crew.until("return document.getElementById('plain').innerText.includes('‘%s’')" % text, 3)
        gone = words_are(crew, "NO ADVICE.")
        check(told and gone and text in crew.text("#plain") and "withdrawn" in crew.text("#plain"), "'%s' is withdrawn while deaf" % word, crew.text("#plain"))
    server.say("pre-watch")
    check(words_are(crew, "DO NOT START.") and "DO NOT START REMAINS" in crew.script(FAULTS), "do not start stays while deaf", crew.script(FAULTS))
    server.say("hear", "disk-ok", "may-start")
    check(words_are(crew, "YOU MAY START."), "and 'may start' is shown again when all is well", crew.script(WORDS))
    crew.picture("crew-may-start")


def hostile(server, observer, crew):
    server.say("delay", "hostile")
    crew.open(server.base + "/crew?station=" + urllib.parse.quote("<img src=x onerror='window.owned=1'>"))
    time.sleep(1.2)
    for browser, name in [(observer, "observer"), (crew, "crew")]:
        state = browser.script("return [window.owned === undefined, document.querySelectorAll('script').length, document.querySelectorAll('img').length, document.body.innerText.includes('<script>window.owned=1</script>')]")
        check(state == [True, 1, 0, True], "markup in names and reasons is text and does nothing: " + name, state)
    crew.open(crew_url(server))


RATIO = """
const lin = (c) => { c /= 255; return c <= 0.04045 ? c / 12.92 : ((c + 0.055) / 1.055) ** 2.4; };
const probe = document.createElement('i'); document.body.append(probe);
const rgb = (name) => { probe.style.color = `var(${name})`; return getComputedStyle(probe).color.match(/[0-9.]+/g).slice(0, 3).map(Number); };
const light = (name) => { const [r, g, b] = rgb(name).map(lin); return 0.2126 * r + 0.7152 * g + 0.0722 * b; };
const ratio = (a, b) => { const [x, y] = [light(a), light(b)]; return (Math.max(x, y) + 0.05) / (Math.min(x, y) + 0.05); };
const result = arguments[0].map(([a, b]) => ratio(a, b)); probe.remove(); return result;"""
TEXT = [("--ink", "--panel"), ("--ink", "--ground"), ("--soft", "--panel"), ("--soft", "--ground"), ("--accent-ink", "--accent"),
        ("--ink", "--field"), ("--fault-ink", "--fault"), ("--panel", "--ink"), ("--ink", "--calm")]
STATE = [("--stop-ink", "--stop"), ("--hold-ink", "--hold"), ("--go-ink", "--go"), ("--calm-ink", "--calm")]
SHAPES = [("--act", "--panel"), ("--look", "--panel"), ("--edge", "--panel"), ("--accent", "--panel")]


def contrast(observer):
    for palette in ("day", "dusk", "night"):
        observer.script("document.documentElement.dataset.palette = arguments[0]", palette)
        text, state, shapes = (observer.script(RATIO, pairs) for pairs in (TEXT, STATE, SHAPES))
        check(min(text) >= 4.5, palette + ": text at least 4.5 to 1", list(zip(TEXT, text)))
        check(min(state) >= 7, palette + ": the instruction at least 7 to 1", list(zip(STATE, state)))
        check(min(shapes) >= 3, palette + ": shapes at least 3 to 1", list(zip(SHAPES, shapes)))
        if palette == "night":
            check(max(text + state) <= 15, "night: at most 15 to 1", max(text + state))
        print("# figure contrast %s: text %.1f, instruction %.1f, shapes %.1f at least" % (palette, min(text), min(state), min(shapes)))
        observer.until("return true")
        time.sleep(0.3)
        observer.script("document.dispatchEvent(new Event('palette'))")
        observer.picture("observer-" + palette)
    observer.script("document.documentElement.dataset.palette = 'day'")
    observer.script("localStorage.setItem('hushwatch.palette', 'day')")
    observer.driver.refresh()
    time.sleep(0.5)
    find(observer, "body").send_keys("p")
    check(observer.script("return document.documentElement.dataset.palette") == "dusk", "one key changes the palette")
    find(observer, "body").send_keys("p", "p")


def sizes(server, observer, crew):
    for width, height in [(800, 600), (1366, 768), (683, 384), (1920, 1080), (600, 900), (3840, 2160)]:  # 683 x 384: 1366 x 768 at 200 %
        for word in ("stop", "pre-watch"):
            server.say(word)
            crew.size(width, height)
            time.sleep(0.6)
            fits = crew.script("""
                const cut = ['words', 'plain', 'reason', 'since', 'until', 'requires', 'acknowledge'].filter((id) => {
                    const r = document.getElementById(id).getBoundingClientRect();
                    return r.left < 0 || r.top < 0 || r.right > innerWidth + 1 || r.bottom > innerHeight + 1 || r.width === 0 });
                const box = document.getElementById('instruction');
                if (box.scrollHeight > box.clientHeight + 1 || box.scrollWidth > box.clientWidth + 1) cut.push('instruction');
                return cut""")
            check(fits == [], "crew, %s, %d x %d: nothing is cut off" % (word, width, height), fits)
            tall = crew.script("return parseFloat(getComputedStyle(document.getElementById('words')).fontSize)")
            check(tall >= min(height / 13, width / 13), "crew, %s, %d x %d: the words are large" % (word, width, height), tall)
        crew.picture("crew-%dx%d" % (width, height))
    server.say("stop", "deaf", "disk-full")
    for width, height in [(683, 384), (800, 600), (1366, 768)]:
        crew.size(width, height)
        time.sleep(0.6)
        rows = crew.script("return ['faults', 'words', 'acknowledge'].map((id) => { const r = document.getElementById(id).getBoundingClientRect(); return [r.top, r.bottom] })")
        check(rows[0][1] <= rows[1][0] and rows[1][1] <= rows[2][0] and rows[2][1] <= height,
              "crew, %d x %d: faults, instruction and button are all in sight" % (width, height), rows)
        crew.picture("crew-faults-%dx%d" % (width, height))
    server.say("hear", "disk-ok", "delay")
    for width, height in [(800, 600), (1366, 768), (683, 384), (1920, 1080), (3840, 2160), (400, 800)]:
        observer.size(width, height)
        time.sleep(0.6)
        wide = observer.script("return [document.documentElement.scrollWidth, innerWidth]")
        check(wide[0] <= wide[1], "observer, %d x %d: no sideways scrolling" % (width, height), wide)
        top = observer.script("return document.getElementById('words').getBoundingClientRect().bottom")
        check(top < height, "observer, %d x %d: the advice is in sight at once" % (width, height), top)
        observer.picture("observer-%dx%d" % (width, height))


def all_together(server):
    total = 0
    for name in os.listdir("web"):  # as they are served
        with urllib.request.urlopen(server.base + "/" + name) as answer:
            total += len(answer.read())
    check(total <= 150 * 1024, "all pages together are at most 150 KiB", total)
    print("# figure pages together: %.1f KiB" % (total / 1024))
    with urllib.request.urlopen(server.base + "/api/state") as answer:
        print("# figure one state: %.1f KiB" % (len(answer.read()) / 1024))
    page = "".join(open(os.path.join("web", name), encoding="utf-8").read() for name in os.listdir("web"))
    outside = [line for line in page.splitlines() if "http:" in line.replace("http://www.w3.org/2000/svg", "") or "https:" in line]
    check(outside == [] and "innerHTML" not in page, "nothing is fetched from outside, no markup from strings", outside)


def main():
    signal.alarm(170)
    server, browsers = PageServer(), []
    try:
        observer, crew = Browser(), Browser()
        browsers += [observer, crew]
        observer.open(server.base + "/")
        crew.open(crew_url(server))
        observer_shows(server, observer)
        nameless(server, observer)
        enter(server, observer)
        crew_answers(server, crew)
        reload_keeps(server, observer, crew)
        times_beside(server, observer, crew)
        agree(server, observer, crew)
        sizes(server, observer, crew)
        observer.size(1920, 1080)
        crew.size(1920, 1080)
        faults(server, observer, crew)
        hostile(server, observer, crew)
        contrast(observer)
        all_together(server)
        said = [text for browser in browsers for text in browser.complaints() if not any(part in text for part in ("/api/note", "ERR_", "willReadFrequently"))]  # our refusals, our stops, our looks at pixels
        check(said == [], "the browsers have nothing to complain about", said)
    finally:
        for browser in browsers:
            browser.end()
        server.end()
    return tap.end()


sys.exit(main())
