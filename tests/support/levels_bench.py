#!/usr/bin/python3
"""levels_bench.py SAMPLES RATE_HZ OUR_SECONDS: the same decidecades by scipy, and the rest of the bench's JSON line."""
import os
import sys
import time

os.environ["OMP_NUM_THREADS"] = os.environ["OPENBLAS_NUM_THREADS"] = "1"
import numpy  # noqa: E402
import scipy.signal  # noqa: E402

samples = numpy.fromfile(sys.argv[1], numpy.float32).astype(float)
rate, ours = float(sys.argv[2]), float(sys.argv[3])
n, bank = -20, []
while 1000 * 10 ** (n / 10 + 0.05) < 0.94 * rate / 2:  # the bands that IEC 61260-1 base ten gives below 0.94 of Nyquist
    edges = [1000 * 10 ** (n / 10 - 0.05), 1000 * 10 ** (n / 10 + 0.05)]
    bank.append(scipy.signal.butter(3, edges, "bandpass", fs=rate, output="sos"))
    n += 1
start = time.process_time()
whole = int(len(samples) // rate)
for sos in bank:
    filtered = scipy.signal.sosfilt(sos, samples)
    10 * numpy.log10(numpy.mean(filtered[:int(whole * rate)].reshape(whole, int(rate)) ** 2, axis=1))
spent = time.process_time() - start
seconds = len(samples) / rate
print('"scipy_bands_ms_per_channel_second": %.1f, "scipy_over_ours": %.1f}' % (spent / seconds * 1e3, spent / ours))
