/* What the own source covers. */
#include "call/gate.h"
#include "call/bands.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define STEP_S 0.005
#define BLOCK_STEPS 1
#define ABOVE 2.0 /* 3 dB over the background: the band is covered */
#define STANDS_OUT                                                                                           \
    4.0               /* 6 dB: the impulse is in the band at all; a step of 5 ms in the narrowest band has a \
                         deviation of 1.4 dB */
#define QUIET_STEPS 4 /* 20 ms back near the background end a stretch */
#define LATE_BURST_STEPS 5   /* 25 ms: a burst that begins so late is still the same event */
#define STALL_DB_S 8.0       /* a tail that falls more slowly is not told from another sound that stays up */
#define STALL_ABOVE 4.0F     /* within 6 dB of the background the tail's end is not judged by its slope */
#define BEFORE_STEPS 2       /* the 5 % energy point lies after the true onset */
#define BACKGROUND_STEPS 100 /* 0.5 s before the onset */
#define STRETCHES 64

/* A masked stretch, in steps since the last reset; end is exclusive. */
struct stretch {
    int64_t start, end;
};

struct band {
    double low_hz, high_hz;
    struct stretch stretches[STRETCHES]; /* a ring, newest last */
    uint32_t n_stretches;
    bool open; /* the newest stretch has no end yet */
    int64_t open_limit, quiet_since;
    int64_t tail_from;   /* from this step on the band has to fall */
    int64_t stall_steps; /* over how long its fall is judged */
    float stall_ratio;   /* power after less power before that is no fall */
    double background;
};

struct gate {
    double rate_hz;
    uint32_t step_frames, n_bands;
    uint32_t n_memory; /* steps */
    uint64_t first_frame;
    int64_t n_steps; /* since the last reset */
    uint32_t filled;
    float *block; /* [step_frames] */
    float *power; /* [n_bands][n_memory], a ring */
    struct bands *bank;
    struct band bands[GATE_BANDS];
};

static uint32_t choose_bands(double rate_hz, struct band_edges edges[GATE_BANDS])
{
    static const double limits_hz[GATE_BANDS + 1] = {50, 1000, 5000, 20000, 1e9};
    uint32_t n = 0;
    for (uint32_t b = 0; b < GATE_BANDS; b++) {
        double high = fmin(limits_hz[b + 1], BANDS_HIGHEST * rate_hz);
        if (high > 1.2 * limits_hz[b])
            edges[n++] = (struct band_edges){limits_hz[b], high};
    }
    return n;
}

enum status gate_create(double rate_hz, double memory_s, struct gate **out)
{
    if (!out || !(rate_hz >= 8000) || !(rate_hz <= 1e6) || !(memory_s >= 0.5) || !(memory_s <= 30))
        return STATUS_BAD_ARGUMENT;
    struct gate *gate = calloc(1, sizeof *gate);
    if (!gate)
        return STATUS_NO_MEMORY;
    struct band_edges edges[GATE_BANDS];
    gate->rate_hz = rate_hz;
    gate->step_frames = (uint32_t)lround(STEP_S * rate_hz);
    gate->n_bands = choose_bands(rate_hz, edges);
    gate->n_memory = (uint32_t)ceil((memory_s + GATE_LONGEST_S) / STEP_S) + BACKGROUND_STEPS;
    for (uint32_t b = 0; b < gate->n_bands; b++) {
        struct band *band = &gate->bands[b];
        band->low_hz = edges[b].low_hz;
        band->high_hz = edges[b].high_hz;
        /* Two means of a band's noise over T differ by 6.1 / sqrt(B T) dB (one deviation). A tail of 24 dB a
         * second is told from one of 8 with four deviations where (24 - 8) T is 4 times that. */
        double stall_s = pow(1.53 / sqrt(band->high_hz - band->low_hz), 2.0 / 3.0);
        band->stall_steps = (int64_t)ceil(stall_s / STEP_S);
        band->stall_ratio = (float)pow(10, -0.1 * STALL_DB_S * (double)band->stall_steps * STEP_S);
    }
    gate->block = calloc(gate->step_frames, sizeof *gate->block);
    gate->power = calloc((size_t)gate->n_bands * gate->n_memory, sizeof *gate->power);
    enum status status =
        gate->block && gate->power
            ? bands_create(rate_hz, edges, gate->n_bands, gate->step_frames, BLOCK_STEPS, 0, &gate->bank)
            : STATUS_NO_MEMORY;
    if (status != STATUS_OK) {
        gate_destroy(gate);
        return status;
    }
    *out = gate;
    return STATUS_OK;
}

void gate_reset(struct gate *gate, uint64_t next_frame)
{
    gate->first_frame = next_frame;
    gate->n_steps = 0;
    gate->filled = 0;
    bands_reset(gate->bank);
    for (uint32_t b = 0; b < gate->n_bands; b++) {
        gate->bands[b].n_stretches = 0;
        gate->bands[b].open = false;
    }
}

static double frame_of(const struct gate *gate, int64_t step)
{
    return (double)gate->first_frame + (double)step * gate->step_frames;
}

static float power_at(const struct gate *gate, uint32_t b, int64_t step)
{
    return gate->power[(size_t)b * gate->n_memory + (size_t)(step % gate->n_memory)];
}

static struct stretch *newest(struct band *band)
{
    return band->n_stretches ? &band->stretches[(band->n_stretches - 1) % STRETCHES] : NULL;
}

static bool is_masked(const struct band *band, int64_t step)
{
    uint32_t kept = band->n_stretches < STRETCHES ? band->n_stretches : STRETCHES;
    for (uint32_t i = 0; i < kept; i++) {
        const struct stretch *stretch = &band->stretches[(band->n_stretches - 1 - i) % STRETCHES];
        if (step >= stretch->start && step < stretch->end)
            return true;
    }
    return false;
}

static int compare_floats(const void *a, const void *b)
{
    float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

/* Median power of the unmasked steps before `step`; what was the background before where there are too few.
 */
static double background_before(const struct gate *gate, uint32_t b, int64_t step)
{
    float before[BACKGROUND_STEPS];
    const struct band *band = &gate->bands[b];
    uint32_t n = 0;
    int64_t oldest = gate->n_steps - gate->n_memory;
    for (int64_t k = step - 1; k >= 0 && k >= oldest && k >= step - BACKGROUND_STEPS; k--)
        if (!is_masked(band, k))
            before[n++] = power_at(gate, b, k);
    if (n < 10)
        return band->background;
    qsort(before, n, sizeof before[0], compare_floats);
    return before[n / 2];
}

static void give(const struct gate *gate, struct band *band, const struct gate_masked_sink *sink)
{
    const struct stretch *stretch = newest(band);
    band->open = false;
    if (!sink || stretch->end <= stretch->start)
        return;
    struct gate_masked masked = {.start_frame = frame_of(gate, stretch->start),
                                 .end_frame = frame_of(gate, stretch->end),
                                 .low_hz = band->low_hz,
                                 .high_hz = band->high_hz};
    sink->take(sink->context, &masked);
}

/* A tail falls. A band that stays up is held by another sound, an animal's for all we know: it must not be
 * hidden. */
static bool has_stalled(const struct gate *gate, uint32_t b, int64_t step)
{
    const struct band *band = &gate->bands[b];
    int64_t n = band->stall_steps;
    if (step + 1 < band->tail_from + 2 * n)
        return false;
    float before = 0, after = 0;
    for (int64_t k = 0; k < n; k++) {
        after += power_at(gate, b, step - k);
        before += power_at(gate, b, step - n - k);
    }
    float background = (float)((double)n * band->background);
    return after > STALL_ABOVE * background && after - background > band->stall_ratio * (before - background);
}

/* Where the tail had fallen furthest before another sound held the band. */
static int64_t least_step(const struct gate *gate, uint32_t b, int64_t step)
{
    int64_t least = step;
    for (int64_t k = step; k > step - 2 * gate->bands[b].stall_steps; k--)
        if (power_at(gate, b, k) < power_at(gate, b, least))
            least = k;
    return least;
}

/* Takes one more step into the open stretch, or ends it. */
static void extend(struct gate *gate, uint32_t b, int64_t step, const struct gate_masked_sink *sink)
{
    struct band *band = &gate->bands[b];
    struct stretch *stretch = newest(band);
    if (has_stalled(gate, b, step)) {
        stretch->end = least_step(gate, b, step) + 1;
        give(gate, band, sink);
        return;
    }
    if (power_at(gate, b, step) > ABOVE * band->background) {
        band->quiet_since = step + 1;
        stretch->end = step + 1;
    }
    if (step + 1 - band->quiet_since >= QUIET_STEPS || step + 1 >= band->open_limit)
        give(gate, band, sink);
}

static void take_step(struct gate *gate, const struct gate_masked_sink *sink)
{
    bands_push(gate->bank, gate->block);
    for (uint32_t b = 0; b < gate->n_bands; b++)
        gate->power[(size_t)b * gate->n_memory + (size_t)(gate->n_steps % gate->n_memory)] =
            bands_get_power(gate->bank, b)[0];
    gate->n_steps++;
    for (uint32_t b = 0; b < gate->n_bands; b++)
        if (gate->bands[b].open)
            extend(gate, b, gate->n_steps - 1, sink);
}

void gate_push(struct gate *gate, const float *pascals, uint32_t n, const struct gate_masked_sink *sink)
{
    while (n > 0) {
        uint32_t room = gate->step_frames - gate->filled, part = n < room ? n : room;
        memcpy(gate->block + gate->filled, pascals, part * sizeof *pascals);
        gate->filled += part;
        pascals += part;
        n -= part;
        if (gate->filled == gate->step_frames) {
            gate->filled = 0;
            take_step(gate, sink);
        }
    }
}

/* The first step, from the onset on, at which the impulse is in the band; -1 where it is not. */
static int64_t find_start(const struct gate *gate, uint32_t b, int64_t onset, int64_t last, double background)
{
    int64_t oldest = gate->n_steps - gate->n_memory;
    int64_t first = onset - BEFORE_STEPS;
    first = first < 0 ? 0 : first < oldest ? oldest : first;
    for (int64_t step = first; step < last && step < gate->n_steps; step++)
        if (power_at(gate, b, step) > STANDS_OUT * background) {
            while (step > first && power_at(gate, b, step - 1) > ABOVE * background)
                step--;
            return step;
        }
    return -1;
}

static void mask_band(struct gate *gate, uint32_t b, int64_t onset, int64_t t90,
                      const struct gate_masked_sink *sink)
{
    struct band *band = &gate->bands[b];
    double background = background_before(gate, b, onset - BEFORE_STEPS);
    int64_t start = find_start(gate, b, onset, onset + t90 + LATE_BURST_STEPS, background);
    if (start < 0)
        return;
    if (band->open && start <= newest(band)->end) { /* the sound before still covers it: one stretch */
        band->open_limit = onset + (int64_t)(GATE_LONGEST_S / STEP_S);
        band->tail_from = onset + t90 + LATE_BURST_STEPS;
        return;
    }
    if (band->open)
        give(gate, band, sink);
    struct stretch *last = newest(band);
    if (last && start < last->end)
        start = last->end;
    band->background = background;
    band->n_stretches++;
    *newest(band) = (struct stretch){start, start};
    band->open = true;
    band->quiet_since = start + LATE_BURST_STEPS;
    band->tail_from = onset + t90 + LATE_BURST_STEPS;
    band->open_limit = onset + (int64_t)(GATE_LONGEST_S / STEP_S);
    for (int64_t step = start; step < gate->n_steps && band->open; step++)
        extend(gate, b, step, sink);
}

void gate_push_impulse(struct gate *gate, double onset_frame, double t90_s,
                       const struct gate_masked_sink *sink)
{
    int64_t onset = (int64_t)floor((onset_frame - (double)gate->first_frame) / gate->step_frames);
    if (onset < 0 || onset >= gate->n_steps)
        return;
    for (uint32_t b = 0; b < gate->n_bands; b++)
        mask_band(gate, b, onset, (int64_t)ceil(t90_s / STEP_S), sink);
}

static double masked_frames(const struct gate *gate, const struct band *band, double start_frame,
                            double end_frame)
{
    double sum = 0;
    uint32_t kept = band->n_stretches < STRETCHES ? band->n_stretches : STRETCHES;
    for (uint32_t i = 0; i < kept; i++) {
        const struct stretch *stretch = &band->stretches[(band->n_stretches - 1 - i) % STRETCHES];
        double from = fmax(start_frame, frame_of(gate, stretch->start));
        double to = fmin(end_frame, frame_of(gate, stretch->end));
        sum += fmax(0, to - from);
    }
    return sum;
}

bool gate_hides(const struct gate *gate, double start_frame, double end_frame, double low_hz, double high_hz)
{
    for (uint32_t b = 0; b < gate->n_bands; b++) {
        const struct band *band = &gate->bands[b];
        if (band->low_hz < high_hz && band->high_hz > low_hz &&
            2 * masked_frames(gate, band, start_frame, end_frame) >= end_frame - start_frame)
            return true;
    }
    return false;
}

void gate_destroy(struct gate *gate)
{
    if (!gate)
        return;
    bands_destroy(gate->bank);
    free(gate->power);
    free(gate->block);
    free(gate);
}
