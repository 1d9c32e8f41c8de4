/* What an impulse covers of a band; see gate.h. */
#include "call/gate_inner.h"
#include <math.h>
#include <stdlib.h>

#define ABOVE 2.0 /* 3 dB over the background: the band is covered */
#define STANDS_OUT                                                                                           \
    4.0               /* 6 dB: the impulse is in the band at all; a step of 5 ms in the narrowest band has a \
                         deviation of 1.4 dB */
#define QUIET_STEPS 4 /* 20 ms back near the background end a stretch */
#define STALL_ABOVE 4.0F /* within 6 dB of the background the tail's end is not judged by its slope */

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
void gate_extend(struct gate *gate, uint32_t b, int64_t step, const struct gate_masked_sink *sink)
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

void gate_mask_band(struct gate *gate, uint32_t b, int64_t onset, int64_t t90,
                    const struct gate_masked_sink *sink)
{
    struct band *band = &gate->bands[b];
    double background = background_before(gate, b, onset - BEFORE_STEPS);
    int64_t start = find_start(gate, b, onset, onset + t90 + LATE_BURST_STEPS, background);
    if (start < 0)
        return;
    band->arrival = gate->arrival;
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
        gate_extend(gate, b, step, sink);
}
