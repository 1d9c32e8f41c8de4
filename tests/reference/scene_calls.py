#!/usr/bin/python3
"""The recipes of lib/scene against published figures of real calls, measured on rendered sound with scipy. Prints TAP."""
import json
import os
import subprocess
import sys
import tempfile

import numpy as np
from scipy import signal
from scipy.io import wavfile

TOOL = os.path.join(os.environ.get("HUSHWATCH_BUILD", "build"), "hushwatch")
folder = tempfile.TemporaryDirectory(prefix="hushwatch-calls-")
count, failed = 0, 0


def check(name, good, detail):
    global count, failed
    count += 1
    failed += not good
    print("# figure %s\n%s %d - %s" % (detail, "ok" if good else "not ok", count, name), flush=True)


def render(voice, rate, seconds, more=""):
    """The sound of one animal 10 m away (no noise, hardly any absorption), and its calls' truth."""
    name = os.path.join(folder.name, voice.replace(" ", "-"))
    with open(name + ".cfg", "w") as file:
        file.write("seed = 21; duration_s = %.1f; rate_hz = %d.0; sea = { ambient = false; };"
                   "hydrophones = ( { sensitivity_db = -200.0; gain_db = 0.0; full_scale_v = 100.0; } );"
                   "animals = ( { voice = \"%s\"; x_m = 10.0; z_m = 10.0; %s } );" % (seconds, rate, voice, more))
    subprocess.run([TOOL, "render", name + ".cfg", "--out", name + ".wav", "--truth", name + ".json"], check=True,
                   capture_output=True)
    samples = wavfile.read(name + ".wav")[1].astype(np.float64)
    with open(name + ".json") as file:
        calls = json.load(file)["calls"]
    os.remove(name + ".wav")
    return samples, [c for c in calls if c["heard"][0]["end_s"] < seconds]


def cut(samples, rate, start_s, end_s):
    return samples[int(start_s * rate):int(end_s * rate)]


def spectrum(piece, rate, size=None):
    size = size or 8 * len(piece)
    return np.fft.rfftfreq(size, 1 / rate), np.abs(np.fft.rfft(piece, size)) ** 2


def band(hz, power, down_db):
    inside = hz[power >= power.max() * 10 ** (-down_db / 10)]
    return inside[-1] - inside[0]


def pulse_pieces(samples, rate, calls, length_s):
    for call in calls:
        travel = call["heard"][0]["start_s"] - call["start_s"]
        for pulse_s in call["pulses_s"]:
            yield cut(samples, rate, pulse_s + travel, pulse_s + travel + length_s)


def duration_s(piece, rate):
    """-10 dB duration of the envelope."""
    envelope = np.abs(signal.hilbert(np.pad(piece, len(piece))))
    inside = np.nonzero(envelope >= envelope.max() * 10 ** -0.5)[0]
    return (inside[-1] - inside[0] + 1) / rate


def porpoise():
    """Villadsgaard et al. 2007 (J. Exp. Biol. 210, 56): peak 129 to 145 kHz, duration 44 to 113 us, -3 dB band 6 to 26
    kHz, -10 dB band 14 to 46 kHz; intervals 30 to 200 ms."""
    rate = 768000
    samples, calls = render("porpoise clicks", rate, 15)
    peaks, durations, three, ten = [], [], [], []
    for piece in pulse_pieces(samples, rate, calls, 0.0003):
        hz, power = spectrum(piece, rate)
        peaks.append(hz[np.argmax(power)])
        three.append(band(hz, power, 3))
        ten.append(band(hz, power, 10))
        durations.append(duration_s(piece, rate))
    gaps = np.concatenate([np.diff(c["pulses_s"]) for c in calls])
    good = (min(peaks) > 127e3 and max(peaks) < 145e3 and min(durations) > 44e-6 and max(durations) < 113e-6
            and min(three) > 6e3 and max(three) < 26e3 and min(ten) > 14e3 and max(ten) < 46e3
            and gaps.min() > 0.0299 and gaps.max() < 0.2001 and len(peaks) > 50)
    check("porpoise clicks are as published", good, "%d clicks: peak %.0f to %.0f kHz, -10 dB duration %.0f to %.0f us, "
          "-3 dB band %.1f to %.1f kHz, -10 dB band %.1f to %.1f kHz" % (
              len(peaks), min(peaks) / 1e3, max(peaks) / 1e3, min(durations) * 1e6, max(durations) * 1e6,
              min(three) / 1e3, max(three) / 1e3, min(ten) / 1e3, max(ten) / 1e3))


def delphinid():
    """Wahlberg et al. 2011 (J. Exp. Biol. 214): clicks of bottlenose dolphins with centroids of 33 to 109 kHz, 8 to 72 us."""
    rate = 500000
    samples, calls = render("delphinid clicks", rate, 15)
    centroids, durations = [], []
    for piece in pulse_pieces(samples, rate, calls, 0.0003):
        hz, power = spectrum(piece, rate)
        centroids.append(np.sum(hz * power) / np.sum(power))
        durations.append(duration_s(piece, rate))
    good = min(centroids) > 33e3 and max(centroids) < 109e3 and min(durations) > 8e-6 and max(durations) < 72e-6
    check("delphinid clicks are of the published order", good, "%d clicks: centroid %.0f to %.0f kHz, duration %.0f to "
          "%.0f us" % (len(centroids), min(centroids) / 1e3, max(centroids) / 1e3, min(durations) * 1e6, max(durations) * 1e6))


def sperm():
    """Off the axis 2 to 18 kHz with several pulses over 17 to 30 ms at most (Mohl et al. 2003); 0.5 to 1.0 s apart."""
    rate = 96000
    samples, calls = render("sperm whale clicks", rate, 260, "pulses = 40;")
    centroids = []
    for piece in pulse_pieces(samples, rate, calls[:1], 0.04):
        hz, power = spectrum(piece, rate)
        centroids.append(np.sum(hz * power) / np.sum(power))
    gaps = np.diff(calls[0]["pulses_s"])
    good = min(centroids) > 5e3 and max(centroids) < 18e3 and gaps.min() >= 0.44 and gaps.max() <= 1.01
    check("sperm whale clicks are as published", good, "centroid %.1f kHz, interval %.2f to %.2f s" % (
        np.mean(centroids) / 1e3, gaps.min(), gaps.max()))


def tones():
    """Fin: 23 to 18 Hz in 1 s (Watkins et al. 1987). Blue, North-East Pacific B: strongest near 48 Hz (McDonald et al.
    2006). Right whale upcall: 50 to 200 Hz, rising (Clark 1982). Humpback: 52 to 3877 Hz, units of 0.15 to 8 s (Au et al.
    2006). Delphinid whistle: 2 to 24 kHz, 0.1 to 2 s."""
    rate = 8000
    samples, calls = render("fin whale pulse", rate, 40)
    heard = calls[0]["heard"][0]
    half = (heard["start_s"] + heard["end_s"]) / 2
    hz, first = spectrum(cut(samples, rate, heard["start_s"], half), rate)
    _, second = spectrum(cut(samples, rate, half, heard["end_s"]), rate)
    a, b = hz[np.argmax(first)], hz[np.argmax(second)]
    check("fin whale pulses fall from 23 to 18 Hz", 20 < a < 23 and 18 < b < 21 and b < a, "%.1f then %.1f Hz" % (a, b))
    samples, calls = render("blue whale moan", rate, 40)
    hz, power = spectrum(samples, rate, 2 ** 20)
    peak = hz[np.argmax(power)]
    check("blue whale moans are strongest near 48 Hz", 46 < peak < 50, "%.1f Hz" % peak)
    samples, calls = render("right whale upcall", rate, 60)
    rises = []
    for call in calls:
        heard = call["heard"][0]
        piece = cut(samples, rate, heard["start_s"], heard["end_s"])
        ends = [hz[np.argmax(power)] for hz, power in (spectrum(p, rate) for p in np.array_split(piece, 5)[::4])]
        rises.append(ends)
    rises = np.array(rises)
    check("right whale upcalls rise within 50 to 220 Hz", np.all(rises[:, 1] - rises[:, 0] > 30) and rises.min() > 50
          and rises.max() < 220, "%d calls: %.0f Hz, later %.0f Hz on average" % (len(rises), *rises.mean(axis=0)))
    for voice, rate, low, high, longest in (("humpback song", 16000, 52, 3877, 8), ("delphinid whistle", 96000, 2000, 24000, 2)):
        samples, calls = render(voice, rate, 60)
        peaks, lengths = [], [c["end_s"] - c["start_s"] for c in calls]
        for call in calls:
            hz, power = spectrum(cut(samples, rate, call["heard"][0]["start_s"], call["heard"][0]["end_s"]), rate)
            peaks.append(hz[np.argmax(power)])
        check("%s lies in its published band" % voice, min(peaks) > low and max(peaks) < high and min(lengths) > 0.1
              and max(lengths) < longest, "%d calls: peak %.0f to %.0f Hz, %.2f to %.2f s" % (
                  len(peaks), min(peaks), max(peaks), min(lengths), max(lengths)))


for test in (porpoise, delphinid, sperm, tones):
    test()
print("1..%d" % count)
sys.exit(1 if failed else 0)
