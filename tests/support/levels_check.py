#!/usr/bin/python3
"""Checks lib/dsp and lib/level by numpy and scipy: levels_check.py WHAT NUMBER PREFIX (files PREFIXinput of float32,
PREFIXoutput of the program's results). Everything here is in double precision at the full rate: no decimation."""
import sys
import numpy
from scipy import signal, stats

what, number, prefix = sys.argv[1], float(sys.argv[2]), sys.argv[3]
x = numpy.fromfile(prefix + "input", numpy.float32).astype(float)


def db(power):
    return 10 * numpy.log10(power / 1e-12)


def spectrum():
    """numpy.fft.rfft with scipy's cosine window (which has its half step) and its square."""
    n = int(number)
    ours = numpy.fromfile(prefix + "output", numpy.float32).astype(float).reshape(3, -1)
    sine = signal.windows.cosine(n)
    worst = 0
    for row, window in zip(ours, (sine ** 2, sine, numpy.ones(n))):
        power = 2 * abs(numpy.fft.rfft(x * window)) ** 2 / (n * (window ** 2).sum())
        power[[0, -1]] /= 2
        worst = max(worst, abs(10 * numpy.log10(row / power))[power > 1e-9 * power.max()].max())
    print("# figure spectra: within %.5f dB of numpy's" % worst)
    return worst < 0.01


def filters():
    """scipy.signal.butter and sosfilt."""
    ours = numpy.fromfile(prefix + "output").reshape(3, -1)
    designs = [signal.butter(5, 3000, "low", fs=number, output="sos"),
               signal.butter(4, 20, "high", fs=number, output="sos"),
               signal.butter(3, [891.250938, 1122.018454], "band", fs=number, output="sos")]
    worst = max(abs(signal.sosfilt(sos, x) - row).max() / row.std() for sos, row in zip(designs, ours))
    print("# figure filters: within %.1e of scipy's output" % worst)
    return worst < 1e-6


def second_levels(n, frame_power, hop, low_bin, high_bin):
    """Mean of half-overlapped frames' band power a second, frames shared out by time; k * hop is a frame's centre."""
    rate, edges = int(number), numpy.arange(n)[:, None] * number
    centre = numpy.arange(len(frame_power)) * hop
    begin, end = numpy.maximum(centre - hop / 2, 0), centre + hop / 2
    share = numpy.clip(numpy.minimum(end, edges + rate) - numpy.maximum(begin, edges), 0, None)
    k = numpy.arange(frame_power.shape[1])
    weight = numpy.clip(numpy.minimum(k + 0.5, high_bin) - numpy.maximum(k - 0.5, low_bin), 0, 1)
    energy = (frame_power @ weight) * hop / (end - begin)
    return (share @ energy) / share.sum(axis=1)


def frames(n_fft):
    """Power of sine-windowed frames of the sound less the mean of its first 2,048 samples, which the meter takes off."""
    hop = n_fft // 2
    padded = numpy.concatenate([numpy.zeros(hop), x - x[:2048].mean()])
    count = len(padded) // hop - 1
    view = numpy.lib.stride_tricks.sliding_window_view(padded, n_fft)[::hop][:count]
    window = signal.windows.cosine(n_fft)
    power = 2 * abs(numpy.fft.rfft(view * window)) ** 2 / (n_fft * (window ** 2).sum())
    power[:, [0, -1]] /= 2
    return power, hop


def levels():
    """SPL and peak by numpy; bands by numpy's FFT of long frames at the full rate, and by scipy's Butterworth filters."""
    ours = numpy.fromfile(prefix + "output").reshape(8, -1)
    rate, n = int(number), 8
    seconds = x[:n * rate].reshape(n, rate)
    dc, peak_error, spl_error = seconds[0].mean(), 0, 0
    for k in range(n):
        if k:
            dc += (seconds[k].mean() - dc) / 8
        spl_error = max(spl_error, abs(ours[k, 0] - db(((seconds[k] - dc) ** 2).mean())))
        peak_error = max(peak_error, abs(ours[k, 1] - db(abs(seconds[k] - dc).max() ** 2)))
    print("# figure %d Hz: SPL within %.5f dB, peak within %.5f dB of numpy's" % (rate, spl_error, peak_error))
    # Frame lengths of lib/level/decidecades.c: 2,048 samples; 171 ms; filters up to 0.36 of 1.5 kHz.
    n_bands = int(numpy.sum(1000 * 10 ** ((numpy.arange(-20, 27) + 0.5) / 10) < 0.47 * rate))
    short, long_frame = frames(2048), frames(2048 * rate // 12000)
    # The filters run at 1.5 kHz: scipy's at that rate, on what scipy.signal.resample makes of the sound, is the same method.
    slow = signal.resample(x - x[:2048].mean(), len(x) * 1500 // rate)
    worst = {"filters": 0, "filters at their own rate": 0, "long frames": 0, "short frames": 0}
    for b in range(n_bands):
        low, high = 1000 * 10 ** ((b - 20.5) / 10), 1000 * 10 ** ((b - 19.5) / 10)
        if high <= 0.36 * 1500:
            kind, width = "filters", (high - low) / 1.0261721529770308
            top = width / 2 + numpy.sqrt(width ** 2 / 4 + low * high)
            sos = signal.butter(4, [top - width, top], "band", fs=rate, output="sos")
            filtered = signal.sosfilt(sos, x - x[:2048].mean())[:n * rate].reshape(n, rate)
            wanted = (filtered ** 2).mean(axis=1)
            sos = signal.butter(4, [top - width, top], "band", fs=1500, output="sos")
            own = (signal.sosfilt(sos, slow)[:n * 1500].reshape(n, 1500) ** 2).mean(axis=1)
            error = abs(ours[2:, 2 + b] - db(own[2:])).max()
            worst["filters at their own rate"] = max(worst["filters at their own rate"], error)
        else:
            kind = "short frames" if high - low >= 16 * rate / 2048 else "long frames"
            power, hop = short if kind == "short frames" else long_frame
            bin_hz = rate / 2 / hop
            wanted = second_levels(n, power, hop, low / bin_hz, high / bin_hz)
        error = abs(ours[1:, 2 + b] - db(wanted[1:])).max()
        worst[kind] = max(worst[kind], error)
    for kind in worst:
        print("# figure %d Hz: decidecades by %s within %.4f dB each second of scipy%s" %
              (rate, kind, worst[kind], "" if "own" in kind else " at the full rate"))
    other_method = worst.pop("filters")  # at the full rate the bilinear transform bends them less
    return spl_error < 1e-3 and peak_error < 1e-3 and 0 < other_method < 0.05 and max(worst.values()) < 0.01 and min(worst.values()) > 0


def impulse():
    """The formulas of ISO 18406 by numpy: cumulative energy less the background's, interpolated."""
    ours = numpy.fromfile(prefix + "output")
    p = x - 3
    running = numpy.concatenate([[0], numpy.cumsum(p ** 2 - 1)])
    total = running[-1]
    half = int(numpy.argmax(running >= 0.5 * total))
    i5 = int(numpy.flatnonzero(running[:half] < 0.05 * total)[-1])
    t5 = i5 + (0.05 * total - running[i5]) / (running[i5 + 1] - running[i5])
    i95 = half + int(numpy.argmax(running[half:] >= 0.95 * total)) - 1
    t95 = i95 + (0.95 * total - running[i95]) / (running[i95 + 1] - running[i95])
    t90 = (t95 - t5) / number
    wanted = [db(total / number), db(abs(p).max() ** 2), db((p.max() - p.min()) ** 2), db(0.9 * total / number / t90)]
    error = abs(ours[:4] - wanted).max()
    print("# figure impulse measures: within %.5f dB, T90 within %.2e s of numpy's" % (error, abs(ours[4] - t90)))
    # Effective duration from the fourth powers, a Gaussian background's share taken off; kurtosis by scipy.
    fourths = (p ** 4).sum() - 6 * total - 3 * len(p)
    effective = total ** 2 / fourths / number
    peak = int(p.argmax())
    start = int(numpy.flatnonzero(p[:peak] <= 0)[-1]) + 1
    end = peak + int(numpy.argmax(p[peak:] <= 0))
    positive = p[start:end].sum() / number
    shape = [abs(ours[6] / effective - 1), abs(ours[7] / stats.kurtosis(p, fisher=False) - 1), abs(ours[8] / positive - 1)]
    print("# figure effective duration, kurtosis, positive impulse: within %.1e, %.1e, %.1e of numpy's and scipy's" % tuple(shape))
    return error < 0.01 and abs(ours[4] - t90) < 1e-6 and abs(ours[5] - (t5 - 0.5)) < 0.1 and max(shape) < 1e-4


def running():
    """Exponential averages by scipy.signal.lfilter at every sample, kurtosis by scipy.stats, percentiles by numpy."""
    ours = numpy.fromfile(prefix + "output")
    rate, n = int(number), 10
    rows, seconds, y = ours[:50].reshape(n, 5), x.reshape(n, rate), numpy.zeros(2)
    dc, error = seconds[0].mean(), numpy.zeros(5)
    for k in range(n):
        if k:
            dc += (seconds[k].mean() - dc) / 8
        square = (seconds[k] - dc) ** 2
        wanted = [db(square.mean()), 0, 0, stats.kurtosis(seconds[k], fisher=False), db(square.sum() / rate)]
        for j, tau in enumerate((0.125, 1.0)):
            a = 1 - numpy.exp(-1 / (rate * tau))
            weighted, _ = signal.lfilter([a], [1, a - 1], square, zi=[(1 - a) * y[j]])
            y[j], wanted[1 + j] = weighted[-1], db(weighted.max())
        error = numpy.maximum(error, abs(rows[k] - wanted))
    error[3] = max(error[3], abs(ours[50] - stats.kurtosis(x, fisher=False)))
    spl = rows[:, 0]
    levels_error = max(abs(ours[51:54] - numpy.percentile(spl, [95, 50, 5])).max(),
                       abs(ours[54] - 10 * numpy.log10((10 ** (spl / 10)).mean())))
    print("# figure running levels: SPL within %.5f, fast %.4f, slow %.4f dB, kurtosis within %.1e, SEL %.5f dB, "
          "percentiles and energy mean within %.1e dB of numpy's and scipy's" % (*error, levels_error))
    return error[0] < 1e-3 and error[1] < 0.05 and error[2] < 0.01 and error[3] < 0.01 and error[4] < 1e-3 and \
        levels_error < 1e-9


def impulse_bands():
    """Energy spectral densities by numpy.fft.rfft of the window and of the quiet before it, scipy's Tukey taper."""
    ours, quiet, n = numpy.fromfile(prefix + "output"), 24576, 43200
    rate, size = int(number), 65536

    def energies(piece, padded):
        taper = int(0.016 * rate)
        window = numpy.ones(len(piece))
        ramp = 0.5 - 0.5 * numpy.cos(numpy.pi * (numpy.arange(taper) + 0.5) / taper)
        window[:taper], window[-taper:] = ramp, ramp[::-1]
        power = abs(numpy.fft.rfft((piece - 2) * window, padded)) ** 2 / padded
        power[1:-1] *= 2
        k, bin_hz, found = numpy.arange(len(power)), rate / padded, []
        for b in range(-20, 27):
            low, high = 1000 * 10 ** ((b - 0.5) / 10) / bin_hz, 1000 * 10 ** ((b + 0.5) / 10) / bin_hz
            found.append(power @ numpy.clip(numpy.minimum(k + 0.5, high) - numpy.maximum(k - 0.5, low), 0, 1))
        return numpy.array(found), (window ** 2).sum()

    background, background_weight = energies(x[:quiet], 32768)
    whole, weight = energies(x[quiet:quiet + n], size)
    background *= weight / background_weight
    stands_out = whole > 2 * background
    n_bands = int(numpy.sum(1000 * 10 ** ((numpy.arange(-20, 27) + 0.5) / 10) < 0.47 * rate))
    stands_out[n_bands:] = False
    error = abs(ours[stands_out] - db((whole - background)[stands_out] / rate)).max()
    print("# figure decidecade SEL of an impulse: %d bands stand out, within %.5f dB of numpy's" % (stands_out.sum(), error))
    return error < 0.01 and 5 < stands_out.sum() < n_bands and (numpy.isfinite(ours) == stands_out).all()


sys.exit(0 if {"spectrum": spectrum, "filter": filters, "levels": levels, "impulse": impulse, "running": running,
          "impulse_bands": impulse_bands}[what]() else 1)
