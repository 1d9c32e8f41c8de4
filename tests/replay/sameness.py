#!/usr/bin/python3
"""The same sound and notes give the same entries: at real pace under load, as fast as possible, and however the sound is cut
into pieces. Compared are (utc, kind, body) in order, of all kinds but run, health, clock and stamp."""
import os
import random
import subprocess
import sys
import threading

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from watch import BUILD, CALIBRATED, LENGTH, check, entries, figure, finish, folder, scan, settings  # noqa: E402

START = ("--start", "2026-03-01T12:00:00Z")
SECONDS = {"short": 12, "check": 24, "long": 300}[LENGTH]
SCENE = """seed = 77; duration_s = %d.0; rate_hz = 48000.0;
sea = { temperature_c = 11.0; salinity = 34.0; depth_m = 30.0; wind_m_s = 5.0; shipping = 0.4; };
hydrophones = ( { x_m = 100.0; y_m = 0.0; z_m = 12.0; sensitivity_db = -180.0; gain_db = 0.0; full_scale_v = 1.0; },
                { x_m = 103.0; y_m = 0.0; z_m = 12.0; sensitivity_db = -180.0; gain_db = 0.0; full_scale_v = 1.0; } );
animals = ( { voice = "delphinid whistle"; members = 2; x_m = 250.0; y_m = 60.0; z_m = 8.0; start_s = 3.0; end_s = %d.0; },
            { voice = "humpback song"; x_m = 500.0; y_m = -300.0; z_m = 15.0; start_s = 1.0; end_s = %d.0; } );
hammers = ( { x_m = 0.0; y_m = 0.0; z_m = 10.0; start_s = 6.0;
              steps = ( { duration_s = %d.0; blow_interval_s = 2.0; source_energy_level_db = 195.0; } ); } );
notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
          { at_s = 0.7; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; },
          { at_s = 8.25; kind = "sighting"; person = "A. Eyes"; group = "delphinid"; distance_m = 300.0; },
          { at_s = 9.5; kind = "remark"; person = "A. Eyes"; text = "three fins"; } );
""" % (SECONDS, SECONDS, SECONDS, SECONDS - 6)



def compare(name, first, other):
    differences = [(a, b) for a, b in zip(first, other) if a != b]
    return check(name, first and first == other,
                 "%d and %d entries, first difference %s" % (len(first), len(other), differences[:1]))


def scene(place):
    with open(place + "/scene.cfg", "w") as file:
        file.write(SCENE)
    config = settings(place + "/scene-site.cfg", stream='input = "scene"; path = "scene.cfg";',
                      channels=CALIBRATED + "," + CALIBRATED)
    done = scan(config, place + "/fast.ledger", *START)
    check("the scene is scanned fast", done.returncode == 0, done.stderr)
    first = entries(place + "/fast.ledger")
    kinds = {row[1] for row in first}
    check("it has calls, impulses, levels, notes, contacts and advice",
          {"call", "impulse", "level", "note", "contact", "advice", "phase"} <= kinds, kinds)
    figure("sameness: %d entries of %d s of sound" % (len(first), SECONDS))
    load = [subprocess.Popen(["sh", "-c", "while :; do :; done"]) for _ in range(3)]
    try:
        done = scan(config, place + "/real.ledger", "--pace", "real", *START, timeout=SECONDS * 3 + 60)
    finally:
        for process in load:
            process.kill()
            process.wait()
    check("the scene is scanned at real pace under load", done.returncode == 0, done.stderr)
    compare("real pace under load gives the same entries", first, entries(place + "/real.ledger"))
    return place + "/scene.cfg"


def pieces(place, scene_path):
    """The rendered scene as a recording and, in pieces of random size, on a pipe."""
    wav, truth = place + "/scene.wav", place + "/truth.json"
    done = subprocess.run([BUILD + "/hushwatch", "render", scene_path, "--out", wav, "--truth", truth],
                          capture_output=True, text=True, timeout=200)
    check("the scene is rendered", done.returncode == 0, done.stderr)
    config = settings(place + "/wav-site.cfg", channels=CALIBRATED + "," + CALIBRATED)
    with open(place + "/notes.cfg", "w") as file:
        file.write(SCENE[SCENE.index("notes = "):])
    scan(config, place + "/wav.ledger", "--notes", place + "/notes.cfg", *START, wav)
    first = entries(place + "/wav.ledger")
    # The recording at real pace, while the pieces below and two busy loops load the machine.
    load = [subprocess.Popen(["sh", "-c", "while :; do :; done"]) for _ in range(2)]
    real = subprocess.Popen([BUILD + "/hushwatch", "scan", "--config", config, "--ledger", place + "/wav-real.ledger",
                             "--notes", place + "/notes.cfg", "--pace", "real", *START, wav],
                            stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True)
    try:
        in_pieces(place, wav, first)
        problem = real.communicate(timeout=SECONDS * 3 + 60)[1]
    finally:
        for process in load + [real]:
            process.kill()
            process.wait()
    check("the recording is scanned at real pace under load", real.returncode == 0, problem)
    compare("the recording at real pace gives the same entries", first, entries(place + "/wav-real.ledger"))


def in_pieces(place, wav, first):
    import wave
    try:
        with wave.open(wav) as sound:
            width, rate, raw = sound.getsampwidth(), sound.getframerate(), sound.readframes(sound.getnframes())
        encoding = {2: "s16", 3: "s24", 4: "s32"}[width]
    except wave.Error:  # floating point, which the module does not know: take the samples from the file's end
        import numpy
        import scipy.io.wavfile
        rate, samples = scipy.io.wavfile.read(wav)
        raw, encoding, width = samples.astype("<f4").tobytes(), "f32", 4
    pipe = place + "/pipe"
    os.mkfifo(pipe)
    config = settings(place + "/pipe-site.cfg", stream='input = "pcm"; path = "pipe"; format = "%s"; rate_hz = %d;' %
                      (encoding, rate), channels=CALIBRATED + "," + CALIBRATED)
    for seed in range(5):
        generator = random.Random(seed)

        def feed():
            with open(pipe, "wb", buffering=0) as out:
                at = 0
                while at < len(raw):
                    n = generator.choice([1, 3, 500, 4096, 65536, 1 << 20])
                    out.write(raw[at:at + n])
                    at += n

        feeder = threading.Thread(target=feed)
        feeder.start()
        ledger = place + "/pipe%d.ledger" % seed
        done = scan(config, ledger, "--notes", place + "/notes.cfg", *START)
        feeder.join()
        check("pieces of seed %d are scanned" % seed, done.returncode == 0, done.stderr)
        compare("pieces of seed %d give the same entries" % seed, first, entries(ledger))


with folder() as place_of_test:
    pieces(place_of_test, scene(place_of_test))
finish()
