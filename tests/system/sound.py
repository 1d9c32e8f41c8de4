#!/usr/bin/python3
"""What is kept of the sound, by the real daemon on a scene: the ring holds it to the sample, wraps, and is found again after
kill -9; a call that led to an advice, a mark and a dismissed contact each have a clip whose digest stands in the ledger; what
is heard is limited; a disk that is full loses no note and no analysis. Recordings are read with Python's wave module, FLAC by
the reference decoder's metadata (RFC 9639) and sha256 by hashlib."""
import hashlib
import os
import subprocess
import sys
import time
import urllib.error
import urllib.request
import wave

import numpy

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from watch import BUILD, ROOT, ask, body, check, figure, finish, folder, settings, verify  # noqa: E402

RATE = 48000
SCENE = """seed = 5; duration_s = 400.0; rate_hz = 48000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 20.0; wind_m_s = 3.0; shipping = 0.2; };
hydrophones = ( { x_m = 0.0; y_m = 750.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; },
                { x_m = 150.0; y_m = 0.0; z_m = 10.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } );
animals = ( { voice = "humpback song"; x_m = 300.0; y_m = 100.0; z_m = 15.0; start_s = 3.0; end_s = 20.0; } );
hammers = ( { z_m = 10.0; start_s = 30.0; steps = ( { duration_s = 300.0; blow_interval_s = 2.0; source_energy_level_db = 206.0; } ); } );
"""
CHANNELS = ('{ role = "measure"; sensitivity_db = -170.0; full_scale_v = 10.0; place_m = [0.0, 750.0, 10.0]; }, '
            '{ role = "listen"; sensitivity_db = -170.0; full_scale_v = 10.0; place_m = [150.0, 0.0, 10.0]; }')


def write_settings(place, ledger, sound):
    with open(place + "/scene.cfg", "w") as file:
        file.write(SCENE)
    return settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg", ledger=ledger, channels=CHANNELS,
                    stream='input = "scene"; path = "scene.cfg"; pace = "real";',
                    more="pages = { port = 0; }; contact = { look_evidence = 0.2; act_evidence = 0.6; }; sound = { %s };" % sound)


def get(daemon, path, headers={}):
    """(status, headers, body)"""
    try:
        with urllib.request.urlopen(urllib.request.Request(daemon.url(path), headers=headers), timeout=20) as answer:
            return answer.status, answer.headers, answer.read()
    except urllib.error.HTTPError as error:
        return error.code, error.headers, error.read()


def samples(wav):
    """(rate, samples) of a 16-bit WAV of one channel, 1.0 = full scale."""
    import io
    with wave.open(io.BytesIO(wav)) as file:
        assert file.getnchannels() == 1 and file.getsampwidth() == 2
        return file.getframerate(), numpy.frombuffer(file.readframes(file.getnframes()), "<i2") / 32767.0


def ring_files(place):
    return sorted(os.listdir(place + "/watch.ledger.sound/ring")) if os.path.isdir(place + "/watch.ledger.sound/ring") else []


def read_24(path):
    with wave.open(path) as file:
        raw = numpy.frombuffer(file.readframes(file.getnframes()), numpy.uint8).reshape(-1, file.getnchannels(), 3).astype(numpy.int32)
        rate = file.getframerate()
    value = raw[:, :, 0] | raw[:, :, 1] << 8 | raw[:, :, 2] << 16
    return rate, (value - (value >> 23 << 24)) / 8388607.0


def rendered(place):
    subprocess.run([BUILD + "/hushwatch", "render", place + "/scene.cfg", "--out", place + "/scene.wav", "--truth",
                    place + "/scene.json"], check=True, capture_output=True)
    import scipy.io.wavfile
    return scipy.io.wavfile.read(place + "/scene.wav")[1]


def same_as_scene(place, scene, name):
    """The file's sound is the scene's from the watch time of its name on (in the first run the scene begins at zero)."""
    path = place + "/watch.ledger.sound/ring/" + name
    rate, kept = read_24(path)
    at = int(round(int(name.split(".")[2]) * 1e-6 * rate))
    return len(kept) > 0 and abs(kept - scene[at:at + len(kept)]).max() < 2 ** -22, len(kept)


def clips_of(daemon, reason, n, limit_s=25):
    state = daemon.wait_for(lambda s: sum(c["reason"] == reason for c in s["clips"]) >= n, limit_s)
    return [clip for clip in (state or daemon.state())["clips"] if clip["reason"] == reason]


def watch_and_mark(daemon):
    for person, watch in [("A. Eyes", "visual"), ("B. Ears", "acoustic")]:
        daemon.note(kind="sign-on", person=person, watch=watch)
    time.sleep(2)
    status, answer = daemon.note(kind="mark", person="B. Ears")
    check("a mark needs nothing but itself", status == 200, answer)
    mark = answer["id"]
    marked = daemon.state()["marks"]
    check("it is open on the pages at once", [m["id"] for m in marked if m["state"] == "open"] == [mark], marked)
    status, answer = daemon.note(kind="sighting", person="B. Ears", mark=mark, line="porpose 320 m")
    check("a line that means nothing is refused with the word at fault",
          status == 400 and answer["field"] == "line" and "porpose" in answer["error"], answer)
    status, answer = daemon.note(kind="sighting", person="B. Ears", mark=mark, line="Porpoise 4.2 km 045 closing 2-4 probable",
                                 closest_m=4000, in_zone_ns=1500000000)
    check("a line that does completes it", status == 200 and daemon.wait_for(lambda s: s["marks"][0]["state"] == "completed", 3), answer)
    said = answer.get("id")
    status, answer = daemon.note(kind="mark", person="B. Ears")
    second = answer["id"]
    status, answer = daemon.note(kind="correction", person="B. Ears", corrects=second, text="a mistake")
    check("a correction takes a mark back", status == 200 and daemon.wait_for(lambda s: s["marks"][0]["state"] == "withdrawn", 3), answer)
    return mark, said


def hear_the_calls(daemon):
    contact = daemon.wait_for(lambda s: any(c["group"] == "baleen whale" and c["n_calls"] > 2 for c in s["contacts"]), 30)
    check("the humpback is heard", contact)
    number = [c["contact"] for c in contact["contacts"] if c["group"] == "baleen whale"][0]
    advice = clips_of(daemon, "advice", 1)
    check("a call that led to an advice has a clip", advice and all(".call." in c["causes"][0] for c in advice), daemon.state()["clips"])
    daemon.wait_for(lambda s: s["watch_s"] > 22, 30)
    status, answer = daemon.note(kind="verdict", person="B. Ears", contact=number, verdict="dismiss", text="a recording of last week")
    check("the contact is dismissed", status == 200, answer)
    calls = max(c["n_calls"] for c in daemon.state()["contacts"] if c["contact"] == number)
    advice = clips_of(daemon, "advice", 1)  # more advice has named more of them by now
    dismissed = clips_of(daemon, "dismissed", min(3, calls - len(advice)), 12)
    check("its clearest calls are kept too, at most three that were not kept before",
          len(dismissed) <= 3 and len(advice) + len(dismissed) >= min(3, calls), (calls, len(advice), dismissed))
    return advice + dismissed


def serve(daemon, place, clips):
    clip = clips[0]
    status, headers, kept = get(daemon, "/clip/%s?form=file" % clip["id"])
    entry = body(ask(place + "/watch.ledger", "SELECT body FROM entry WHERE json_extract(body, '$.id') = ?", clip["id"])[0][0])
    check("the file is served as it is kept, and its digest is the ledger's",
          status == 200 and kept[:4] == b"fLaC" and hashlib.sha256(kept).hexdigest() == entry["sha256"] and len(kept) == entry["bytes"],
          (status, entry))
    status, headers, part = get(daemon, "/clip/%s?form=file" % clip["id"], {"Range": "bytes=4-99"})
    check("a range of it too", status == 206 and part == kept[4:100] and headers["Content-Range"] == "bytes 4-99/%d" % len(kept), (status, headers))
    check("the end of it", get(daemon, "/clip/%s?form=file" % clip["id"], {"Range": "bytes=-5"})[2] == kept[-5:])
    check("a range beyond it is refused", get(daemon, "/clip/%s?form=file" % clip["id"], {"Range": "bytes=%d-" % len(kept)})[0] == 416)
    seconds = entry["end_s"] - entry["start_s"]
    for form, rate, length in [("as-is", 48000, seconds), ("slowed", 4800, 10 * seconds), ("shifted&hz=12000", 48000, seconds)]:
        status, headers, wav = get(daemon, "/clip/%s?form=%s" % (clip["id"], form))
        made_rate, sound = samples(wav) if status == 200 else (0, numpy.zeros(1))
        check("%s: at %d Hz, %.0f s, nothing beyond the ceiling" % (form, rate, length),
              made_rate == rate and abs(len(sound) / rate - length) < 0.01 and 0.01 < abs(sound).max() <= 0.25 + 1e-4,
              (status, made_rate, len(sound) / max(1, made_rate), abs(sound).max()))
    for path, code in [("/clip/1.1.sound.99", 404), ("/clip/..%2f..%2fsite.cfg", 404), ("/clip/../../site.cfg", 404), ("/clip/", 404),
                       ("/clip/1.1.sound.1/x", 404), ("/clip/1.1.sound.1.flac", 404), ("/clip/01.1.sound.1", 404),
                       ("/clip/%s?form=loud" % clip["id"], 400), ("/api/hear?from=1&to=1", 400), ("/api/hear?from=1&to=90", 400),
                       ("/api/hear?stream=2&from=1&to=2", 404), ("/api/hear?from=90000&to=90001", 404), ("/api/hear?from=1&to=2&hz=nan", 400)]:
        got = get(daemon, path)[0]
        check("%s is answered %d" % (path, code), got == code, got)
    now_s = daemon.state()["watch_s"]
    example(daemon, now_s)
    status, _, wav = get(daemon, "/api/hear?stream=1&from=%.3f&to=%.3f&form=as-is" % (now_s - 8, now_s - 2))
    check("a stretch of the ring can be heard", status == 200 and abs(len(samples(wav)[1]) / RATE - 6) < 0.01, status)


def example(daemon, now_s):
    """The curl line of docs/http.md, at a time that the ring holds."""
    with open(os.path.join(ROOT, "docs/http.md")) as file:
        [line] = [one.strip() for one in file if one.startswith("    curl ") and "/api/hear" in one]
    line = line.replace(":8470", ":%d" % daemon.port).replace("from=60&to=65", "from=%.1f&to=%.1f" % (now_s - 8, now_s - 3))
    done = subprocess.run(line.replace("> heard.wav", ""), shell=True, capture_output=True, timeout=20)
    check("the example of docs/http.md gives sound", done.returncode == 0 and done.stdout[:4] == b"RIFF", (line, done.stdout[:100]))


def hear_blows(daemon):
    daemon.wait_for(lambda s: s["watch_s"] > 39, 60)
    now_s = daemon.state()["watch_s"]
    rate, sound = samples(get(daemon, "/api/hear?stream=1&channel=1&from=%.3f&to=%.3f&gain=60" % (now_s - 8, now_s - 2))[2])
    loud = abs(sound).max()
    usual = numpy.sqrt(numpy.median(sound[:rate] ** 2))
    silent = (abs(sound.reshape(-1, rate // 100)).max(axis=1) == 0).sum() / 100
    figure("blows of 206 dB at 750 m, heard with 60 dB of gain: %.2f of 6 s muted, loudest sample %.3f of full scale" % (silent, loud))
    check("blows are muted, the rest is heard", loud <= 0.2501 and 0.1 < silent < 4 and usual > 0, (loud, silent, usual))


def first_life(place):
    config = write_settings(place, place + "/watch.ledger", "minutes = 0.6; around_s = 2.0; leave_mib = 1;")
    scene = rendered(place)
    daemon = Daemon(config).start()
    try:
        mark, said = watch_and_mark(daemon)
        clips = hear_the_calls(daemon)
        marks = clips_of(daemon, "mark", 2)
        check("each mark has its last 30 s, as far as they were heard", len(marks) == 2 and mark in [c["causes"][0] for c in marks], marks)
        check("of the channel that listens", all(c["channel"] == 2 for c in marks + clips), marks)
        serve(daemon, place, clips)
        hear_blows(daemon)
        daemon.wait_for(lambda s: s["watch_s"] > 62, 60)
        files, now_s = ring_files(place), daemon.state()["watch_s"]
        starts = [int(name.split(".")[2]) * 1e-6 for name in files]
        check("the ring has wrapped: the last 36 s are left, and a file more", now_s - 46 < min(starts, default=0) < now_s - 34, (now_s, files))
        late = daemon.note(kind="mark", person="B. Ears")[1]["id"]
        time.sleep(0.3)
    finally:
        daemon.kill()
    return scene, mark, said, late


def second_life(place, scene, late):
    before = ring_files(place)
    good = [same_as_scene(place, scene, name) for name in before]
    check("killed with -9, every file of the ring opens and is the scene to the last bit", good and all(same for same, _ in good), (before, good))
    # It goes on in the scene where it would be by now, so a gap is between the two.
    daemon = Daemon(place + "/site.cfg").start()
    try:
        check("started again, it has found them", set(before) <= set(ring_files(place)), (before, ring_files(place)))
        marks = clips_of(daemon, "mark", 3)
        check("the mark whose clip was not made yet has one now", late in [c["causes"][0] for c in marks], marks)
        state = daemon.state()
        check("the marks are still there, each in its state", [m["state"] for m in state["marks"]] == ["open", "withdrawn", "completed"], state["marks"])
        status, _, kept = get(daemon, "/clip/%s?form=file" % marks[-1]["id"])
        check("a clip of the run before is served", status == 200 and kept[:4] == b"fLaC", status)
        took, code = daemon.terminate()
        check("it ends within 2 s", took < 2 and code == 0, (took, code))
    finally:
        if daemon.process.poll() is None:
            daemon.kill()


def ledger_and_files(place, mark, said):
    ledger = place + "/watch.ledger"
    rows = ask(ledger, "SELECT id, file, sha256, reason, start_s, end_s FROM sound ORDER BY seq")
    wrong = []
    for _, name, digest, _, _, _ in rows:
        with open(place + "/watch.ledger.sound/clips/" + name, "rb") as file:
            if hashlib.sha256(file.read()).hexdigest() != digest:
                wrong.append(name)
    figure("%d clips kept, %d digests differ" % (len(rows), len(wrong)))
    check("every clip's digest is the ledger's", len(rows) >= 5 and not wrong, (rows, wrong))
    check("no clip is without an entry", sorted(row[1] for row in rows) == sorted(os.listdir(place + "/watch.ledger.sound/clips")))
    row = ask(ledger, 'SELECT "group", distance_m, bearing_deg, behaviour, number_low, number_high, certainty, mark, text, closest_m, in_zone_s '
              "FROM note WHERE id = ?", said)
    check("the line is in the ledger by its fields",
          row == [("porpoise", 4200.0, 45.0, "closing", 2, 4, "probable", mark, "Porpoise 4.2 km 045 closing 2-4 probable", 4000.0, 1.5)], row)
    done = verify(ledger)
    check("the ledger verifies", done.returncode == 0, done.stdout)


def fill(path):
    with open(path, "wb", buffering=0) as out:
        try:
            while True:
                out.write(bytes(4096))
        except OSError:
            pass


def full_disk(place):
    disk = place + "/disk"
    os.mkdir(disk)
    mounted = subprocess.run(["mount", "-t", "tmpfs", "-o", "size=16m", "tmpfs", disk], capture_output=True, text=True)
    if not check("a small disk is there", mounted.returncode == 0, mounted.stderr):
        return
    ring = disk + "/watch.ledger.sound/ring"
    config = write_settings(place, disk + "/watch.ledger", "leave_mib = 4;")
    try:
        with Daemon(config) as daemon:
            daemon.note(kind="sign-on", person="B. Ears", watch="acoustic")
            check("the ring begins", daemon.wait_for(lambda s: s["watch_s"] > 4 and os.listdir(ring), 10))
            fill(disk + "/filler")
            said = daemon.wait_for(lambda s: any("SOUND IS NOT KEPT" in fault for fault in s["faults"]), 6)
            check("a disk that fills is said as a fault of the ring", said, daemon.state()["faults"])
            ids = [daemon.note(kind="remark", person="B. Ears", text="remark %d %s" % (i, "x" * 200))[1].get("id") for i in range(40)]
            check("every note is taken", all(ids), ids)
            heard = daemon.wait_for(lambda s: s["watch_s"] > 18, 20)
            heard_s = [stream["heard_s"] for stream in heard["streams"]] if heard else []
            check("the analysis goes on", heard and all(heard["watch_s"] - s < 1.5 for s in heard_s) and
                  any(c["group"] == "baleen whale" for c in heard["contacts"]), heard_s)
            os.unlink(disk + "/filler")
            again = daemon.wait_for(lambda s: not any("SOUND IS NOT KEPT" in fault for fault in s["faults"]) and s["recording"]["recording"], 10)
            check("with room again, sound is kept again", again, daemon.state()["faults"])
            unheard = daemon.state()["streams"][0]["unheard_s"]
            check("no sample was missed by the analysis", unheard == 0, unheard)
            daemon.terminate()
        kept = {row[0] for row in ask(disk + "/watch.ledger", "SELECT json_extract(body, '$.id') FROM entry")}
        figure("a full disk: %d notes entered meanwhile, %d lost" % (len(ids), sum(i not in kept for i in ids)))
        check("no note was lost", all(i in kept for i in ids))
    finally:
        subprocess.run(["umount", "-l", disk])


with folder() as place_of_test:
    the_scene, a_mark, its_line, a_late_mark = first_life(place_of_test)
    second_life(place_of_test, the_scene, a_late_mark)
    ledger_and_files(place_of_test, a_mark, its_line)
    full_disk(place_of_test)
finish()
