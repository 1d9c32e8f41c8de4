#!/usr/bin/python3
"""Checks sound for people's ears by scipy: audible_check.py WHAT RATE CENTRE OUT_RATE INPUT OUTPUT (files of float32).

The same filters by scipy.signal.butter and sosfilt, the mixing by numpy, the limiter by scipy.ndimage's sliding minimum
and by means written out. Where a decimator stands between, only the spectrum can be compared (scipy.signal.welch)."""
import sys
import numpy
from scipy import ndimage, signal

what, rate, centre, out_rate = sys.argv[1], float(sys.argv[2]), float(sys.argv[3]), float(sys.argv[4])
samples, output = (numpy.fromfile(name, numpy.float32).astype(float) for name in sys.argv[5:7])


def limit(x, ceiling, reach):
    need = numpy.minimum(1, ceiling / numpy.maximum(abs(x), 1e-30))
    lowest = ndimage.minimum_filter1d(need, 2 * reach + 1, mode="constant", cval=1.0)
    mean = numpy.array([lowest[max(0, i - reach):i + reach + 1].mean() for i in range(len(x))])
    return x * mean


def high_pass(x):
    return signal.sosfilt(signal.butter(2, 10, "highpass", fs=rate, output="sos"), x)


def shift(x):
    t = (12345678901 + numpy.arange(len(x)))  # exact in double: the number of the first sample is a whole one
    turns = numpy.array([(int(k) * int(centre)) % int(rate) for k in t]) / rate
    up = numpy.array([(int(k) * 5300) % int(rate) for k in t]) / rate
    low = signal.sosfilt(signal.butter(8, 5000, fs=rate, output="sos"), x * numpy.exp(-2j * numpy.pi * turns))
    return 2 * numpy.real(low * numpy.exp(2j * numpy.pi * up))


if what == "limiter":
    wanted = limit(samples * 2, 0.25, int(rate))
elif what == "shifted":
    wanted = shift(high_pass(samples))
else:
    wanted = high_pass(samples)
if what == "slowed" and out_rate * 10 != rate:
    sys.exit("slowed to %g Hz" % out_rate)
if what == "shifted" and out_rate != rate:
    band = dict(nperseg=2048)
    f, made = signal.welch(output, fs=out_rate, **band)
    g, ideal = signal.welch(wanted, fs=rate, nperseg=int(2048 * rate / out_rate))
    inside, outside = (f > 500) & (f < 10000), f > 14000
    # A density: the decimator keeps it.
    error_db = abs(10 * numpy.log10(made[inside] / ideal[:len(f)][inside])).max()
    left_db = 10 * numpy.log10(made[outside].max() / made[inside].mean())
    print("# figure shifted from %.0f kHz: spectrum within %.3f dB of scipy's, %.0f dB left above 14 kHz" % (centre / 1e3, error_db, left_db))
    sys.exit(0 if error_db < 0.3 and left_db < -30 else 1)
error = abs(wanted - output).max() / abs(samples).max() if len(wanted) == len(output) else 1
print("# figure %s: within %.1e of scipy's" % (what, error))
sys.exit(0 if error < 1e-5 else 1)
