/* Adaptive background of a spectrum; see background.h. */
#include "dsp/background.h"
#include "dsp/lanes.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define QUANTILE 0.3
#define UP_TENTHS 3              /* the same in tenths */
#define QUANTILE_OF_MEAN 0.35667 /* -ln(1 - 0.3): the quantile of an exponential with mean 1 */
#define MEDIAN_OF_MEAN 0.69315F  /* ln 2 */
#define RISE_DB_S 0.5            /* at which a bin that is always above goes up */
#define FIRST_STEP_DB 6.0        /* of the first frames, then of the n-th a share that falls with n */
#define READY_S 1.0
#define READY_FRAMES 8
#define LEAST 1e-30F          /* of a quantile: digital silence */
#define RESTART_RATIO 10.0F   /* a rise of all that is heard, while learning, begins anew */
#define BROADBAND_SPEED 4     /* of learning, while all of a stretch has risen */
#define STRETCH 32            /* bins whose median over frequency tells broadband sound */
#define LEAST_STRETCH 8       /* bins that have a median worth the name */
#define BROADBAND_RATIO 1.41F /* over the mean; 1.5 dB */

/* What a step multiplies by. */
struct step {
    float up, down;
};

struct background {
    uint32_t n_bins;
    double frames_per_s;
    double step_db, next_step_db; /* at last, and of the next frame */
    struct step step, fast_step;  /* of the next frame; the fast one where all of a stretch has risen */
    float caution;                /* what the estimate is raised by while it is young */
    uint64_t n_frames;
    float *quantile; /* [n_bins] */
    float *tail;     /* [n_bins]: the same of a tail, to a factor; 0: not known */
    bool *in_tail;   /* [stretches_of(n_bins)] */
};

static uint32_t stretches_of(uint32_t n_bins)
{
    return (n_bins + STRETCH - 1) / STRETCH;
}

enum status background_create(uint32_t n_bins, double frames_per_s, struct background **out)
{
    if (n_bins == 0 || !(frames_per_s > 0))
        return STATUS_BAD_ARGUMENT;
    struct background *background = calloc(1, sizeof *background);
    if (!background)
        return STATUS_NO_MEMORY;
    background->quantile = calloc(n_bins, sizeof *background->quantile);
    background->tail = calloc(n_bins, sizeof *background->tail);
    background->in_tail = calloc(stretches_of(n_bins), sizeof *background->in_tail);
    if (!background->quantile || !background->tail || !background->in_tail) {
        background_destroy(background);
        return STATUS_NO_MEMORY;
    }
    background->n_bins = n_bins;
    background->frames_per_s = frames_per_s;
    background->step_db = RISE_DB_S / (QUANTILE * frames_per_s);
    *out = background;
    return STATUS_OK;
}

void background_set_rise(struct background *background, double rise_db_s)
{
    background->step_db = rise_db_s / (QUANTILE * background->frames_per_s);
}

void background_destroy(struct background *background)
{
    if (!background)
        return;
    free(background->quantile);
    free(background->tail);
    free(background->in_tail);
    free(background);
}

bool background_is_ready(const struct background *background)
{
    return (double)background->n_frames >= fmax(READY_FRAMES, READY_S * background->frames_per_s);
}

void background_raise(struct background *background, uint32_t bin, float power)
{
    float quantile = power * (float)QUANTILE_OF_MEAN;
    if (bin < background->n_bins && background->quantile[bin] < quantile)
        background->quantile[bin] = quantile;
}

void background_set_tail(struct background *background, uint32_t low, uint32_t high, bool is_heard)
{
    const uint32_t n = background->n_bins, n_stretches = stretches_of(n);
    for (uint32_t i = 0; i < n_stretches; i++)
        if (n * i / n_stretches < high && n * (i + 1) / n_stretches > low)
            background->in_tail[i] = is_heard;
}

/* The first frame: every bin starts from the mean over its neighbours, which is nearer than its own power. */
static void start(struct background *background, const float *power)
{
    const uint32_t reach = 4, n = background->n_bins;
    for (uint32_t k = 0; k < n; k++) {
        uint32_t low = k > reach ? k - reach : 0, high = k + reach < n ? k + reach : n - 1;
        double sum = 0;
        for (uint32_t j = low; j <= high; j++)
            sum += power[j];
        background->quantile[k] = (float)(QUANTILE_OF_MEAN * sum / (high - low + 1) + 1e-30);
    }
}

/* Steps are large for a quarter of the time to get ready, then fall as 1 / n. */
static double step_of(const struct background *background)
{
    double first = fmax(4, READY_S / 4 * background->frames_per_s);
    return fmax(background->step_db, FIRST_STEP_DB * first / fmax(first, (double)background->n_frames));
}

static double whole_power(double x, unsigned n)
{
    double product = 1;
    for (; n > 0; n--)
        product *= x;
    return product;
}

/* By QUANTILE of the step up, by the rest of it down, each in tenths; `speed` times as far. */
static struct step make_step(double tenth, unsigned speed)
{
    return (struct step){(float)whole_power(tenth, UP_TENTHS * speed),
                         (float)(1 / whole_power(tenth, (10 - UP_TENTHS) * speed))};
}

/* The caution is twice the standard deviation of a young estimate, sqrt(step q (1 - q) / (2 f)) for a
 * stochastic approximation with f = 0.0575 per dB, the density of noise in dB at the quantile. */
static void prepare_step(struct background *background)
{
    const double scale = sqrt(QUANTILE * (1 - QUANTILE) / (2 * 0.0575));
    double step_db = step_of(background);
    if (step_db == background->next_step_db)
        return;
    background->next_step_db = step_db;
    const double tenth = pow(10, step_db / 100);
    background->step = make_step(tenth, 1);
    background->fast_step = make_step(tenth, BROADBAND_SPEED);
    background->caution = (float)pow(10, 2 * scale * (sqrt(step_db) - sqrt(background->step_db)) / 10);
}

static void learn(const float *power, float *quantile, uint32_t n, struct step step)
{
    uint32_t k = 0;
    for (; k + LANES <= n; k += LANES) {
        const lanes before = lanes_load(quantile + k);
        const lanes by =
            lanes_choose(lanes_load(power + k) > before, lanes_all(step.up), lanes_all(step.down));
        lanes_store(quantile + k, lanes_greatest(before * by, lanes_all(LEAST)));
    }
    for (; k < n; k++) {
        float next = quantile[k] * (power[k] > quantile[k] ? step.up : step.down);
        quantile[k] = next > LEAST ? next : LEAST;
    }
}

/* What the quantiles say of the mean, and how many of the n bins hold more than broadband sound would. */
static uint32_t expect(const float *power, const float *quantile, uint32_t n, float scale, float *level)
{
    lane_mask above = {0};
    uint32_t k = 0, n_above = 0;
    for (; k + LANES <= n; k += LANES) {
        const lanes mean = lanes_load(quantile + k) * scale;
        above -= lanes_load(power + k) > BROADBAND_RATIO * mean;
        lanes_store(level + k, mean);
    }
    for (uint32_t lane = 0; lane < LANES; lane++)
        n_above += (uint32_t)above[lane];
    for (; k < n; k++) {
        level[k] = quantile[k] * scale;
        n_above += power[k] > BROADBAND_RATIO * level[k];
    }
    return n_above;
}

/* While learning: whether most bins hold much more than was thought (the sound has only now begun). */
static bool has_begun(const struct background *background, const float *power)
{
    uint32_t n_above = 0;
    for (uint32_t k = 0; k < background->n_bins; k++)
        n_above += power[k] > RESTART_RATIO * (float)(1 / QUANTILE_OF_MEAN) * background->quantile[k];
    return 2 * n_above > background->n_bins;
}

/* The number after the n / 2 least of n <= STRETCH: the greatest of those with no more than so many less than
 * they. Counted without a branch, of which a sort of noise takes every other one wrongly. */
LANES_WIDE static float median(const float *ratio, uint32_t n)
{
    float padded[STRETCH];
    wide_lanes greatest = WIDE_ALL(-INFINITY), mine;
    const wide_mask most = (wide_mask){0} + (int32_t)(n / 2);
    for (uint32_t i = 0; i < STRETCH; i++)
        padded[i] = i < n ? ratio[i] : INFINITY;
    for (uint32_t part = 0; part < STRETCH; part += WIDE_LANES) {
        wide_mask n_less = {0};
        wide_load(&mine, padded + part);
        for (uint32_t i = 0; i < n; i++)
            n_less -= WIDE_ALL(padded[i]) < mine;
        mine = WIDE_CHOOSE(n_less <= most, mine, WIDE_ALL(-INFINITY));
        greatest = WIDE_CHOOSE(mine > greatest, mine, greatest);
    }
    float middle = greatest[0];
    for (uint32_t lane = 1; lane < WIDE_LANES; lane++)
        middle = greatest[lane] > middle ? greatest[lane] : middle;
    return middle;
}

/* Returns whether the stretch was raised. */
static bool raise_broadband(const float *power, float *level, uint32_t n, uint32_t n_above)
{
    if (n < LEAST_STRETCH || 2 * n_above <= n)
        return false;
    float ratio[STRETCH];
    for (uint32_t k = 0; k < n; k++)
        ratio[k] = power[k] / level[k];
    float gain = fmaxf(1, median(ratio, n) / MEDIAN_OF_MEAN);
    for (uint32_t k = 0; k < n; k++)
        level[k] *= gain;
    return true;
}

/* Each bin starts from the mean over its neighbours. */
static void begin_colour(const float *power, float *tail, uint32_t n)
{
    const uint32_t reach = 4;
    for (uint32_t k = 0; k < n; k++) {
        uint32_t low = k > reach ? k - reach : 0, high = k + reach < n ? k + reach : n - 1;
        double sum = 0;
        for (uint32_t j = low; j <= high; j++)
            sum += (double)power[j];
        tail[k] = (float)(QUANTILE_OF_MEAN * sum / (high - low + 1) + 1e-30);
    }
}

/* How loud the tail is now, over its colour: told by the half of the bins in which it stands out most. */
static float gain_of_tail(const float *power, const float *quantile, const float *tail, uint32_t n)
{
    float share[STRETCH] = {0}, ratio[STRETCH];
    uint32_t n_told = 0;
    for (uint32_t k = 0; k < n; k++)
        share[k] = tail[k] / quantile[k];
    const float middle = median(share, n);
    for (uint32_t k = 0; k < n; k++)
        if (share[k] >= middle)
            ratio[n_told++] = power[k] / tail[k];
    return median(ratio, n_told) * (float)QUANTILE_OF_MEAN / MEDIAN_OF_MEAN;
}

/* While a tail is heard: each bin's level is what the tail's colour makes of its loudness now, where that is
 * more than without the tail. Bins that it raises teach the colour, the others the background. */
static void judge_tail(const struct background *background, const float *power, float *quantile, float *tail,
                       uint32_t n, float scale, float *level)
{
    float told[STRETCH], colour[STRETCH];
    bool raises[STRETCH];
    if (tail[0] <= 0)
        begin_colour(power, tail, n);
    const float gain = gain_of_tail(power, quantile, tail, n);
    for (uint32_t k = 0; k < n; k++) {
        raises[k] = gain * tail[k] > BROADBAND_RATIO * quantile[k];
        level[k] = (raises[k] ? gain * tail[k] : quantile[k]) * scale;
        told[k] = power[k] / gain;
        colour[k] = tail[k];
    }
    learn(told, tail, n, background->fast_step);
    memcpy(told, quantile, n * sizeof told[0]);
    learn(power, quantile, n, background->step);
    for (uint32_t k = 0; k < n; k++)
        if (raises[k])
            quantile[k] = told[k];
        else
            tail[k] = colour[k];
}

void background_push(struct background *background, const float *power, float *out_background)
{
    const uint32_t n = background->n_bins, n_stretches = stretches_of(n);
    if (background->n_frames > 0 && !background_is_ready(background) && has_begun(background, power))
        background->n_frames = 0;
    if (background->n_frames == 0)
        start(background, power);
    prepare_step(background);
    const float scale = background->caution * (float)(1 / QUANTILE_OF_MEAN);
    for (uint32_t i = 0; i < n_stretches; i++) {
        uint32_t low = n * i / n_stretches, high = n * (i + 1) / n_stretches;
        float *quantile = background->quantile + low;
        if (background->in_tail[i] && high - low >= LEAST_STRETCH) {
            judge_tail(background, power + low, quantile, background->tail + low, high - low, scale,
                       out_background + low);
            continue;
        }
        uint32_t n_above = expect(power + low, quantile, high - low, scale, out_background + low);
        bool raised = raise_broadband(power + low, out_background + low, high - low, n_above);
        learn(power + low, quantile, high - low, raised ? background->fast_step : background->step);
    }
    background->n_frames++;
}
