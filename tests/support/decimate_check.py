#!/usr/bin/python3
"""Checks a decimator by scipy.signal: decimate_check.py FACTOR RESPONSE INPUT OUTPUT (files of float32).

RESPONSE is the impulse response that the program measured through the decimator; freqz gives its pass band and stop
bands, lfilter followed by taking every FACTOR-th sample gives the output that the program must have for INPUT."""
import sys
import numpy
from scipy import signal

factor = int(sys.argv[1])
response, samples, output = (numpy.fromfile(name, numpy.float32).astype(float) for name in sys.argv[2:5])
frequency, gain = signal.freqz(response, worN=1 << 17, fs=factor)  # the output rate is 1
gain_db = 20 * numpy.log10(abs(gain) + 1e-12)
flat_db = abs(gain_db[frequency <= 0.4]).max()
alias = (frequency > 0.5) & (abs(frequency - numpy.round(frequency)) <= 0.4)
alias_db = gain_db[alias].max() if alias.any() else -240
wanted = signal.lfilter(response, 1, samples)[::factor]
error = abs(wanted - output).max() / samples.std() if len(wanted) == len(output) else 1
print("# figure decimate by %d: flat within %.4f dB, aliases %.1f dB (freqz), output within %.1e of lfilter's"
      % (factor, flat_db, alias_db, error))
sys.exit(0 if flat_db <= 0.05 and alias_db <= -80 and error < 2e-6 else 1)
