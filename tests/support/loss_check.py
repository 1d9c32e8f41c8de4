#!/usr/bin/python3
"""Checks propagation loss by scipy: loss_check.py FILE, one case a line (tests/reference/loss.c).

range    the isopleth by scipy.optimize.brentq; Weston's energy flux by integrating over grazing angles
fit      N by scipy.stats.theilslopes: another robust estimator, so equal within its own error
welch    the 90 % interval of a difference of means by scipy.stats.t
student  scipy.stats.t.ppf"""
import sys
import numpy
from scipy import integrate, optimize, stats


def loss_db(law, n, transition, damping, depth, critical, eta, absorption, r):
    if law == 0:
        spreading = n * numpy.log10(r)
    elif law == 1:
        spreading = 20 * numpy.log10(r) if r < transition else 20 * numpy.log10(transition) + 10 * numpy.log10(r / transition)
    elif law == 2:
        spreading = 10 * numpy.log10(r) + damping * r
    else:
        width = min(critical, 8 * numpy.sqrt(depth / (eta * r)))  # beyond, the integrand is below 1e-27
        flux = 2 / (r * depth) * integrate.quad(lambda a: numpy.exp(-eta * r * a * a / depth), 0, width, epsabs=0)[0]
        spreading = min(-10 * numpy.log10(flux), 20 * numpy.log10(r))
    return spreading + absorption * r


worst = {"range": 0.0, "fit": 0.0, "welch": 0.0, "student": 0.0}
count = dict.fromkeys(worst, 0)
error_ours, error_theirs = [], []
for line in open(sys.argv[1]):
    kind, *fields = line.split()
    x = [float(f) for f in fields]
    if kind == "range":
        law, (level, at, threshold, got) = int(x[0]), x[8:]
        level_at = lambda lg_r: level - loss_db(law, *x[1:8], 10 ** lg_r) + loss_db(law, *x[1:8], at) - threshold
        wanted = 10 ** optimize.brentq(level_at, -5, 7.3, xtol=1e-13)
        error = abs(got / wanted - 1)
    elif kind == "fit":
        r, level = numpy.array(x[:-3:2]), numpy.array(x[1:-3:2])
        n, scatter, truth = x[-3:]
        slope = stats.theilslopes(level, numpy.log10(r))
        error_ours.append(n - truth)
        error_theirs.append(-slope[0] - truth)
        error = abs(n + slope[0]) / ((slope[3] - slope[2]) / 2)  # in half widths of its own 95 % interval
    elif kind == "welch":
        n_off = int(x[0])
        off, on = numpy.array(x[1:1 + n_off]), numpy.array(x[1 + n_off:-2])
        a, b = off.var(ddof=1) / len(off), on.var(ddof=1) / len(on)
        dof = (a + b) ** 2 / (a * a / (len(off) - 1) + b * b / (len(on) - 1))
        half = stats.t.ppf(0.95, dof) * numpy.sqrt(a + b)
        difference = off.mean() - on.mean()
        error = max(abs(x[-2] - difference + half), abs(x[-1] - difference - half))
    else:
        wanted = stats.t.ppf(x[0], x[1])
        error = abs(x[2] - wanted) / max(1, abs(wanted))
    worst[kind] = max(worst[kind], error)
    count[kind] += 1

rms = [float(numpy.sqrt(numpy.mean(numpy.square(e)))) for e in (error_ours, error_theirs)]
print("# figure isopleths of four laws against brentq: %d, at most %.1e of the range apart" % (count["range"], worst["range"]))
print("# figure N against Theil and Sen: %d fits, error %.3f rms, theirs %.3f; at most %.2f of their 95 %% interval apart"
      % (count["fit"], *rms, worst["fit"]))
print("# figure Welch's interval: %.1e dB, Student's t: %.1e" % (worst["welch"], worst["student"]))
good = worst["range"] < 1e-4 and worst["fit"] < 1 and rms[0] < 1.1 * rms[1] and worst["welch"] < 1e-3 and \
    worst["student"] < 1e-6 and min(count.values()) > 0
sys.exit(0 if good else 1)
