#!/usr/bin/python3
"""Bad input gets a clear word, a sensible exit code and no silent default; nothing crashes and nothing is lost."""
import json
import math
import os
import re
import struct
import subprocess
import sys
import urllib.request
import wave

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from watch import BUILD, ROOT, ask, check, finish, folder, scan, settings, verify  # noqa: E402

def write_wav(path, seconds=2.0, rate=48000, channels=1):
    with wave.open(path, "wb") as out:
        out.setnchannels(channels)
        out.setsampwidth(2)
        out.setframerate(rate)
        out.writeframes(b"".join(struct.pack("<h", int(300 * math.sin(i * 0.37 + 0.01 * i * i))) * channels
                                 for i in range(int(seconds * rate))))
    return path


def refused(name, done, *words, code=2):
    text = done.stderr + done.stdout
    check(name, done.returncode == code and all(w in text for w in words),
          "exit %d, wanted %d and %s in:\n%s" % (done.returncode, code, words, text))


def recordings(place):
    config = settings(place + "/site.cfg")
    ledger = place + "/x.ledger"
    refused("a missing file is named", scan(config, ledger, place + "/none.wav"), "none.wav")
    open(place + "/empty.wav", "w").close()
    refused("an empty file is named", scan(config, ledger, place + "/empty.wav"), "empty.wav")
    with open(place + "/text.wav", "w") as out:
        out.write("this is no sound\n" * 100)
    refused("a file that is not audio is named", scan(config, ledger, place + "/text.wav"), "text.wav")
    check("no ledger was left behind", not os.path.exists(ledger))
    good = write_wav(place + "/good.wav")
    with open(good, "rb") as whole, open(place + "/cut.wav", "wb") as cut:
        cut.write(whole.read()[:30000])
    done = scan(config, ledger, place + "/cut.wav")
    check("a truncated file is either refused by name or taken as far as it goes",
          done.returncode == 2 and "cut.wav" in done.stderr or
          done.returncode == 0 and verify(ledger).returncode == 0, done.stderr)
    two = write_wav(place + "/two.wav", channels=2)
    refused("a channel count that does not fit is told", scan(config, place + "/c.ledger", two), "two.wav", "channel")
    fixed = settings(place + "/rate.cfg", stream='input = "recording"; files = ["none.wav"]; rate_hz = 96000;')
    refused("a rate that does not fit is told", scan(fixed, place + "/r.ledger", good), "good.wav", "96000")
    done = scan(config, place + "/ok.ledger", good)
    check("a good file is scanned", done.returncode == 0, done.stderr)
    refused("a ledger that exists is not written over", scan(config, place + "/ok.ledger", good), "ok.ledger")
    refused("a bad start is told", scan(config, place + "/s.ledger", "--start", "noon", good), "noon")
    refused("an unknown option is told", scan(config, place + "/s.ledger", "--strat", "x", good), "--strat")


def samples(place):
    """NaN, infinite and denormal samples, through a pipe of 32-bit floats."""
    pipe = place + "/pipe"
    os.mkfifo(pipe)
    config = settings(place + "/pcm.cfg", stream='input = "pcm"; path = "pipe"; format = "f32"; rate_hz = 48000;')
    values = [float("nan"), float("inf"), -float("inf"), 1e-42, 3.4e38, -3.4e38, 0.0, 1.0, -1.0]
    feeder = os.fork()
    if feeder == 0:
        with open(pipe, "wb") as out:
            for second in range(6):
                out.write(struct.pack("<48000f", *(values[i % len(values)] if second % 2 else 0.01 * math.sin(0.3 * i)
                                                   for i in range(48000))))
        os._exit(0)
    done = scan(config, place + "/pcm.ledger")
    os.waitpid(feeder, 0)
    check("broken samples are survived", done.returncode == 0, done.stderr)
    gaps = ask(place + "/pcm.ledger", "SELECT count(*) FROM unheard WHERE cause = 'gap' AND channel = 1")[0][0]
    check("blocks with broken samples are unheard", gaps > 0)
    bodies = "".join(row[0] for row in ask(place + "/pcm.ledger", "SELECT body FROM entry WHERE kind <> 'run'"))
    check("no NaN reaches the ledger", not re.search(r"[:\[,](-?nan|-?inf)", bodies, re.IGNORECASE))


def settings_files(place):
    path = place + "/wrong.cfg"
    with open(path, "w") as out:
        out.write('name = "x";\nledger = "l";\npermit = "p.cfg";\ncalls = "c";\nprot = 5;\n'
                  'pages = { port = 99999; };\nstreams = ( { input = "radio"; } );\n')
    done = subprocess.run([BUILD + "/hushwatchd", "--config", path, "--check"], capture_output=True, text=True, timeout=30)
    refused("all errors of meaning are listed with file, line and key", done, ":5: prot", ":6: pages.port", "0 to 65535",
            ":7: streams[0].input", "device, recording, pcm, scene", "p.cfg")
    with open(path, "w") as out:
        out.write('name = "x";\nledger == 5;\n')
    done = subprocess.run([BUILD + "/hushwatchd", "--config", path, "--check"], capture_output=True, text=True, timeout=30)
    refused("the first error of syntax is told with its line", done, "wrong.cfg:2", "syntax error")
    done = subprocess.run([BUILD + "/hushwatchd", "--config", ROOT + "/config/demonstration.cfg", "--check"],
                          capture_output=True, text=True, timeout=30)
    check("the demonstration's settings are good", done.returncode == 0, done.stderr)
    check("--check says what must be known of the permit", "never for work" in done.stdout and
          "values are unverified: check each" in done.stdout and
          "zones[0].radius_m = 500 (invented; for demonstrations and tests)" in done.stdout, done.stdout)
    scene = 'input = "scene"; path = "%s/config/scenes/quiet.cfg";' % ROOT
    ended = "config/permits/us-nmfs-gulf-2021.cfg"
    open_permit = settings(place + "/open.cfg", permit=ended, stream=scene)
    done = subprocess.run([BUILD + "/hushwatchd", "--config", open_permit, "--check"], capture_output=True, text=True, timeout=30)
    refused("a permit with values to be filled is refused, each with line and key", done, "us-nmfs-gulf-2021.cfg:",
            "break.watch_kept.mark", "zones[1].species_unknown.mark", "zones[4].species_unknown.mark",
            "clearances[1].species_unknown.mark", "permit_values")
    stated = 'source = { form = "array"; aperture_m = 20.0; }; permit_values = ( %s );' % ", ".join(
        '{ key = "%s"; value = "%s"; who = "nobody: invented for tests"; source = "invented for tests"; }' % (key, value)
        for key, value in (("break.watch_kept", "counts"), ("zones[1].species_unknown", "listed"),
                           ("zones[4].species_unknown", "listed"), ("clearances[1].species_unknown", "other")))
    open_permit = settings(place + "/open.cfg", permit=ended, stream=scene, more=stated)
    done = subprocess.run([BUILD + "/hushwatchd", "--config", open_permit, "--check"], capture_output=True, text=True, timeout=30)
    wrong = settings(place + "/wrong-values.cfg", permit=ended, stream=scene, more=stated.replace("counts", "sometimes").replace(
        "zones[4].species_unknown", "zones[7].species_unknown"))
    refused("a stated value that is wrong is told with the settings' file and line",
            subprocess.run([BUILD + "/hushwatchd", "--config", wrong, "--check"], capture_output=True, text=True, timeout=30),
            "wrong-values.cfg:3: permit_values: break.watch_kept is \"sometimes\"; allowed: nothing, counts, stands",
            "us-nmfs-gulf-2021.cfg has no value \"zones[7].species_unknown\"")
    check("with them stated it is taken, and what ended and who states what is said", done.returncode == 0 and
          "has ENDED: it holds no more since 2026-04-19" in done.stdout and "4 are stated by the settings" in done.stdout and
          "break.watch_kept = counts (filled; nobody: invented for tests: invented for tests)" in done.stdout,
          done.stdout + done.stderr)
    check("--check says what is not watched", "not watched by the program:\n  report: due within 2160 h" in done.stdout, done.stdout)
    with Daemon(settings(place + "/ended.cfg", permit=ended, stream=scene, ledger="ended.ledger",
                         more=stated + "pages = { port = 0; };")) as daemon:
        page = json.load(urllib.request.urlopen(daemon.url("/api/permit"), timeout=5))["permit"]
        check("the page is told what is not watched, and what ended", page["unwatched"] == ["report: due within 2160 h"] and
              page["ended"] == "2026-04-19", page)
        daemon.terminate()
        check("the daemon says at its start that the guideline has ended", "has ENDED: it holds no more since 2026-04-19" in
              daemon.errors() and "values are unverified" in daemon.errors(), daemon.errors())
    with open(ROOT + "/config/permits/demonstration.cfg") as text, open(place + "/limit.cfg", "w") as out:
        out.write(text.read() + 'limits = { criteria = { value = ["germany-2008"]; mark = "invented"; source = "x"; }; };\n')
    for more, good in (("", False), ('source = { criteria = ["%s/config/criteria/germany-2008.cfg"]; };' % ROOT, True)):
        site = settings(place + "/limited.cfg", permit=place + "/limit.cfg", stream=scene, more=more)
        done = subprocess.run([BUILD + "/hushwatchd", "--config", site, "--check"], capture_output=True, text=True, timeout=30)
        check("a limit of the permit is taken only with its criteria: %s" % good, (done.returncode == 0) == good and
              ("limits.criteria: names 'germany-2008'" in done.stderr) != good, done.stdout[:300] + done.stderr)
    done = subprocess.run([BUILD + "/hushwatchd", "--config", ROOT + "/config/demonstration.cfg", "--print"],
                          capture_output=True, text=True, timeout=30)
    check("--print shows settings and defaults", "contact.gap_s = 300  # default" in done.stdout and
          "silence_s = 20" in done.stdout, done.stdout[:600])
    done = subprocess.run([BUILD + "/hushwatchd"], capture_output=True, text=True, timeout=30)
    refused("a daemon without settings says what it needs", done, "--config")
    config = settings(place + "/device.cfg", stream='input = "device"; device = "no such card"; rate_hz = 48000;')
    done = subprocess.run([BUILD + "/hushwatchd", "--config", config], capture_output=True, text=True, timeout=60)
    refused("an unknown device is told, with the known ones", done, "no such card")


def ledgers(place):
    good = place + "/ok.ledger"
    wav = place + "/good.wav"
    config = settings(place + "/daemon.cfg", stream='input = "recording"; files = ["%s"]; pace = "real";' % wav,
                      ledger="busy.ledger", more="pages = { port = 0; };")

    def refused_by_daemon(name, path, *words, code=2):
        site = settings(place + "/other.cfg", stream='input = "recording"; files = ["%s"]; pace = "real";' % wav,
                        ledger=path, more="pages = { port = 0; };")
        done = subprocess.run([BUILD + "/hushwatchd", "--config", site], capture_output=True, text=True, timeout=30)
        check(name, done.returncode in (2, 3) and all(w in done.stderr for w in words), (done.returncode, done.stderr))

    with open(place + "/not.ledger", "w") as out:
        out.write("a letter to my aunt\n" * 500)
    refused_by_daemon("a file that is no ledger is told", place + "/not.ledger", "not.ledger")
    newer = place + "/newer.ledger"
    with open(good, "rb") as a, open(newer, "wb") as b:
        b.write(a.read())
    subprocess.run(["sqlite3", newer, "PRAGMA user_version = 99;"], check=True)
    refused_by_daemon("a newer ledger is told", newer, "newer.ledger")
    with Daemon(config) as daemon:
        refused_by_daemon("a ledger that another writes is told", place + "/busy.ledger", "busy.ledger")
        port = daemon.port
        taken = settings(place + "/port.cfg", stream='input = "recording"; files = ["%s"]; pace = "real";' % wav,
                         ledger="port.ledger", more="pages = { port = %d; };" % port)
        done = subprocess.run([BUILD + "/hushwatchd", "--config", taken], capture_output=True, text=True, timeout=30)
        refused("a port in use is told", done, str(port))
        check("and the first daemon goes on", daemon.state()["watch_s"] >= 0)
        seconds, code = daemon.terminate()
        check("SIGTERM ends it in under 1 s", seconds < 1 and code == 0, (seconds, code))
    check("verify names what is no ledger", "not.ledger" in verify(place + "/not.ledger").stderr)


with folder() as place_of_test:
    recordings(place_of_test)
    samples(place_of_test)
    settings_files(place_of_test)
    ledgers(place_of_test)
finish()
