/* Traces a path back and measures it; see tones_trace.h. */
#include "call/tones_field.h"
#include <math.h>
#include <stddef.h>

#define START_SHARE 0.03 /* of a path's mean power: 15 dB */
#define FLAT_SHARE 0.05  /* of its frequency, or FLAT_BINS: what is flat within FLAT_S */
#define FLAT_BINS 3
#define FLAT_S 5.0
#define SWEPT_BINS 2.0    /* from end to end: means of several cells, which noise moves less */
#define SETTLED_BINS 1.0  /* by which what has settled still drifts: a steady sweep goes on */
#define MOST_JUMP 4       /* bins that one jump counts: a whistle's few steps are no hopping */
#define MOST_WEIGHT 100.0 /* of one frame: 20 dB */
#define NOISE_RATIO 3.0   /* power over background that noise alone has in 1 cell of 20 */
#define FLANK 2           /* bins beside a tone's that hold its power (Hann) */
#define OPEN_CELLS 48     /* of a path that is open, and looked at again and again, tell its mean power */

static const float *row_of(const float *history, const struct tracer *tracer, uint64_t frame)
{
    return history + (size_t)tracer_row(tracer, frame) * tracer->stride;
}

/* Frequency of the peak near bin k: parabola through the logarithms of three cells (Smith and Serra 1987). */
static double refine_hz(const struct tracer *tracer, const float *power, uint32_t k)
{
    double shift = 0;
    for (uint32_t i = 0; i < FLANK; i++) {
        if (k > 0 && power[k - 1] > power[k])
            k--;
        else if (k + 1 < tracer->n_bins && power[k + 1] > power[k])
            k++;
    }
    if (k > 0 && k + 1 < tracer->n_bins) {
        double a = log(power[k - 1] + 1e-30), b = log(power[k] + 1e-30), c = log(power[k + 1] + 1e-30);
        double bend = a - 2 * b + c;
        if (bend < 0)
            shift = fmin(fmax(0.5 * (a - c) / bend, -0.5), 0.5);
    }
    return (tracer->first_bin + k + shift) * tracer->bin_hz;
}

/* Whether the own source leaves the path's cell to be heard. */
static bool is_heard(const struct tracer *tracer, uint64_t last, uint32_t i)
{
    return row_of(tracer->history_snr, tracer, last - i)[tracer->trail[i]] > NOT_HEARD;
}

static void refine_trail(struct tracer *tracer, uint64_t last, uint32_t n)
{
    for (uint32_t i = 0; i < n; i++)
        tracer->trail_hz[i] =
            is_heard(tracer, last, i)
                ? refine_hz(tracer, row_of(tracer->history_power, tracer, last - i), tracer->trail[i])
                : (tracer->first_bin + tracer->trail[i]) * tracer->bin_hz;
}

/* Mean over the cells beside the tone's, on both sides where the band has them. */
static double mean_beside(const struct tracer *tracer, const float *cells, uint32_t k)
{
    double sum = 0;
    uint32_t n = 0;
    for (uint32_t d = FLANK + 1; d <= FLANK + 3; d++) {
        if (k >= d) {
            sum += fmax(0, cells[k - d]);
            n++;
        }
        if (k + d < tracer->n_bins) {
            sum += fmax(0, cells[k + d]);
            n++;
        }
    }
    return n ? sum / n : 0;
}

/* Power of the tone in a frame: its cells less the background. */
static double tone_power(const struct tracer *tracer, const float *power, const float *snr, uint32_t k)
{
    double sum = 0, noise = 0;
    for (uint32_t j = k > FLANK ? k - FLANK : 0; j <= k + FLANK && j < tracer->n_bins; j++) {
        sum += power[j];
        noise += snr[j] > 0 ? power[j] / snr[j] : 0;
    }
    const double rest = sum - noise;
    return rest > 0.1 * sum ? rest : 0.1 * sum;
}

/* Bins from the path's last rise back to its start, the last first; returns how many. */
static uint32_t follow_back(struct tracer *tracer, const struct path *path)
{
    uint32_t n = 0;
    int k = (int)path->best_bin;
    for (uint64_t frame = path->last_rise;; frame--) {
        tracer->trail[n++] = (uint32_t)k;
        int step = tracer->history_step[(size_t)tracer_row(tracer, frame) * tracer->stride + (uint32_t)k];
        if (step == STEP_START || frame == 0 ||
            n + tracer->gap + tracer->max_unheard + 2 >= tracer->n_history)
            return n;
        k -= step;
    }
}

static double cell_power(const struct tracer *tracer, uint64_t last, uint32_t i)
{
    return row_of(tracer->history_power, tracer, last - i)[tracer->trail[i]];
}

/* A path may come out of noise, and a loud call is felt in spectra that only touch its beginning: cells at
 * the start that are far below the path's mean, or below the next few, are dropped. */
static uint32_t trim_start(const struct tracer *tracer, uint64_t last, uint32_t n, uint32_t every)
{
    double mean = 0;
    for (uint32_t i = 0; i < n; i += every)
        mean += cell_power(tracer, last, i) / ((n + every - 1) / every);
    while (n > 4) {
        double next = fmax(cell_power(tracer, last, n - 2),
                           fmax(cell_power(tracer, last, n - 3), cell_power(tracer, last, n - 4)));
        double power = cell_power(tracer, last, n - 1);
        if (power >= TAIL_SHARE * next && power >= START_SHARE * mean)
            break;
        n--;
    }
    return n;
}

static void measure_cells(const struct tracer *tracer, uint64_t last, uint32_t n, struct contour *out)
{
    double snr = 0, contrast = 0, occupancy = 0, mean_square = 0;
    double st = 0, sl = 0, stt = 0, stl = 0;
    uint32_t n_heard = 0;
    for (uint32_t i = 0; i < n; i++) {
        if (!is_heard(tracer, last, i))
            continue;
        n_heard++;
        const float *power = row_of(tracer->history_power, tracer, last - i);
        const float *ratio = row_of(tracer->history_snr, tracer, last - i);
        uint32_t k = tracer->trail[i];
        double t = -(double)i / tracer->frame_rate, level_db = 10 * log10(power[k] + 1e-30);
        snr += ratio[k];
        contrast += log((ratio[k] + 1e-30) / (mean_beside(tracer, ratio, k) + 1e-30));
        occupancy += tracer->occupancy[k];
        mean_square += tone_power(tracer, power, ratio, k);
        st += t;
        sl += level_db;
        stt += t * t;
        stl += t * level_db;
    }
    double spread = n_heard * stt - st * st;
    out->snr = n_heard > 0 ? snr / n_heard : 0;
    out->contrast = n_heard > 0 ? exp(contrast / n_heard) : 0;
    out->occupancy = n_heard > 0 ? occupancy / n_heard : 0;
    out->mean_square = n_heard > 0 ? mean_square / n_heard : 0;
    out->fall_db_s = spread > 0 ? -(n_heard * stl - st * sl) / spread : 0;
}

/* How far the course is from a straight line, and how it jumps. Each frame weighs as much as its cell stands
 * out, for the variance of a frequency goes as its reciprocal: ends that lie in noise say little. */
static void measure_smoothness(const struct tracer *tracer, uint64_t last, uint32_t n, struct contour *out)
{
    double sw = 0, sx = 0, sy = 0, sxx = 0, sxy = 0, syy = 0, jumps = 0, before[2] = {0, 0};
    for (uint32_t i = 0; i < n; i++) {
        const double hz = tracer->trail_hz[i];
        const float *ratio = row_of(tracer->history_snr, tracer, last - i);
        double w = fmin(fmax(ratio[tracer->trail[i]] - NOISE_RATIO, 1e-3), MOST_WEIGHT), second;
        double x = i - (n - 1) / 2.0, y = hz - tracer->first_bin * tracer->bin_hz;
        sw += w;
        sx += w * x;
        sy += w * y;
        sxx += w * x * x;
        sxy += w * x * y;
        syy += w * y * y;
        second = hz - 2 * before[0] + before[1];
        jumps += i >= 2 ? fmin(fabs(second), MOST_JUMP * tracer->bin_hz) : 0;
        before[1] = before[0];
        before[0] = hz;
    }
    double spread = sxx - sx * sx / sw, slope = spread > 0 ? (sxy - sx * sy / sw) / spread : 0;
    out->bend_hz = sw > 0 ? sqrt(fmax(0, syy - sy * sy / sw - slope * slope * spread) / sw) : 0;
    out->jump_hz = n > 2 ? jumps / (n - 2) : 0;
}

static void measure_shape(const struct tracer *tracer, uint32_t n, struct contour *out)
{
    double low = INFINITY, high = 0, ends[2] = {0, 0};
    uint32_t share = n / 8 + 1;
    for (uint32_t i = 0; i < n; i++) {
        const double hz = tracer->trail_hz[i];
        low = fmin(low, hz);
        high = fmax(high, hz);
        ends[0] += i >= n - share ? hz / share : 0;
        ends[1] += i < share ? hz / share : 0;
    }
    for (uint32_t p = 0; p < TRACE_POINTS; p++) {
        uint32_t i = n - 1 - p * (n - 1) / (TRACE_POINTS - 1);
        out->hz[p] = (float)tracer->trail_hz[i];
    }
    out->low_hz = low;
    out->high_hz = high;
    out->sweep_hz = ends[1] - ends[0];
}

/* What tells whether an open path goes on with a sound: where it runs and how strong it is. */
static void measure_course(const struct tracer *tracer, uint64_t last, uint32_t n, struct contour *out)
{
    const uint32_t every = 1 + n / OPEN_CELLS;
    double power = 0;
    for (uint32_t i = 0; i < n; i += every)
        power += tone_power(tracer, row_of(tracer->history_power, tracer, last - i),
                            row_of(tracer->history_snr, tracer, last - i), tracer->trail[i]);
    out->mean_square = power / ((n + every - 1) / every);
    out->low_hz = INFINITY;
    for (uint32_t p = 0; p < TRACE_POINTS; p++) {
        uint32_t i = n - 1 - p * (n - 1) / (TRACE_POINTS - 1);
        out->hz[p] = (float)((tracer->first_bin + tracer->trail[i]) * tracer->bin_hz);
        out->low_hz = fmin(out->low_hz, out->hz[p]);
        out->high_hz = fmax(out->high_hz, out->hz[p]);
    }
}

/* Power of the cell in which the path ended, over the frames since then, as a share of that along it. */
static double measure_remains(const struct tracer *tracer, uint64_t last, uint32_t n)
{
    double along = 0, after = 0;
    for (uint32_t i = 0; i < n; i++)
        along += cell_power(tracer, last, i) / n;
    uint32_t n_after = 0;
    for (uint64_t frame = last + 1; frame <= tracer->newest; frame++)
        if (row_of(tracer->history_snr, tracer, frame)[tracer->trail[0]] > NOT_HEARD) {
            after += (double)row_of(tracer->history_power, tracer, frame)[tracer->trail[0]];
            n_after++;
        }
    return along > 0 && n_after > 0 ? after / n_after / along : 0;
}

/* How far what is flat may go: so many bins, or its share of the highest frequency. */
static double flat_hz(const struct contour *contour, double bins, double high_hz)
{
    return fmax(bins * contour->bin_hz, high_hz * fmin(FLAT_SHARE, FLAT_SHARE * FLAT_S / contour->seconds));
}

bool contour_is_flat(const struct contour *contour)
{
    const double high = contour->high_hz, extent = high - contour->low_hz;
    return extent <= flat_hz(contour, FLAT_BINS, high) ||
           (fabs(contour->sweep_hz) <= flat_hz(contour, SWEPT_BINS, high) &&
            contour->bend_hz <= 2 * contour->bin_hz);
}

bool contour_settles(const struct contour *contour)
{
    double low = INFINITY, high = 0;
    for (uint32_t i = TRACE_POINTS / 2; i < TRACE_POINTS; i++) {
        low = fmin(low, contour->hz[i]);
        high = fmax(high, contour->hz[i]);
    }
    const double drift = fabs((double)contour->hz[TRACE_POINTS - 1] - (double)contour->hz[TRACE_POINTS / 2]);
    return high - low <= flat_hz(contour, FLAT_BINS, high) && drift <= flat_hz(contour, SETTLED_BINS, high);
}

void contour_trace(struct tracer *tracer, const struct path *path, bool whole, struct contour *out)
{
    uint64_t last = path->last_rise;
    uint32_t n = follow_back(tracer, path);
    n = trim_start(tracer, last, n, whole ? 1 : 1 + n / OPEN_CELLS);
    *out = (struct contour){.n_cells = n, .score = path->best, .bin_hz = tracer->bin_hz};
    out->start_frame = tracer->centre[tracer_row(tracer, last - (n - 1))] - tracer->hop / 2;
    out->end_frame = tracer->centre[tracer_row(tracer, last)] + tracer->hop / 2;
    out->seconds = (out->end_frame - out->start_frame) / tracer->setup.rate_hz;
    if (whole) {
        out->remains = measure_remains(tracer, last, n);
        out->sideband_hz = tracer->setup.tells_sidebands ? contour_sideband_hz(tracer, last, n) : 0;
        refine_trail(tracer, last, n);
        measure_cells(tracer, last, n, out);
        measure_shape(tracer, n, out);
        measure_smoothness(tracer, last, n, out);
    } else
        measure_course(tracer, last, n, out);
}
