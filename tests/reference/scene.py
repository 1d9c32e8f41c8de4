#!/usr/bin/python3
"""`hushwatch render` against scipy and formulas written out here: the spectrum of the noise, the delay between two
hydrophones by cross-correlation, the truth against the samples, and the tool's manners. Prints TAP."""
import json
import os
import subprocess
import sys
import tempfile

import numpy as np
from scipy import signal
from scipy.io import wavfile

TOOL = os.path.join(os.environ.get("HUSHWATCH_BUILD", "build"), "hushwatch")
SHORT = os.environ.get("HUSHWATCH_LENGTH") == "short"
folder = tempfile.TemporaryDirectory(prefix="hushwatch-scene-")
count, failed = 0, 0


def check(name, good, detail=""):
    global count, failed
    count += 1
    failed += not good
    if detail:
        print("# %s" % detail)
    print("%s %d - %s" % ("ok" if good else "not ok", count, name), flush=True)


def path(name):
    return os.path.join(folder.name, name)


def tool(*arguments):
    return subprocess.run([TOOL, "render", *arguments], capture_output=True, text=True)


def render(name, text):
    with open(path(name + ".cfg"), "w") as file:
        file.write(text)
    done = tool(path(name + ".cfg"), "--out", path(name + ".wav"), "--truth", path(name + ".json"))
    if done.returncode != 0:
        raise RuntimeError(done.stderr)
    rate, samples = wavfile.read(path(name + ".wav"))
    with open(path(name + ".json")) as file:
        truth = json.load(file)
    samples = np.atleast_2d(samples.astype(np.float64).T)
    for row, hydrophone in zip(samples, truth["hydrophones"]):
        row *= hydrophone["pascals_at_full_scale"]
    return rate, samples, truth


HYDROPHONE = "{ x_m = %s; y_m = %s; z_m = %s; sensitivity_db = -170.0; gain_db = 6.0; full_scale_v = 5.0; }"


def coates_db(hz, wind, shipping):
    """Coates (1990) as printed by Stojanovic (2007), with the renderer's stated first-order high-pass at 10 Hz."""
    f = hz / 1e3
    parts = [17 - 30 * np.log10(f), 40 + 20 * (shipping - 0.5) + 26 * np.log10(f) - 60 * np.log10(f + 0.03),
             50 + 7.5 * np.sqrt(wind) + 20 * np.log10(f) - 40 * np.log10(f + 0.4), -15 + 20 * np.log10(f)]
    total = sum(10 ** (p / 10) for p in parts)
    return 10 * np.log10(total * (hz / 10) ** 2 / (1 + (hz / 10) ** 2))


def noise():
    """Decidecade levels of noise against the integral of the curve. A level of bandwidth B over T scatters by 4.34 /
    sqrt(B T) dB (chi-square); within 4 of that and 0.15 dB for the window's width everywhere."""
    seconds = 12 if SHORT else 40
    for rate in (48000, 384000):
        seconds_here = seconds if rate < 100000 else seconds / 4
        _, samples, _ = render("noise%d" % rate, "seed = 12; duration_s = %.1f; rate_hz = %d.0;"
                               "sea = { wind_m_s = 7.0; shipping = 0.6; }; hydrophones = ( %s, %s );"
                               % (seconds_here, rate, HYDROPHONE % (0.0, 0.0, 10.0), HYDROPHONE % (0.0, 5.0, 10.0)))
        hz, density = signal.welch(samples, rate, "hann", nperseg=2 ** 15, axis=1)
        worst = 0
        for n in range(-13, 27):
            low, high = 1000 * 10 ** ((n - 0.5) / 10), 1000 * 10 ** ((n + 0.5) / 10)
            inside = (hz >= low) & (hz < high)
            if high > 0.47 * rate or inside.sum() < 4 or low < 3 * rate / 2 ** 15:
                continue
            want = 10 * np.log10(np.mean(10 ** (coates_db(hz[inside], 7, 0.6) / 10)))
            scatter = 4.34 / np.sqrt((high - low) * seconds_here)
            for row in density:
                got = 10 * np.log10(np.mean(row[inside]) / 1e-12)
                worst = max(worst, abs(got - want) / (0.15 + 4 * scatter))
        check("noise at %d Hz has the spectrum of Coates" % rate, worst < 1,
              "figure worst decidecade of 2 channels: %.2f of the tolerance" % worst)
        excess = np.mean(samples[0] ** 4) / np.mean(samples[0] ** 2) ** 2
        # Low frequencies carry the power: fewer independent values than samples.
        check("noise at %d Hz is Gaussian" % rate, abs(excess - 3) < 0.15, "figure kurtosis %.3f" % excess)
        coherence_hz, coherence = signal.coherence(samples[0], samples[1], rate, nperseg=4096)
        segments = 2 * seconds_here * rate / 4096 * 0.9
        check("noise at %d Hz is independent on two channels" % rate, np.mean(coherence) < 3 / segments,
              "figure mean coherence %.4f" % np.mean(coherence))


def delay():
    """A whistle and a blow at two hydrophones: the cross-correlation's peak, read between samples by sinc
    interpolation 8 times finer and a parabola, against the path difference over the speed of sound."""
    text = ("duration_s = 12.0; rate_hz = 96000.0; sea = { ambient = false; }; hydrophones = ( %s, %s );"
            "animals = ( { voice = \"right whale upcall\"; x_m = 220.0; y_m = 90.0; z_m = 8.0; start_s = 1.0;"
            "end_s = 2.0; }, { voice = \"delphinid whistle\"; x_m = -150.0; y_m = 310.0; z_m = 4.0; start_s = 5.0;"
            "end_s = 5.1; source_level_db = 160.0; } );"
            "hammers = ( { x_m = 0.0; y_m = 400.0; start_s = 9.0; steps = ( { duration_s = 0.5; blow_interval_s = 1.0;"
            "source_energy_level_db = 190.0; } ); } );"
            % (HYDROPHONE % (0.0, 0.0, 10.0), HYDROPHONE % (1.7, -0.35, 10.9)))
    rate, samples, truth = render("delay", text)
    places = [np.array([h["x_m"], h["y_m"], h["z_m"]]) for h in truth["hydrophones"]]
    worst = 0
    for entry in truth["calls"] + truth["blows"]:
        source = np.array([entry["x_m"], entry["y_m"], entry["z_m"]])
        want = (np.linalg.norm(source - places[1]) - np.linalg.norm(source - places[0])) / truth["sound_speed_m_s"]
        from_, to = int((entry["heard"][0]["start_s"] - 0.05) * rate), int((entry["heard"][0]["end_s"] + 0.05) * rate)
        a, b = (np.fft.rfft(s[from_:to], 2 * (to - from_)) for s in samples)
        fine = np.fft.irfft(b * np.conj(a), 8 * 2 * (to - from_))
        at = np.argmax(fine)
        before, here, after = fine[at - 1], fine[at], fine[(at + 1) % len(fine)]
        at = at - len(fine) if at > len(fine) // 2 else at
        at += (before - after) / (2 * (before - 2 * here + after))
        worst = max(worst, abs(at / 8 - want * rate))
    check("delays between hydrophones are exact to 1/40 of a sample", worst < 1 / 40 and len(truth["calls"]) == 2,
          "figure worst delay error %.4f samples" % worst)


def truth():
    """Exposure and peak of every call and blow, from the samples between the times that the truth states, by numpy;
    pulses where it says; and nothing outside."""
    text = ("seed = 8; duration_s = 40.0; rate_hz = 48000.0; sea = { ambient = false; surface_reflection = 0.5; };"
            "hydrophones = ( %s, %s ); animals = ("
            "{ voice = \"humpback song\"; x_m = 400.0; start_s = 1.0; end_s = 9.0; speed_m_s = 2.0; course_deg = 70.0; },"
            "{ voice = \"sperm whale clicks\"; x_m = 300.0; z_m = 200.0; start_s = 14.0; end_s = 15.0; pulses = 9; } );"
            "hammers = ( { x_m = -500.0; start_s = 27.0; steps = ( { duration_s = 11.0; blow_interval_s = 2.0;"
            "source_energy_level_db = 200.0; } ); } );"
            % (HYDROPHONE % (0.0, 0.0, 10.0), HYDROPHONE % (60.0, 20.0, 14.0)))
    rate, samples, truth_ = render("truth", text)
    entries = truth_["calls"] + truth_["blows"]
    voices = {c["voice"] for c in truth_["calls"]}
    check("the truth lists calls, blows and pulses", len(truth_["blows"]) == 6 and len(voices) == 2
          and [len(c["pulses_s"]) for c in truth_["calls"] if "pulses_s" in c] == [9])
    worst_sel, worst_peak, inside = 0, 0, np.zeros(samples.shape, bool)
    for entry in entries:
        for heard in entry["heard"]:
            row = heard["channel"] - 1
            from_, to = int(heard["start_s"] * rate), int(np.ceil(heard["end_s"] * rate)) + 1
            piece = samples[row, from_:to]
            inside[row, from_:to] = True
            sel = 10 * np.log10(np.sum(piece ** 2) / rate / 1e-12)
            peak = 20 * np.log10(np.max(np.abs(piece)) / 1e-6)
            worst_sel, worst_peak = max(worst_sel, abs(sel - heard["sel_db"])), max(worst_peak, abs(peak - heard["peak_db"]))
    check("the truth's levels are those of the samples", worst_sel < 0.01 and worst_peak < 0.01,
          "figure worst difference: SEL %.4f dB, peak %.4f dB" % (worst_sel, worst_peak))
    check("there is silence outside what the truth lists", np.all(samples[~inside] == 0) and np.any(samples[inside] != 0))
    train = [c for c in truth_["calls"] if "pulses_s" in c][0]
    place = np.array([train["x_m"], train["y_m"], train["z_m"]])
    hydrophone = truth_["hydrophones"][0]
    travel = np.linalg.norm(place - [hydrophone["x_m"], hydrophone["y_m"], hydrophone["z_m"]]) / truth_["sound_speed_m_s"]
    energy = signal.lfilter(np.ones(48) / 48, 1, samples[0] ** 2)
    good = True
    for pulse_s in train["pulses_s"]:
        before = int((pulse_s + travel - 0.004) * rate)
        at = int((pulse_s + travel) * rate)
        good = good and energy[before] < 1e-4 * np.max(energy[at:at + int(0.04 * rate)])
    check("pulses begin where the truth says", good)


def manners():
    cfg, wav, out = path("truth.cfg"), path("m.wav"), path("m.json")
    first = tool(cfg, "--out", wav, "--truth", out)
    check("it says where the output went", first.returncode == 0 and wav in first.stdout and out in first.stdout)
    with open(wav, "rb") as a, open(path("truth.wav"), "rb") as b:
        check("the same scene gives the same file", a.read() == b.read())
    again = tool(cfg, "--out", wav, "--truth", path("new.json"))
    check("it does not overwrite", again.returncode == 2 and "exists" in again.stderr and not os.path.exists(path("new.json")))
    again = tool(cfg, "--out", path("new.wav"), "--truth", out)
    check("nor the truth, and leaves nothing behind", again.returncode == 2 and not os.path.exists(path("new.wav")))
    check("wrong use", tool(cfg).returncode == 2 and tool("--nonsense").returncode == 2
          and tool(path("absent.cfg"), "--out", path("x.wav"), "--truth", path("x.json")).returncode == 2)
    check("a folder that is not there", tool(cfg, "--out", path("no/x.wav"), "--truth", path("x.json")).returncode == 3)
    help_ = tool("--help")
    check("help", help_.returncode == 0 and "--truth" in help_.stdout)
    with open(path("bad.cfg"), "w") as file:
        file.write("duration_s = 10.0;\nrate_hz = 48000.0;\nanimals = (\n{ voice = \"porpoise\"; },\n"
                   "{ voice = \"humpback song\"; speed_m = 2.0; start_s = -1.0; }\n);\nhydrophones = ( { x_m = 0.0; } );\n")
    bad = tool(path("bad.cfg"), "--out", path("x.wav"), "--truth", path("x.json"))
    lines = bad.stderr
    check("every wrong key is named with its line and what is allowed", bad.returncode == 2
          and "bad.cfg:4: animals[0].voice" in lines and "porpoise clicks" in lines
          and "bad.cfg:5: animals[1].speed_m:" in lines and "speed_m_s" in lines and "bad.cfg:5: animals[1].start_s" in lines
          and "sensitivity_db: is missing" in lines and not os.path.exists(path("x.wav")), lines.replace("\n", "\n# "))


for test in (noise, delay, truth, manners):
    test()
print("1..%d" % count)
sys.exit(1 if failed else 0)
