/* The tracer of one spectrum window: from samples to the cells of the recursion; see tones_trace.h. */
#include "call/tones_field.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define DESIGN_SNR 4.0F /* of a cell, for which the likelihood ratio is made: near the weakest of use */
#define MAX_GAIN 5.0F   /* of one cell: a single loud frame says little about a tone */
#define NEAR 3          /* bins over which a tone leaks (Hann) ... */
#define LEAK_SHARE 0.1F /* ... with at most this share of its power outside the two bins beside it */
#define OCCUPANCY_S 30
#define OCCUPANCY_SNR 4.0F
/* The sea as two laws: this share of the samples belongs to transients (snaps of 0.4 ms, 25 a second) whose
 * scale is so many times that of the rest (20 dB). Both are own choices. */
#define TRANSIENT_SHARE 0.01
#define TRANSIENT_SCALE 10.0
#define MOST_RISE_DB_S 0.5 /* of the background, by a call ... */
#define MOST_RISE_DB 3.0   /* ... and by the longest one in all */
#define MOST_UNHEARD_S 1.0 /* that a path waits for its call to come out from behind a blow */
#define EXP_POWER 8.0F     /* exp(u) is taken as (1 + u / 8)^8 */

/* The even number with no prime above 5 that is nearest to x. */
static uint32_t fast_length(double x)
{
    uint32_t best = 0;
    for (uint32_t n = 16; n <= 1u << 20 && (best == 0 || n < 2 * x); n += 2) {
        uint32_t rest = n;
        for (uint32_t prime = 2; prime <= 5; prime++)
            while (rest % prime == 0)
                rest /= prime;
        if (rest == 1 && (best == 0 || fabs(n - x) < fabs(best - x)))
            best = n;
    }
    return best;
}

static void choose_bins(struct tracer *tracer)
{
    const struct tracer_setup *setup = &tracer->setup;
    double rate = setup->rate_hz / setup->factor;
    tracer->n = fast_length(setup->window_s * rate);
    tracer->bin_hz = rate / tracer->n;
    tracer->hop = tracer->n / 2.0 * setup->factor;
    tracer->frame_rate = setup->rate_hz / tracer->hop;
    uint32_t last = (uint32_t)fmin(floor(setup->high_hz / tracer->bin_hz), tracer->n / 2 - 1);
    tracer->first_bin = (uint32_t)fmax(1, ceil(setup->low_hz / tracer->bin_hz));
    tracer->n_bins = last >= tracer->first_bin ? last - tracer->first_bin + 1 : 0;
    double step = ceil(setup->max_rate_hz_s / tracer->frame_rate / tracer->bin_hz);
    tracer->max_step = (uint32_t)fmin(fmax(step, 1), MAX_STEP);
    tracer->stride = (tracer->n_bins + WIDE_LANES - 1) / WIDE_LANES * WIDE_LANES;
    tracer->tail_fall = (float)pow(10, -TAIL_FALL_DB_S / 10 / tracer->frame_rate);
    tracer->max_unheard = (uint32_t)ceil(MOST_UNHEARD_S * tracer->frame_rate);
    tracer->n_history =
        (uint32_t)ceil((setup->max_s + setup->delay_s) * tracer->frame_rate) + tracer->max_unheard + 4;
}

double tracer_cells_per_s(const struct tracer_setup *setup)
{
    struct tracer tracer = {.setup = *setup};
    choose_bins(&tracer);
    return tracer.n_bins * tracer.frame_rate;
}

static bool make_cells(struct cells *cells, size_t n)
{
    cells->score = calloc(n, sizeof *cells->score);
    cells->slope = calloc(n, sizeof *cells->slope);
    cells->level = calloc(n, sizeof *cells->level);
    cells->peak = calloc(n, sizeof *cells->peak);
    cells->path = calloc(n, sizeof *cells->path);
    cells->first = calloc(n, sizeof *cells->first);
    return cells->score && cells->slope && cells->level && cells->peak && cells->path && cells->first;
}

static void free_cells(struct cells *cells)
{
    free(cells->score);
    free(cells->slope);
    free(cells->level);
    free(cells->peak);
    free(cells->path);
    free(cells->first);
}

static bool make_arrays(struct tracer *tracer)
{
    size_t k = tracer->stride, history = tracer->n_history;
    float **const of_bins[] = {&tracer->level,     &tracer->floor, &tracer->smooth, &tracer->smooth_snr,
                               &tracer->occupancy, &tracer->gain,  &tracer->tail,   &tracer->best};
    bool good = true;
    for (size_t i = 0; i < sizeof of_bins / sizeof of_bins[0]; i++)
        good = (*of_bins[i] = calloc(k, sizeof(float))) && good;
    good = make_cells(&tracer->now, k + 2 * MAX_STEP) && good;
    good = make_cells(&tracer->before, k + 2 * MAX_STEP) && good;
    good = (tracer->held = calloc(tracer->n, sizeof(float))) && good;
    good = (tracer->limited = calloc(tracer->n, sizeof(float))) && good;
    good = (tracer->power_store = calloc(tracer->n / 2 + 1 + TILE + 2 * WIDE_LANES, sizeof(float))) && good;
    tracer->power = tracer->power_store ? tracer->power_store + TILE : NULL;
    good = (tracer->excess_store = calloc(k + 2 * TILE, sizeof(float))) && good;
    tracer->excess = tracer->excess_store ? tracer->excess_store + TILE : NULL;
    good = (tracer->centre = calloc(history, sizeof *tracer->centre)) && good;
    good = (tracer->history_step = calloc(history * k, 1)) && good;
    good = (tracer->history_power = calloc(history * k, sizeof(float))) && good;
    good = (tracer->history_snr = calloc(history * k, sizeof(float))) && good;
    good = (tracer->trail_hz = calloc(history, sizeof *tracer->trail_hz)) && good;
    return (tracer->trail = calloc(history, sizeof *tracer->trail)) && good;
}

enum status tracer_create(const struct tracer_setup *setup, struct tracer **out)
{
    struct tracer *tracer = calloc(1, sizeof *tracer);
    if (!tracer)
        return STATUS_NO_MEMORY;
    tracer->setup = *setup;
    choose_bins(tracer);
    enum status status = tracer->n_bins >= 3 ? STATUS_OK : STATUS_BAD_ARGUMENT;
    if (status == STATUS_OK)
        status = spectrum_create(tracer->n, WINDOW_HANN, &tracer->spectrum);
    if (status == STATUS_OK)
        status = background_create(tracer->n_bins, tracer->frame_rate, &tracer->background);
    if (status == STATUS_OK)
        background_set_rise(tracer->background, fmin(MOST_RISE_DB_S, MOST_RISE_DB / setup->max_s));
    if (status == STATUS_OK && !make_arrays(tracer))
        status = STATUS_NO_MEMORY;
    /* A contour ends half a hop after its last frame's middle; that frame is complete half a window after its
     * middle and reaches the tracer by the decimator's delay later. */
    if (status == STATUS_OK) {
        double late = tracer->hop / 2 + setup->late_frames;
        double gap = floor((setup->delay_s * setup->rate_hz - late) / tracer->hop);
        tracer->gap = gap >= 1 ? (uint32_t)gap : 0;
        status = tracer->gap ? STATUS_OK : STATUS_BAD_ARGUMENT;
    }
    if (status != STATUS_OK) {
        tracer_destroy(tracer);
        return status;
    }
    *out = tracer;
    return STATUS_OK;
}

void tracer_destroy(struct tracer *tracer)
{
    if (!tracer)
        return;
    spectrum_destroy(tracer->spectrum);
    background_destroy(tracer->background);
    void *const arrays[] = {tracer->level,         tracer->floor,       tracer->smooth,
                            tracer->smooth_snr,    tracer->occupancy,   tracer->gain,
                            tracer->best,          tracer->held,        tracer->limited,
                            tracer->power_store,   tracer->tail,        tracer->excess_store,
                            tracer->centre,        tracer->trail,       tracer->history_step,
                            tracer->history_power, tracer->history_snr, tracer->trail_hz};
    for (size_t i = 0; i < sizeof arrays / sizeof arrays[0]; i++)
        free(arrays[i]);
    free_cells(&tracer->now);
    free_cells(&tracer->before);
    free(tracer);
}

/* Takes transients out before the spectrum. A sample is either sea and tone, normal with the frame's scale s,
 * or with the probability q a transient's, of scale b s. By Bayes' rule x belongs to the former with the
 * probability w = 1 / (1 + exp(u)), u = (1 - 1 / b2) x2 / (2 s2) - ln(b (1 - q) / q), and w x is what it is
 * expected to say of the tone: nearly x up to 3 s, half of it at 3.7 s, nothing beyond 5 s (of Gaussian noise
 * 1 in 5,000 lies beyond 3.7 s). It is the nonlinearity -p' / p of the locally optimum detector of a weak
 * signal in a mixture of two normal laws (Kassam 1988, "Signal Detection in Non-Gaussian Noise", ch. 2) but
 * for the transients' own share x / b2. s is the mean size times sqrt(pi / 2), as of normal noise; the crest
 * of a steady tone is 1.25 s at any level, and one that fills only 0.4 of the frame still passes. */
LANES_WIDE static void limit_transients(const float *in, float *out, uint32_t n, uint32_t n_heard)
{
    wide_lanes sizes = {0}, x;
    uint32_t i = 0;
    for (; i + WIDE_LANES <= n; i += WIDE_LANES) {
        wide_load(&x, in + i);
        sizes += WIDE_SIZE(x);
    }
    double sum = 0;
    for (uint32_t lane = 0; lane < WIDE_LANES; lane++)
        sum += (double)sizes[lane];
    for (; i < n; i++)
        sum += fabsf(in[i]);
    const double s = 1.2533 * sum / n_heard, shape = 1 - 1 / (TRANSIENT_SCALE * TRANSIENT_SCALE);
    const double odds = TRANSIENT_SCALE * (1 - TRANSIENT_SHARE) / TRANSIENT_SHARE;
    const float per_square = (float)(shape / (2 * EXP_POWER * s * s + 1e-30));
    const float start = 1 - (float)log(odds) / EXP_POWER;
    const wide_lanes none = {0};
    for (i = 0; i + WIDE_LANES <= n; i += WIDE_LANES) {
        wide_load(&x, in + i);
        wide_lanes e = start + x * x * per_square;
        e = WIDE_CHOOSE(e > none, e, none);
        e *= e;
        e *= e;
        x *= 1.0F / (1.0F + e * e);
        wide_store(out + i, &x);
    }
    for (; i < n; i++) {
        float e = start + in[i] * in[i] * per_square;
        e = e > 0 ? e : 0;
        e *= e;
        e *= e;
        out[i] = in[i] * (1 / (1 + e * e));
    }
}

/* What each cell holds over its background: a line that was always there is in the background of the cells
 * beside it too, and hides no call that crosses it. */
static void find_excess(struct tracer *tracer)
{
    for (uint32_t k = 0; k < tracer->n_bins; k += TILE)
        lanes_store(tracer->excess + k,
                    lanes_load(tracer->power + tracer->first_bin + k) - lanes_load(tracer->level + k));
    for (uint32_t k = tracer->n_bins; k < tracer->stride; k++)
        tracer->excess[k] = 0;
}

/* From power to log-likelihood ratios, over the background or the tail of a path that has just been there. A
 * cell far below one beside it holds only what leaks from that. */
LANES_WIDE static void weigh_cells(struct tracer *tracer)
{
    const float slope = DESIGN_SNR / (1 + DESIGN_SNR), offset = logf(1 + DESIGN_SNR);
    const float remember = (float)(1 / (OCCUPANCY_S * tracer->frame_rate)), fall = tracer->tail_fall;
    const wide_lanes one = WIDE_ALL(1), none = {0}, flank = WIDE_ALL(FLANK_GAIN), most = WIDE_ALL(MAX_GAIN);
    float *snrs = tracer->history_snr + (size_t)tracer_row(tracer, tracer->frame) * tracer->stride;
    const float *powers = tracer->power + tracer->first_bin, *excesses = tracer->excess;
    find_excess(tracer);
    for (uint32_t k = 0; k < tracer->n_bins; k += WIDE_LANES) {
        wide_lanes power, near, loudest, level, floor, occupancy, smooth, smooth_snr, tail;
        wide_load(&power, powers + k);
        wide_load(&loudest, excesses + k);
        for (int d = 1; d <= NEAR; d++) {
            wide_load(&near, excesses + k - d);
            loudest = WIDE_CHOOSE(near > loudest, near, loudest);
            wide_load(&near, excesses + k + d);
            loudest = WIDE_CHOOSE(near > loudest, near, loudest);
        }
        wide_load(&level, tracer->level + k);
        wide_load(&floor, tracer->floor + k);
        const wide_lanes snr = power / level, over = WIDE_CHOOSE(floor > one, floor, one);
        wide_lanes gain = slope * snr / over - offset;
        gain = WIDE_CHOOSE(gain < most, gain, most);
        gain = WIDE_CHOOSE((power < LEAK_SHARE * loudest) & (gain > flank), flank, gain);
        wide_store(tracer->gain + k, &gain);
        wide_store(snrs + k, &snr);
        wide_load(&occupancy, tracer->occupancy + k);
        occupancy += (WIDE_CHOOSE(snr > OCCUPANCY_SNR, one, none) - occupancy) * remember;
        wide_store(tracer->occupancy + k, &occupancy);
        wide_load(&smooth, tracer->smooth + k);
        smooth += (power - smooth) * SMOOTHING;
        wide_store(tracer->smooth + k, &smooth);
        wide_load(&smooth_snr, tracer->smooth_snr + k);
        smooth_snr += (snr - smooth_snr) * SMOOTHING;
        wide_store(tracer->smooth_snr + k, &smooth_snr);
        wide_load(&tail, tracer->tail + k);
        tail *= smooth_snr;
        floor *= fall;
        floor = WIDE_CHOOSE(tail > floor, tail, floor);
        wide_store(tracer->floor + k, &floor);
    }
}

/* The power of the frame that is held. */
static void hear_frame(struct tracer *tracer)
{
    uint32_t n_heard = unheard_silence(tracer);
    limit_transients(tracer->held, tracer->limited, tracer->n, n_heard);
    double good = unheard_make_good(tracer);
    if (good <= 0)
        return; /* it stays as it was */
    spectrum_power(tracer->spectrum, tracer->limited, tracer->power);
    for (uint32_t k = 0; k < tracer->n_bins && good > 1; k++)
        tracer->power[tracer->first_bin + k] *= (float)good;
}

static void take_frame(struct tracer *tracer, const struct trace_sink *sink)
{
    uint32_t row = tracer_row(tracer, tracer->frame);
    const float *power = tracer->power + tracer->first_bin;
    hear_frame(tracer);
    double samples = (double)tracer->n_shifted + (tracer->n - 1) / 2.0;
    tracer->centre[row] = (double)tracer->origin + samples * tracer->setup.factor - tracer->setup.late_frames;
    tracer->newest = tracer->frame;
    bool ready = background_is_ready(tracer->background);
    background_push(tracer->background, power, tracer->level);
    unheard_replace(tracer);
    memcpy(tracer->history_power + (size_t)row * tracer->stride, power, tracer->n_bins * sizeof *power);
    weigh_cells(tracer);
    unheard_clear(tracer);
    for (uint32_t k = 0; k < tracer->n_bins && !ready; k++)
        tracer->gain[k] = -1;
    paths_advance(tracer, sink);
    tracer->frame++;
}

void tracer_push(struct tracer *tracer, const float *samples, uint32_t n, const struct trace_sink *sink)
{
    while (n > 0) {
        uint32_t room = tracer->n - tracer->n_held, take = n < room ? n : room;
        memcpy(tracer->held + tracer->n_held, samples, take * sizeof *samples);
        tracer->n_held += take;
        samples += take;
        n -= take;
        if (tracer->n_held < tracer->n)
            continue;
        take_frame(tracer, sink);
        tracer->n_held = tracer->n / 2;
        memmove(tracer->held, tracer->held + tracer->n / 2, tracer->n_held * sizeof *tracer->held);
        tracer->n_shifted += tracer->n / 2;
    }
}

void tracer_set_tail(struct tracer *tracer, double low_hz, double high_hz, bool is_heard)
{
    double low = ceil(low_hz / tracer->bin_hz) - tracer->first_bin;
    double high = ceil(high_hz / tracer->bin_hz) - tracer->first_bin;
    background_set_tail(tracer->background, (uint32_t)fmax(0, low),
                        (uint32_t)fmax(0, fmin(high, tracer->n_bins)), is_heard);
}

void tracer_end(struct tracer *tracer, uint64_t next_frame, const struct trace_sink *sink)
{
    paths_end(tracer, sink);
    tracer->origin = next_frame;
    tracer->n_shifted = 0;
    tracer->n_held = 0;
}

uint32_t tracer_get_open(struct tracer *tracer, struct contour *out, uint32_t max_count)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < MAX_PATHS && n < max_count; i++)
        if (tracer->paths[i].open)
            contour_trace(tracer, &tracer->paths[i], false, &out[n++]);
    return n;
}
