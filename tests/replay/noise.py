#!/usr/bin/python3
"""Noise alone through the whole chain: calls no more often than the catalogue states, no contact of grade act, contacts of
grade look no more often than once an hour.

White Gaussian noise, and noise that falls by 6 dB an octave from 100 Hz (as far from white as a sea is), 10 seeds of 10
minutes in all; a shorter set when HUSHWATCH_LENGTH is short. The limits are 99 % quantiles of the Poisson distribution
with the stated rates (scipy.stats.poisson)."""
import glob
import os
import re
import sys
import wave

import numpy
import scipy.signal
import scipy.stats

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from watch import LENGTH, ROOT, ask, check, derive_again, figure, finish, folder, scan, settings  # noqa: E402

MINUTES = {"short": 2, "check": 10, "long": 30}[LENGTH]
SEEDS = {"short": 2, "check": 10, "long": 40}[LENGTH]
LOOK_AN_HOUR = 1.0
NOTES = """notes = ( { at_s = 0.5; kind = "sign-on"; person = "A. Eyes"; watch = "visual"; },
  { at_s = 0.6; kind = "sign-on"; person = "B. Ears"; watch = "acoustic"; } );
"""


def write_noise(path, rate, seconds, seed, coloured):
    generator = numpy.random.default_rng(seed)
    filter_b, filter_a = scipy.signal.butter(1, 100, fs=rate)
    state = numpy.zeros(1)
    with wave.open(path, "wb") as out:
        out.setnchannels(1)
        out.setsampwidth(2)
        out.setframerate(rate)
        for _ in range(0, seconds, 10):
            samples = generator.normal(0, 1000, 10 * rate)
            if coloured:
                samples, state = scipy.signal.lfilter(filter_b, filter_a, samples, zi=state)
                samples = samples * numpy.sqrt(rate / 400) + generator.normal(0, 3, len(samples))
            out.writeframes(numpy.clip(samples, -32767, 32767).astype("<i2").tobytes())


def stated_rates():
    rates = {}
    for path in glob.glob(ROOT + "/config/calls/*.cfg"):
        with open(path) as file:
            text = file.read()
        name = re.search(r'^name\s*=\s*"([^"]+)"', text, re.M)
        if name:  # certainty.cfg holds no class
            rates[name.group(1)] = float(re.search(r"^false_per_hour\s*=\s*([0-9.eE+-]+)", text, re.M).group(1))
    return rates


def main(place):
    hours, calls, acts, looks = 0.0, {}, 0, 0
    config = settings(place + "/site.cfg", permit="tests/replay/recording-permit.cfg")
    with open(place + "/notes.cfg", "w") as file:
        file.write(NOTES)
    first_seed = 4100
    for i in range(SEEDS):
        rate = 96000 if i % 5 == 4 else 48000
        write_noise(place + "/noise.wav", rate, MINUTES * 60, first_seed + i, i % 2 == 1)
        ledger = place + "/noise%d.ledger" % i
        done = scan(config, ledger, "--notes", place + "/notes.cfg", place + "/noise.wav")
        if done.returncode != 0:
            check("the scan of seed %d" % (first_seed + i), False, done.stderr)
        hours += MINUTES / 60
        for name, n in ask(ledger, "SELECT class, count(*) FROM call GROUP BY class"):
            calls[name] = calls.get(name, 0) + n
        acts += len(ask(ledger, "SELECT DISTINCT contact FROM contact WHERE grade = 'act'"))
        looks += len(ask(ledger, "SELECT DISTINCT contact FROM contact WHERE grade = 'look'"))
        derive_again(place)
        os.remove(ledger)
    figure("noise, %.2f h, seeds %d to %d: calls %s, look %d, act %d" %
           (hours, first_seed, first_seed + SEEDS - 1, calls or "none", looks, acts))
    for name, rate in sorted(stated_rates().items()):
        limit = scipy.stats.poisson.ppf(0.99, rate * hours)
        check("%s: %d calls, at most %d by its %.3g an hour" % (name, calls.get(name, 0), limit, rate),
              calls.get(name, 0) <= limit)
    check("no contact of grade act", acts == 0, acts)
    check("contacts of grade look within once an hour", looks <= scipy.stats.poisson.ppf(0.99, LOOK_AN_HOUR * hours), looks)


with folder() as place_of_test:
    main(place_of_test)
finish()
