#!/usr/bin/python3
"""The whole chain seen from two browsers: a simulated scene, the real daemon, its ledger. The observer works from the page
(distance, release, source state, verdicts), the crew acknowledges; the daemon is killed and started again with a stop in
force. Scene, people and permit of seconds are invented."""
import os
import signal
import socket
import sys
import time
import urllib.parse

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from browser import Browser  # noqa: E402
from daemon import Daemon  # noqa: E402
from watch import ask, check, figure, finish, folder, settings, verify  # noqa: E402

from selenium.webdriver.common.by import By  # noqa: E402
from selenium.webdriver.common.keys import Keys  # noqa: E402
from selenium.webdriver.support.ui import Select  # noqa: E402

SCENE = """seed = 9; duration_s = 150.0; rate_hz = 48000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 150.0; y_m = 0.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; },
                { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
animals = ( { voice = "delphinid whistle"; members = 3; x_m = 300.0; y_m = 50.0; z_m = 5.0; start_s = 6.0; end_s = 10.0; },
            { voice = "delphinid whistle"; members = 3; x_m = 200.0; y_m = 50.0; z_m = 5.0; start_s = 34.0; end_s = 39.0; },
            { voice = "delphinid whistle"; members = 3; x_m = 250.0; y_m = 50.0; z_m = 5.0; start_s = 72.0; end_s = 77.0; } );
hammers = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 24.0;
    steps = ( { duration_s = 16.0; blow_interval_s = 1.0; source_energy_level_db = 195.0; } ); } );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
          { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 0.8; kind = "job"; person = "C. Crew"; job = "pile 1"; answer = "open"; } );
"""
TWO = '{ role = "listen"; sensitivity_db = -170.0; full_scale_v = 10.0; }, ' \
      '{ role = "measure"; sensitivity_db = -170.0; full_scale_v = 10.0; }'


def free_port():
    with socket.socket() as s:
        s.bind(("127.0.0.1", 0))
        return s.getsockname()[1]


def words(browser, wanted, seconds):
    return browser.until("return document.getElementById('words').textContent === '%s'" % wanted, seconds)


def find(browser, selector):
    return browser.driver.find_element(By.CSS_SELECTOR, selector)


def card_of(browser, state):
    """Number of the newest contact in a state, or None."""
    return browser.script("""
        const n = [...document.querySelectorAll('#contacts .card')].filter((c) => (c.querySelector('.state').textContent || 'open') === arguments[0]);
        return n.length ? String(Math.max(...n.map((c) => Number(c.dataset.key)))) : null""", state)


def before_the_start(observer, crew):
    shown, _ = observer.until("return document.querySelector('#ladder [data-contact=\"1\"]') !== null", 15)
    label = observer.script("return document.querySelector('#ladder svg').getAttribute('aria-label')")
    check("the observer's page shows the contact, range unknown", shown and "contact 1, delphinid" in label and "range unknown" in label, label)
    check("the crew's page shows the instruction", words(crew, "DO NOT START.", 5)[0], crew.text("#words"))
    named, _ = crew.until("return document.getElementById('reason').textContent.includes('delphinid')", 5)
    check("and it says why: the contact", named, crew.text("#reason"))
    marked, _ = observer.until("return document.getElementById('calls').textContent.includes('delphinid')", 5)
    check("its calls are listed under the strips of sound", marked, observer.text("#calls"))
    observer.picture("chain-1-contact")
    find(observer, "#contacts [data-key='1'] [data-form=distance]").click()
    find(observer, "#contacts [data-key='1'] input[name=distance_m]").send_keys("2500", Keys.ENTER)
    asked, _ = observer.until("const n = document.querySelector('#contacts [data-key=\"1\"] .asks'); return n && n.innerText.includes('your name is needed')", 3)
    check("without a name nothing is entered, and the page says so beside the button", asked)
    find(observer, "#contacts [data-key='1'] [data-form=distance]").click()
    find(observer, "#person").send_keys("A. Eyes")
    find(observer, "#contacts [data-key='1'] [data-form=distance]").click()
    find(observer, "#contacts [data-key='1'] input[name=distance_m]").send_keys("2500", Keys.ENTER)
    possible, took = observer.until("return !document.getElementById('release').hidden", 12)
    check("its distance from a person ends the delay: a release is possible", possible, observer.text(".panel.phase"))
    find(observer, "#release").click()
    check("released on the page, the crew may start", words(crew, "YOU MAY START.", 5)[0], crew.text("#words"))
    crew.picture("chain-2-may-start")
    observer.script("[...document.querySelectorAll('#kinds button')].find((button) => button.textContent === 'Source').click()")
    Select(find(observer, "#entry select[name=source_state]")).select_by_visible_text("soft start")
    find(observer, "#entry button").click()
    soft, _ = observer.until("return document.getElementById('phase').textContent === 'soft start'", 5)
    check("the source's state is entered on the page: soft start", soft, observer.text(".panel.phase"))


def the_stop(observer, crew):
    blow, _ = observer.until("return document.querySelectorAll('#impulses tbody td').length > 5 && document.getElementById('impulses').textContent.includes('ours')", 20)
    check("impulses of the source are listed as ours", blow, observer.text("#impulses"))
    told, took = words(crew, "STOP.", 25)
    check("whistles near by while piling: the crew is told to stop", told, (crew.text("#words"), crew.text("#reason")))
    same, behind = words(observer, "STOP.", 2)
    check("the observer's page says the same", same, observer.text("#words"))
    unconfirmed = "not yet confirmed" in crew.text("#tags")
    check("unanswered by the observer, the stop is marked 'not yet confirmed'", unconfirmed, crew.text("#tags"))
    number = card_of(observer, "open")
    find(observer, "#contacts [data-key='%s'] [data-form=confirm]" % number).click()
    find(observer, "#contacts [data-key='%s'] .card_form input" % number).send_keys(Keys.ENTER)
    firm, took = crew.until("return document.getElementById('words').textContent === 'STOP.' && !document.getElementById('tags').textContent.includes('not yet confirmed')", 3)
    check("confirmed by the observer, the stop stays and is no longer marked", firm, (crew.text("#words"), crew.text("#tags")))
    figure("confirmed, and shown on the crew's page, in %.0f ms" % (1000 * took))
    crew.picture("chain-3-stop")
    observer.picture("chain-3-stop-observer")
    crew.until("return document.getElementById('acknowledge').hidden === false", 2)
    find(crew, "#person").send_keys("C. Crew", Keys.ENTER)
    done, took = crew.until("return document.getElementById('answered').textContent.startsWith('Acknowledged by C. Crew')", 3)
    check("the crew's page takes the acknowledgement", done, crew.text(".answer"))
    figure("acknowledged, and shown on the crew's page, in %.0f ms" % (1000 * took))
    seen, _ = observer.until("return document.getElementById('crew').textContent.includes('acknowledged by C. Crew')", 2)
    check("and the observer's page shows it", seen, observer.text("#crew"))
    return observer.script("return document.querySelector('#sheet a').href")


def stop_sheet(observer, address):
    """One sheet about the stop, also after a restart and when it is over."""
    page = observer.driver.current_window_handle
    observer.driver.switch_to.new_window("tab")
    opened = time.monotonic()
    observer.open(address)
    whole, _ = observer.until("return document.querySelectorAll('#behind li').length > 1 && document.querySelectorAll('#groups li').length === 10", 10)
    took = time.monotonic() - opened
    figure("the stop sheet was whole %.1f s after it was opened" % took)
    check("within 10 s", took < 10, took)
    facts = observer.text("#facts") or ""
    check("the stop sheet is whole, with what is behind the stop", whole and observer.text("#words").startswith("STOP, "), observer.text("main"))
    check("it says who acknowledged and when, the last impulse and the earliest restart",
          "crew, C. Crew" in facts and "Last impulse heard" in facts and "Earliest restart" in facts, facts)
    check("where the animal may be, with its doubt", "90 % between" in observer.text("#contacts") or "not known" in observer.text("#contacts"),
          observer.text("#contacts"))
    check("and of each group whether it could have been heard", "Turtle: no: no call of it is proof" in observer.text("#groups")
          and "Delphinid: by its calls" in observer.text("#groups"), observer.text("#groups"))
    heard, _ = observer.until("return !document.getElementById('sound').hidden", 8)
    playable = heard and observer.driver.execute_async_script(
        "const done = arguments[0]; fetch(document.getElementById('sound').src).then(r => r.arrayBuffer()).then(b => done(b.byteLength), () => done(0))")
    check("the sound that led to it can be heard", playable and playable > 10000, (playable, observer.text("#sound_words")))
    observer.picture("chain-3-stop-sheet")
    observer.driver.close()
    observer.driver.switch_to.window(page)


def killed(daemon, observer, crew):
    daemon.kill()
    start = time.monotonic()
    lost, _ = crew.until("return document.getElementById('faults').innerText.includes('NO CONTACT since')", 5)
    took = time.monotonic() - start
    check("the daemon killed: said within 3 s, and the stop remains", lost and took <= 3.0 and "STOP REMAINS" in crew.text("#faults")
          and crew.shown("#words") == "STOP.", (took, crew.text("#faults")))
    daemon.start()
    back, took = crew.until("return document.getElementById('words').textContent === 'STOP.' && document.getElementById('faults').children.length === 0", 8)
    check("started again, the page comes back with the stop", back, (crew.text("#words"), crew.text("#faults")))
    kept, _ = crew.until("return document.getElementById('answered').textContent.startsWith('Acknowledged by C. Crew')", 3)
    check("and with its acknowledgement", kept, crew.text(".answer"))
    figure("the page was whole again %.1f s after the daemon's start" % took)
    crew.picture("chain-4-restarted")


def dismissed(observer, crew):
    number, _ = observer.until("const n = [...document.querySelectorAll('#contacts .card')].find((c) => c.querySelector('.state').textContent === '' && c.querySelector('.countdown').offsetParent); return n && n.dataset.key", 45)
    check("whistles again: the observer is asked for a verdict", number, observer.text("#contacts"))
    if not number:
        return
    find(observer, "#contacts [data-key='%s'] [data-form=dismiss]" % number).click()
    find(observer, "#contacts [data-key='%s'] .card_form button" % number).click()
    stays = observer.script("return document.querySelector('#contacts [data-key=\"%s\"] .card_form form') !== null" % number)
    check("a dismissal without a reason is not sent", stays and card_of(observer, "dismissed") is None, observer.text("#contacts"))
    find(observer, "#contacts [data-key='%s'] .card_form input" % number).send_keys("a loudspeaker of ours", Keys.ENTER)
    gone, _ = observer.until("return document.querySelector('#contacts [data-key=\"%s\"] .state').textContent === 'dismissed'" % number, 3)
    check("dismissed with a reason, the contact is marked so", gone, observer.text("#contacts"))
    observer.picture("chain-5-dismissed")
    find(observer, "#explain summary").click()
    told, _ = observer.until("return document.getElementById('classes').innerText.includes('delphinid whistle: ')", 3)
    text = observer.script("return document.getElementById('classes').innerText")
    check("why sounds were not calls is told of each class, from the stream itself",
          told and "porpoise click train: cannot be heard at 48 kHz" in text and "rejected: " in text, text)


def the_ledger(ledger):
    rows = ask(ledger, "SELECT json_extract(body, '$.note'), json_extract(body, '$.person'), json_extract(body, '$.station'), "
               "json_extract(body, '$.advice') FROM entry WHERE kind = 'note' ORDER BY seq")
    kinds = [row[0] for row in rows]
    answers = [row for row in rows if row[0] == "acknowledgement"]
    stops = [row[0] for row in ask(ledger, "SELECT json_extract(body, '$.id') FROM entry WHERE kind = 'advice' AND "
                                   "json_extract(body, '$.advice') = 'stop' AND json_extract(body, '$.station') = 'crew'")]
    check("the ledger has the acknowledgement once, with person, station and advice",
          len(answers) == 1 and answers[0][1:3] == ("C. Crew", "crew") and answers[0][3] in stops, (rows, stops))
    check("and the distance, the release and the source's state", all(kind in kinds for kind in ("distance", "release", "source state")), kinds)
    verdicts = ask(ledger, "SELECT json_extract(body, '$.verdict'), json_extract(body, '$.person'), json_extract(body, '$.text') "
                   "FROM entry WHERE kind = 'note' AND json_extract(body, '$.note') = 'verdict' ORDER BY seq")
    check("and both verdicts, with person and reason", verdicts == [("confirm", "A. Eyes", "heard and judged real"),
                                                                    ("dismiss", "A. Eyes", "a loudspeaker of ours")], verdicts)
    states = [row[0] for row in ask(ledger, "SELECT state FROM contact ORDER BY seq")]
    check("and the contact as dismissed", "dismissed" in states, states)
    done = verify(ledger)
    check("the ledger verifies", done.returncode == 0, done.stdout)


def main():
    signal.alarm(240)
    browsers = [Browser(1600, 1000), Browser(1280, 800)]
    with folder() as place:
        with open(place + "/scene.cfg", "w") as file:
            file.write(SCENE)
        port = free_port()
        config = settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg", channels=TWO,
                          stream='input = "scene"; path = "scene.cfg"; pace = "real";',
                          more='silence_s = 10.0; pages = { port = %d; }; contact = { gap_s = 6.0; };' % port)
        daemon = Daemon(config)
        try:
            with daemon:
                observer, crew = browsers
                observer.open(daemon.url("/"))
                crew.open(daemon.url("/crew?" + urllib.parse.urlencode({"station": "crew"})))
                before_the_start(observer, crew)
                sheet = the_stop(observer, crew)
                killed(daemon, observer, crew)
                stop_sheet(observer, sheet)
                dismissed(observer, crew)
                seconds, code = daemon.terminate()
                check("SIGTERM with open pages ends it in under 1 s", seconds < 1.0 and code == 0, (seconds, code, daemon.errors()))
                figure("SIGTERM with two open pages: %.2f s" % seconds)
            the_ledger(place + "/watch.ledger")
        finally:
            for browser in browsers:
                browser.end()
    finish()


main()
