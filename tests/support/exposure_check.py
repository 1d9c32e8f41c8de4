#!/usr/bin/python3
"""Checks lib/level's weighting and exposure by numpy and scipy: exposure_check.py WHAT PREFIX (files PREFIXinput and
PREFIXoutput of float64, written by tests/reference/exposure.c)."""
import sys
import numpy
from scipy import integrate, optimize

what, prefix = sys.argv[1], sys.argv[2]
BANDS = 1000 * 10 ** (numpy.arange(-20, 27) / 10)
SPEED, REFERENCE = 1.5, 750.0


def w_db(f, a, b, f1, f2, c):
    """NMFS 2018, equation 1; Southall et al. 2019, equation 2."""
    f = numpy.asarray(f, float)
    return c + 10 * numpy.log10((f / f1) ** (2 * a) / ((1 + (f / f1) ** 2) ** a * (1 + (f / f2) ** 2) ** b))


def across_db(f, *parameters):
    """Mean of 10^(W/10) over the decidecade, by scipy's adaptive quadrature."""
    low, high = f * 10 ** -0.05, f * 10 ** 0.05
    scale = w_db(f, *parameters)
    mean = integrate.quad(lambda x: 10 ** ((w_db(x, *parameters) - scale) / 10), low, high)[0] / (high - low)
    return scale + 10 * numpy.log10(mean)


def weighting():
    rows = numpy.fromfile(prefix + "output").reshape(-1, 5 + 200 + 2 * len(BANDS))
    f = 10 * 16000 ** (numpy.arange(200) / 199)
    at, centre, across = 0, 0, 0
    for row in rows:
        parameters = row[:5]
        at = max(at, abs(row[5:205] - w_db(f, *parameters)).max())
        centre = max(centre, abs(row[205:252] - w_db(BANDS, *parameters)).max())
        across = max(across, max(abs(row[252 + i] - across_db(BANDS[i], *parameters)) for i in range(len(BANDS))))
    print("# figure weighting of %d groups: within %.1e dB of numpy's at 200 frequencies, %.1e at centres, %.1e across bands" %
          (len(rows), at, centre, across))
    return len(rows) == 21 and max(at, centre) < 1e-9 and across < 1e-4


def loss_db(f, start, end):
    return 14 * numpy.log10(end / start) + 2e-5 * (f / 1000) ** 1.5 * (end - start)


def level(sounds, factor, start, speed):
    """Each impulse by itself at the place where the receiver is then."""
    time, heard, sel, bands = sounds
    place = start + speed * (time - time[0])
    moved = bands * 10 ** (-loss_db(BANDS[None, :bands.shape[1]], heard[:, None], place[:, None]) / 10)
    if factor is None:
        return 10 * numpy.log10((10 ** (sel / 10) * moved.sum(axis=1) / bands.sum(axis=1)).sum())
    return 10 * numpy.log10((moved * factor).sum())


def fleeing():
    raw = numpy.fromfile(prefix + "input").reshape(6000, -1)
    sounds = raw[:, 0], raw[:, 1], raw[:, 2], 10 ** (raw[:, 3:] / 10)
    rows = numpy.fromfile(prefix + "output").reshape(5, -1)
    starts = [50, 200, 750, 3000, 9000, 40000]
    received, stays, flees, far, far_flees = 0, 0, 0, 0, 0
    for row in rows:
        factor = None
        if row[0]:
            factor = 10 ** (numpy.array([across_db(f, *row[1:6]) for f in BANDS[:raw.shape[1] - 3]]) / 10)
        heard = 10 ** (sounds[2] / 10) if factor is None else (sounds[3] * factor).sum(axis=1)
        received = max(received, abs(10 * numpy.log10(heard.sum()) - row[7]))
        for k, start in enumerate(starts):
            stays = max(stays, abs(level(sounds, factor, start, 0) - row[8 + 2 * k]))
            flees = max(flees, abs(level(sounds, factor, start, SPEED) - row[9 + 2 * k]))
        for speed, got in ((0, row[-2]), (SPEED, row[-1])):
            want = optimize.brentq(lambda r: level(sounds, factor, r, speed) - row[6], 1, 1e6, rtol=1e-7) \
                if level(sounds, factor, 1, speed) > row[6] else 0
            error = abs(got / want - 1) if want else abs(got)
            if speed:
                far_flees = max(far_flees, error)
            else:
                far = max(far, error)
            print("# speed %.1f m/s: criterion %.0f dB at %.1f m, scipy %.1f m" % (speed, row[6], got, want))
    print("# figure 6000 impulses: received within %.1e dB, a receiver that stays %.1e dB, one that flees %.4f dB" %
          (received, stays, flees))
    print("# figure distances: staying within %.1e, fleeing within %.1e of scipy's" % (far, far_flees))
    return received < 0.001 and stays < 0.001 and flees < 0.02 and far < 1e-4 and far_flees < 2e-3 and integral()


def integral():
    """The sum over impulses is itself the integral of a steady source, for a steady rate (trapezoidal sense)."""
    time = numpy.arange(6000) * 2.0
    bands = numpy.ones((6000, 1))
    sounds = time, numpy.full(6000, REFERENCE), numpy.full(6000, 170.0), bands
    total = level(sounds, None, 200.0, SPEED)
    f = BANDS[0]
    area = integrate.quad(lambda t: 10 ** (17 - loss_db(f, REFERENCE, 200 + SPEED * t) / 10), -1, 11999, limit=200)[0] / 2
    return abs(total - 10 * numpy.log10(area)) < 0.01


good = {"weighting": weighting, "fleeing": fleeing}[what]()
sys.exit(0 if good else 1)
