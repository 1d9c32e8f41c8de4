#!/usr/bin/python3
"""Every kind of sound of the simulator against published figures, measured with scipy on what `hushwatch render` writes: peak
frequency, band, length, intervals. Bounds are the published range, or the published figure within what the recipe varies it
by; where no source is named the figures are common practice, no source. Prints TAP and the speed of rendering."""
import glob
import json
import os
import re
import subprocess
import sys
import tempfile
import time

import numpy as np
from scipy import signal
from scipy.io import wavfile

TOOL = os.path.join(os.environ.get("HUSHWATCH_BUILD", "build"), "hushwatch")
folder = tempfile.TemporaryDirectory(prefix="hushwatch-kinds-")
count, failed = 0, 0
speeds = []


def check(name, good, detail):
    global count, failed
    count += 1
    failed += not good
    print("# figure %s: %s\n%s %d - %s" % (name, detail, "ok" if good else "not ok", count, name), flush=True)


HYDROPHONE = "{ x_m = %s; y_m = 0.0; z_m = 10.0; sensitivity_db = -240.0; gain_db = 0.0; full_scale_v = 100.0; }"


def render(rate, seconds, sources, hydrophones=1, sea="ambient = false;", tool=TOOL):
    """What hydrophones 10 m away hear (hardly any absorption), in pascals, and the truth."""
    name = os.path.join(folder.name, "scene%d" % len(speeds))
    with open(name + ".cfg", "w") as file:
        file.write("seed = 31; duration_s = %.1f; rate_hz = %d.0; sea = { %s }; hydrophones = ( %s ); %s" % (
            seconds, rate, sea, ", ".join(HYDROPHONE % float(i) for i in range(hydrophones)), sources))
    begin = time.monotonic()
    subprocess.run([tool, "render", name + ".cfg", "--out", name + ".wav", "--truth", name + ".json"], check=True,
                   capture_output=True)
    speeds.append((seconds * rate * hydrophones, time.monotonic() - begin))
    samples = np.atleast_2d(wavfile.read(name + ".wav")[1].astype(np.float64).T)
    with open(name + ".json") as file:
        truth = json.load(file)
    for row, hydrophone in zip(samples, truth["hydrophones"]):
        row *= hydrophone["pascals_at_full_scale"]
    os.remove(name + ".wav")
    return samples, truth


def spectrum(piece, rate):
    size = 1 << int(np.ceil(np.log2(max(256, 2 * len(piece)))))
    return np.fft.rfftfreq(size, 1 / rate), np.abs(np.fft.rfft(piece, size)) ** 2


def figures(piece, rate):
    """Of one sound or pulse: strongest frequency, -10 dB band (of the power smoothed over a fiftieth of the centroid), centroid,
    -10 dB length of the envelope, strongest frequency in the first and the last sixth of it."""
    hz, power = spectrum(piece, rate)
    centroid = np.sum(hz * power) / np.sum(power)
    width = max(1, int(0.02 * centroid / hz[1]))
    smooth = np.convolve(power, np.ones(width) / width, "same")
    inside = hz[smooth >= smooth.max() / 10]
    energy = np.abs(signal.hilbert(np.pad(piece, len(piece) // 4 + 8))) ** 2
    span = max(1, len(piece) // 400)
    energy = np.convolve(energy, np.ones(span) / span, "same")
    above = np.nonzero(energy >= energy.max() / 10)[0]
    sixth = max(8, (above[-1] - above[0]) // 6)
    padded = np.pad(piece, len(piece) // 4 + 8)
    ends = [h[np.argmax(p)] for h, p in (spectrum(padded[above[0]:above[0] + sixth], rate),
                                         spectrum(padded[above[-1] - sixth:above[-1]], rate))]
    return {"peak": hz[np.argmax(power)], "low": inside[0], "high": inside[-1], "band": inside[-1] - inside[0],
            "centroid": centroid, "length": (above[-1] - above[0] + 1) / rate, "first": ends[0], "last": ends[1]}


def measure(samples, rate, events, most=12, pulse_s=None):
    rows = []
    for event in events[:most]:
        heard = event["heard"][0]
        travel = heard["start_s"] - event["start_s"]
        times = event.get("pulses_s", [event["start_s"]])[:40]
        for start in times:
            end = start + pulse_s if pulse_s else heard["end_s"] - travel
            piece = samples[int((start + travel) * rate):int((end + travel) * rate) + 1]
            if np.any(piece):
                rows.append(figures(piece, rate))
    values = {key: np.array([row[key] for row in rows]) for key in rows[0]}
    gaps = [np.diff(e["pulses_s"]) for e in events if len(e.get("pulses_s", [])) > 1]
    if gaps:
        values["interval"] = np.concatenate(gaps)
        values["pulses"] = np.array([len(g) + 1 for g in gaps])
        values["begin"] = np.array([g[0] for g in gaps])
        values["end"] = np.array([g[-1] for g in gaps])
        values["train"] = np.array([g.sum() for g in gaps])
    if len(events) > 1:
        values["spacing"] = np.diff([e["start_s"] for e in events])
    return values


# name, rate, seconds, length of one pulse (None: the whole sound), settings, {figure: (least, most)}
ANIMALS = [
    # Villadsgaard et al. 2007 (J. Exp. Biol. 210, 56): the click; Verfuss et al. 2009: down to some 2 ms (from memory).
    ("porpoise buzz", 768000, 8, 3e-4, "", dict(peak=(127e3, 145e3), length=(44e-6, 113e-6), band=(14e3, 46e3), begin=(0.05, 0.07),
                                               end=(0.0015, 0.003))),
    # Wahlberg et al. 2011 (J. Exp. Biol. 214): centroids 33 to 109 kHz; Au 1993: 0.5 to 10 ms apart, 0.05 to 2 s (from memory).
    ("delphinid burst pulse", 500000, 8, 3e-4, "", dict(centroid=(33e3, 109e3), interval=(0.0005, 0.01), train=(0.05, 2))),
    # Frankel et al. 2014 (J. Acoust. Soc. Am. 135, 1624): 2 to 24 kHz, 0.1 to 2 s.
    ("varied delphinid whistle", 96000, 20, None, "", dict(peak=(2e3, 24e3), length=(0.1, 2))),
    # Rough-toothed dolphin: 1.2 to 9.7 kHz, 115 to 826 ms.
    ("stepped whistle", 48000, 20, None, "", dict(peak=(1150, 9750), length=(0.1, 0.83))),
    # Miller 2006, Wellard et al. 2015: 0.6 to 29 kHz, 0.06 to 18 s.
    ("killer whale whistle", 48000, 30, None, "", dict(peak=(600, 29e3), length=(0.06, 18))),
    # 1 to 20 kHz, 0.3 to 2 s (from memory).
    ("pilot whale whistle", 48000, 20, None, "", dict(peak=(1e3, 20e3), length=(0.2, 2))),
    # Sjare and Smith 1986: 0.25 to 1.95 s; means 2.0 to 5.9 kHz, so that a peak lies little outside.
    ("beluga whistle", 48000, 30, None, "", dict(peak=(1.7e3, 6.6e3), length=(0.2, 1.95))),
    # Miller 2006: 0.5 to 25 kHz, 0.5 to 1.5 s.
    ("killer whale call", 96000, 40, None, "", dict(peak=(500, 25e3), length=(0.25, 1.5))),
    # Jaquet et al. 2001 (J. Acoust. Soc. Am. 109, 2254): to 90.9 clicks a second; slower at the start; 10 to 15 kHz.
    ("sperm whale creak", 96000, 40, 0.003, "", dict(centroid=(10e3, 15e3), begin=(0.15, 0.25), end=(0.0105, 0.03))),
    # Below 4 to 8 kHz, ringing for tens of ms, 4 to 8 s apart.
    ("sperm whale slow clicks", 24000, 300, 0.05, "", dict(peak=(1e3, 8e3), high=(1e3, 8e3), length=(0.004, 0.05),
                                                          interval=(3.9, 8.1))),
    # Zimmer et al. 2005 (J. Acoust. Soc. Am. 117, 3919): 42 kHz, -10 dB band 22 kHz, some 200 us (both within 15 %); modal interval 0.40 to 0.43 s.
    ("beaked whale clicks", 288000, 14, 6e-4, "pulses = 25;", dict(centroid=(41e3, 43e3), band=(18.7e3, 25.3e3), length=(170e-6, 230e-6),
                                                                  interval=(0.35, 0.5))),
    # Johnson et al. 2006 (J. Exp. Biol. 209, 5038): -10 dB 26 to 51 kHz (25 kHz wide), 0.2 to 0.4 s; 270 us long.
    ("blainville clicks", 288000, 12, 6e-4, "pulses = 25;", dict(low=(25e3, 28e3), high=(48e3, 52e3), band=(22e3, 26e3), length=(180e-6, 270e-6),
                                                    interval=(0.199, 0.401))),
    # Parks et al. 2005: 20 Hz to 20 kHz, 10 to 200 ms, 1 to 100 s apart (from memory).
    ("right whale gunshot", 48000, 120, None, "", dict(peak=(20, 5e3), length=(0.001, 0.2), spacing=(1, 101))),
    # Watkins et al. 1987: 23 to 18 Hz in 1 s; Helble et al. 2020: intervals 12 and 20 s in turn (4 % scatter, 4 sd).
    ("fin whale song", 8000, 300, None, "", dict(peak=(17, 23), length=(0.4, 1), spacing=(10, 23.3))),
    # 75 to 40 Hz in 0.5 to 1 s (from memory; 5 % scatter).
    ("fin whale 40 Hz call", 8000, 120, None, "", dict(peak=(38, 80), first=(55, 85), last=(35, 55), length=(0.3, 1))),
    # 1.5 pulses a second near 90 Hz, 17 to 20 s.
    ("blue whale A call", 8000, 140, None, "", dict(peak=(85, 95), length=(16, 20))),
    # Berchok et al. 2004: 90 to 30 Hz in 1 to 4 s.
    ("blue whale D call", 8000, 120, None, "", dict(first=(45, 95), last=(30, 60), length=(0.7, 4))),
    # 25 to 28 Hz, then 18 to 19 Hz; each 60 to 65 s (from memory).
    ("blue whale Z call", 8000, 200, None, "", dict(peak=(25, 28), first=(25, 28), last=(18, 19.2), length=(15, 22), spacing=(60, 65))),
    # 82 to 34 Hz within 1.1 to 1.4 s; doublets 3 to 4 s apart.
    ("sei whale downsweep", 8000, 200, 1.4, "", dict(first=(48, 90), last=(33, 48), length=(0.5, 1.4), interval=(3, 4))),
    # Mellinger et al. 2000: 4.5 to 2.9 a second in 60.9 +- 5.8 s; 1.5 to 2.8 in 43.7 +- 6 s; 200 to 400 Hz, 40 to 60 ms.
    ("minke slow-down train", 8000, 200, 0.06, "", dict(peak=(200, 400), length=(0.015, 0.06), begin=(0.2, 0.245), end=(0.31, 0.38),
                                                      train=(49, 73))),
    ("minke speed-up train", 8000, 200, 0.06, "", dict(peak=(200, 400), length=(0.015, 0.06), begin=(0.6, 0.75), end=(0.32, 0.4),
                                                      train=(31, 62))),
    # Rankin and Barlow 2005: 1 to 2 kHz, 2.6 s (central; -10 dB of exp(-t / 1.4 s) after 1.6 s).
    ("minke boing", 8000, 140, None, "", dict(peak=(1000, 2000), low=(1000, 1400), high=(1300, 2000))),
    # Matthews et al. 2017: 40 to 500 Hz, main 60 to 100 Hz, 4.8 s.
    ("harbour seal roar", 16000, 120, None, "", dict(peak=(40, 500), length=(1, 4.8))),
    # 6 kHz to 0.1 kHz, 20 to 70 s.
    ("bearded seal trill", 18000, 260, None, "", dict(first=(2000, 6500), last=(100, 900), length=(18, 60))),
]
OTHERS = [
    # 2 to 10 kHz, 0.25 to 2 s, each 20 to 60 s; the ping's own band (the tail is 20 dB below).
    ("naval sonar", 24000, 100, None, "frequency_hz = 4000.0; sweep_hz = 800.0; length_s = 1.0; interval_s = 30.0;",
     dict(low=(3950, 4150), high=(4650, 4850), length=(0.95, 1.05), spacing=(29.999, 30.001))),
    ("hopping modem", 48000, 60, None, "", dict(low=(8.8e3, 9.6e3), high=(12.4e3, 13.3e3), length=(1.1, 1.25))),
    ("chirp modem", 48000, 60, None, "", dict(low=(7.8e3, 9e3), high=(13e3, 14.2e3), length=(1.4, 1.55))),
    # STANAG 4748: 9440 to 13600 Hz, both of them wake-up tones, whose chips of 6.25 ms reach 160 Hz to either side; 12 + 64 +
    # 176 chips = 1.575 s.
    ("janus modem", 48000, 30, None, "", dict(low=(9280, 9440), high=(13600, 13760), length=(1.57, 1.58))),
    ("beacon", 96000, 20, None, "", dict(peak=(26.9e3, 27.1e3), length=(0.009, 0.0101), spacing=(1.9999, 2.0001))),
    # Regulation (EC) 812/2004, Annex II (from memory).
    ("net pinger", 96000, 20, None, "", dict(peak=(9.99e3, 10.01e3), length=(0.295, 0.3), spacing=(3.9999, 4.0001))),
    ("sweeping net pinger", 384000, 30, None, "", dict(low=(20e3, 160e3), high=(20e3, 160e3), length=(0.15, 0.3), spacing=(4, 30))),
    # Mikkelsen et al. 2017: 12 to 15 kHz, 0.5 s; blocks at random.
    ("deterrent", 288000, 30, 0.5, "", dict(peak=(13.99e3, 14.01e3), length=(0.48, 0.5), interval=(0.6, 2))),
    ("charge", 48000, 200, None, "", dict(length=(0.0001, 0.12), spacing=(5, 1000))),
    # 11 to 21 pulses at 87 to 121 a second, 73 to 260 ms.
    ("fish grunts", 16000, 30, 0.02, "", dict(peak=(100, 1500), pulses=(11, 21), interval=(0.9 / 121, 1.1 / 87), train=(0.07, 0.26))),
    # 150 to 4800 Hz, 8.7 ms, each 1.5 to 1.9 s.
    ("fish knocks", 16000, 30, 0.0086, "", dict(low=(50, 4800), high=(150, 4800), interval=(0.008, 0.0095), spacing=(1.5, 1.9))),
    ("ice cracks", 16000, 60, None, "", dict(peak=(80, 5000), length=(0.0003, 0.1))),
    ("ice squeals", 8000, 120, None, "", dict(peak=(200, 2000), length=(0.15, 3))),
]


def given():
    for rows, list_name, key, events in ((ANIMALS, "animals", "voice", "calls"), (OTHERS, "emitters", "kind", "sounds")):
        for name, rate, seconds, pulse_s, more, bounds in rows:
            samples, truth = render(rate, seconds, '%s = ( { %s = "%s"; x_m = 10.0; z_m = 10.0; %s } );' % (
                list_name, key, name, more))
            whole = [e for e in truth[events] if e["heard"][0]["end_s"] < seconds]
            if not whole:
                check(name, False, "no sound ends within %d s" % seconds)
                continue
            values = measure(samples[0], rate, whole, pulse_s=pulse_s)
            outside = [k for k, (low, high) in bounds.items() if k not in values or values[k].min() < low or values[k].max() > high]
            check(name, not outside, "%d sounds; %s%s" % (len(whole), ", ".join(
                "%s %.4g to %.4g" % (k, values[k].min(), values[k].max()) for k in bounds if k in values),
                "; outside: %s" % ", ".join("%s %s" % (k, bounds[k]) for k in outside) if outside else ""))


def codas():
    """Codas against the annotated ones (Sharma et al. 2024): clicks 5 in 73 %, 4 in 9 %; percentiles 5, 50, 95 % of the length
    0.31, 0.85, 1.42 s and of the interval 0.046, 0.171, 0.441 s. Within 0.1 in share and a quarter in time: the recipe has nine
    types, the data more than twenty."""
    _, truth = render(44000, 400, 'animals = ( { voice = "sperm whale coda"; x_m = 10.0; members = 4; spread_m = 2.0; } );')
    trains = [np.array(c["pulses_s"]) for c in truth["calls"]]
    sizes, lengths = np.array([len(t) for t in trains]), np.array([t[-1] - t[0] for t in trains])
    gaps = np.concatenate([np.diff(t) for t in trains])
    five, four = np.mean(sizes == 5), np.mean(sizes == 4)
    got = np.concatenate([np.percentile(lengths, (5, 50, 95)), np.percentile(gaps, (5, 50, 95))])
    want = np.array([0.31, 0.85, 1.42, 0.046, 0.171, 0.441])
    check("sperm whale coda", abs(five - 0.73) < 0.1 and abs(four - 0.09) < 0.1 and np.all(np.abs(got / want - 1) < 0.25),
          "%d codas; 5 clicks %.2f, 4 clicks %.2f; percentiles %s" % (len(trains), five, four, np.round(got, 3)))


def lasting():
    """What lasts has no seams (the power of half seconds scatters as Gaussian noise of its band does), the level that it is
    given at the hydrophone, and its published form."""
    rate, seconds = 192000, 26
    samples, truth = render(rate, seconds, 'emitters = ( { kind = "ship cavitation"; x_m = 10.0; z_m = 10.0; shaft_hz = 2.0;'
                            ' blades = 4.0; } );')
    low, high = signal.butter(4, (2000, 20000), "bandpass", fs=rate, output="sos"), signal.butter(4, 100, fs=500, output="sos")
    envelope = signal.sosfilt(low, samples[0]) ** 2
    envelope = envelope[:len(envelope) // 384 * 384].reshape(-1, 384).mean(axis=1)[1000:-500]
    hz, comb = signal.welch(envelope, 500, nperseg=2000)
    inside = (hz > 1) & (hz < 20)
    shaft, blade = comb[np.argmin(abs(hz - 2))], comb[np.argmin(abs(hz - 8))]
    floor = np.median(comb[inside])
    hz2, density = signal.welch(samples[0], rate, nperseg=8192)
    level = [10 * np.log10(np.mean(density[(hz2 > f / 1.2) & (hz2 < f * 1.2)])) for f in (500, 1000, 2000, 4000, 8000, 16000)]
    slope = np.polyfit(range(6), level, 1)[0]
    check("ship cavitation", shaft > 4 * floor and blade > 20 * floor and abs(slope + 6) < 1,
          "shaft line %.0f, blade line %.0f over the median of the envelope's spectrum; %.1f dB an octave (Ross 1976: 6)" % (
              shaft / floor, blade / floor, slope))
    spl = truth["sounds"][0]["heard"][0]["spl_db"]
    # 6 s of noise of 80 Hz bandwidth and more, and its swells: 1 + depth2 / 2 each
    check("its level", abs(spl - (170 - 20 + 10 * np.log10((1 + 0.5 * 0.25) * (1 + 0.5 * 0.04)))) < 0.7, "%.2f dB" % spl)
    samples, truth = render(rate, 16, 'emitters = ( { kind = "rain"; }, { kind = "flow noise"; start_s = 20.0; } );', 2)
    halves = 10 * np.log10((samples[:, rate:15 * rate] ** 2).reshape(2, 28, -1).mean(axis=2) / 1e-12)
    coherence = np.mean(signal.coherence(samples[0], samples[1], rate, nperseg=2048)[1])
    hz, density = signal.welch(samples[0], rate, nperseg=4096)
    top = hz[np.argmax(density)]
    check("rain has its level, no seams, a hump at 13 to 25 kHz, and differs at each hydrophone", np.all(abs(halves - 108) < 0.3)
          and 12e3 < top < 25e3 and coherence < 0.01, "%.2f to %.2f dB in half seconds, strongest at %.1f kHz, coherence %.4f" % (
              halves.min(), halves.max(), top / 1e3, coherence))
    samples, _ = render(8000, 60, 'emitters = ( { kind = "flow noise"; } );', 2)
    hz, density = signal.welch(samples[0], 8000, nperseg=8192)
    level = [10 * np.log10(np.mean(density[(hz > f / 1.3) & (hz < f * 1.3)])) for f in (12, 24, 48, 96, 192)]
    slope = np.polyfit(range(5), level, 1)[0] / 3.01
    coherence = np.mean(signal.coherence(samples[0], samples[1], 8000, nperseg=4096)[1][2:150])  # where there is any: 4 to 300 Hz
    check("flow noise falls with the third to fifth power", -5 < slope < -3 and coherence < 0.03, "power %.2f, coherence %.3f" % (
        slope, coherence))
    for name, low_hz, high_hz, rate in (("thruster", 20, 2000, 48000), ("strum", 5, 50, 8000), ("fish hum", 98, 100, 8000)):
        samples, truth = render(rate, 30, 'emitters = ( { kind = "%s"; x_m = 10.0; z_m = 10.0; } );' % name)
        piece = samples[0][2 * rate:]
        hz, power = spectrum(piece, rate)
        rms = np.sqrt((piece[:len(piece) // rate * rate] ** 2).reshape(-1, rate).mean(axis=1))
        frames = [h[np.argmax(p)] for h, p in (spectrum(piece[k * rate:(k + 1) * rate], rate) for k in range(27))]
        peak = hz[np.argmax(power)]
        check(name, low_hz <= peak <= high_hz and rms.max() / rms.min() < 1.15, "strongest line %.2f Hz, %.2f to %.2f Hz from second"
              " to second; level %.2f dB steady within %.2f dB" % (peak, min(frames), max(frames), 20 * np.log10(rms.mean() / 1e-6),
                                                                  20 * np.log10(rms.max() / rms.min())))
    samples, _ = render(192000, 5, 'emitters = ( { kind = "mains pick-up"; }, { kind = "supply pick-up"; } );', 2)
    hz, power = spectrum(samples[0][192000:], 192000)
    line = hz[np.argmax(np.where(hz > 20e3, power, 0))]
    check("pick-up is the same on all channels at once", np.array_equal(samples[0], samples[1]) and abs(hz[np.argmax(power)] - 50) < 1
          and 64e3 < line < 66e3, "strongest %.1f Hz, and a line at %.2f kHz" % (hz[np.argmax(power)], line / 1e3))


def shots():
    """Landro et al. 2013: behind a shot, 7 to 14 ms after its peak, 10 to 20 kHz rise for 5 to 6 ms and drop, 6 to 7 ms in all,
    alike in energy from shot to shot and not in waveform; then reverberation, falling by 60 dB in the time asked for."""
    rate = 48000
    samples, _ = render(rate, 40, "airguns = ( { x_m = 100.0; shot_interval_s = 10.0; source_energy_level_db = 220.0; end_s = 35.0;"
                        " late_burst_energy_level_db = 180.0; reverberation_s = 4.0; } );")
    sos, bursts, energies = signal.butter(6, (10000, 20000), "bandpass", fs=rate, output="sos"), [], []
    lead, lengths = [], []
    for k in range(4):
        piece = samples[0][k * 10 * rate:(k * 10 + 1) * rate]
        peak = np.argmax(np.abs(piece))
        fast = signal.sosfiltfilt(sos, piece)[peak + int(0.003 * rate):peak + int(0.03 * rate)]
        energy = np.convolve(fast ** 2, np.ones(24) / 24, "same")
        above = np.nonzero(energy > 0.05 * energy.max())[0] / rate
        lead.append((np.argmax(energy) / rate + 0.003) * 1e3)
        lengths.append((above[-1] - above[0]) * 1e3)
        energies.append(10 * np.log10(np.sum(fast ** 2)))
        bursts.append(fast)
    alike = np.corrcoef(bursts)[np.triu_indices(4, 1)]
    check("the late burst of a shot", min(lead) > 7 and max(lead) < 15 and min(lengths) > 2.5 and max(lengths) < 8
          and max(energies) - min(energies) < 3 and np.abs(alike).max() < 0.7,
          "strongest %.1f to %.1f ms after the peak, %.1f to %.1f ms, energy alike within %.1f dB, waveforms' correlation at most"
          " %.2f" % (min(lead), max(lead), min(lengths), max(lengths), max(energies) - min(energies), np.abs(alike).max()))
    tail = np.concatenate([samples[0][k * 10 * rate + rate:k * 10 * rate + 3 * rate] for k in range(4)]).reshape(4, 20, -1) ** 2
    fall = np.polyfit(np.arange(20) * 0.1, 10 * np.log10(tail.mean(axis=(0, 2))), 1)[0]
    check("the reverberation of a shot", abs(fall + 15) < 1.5, "%.1f dB/s; 60 dB in 4 s asked for" % fall)


def ratios():
    """The truth's signal-to-noise ratios against ones measured here: noise alone, and the sound alone, from two scenes."""
    sea, rate, rows = "wind_m_s = 6.0; shipping = 0.4;", 48000, []
    noise, _ = render(rate, 20, "", 1, sea)
    for source, kind in (('{ voice = "tone"; frequency_hz = 3000.0; length_s = 2.0; source_level_db = 120.0; x_m = 200.0; }', "cell"),
                         ('{ voice = "fin whale pulse"; x_m = 500.0; source_level_db = 150.0; }', "band"),
                         ('{ voice = "sperm whale slow clicks"; x_m = 900.0; source_level_db = 170.0; }', "pulse")):
        seconds = 10 if kind != "pulse" else 200
        sound, _ = render(rate, seconds, "animals = ( %s );" % source)
        _, truth = render(rate, seconds, "animals = ( %s );" % source, 1, sea)
        call = truth["calls"][0]
        said, heard = call["heard"][0]["snr_db"], call["heard"][0]
        piece = sound[0][int(heard["start_s"] * rate):int(heard["end_s"] * rate)]
        if kind == "cell":
            n = int(call["cell_s"] * rate)
            cells = np.abs(np.array([np.fft.rfft(np.hanning(n) * noise[0][k * n // 2:k * n // 2 + n]) for k in range(300)])) ** 2
            at = int(round(3000 * n / rate))
            middle = len(piece) // 2
            tone = np.abs(np.fft.rfft(np.hanning(n) * piece[middle:middle + n])) ** 2
            got = 10 * np.log10(tone[at] / np.median(cells[:, at - 5:at + 6]))
        else:
            sos = signal.butter(4, (call["low_hz"], call["high_hz"]), "bandpass", fs=rate, output="sos")
            floor = np.mean(signal.sosfilt(sos, noise[0])[rate:] ** 2)
            if kind == "band":
                got = 10 * np.log10(np.sum(piece ** 2) / (len(piece) * floor))
            else:
                got = 10 * np.log10(np.max(piece ** 2) / floor)
        rows.append((kind, said, got))
    # A Tukey window's tone is 0.28 dB above its mean in the middle; 16 to 25 Hz for 19 s scatter by 0.33 dB; filters' skirts.
    check("signal-to-noise ratios of the truth", all(abs(a - b) < 1.2 for _, a, b in rows),
          "; ".join("%s: truth %.2f, measured %.2f dB" % row for row in rows))


def listed():
    """Every kind of the source stands in docs/scenes.md, and is measured here or (the first ten) in scene_calls.py."""
    kinds = [name for path in glob.glob("lib/scene/kind_*.c") for name in re.findall(r'\.name = "([^"]+)"', open(path).read())]
    with open("docs/scenes.md") as file:
        docs = file.read()
    tests = open("tests/reference/scene_kinds.py").read() + open("tests/reference/scene_calls.py").read()
    missing = [k for k in kinds if "| `%s` |" % k not in docs or '"%s"' % k not in tests]
    check("every kind is in the docs and measured", len(kinds) > 50 and not missing, "%d kinds; missing: %s" % (
        len(kinds), ", ".join(missing) or "none"))


for test in (listed, given, codas, lasting, shots, ratios):
    test()
print("# figure rendering: %.1f million samples a second, mean over %d scenes of a source each (with the truth)" % (
    sum(s for s, _ in speeds) / sum(t for _, t in speeds) / 1e6, len(speeds)))
print("1..%d" % count)
sys.exit(1 if failed else 0)
