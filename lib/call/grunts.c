/* Grunts of fish; see grunts.h. */
#include "call/grunts.h"
#include "base/units.h"
#include "dsp/filter.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SLOT_S 0.001
#define WINDOW 16      /* slots: one period of the slowest */
#define MAX_SLOTS 640  /* of a grunt */
#define UP 1.01        /* steps of the background: a median of the windows */
#define FALLEN 0.1     /* a grunt is over 10 dB under its peak */
#define LEAST_PEAK 0.4 /* of the autocorrelation, over its value at 0 ... */
#define LEAST_RISE 0.3 /* ... and over the trough before it */
#define FIRST 0.8      /* the first peak with so much of the greatest is the period */
#define RINGS 0.42     /* more of the energy in the first third is an impulse that rings down */
#define ALIKE_RATE 0.2
#define MAX_ALIKE 32
#define CARRIED 0.4 /* of the decimated rate */

struct grunt {
    double start_frame, end_frame, rate_hz, snr_db, mean_square;
    bool told;
};

struct grunts {
    struct other_setup setup;
    const struct call_class *class; /* NULL: none asks for grunts */
    uint32_t class_index;
    struct filter filter;
    double slow_rate_hz, factor, late_frames, slot_s;
    uint32_t slot_samples;
    uint64_t origin, n_slots; /* frame of the first sample; slots since then */
    double held;              /* power of the slot that is being filled */
    uint32_t n_held;
    double recent[WINDOW], sum, background, peak;
    uint32_t open; /* slots of what stands out; 0: nothing does */
    float slots[MAX_SLOTS];
    uint32_t n_alike;
    struct grunt alike[MAX_ALIKE]; /* ring */
};

enum status grunts_create(const struct other_setup *setup, double slow_rate_hz, double late_frames,
                          struct grunts **out)
{
    struct grunts *grunts = calloc(1, sizeof *grunts);
    if (!grunts)
        return STATUS_NO_MEMORY;
    grunts->setup = *setup;
    grunts->slow_rate_hz = slow_rate_hz;
    grunts->factor = setup->rate_hz / slow_rate_hz;
    grunts->late_frames = late_frames;
    grunts->slot_samples = (uint32_t)fmax(1, round(SLOT_S * slow_rate_hz));
    grunts->slot_s = grunts->slot_samples / slow_rate_hz;
    for (uint32_t c = 0; c < setup->n_classes; c++)
        if (setup->classes[c].sound.manner == MANNER_GRUNTS && !grunts->class) {
            grunts->class = &setup->classes[c];
            grunts->class_index = c;
        }
    if (grunts->class &&
        filter_band_pass(2, grunts->class->low_hz, fmin(grunts->class->high_hz, CARRIED * slow_rate_hz),
                         slow_rate_hz, &grunts->filter) != STATUS_OK) {
        free(grunts);
        return STATUS_BAD_ARGUMENT;
    }
    grunts_reset(grunts, 0);
    *out = grunts;
    return STATUS_OK;
}

void grunts_destroy(struct grunts *grunts)
{
    free(grunts);
}

void grunts_reset(struct grunts *grunts, uint64_t next_frame)
{
    filter_reset(&grunts->filter);
    memset(grunts->recent, 0, sizeof grunts->recent);
    grunts->origin = next_frame;
    grunts->n_slots = 0;
    grunts->held = grunts->sum = 0;
    grunts->n_held = grunts->open = 0;
}

static double frame_of(const struct grunts *grunts, uint64_t slot)
{
    double samples = (double)slot * grunts->slot_samples;
    return fmax(0, (double)grunts->origin + samples * grunts->factor - grunts->late_frames);
}

static void tell(const struct grunts *grunts, const struct grunt *grunt, uint64_t known_frame,
                 const struct found_sink *sink)
{
    const struct found_call found = {.class_index = grunts->class_index,
                                     .start_frame = grunt->start_frame,
                                     .end_frame = grunt->end_frame,
                                     .known_frame = known_frame,
                                     .low_hz = grunts->class->low_hz,
                                     .high_hz = grunts->class->high_hz,
                                     .snr_db = grunt->snr_db,
                                     .mean_square_pa2 = grunt->mean_square};
    sink->take(sink->context, &found);
}

/* Pulses a second, by the first peak of the autocorrelation that has a trough before it; 0: no such. */
static double pulse_rate(const struct grunts *grunts, uint32_t n)
{
    const struct other_shape *sound = &grunts->class->sound;
    double mean = 0, r[MAX_SLOTS / 2], best = 0, trough = INFINITY;
    uint32_t longest = (uint32_t)fmin(n / 2.0, ceil(1 / (sound->low_rate_hz * grunts->slot_s)) + 1), at = 0;
    for (uint32_t i = 0; i < n; i++)
        mean += sqrt(grunts->slots[i]) / n;
    for (uint32_t k = 0; k <= longest && k < MAX_SLOTS / 2; k++) {
        double sum = 0;
        for (uint32_t i = 0; i + k < n; i++)
            sum += (sqrt(grunts->slots[i]) - mean) * (sqrt(grunts->slots[i + k]) - mean);
        r[k] = sum / (n - k);
    }
    for (uint32_t k = 1; k < longest; k++) {
        trough = fmin(trough, r[k]);
        bool is_peak = r[k] >= r[k - 1] && r[k] > r[k + 1];
        if (is_peak && r[k] >= LEAST_PEAK * r[0] && r[k] - trough >= LEAST_RISE * r[0] &&
            r[k] * FIRST > best) {
            best = r[k];
            at = k;
        }
    }
    if (at == 0)
        return 0;
    double bend = r[at - 1] - 2 * r[at] + r[at + 1];
    double rate = 1 / ((at + (bend < 0 ? 0.5 * (r[at - 1] - r[at + 1]) / bend : 0)) * grunts->slot_s);
    return rate >= sound->low_rate_hz && rate <= sound->high_rate_hz ? rate : 0;
}

/* Recognised once it has come often enough; then those before it are told with it, oldest first. */
static void take_grunt(struct grunts *grunts, struct grunt *grunt, uint64_t known_frame,
                       const struct found_sink *sink)
{
    const struct other_shape *sound = &grunts->class->sound;
    uint32_t n = grunts->n_alike < MAX_ALIKE ? grunts->n_alike : MAX_ALIKE, n_found = 0;
    struct grunt *found[MAX_ALIKE];
    for (uint32_t i = 0; i < n; i++) {
        struct grunt *earlier = &grunts->alike[(grunts->n_alike - n + i) % MAX_ALIKE];
        if (grunt->start_frame - earlier->end_frame <= sound->memory_s * grunts->setup.rate_hz &&
            fabs(log(earlier->rate_hz / grunt->rate_hz)) <= ALIKE_RATE)
            found[n_found++] = earlier;
    }
    if (n_found + 1 >= sound->min_repeats) {
        for (uint32_t i = 0; i < n_found; i++)
            if (!found[i]->told) {
                tell(grunts, found[i], known_frame, sink);
                found[i]->told = true;
            }
        tell(grunts, grunt, known_frame, sink);
        grunt->told = true;
    }
    grunts->alike[grunts->n_alike++ % MAX_ALIKE] = *grunt;
}

/* What stood out is over: `open` slots, the last of which is the newest. */
static void end_grunt(struct grunts *grunts, uint64_t known_frame, const struct found_sink *sink)
{
    const struct other_shape *sound = &grunts->class->sound;
    uint32_t n = grunts->open > WINDOW ? grunts->open - WINDOW : 0; /* the window sees it so much longer */
    double length_s = n * grunts->slot_s, power = 0;
    if (length_s < sound->min_s || length_s > sound->max_s || n >= MAX_SLOTS)
        return;
    uint64_t first = grunts->n_slots - grunts->open;
    double rate_hz = pulse_rate(grunts, n);
    double first_third = 0;
    for (uint32_t i = 0; i < n; i++) {
        power += (double)grunts->slots[i] / n;
        first_third += 3 * i < n ? (double)grunts->slots[i] / n : 0;
    }
    struct grunt grunt = {.start_frame = frame_of(grunts, first > WINDOW / 2 ? first - WINDOW / 2 : 0),
                          .end_frame = frame_of(grunts, grunts->n_slots - WINDOW),
                          .rate_hz = rate_hz,
                          .snr_db = units_power_db(power * WINDOW / grunts->background),
                          .mean_square = power};
    if (rate_hz > 0 && first_third <= RINGS * power)
        take_grunt(grunts, &grunt, known_frame, sink);
}

static void take_slot(struct grunts *grunts, double power, uint64_t known_frame,
                      const struct found_sink *sink)
{
    double *oldest = &grunts->recent[grunts->n_slots % WINDOW], sum = 0;
    *oldest = power;
    for (uint32_t i = 0; i < WINDOW; i++)
        sum += grunts->recent[i];
    grunts->n_slots++;
    if (!(grunts->background > 0) || grunts->n_slots < WINDOW)
        grunts->background = sum;
    const double threshold = grunts->background * units_power_ratio(grunts->class->sound.min_snr_db);
    if (sum > threshold && (grunts->open == 0 || sum > FALLEN * grunts->peak)) {
        if (grunts->open < MAX_SLOTS)
            grunts->slots[grunts->open] = (float)power;
        grunts->peak = grunts->open++ == 0 ? sum : fmax(grunts->peak, sum);
    } else if (grunts->open > 0) {
        end_grunt(grunts, known_frame, sink);
        grunts->open = 0;
    }
    if (grunts->open == 0 || grunts->open > MAX_SLOTS) /* what lasts is learned */
        grunts->background *= sum > grunts->background ? UP : 1 / UP;
}

void grunts_push(struct grunts *grunts, const float *samples, uint32_t n, uint64_t known_frame,
                 const struct found_sink *sink)
{
    if (!grunts->class)
        return;
    for (uint32_t i = 0; i < n; i++) {
        double y = filter_step(&grunts->filter, (double)samples[i]);
        grunts->held += y * y / grunts->slot_samples;
        if (++grunts->n_held == grunts->slot_samples) {
            take_slot(grunts, grunts->held, known_frame, sink);
            grunts->held = 0;
            grunts->n_held = 0;
        }
    }
}
