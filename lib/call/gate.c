/* What is known of the own source's impulses; see gate.h. */
#include "call/gate_inner.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define BLOCK_STEPS 1
#define STALL_DB_S 8.0       /* a tail that falls more slowly is not told from another sound that stays up */
#define FLOOR_LATE_STEPS 300 /* 1.5 s: by then an impulse is known */
#define ARRIVAL 0.1          /* 10 dB below the usual peak: the expected impulse is there */
#define RISE_STEPS 4         /* within which it rises by so much */
#define SAME_STEPS 20        /* 100 ms: the 5 % point of a far shot lies that much behind its front */
#define BINS_STEPS (uint32_t)(GATE_FLOOR_BIN_S / STEP_S)

static uint32_t choose_bands(double rate_hz, struct band_edges edges[GATE_BANDS])
{
    static const double limits_hz[GATE_BANDS] = {GATE_LOW_HIGH_HZ, 1000, 5000, 20000, 1e9};
    uint32_t n = 1;
    edges[0] = (struct band_edges){GATE_LOW_LOW_HZ, GATE_LOW_HIGH_HZ};
    for (uint32_t b = 0; b + 1 < GATE_BANDS; b++) {
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
    enum status status = gate->block && gate->power ? gate_low_create(rate_hz, gate->step_frames, &gate->low)
                                                    : STATUS_NO_MEMORY;
    if (status == STATUS_OK)
        status = bands_create(rate_hz, edges + 1, gate->n_bands - 1, gate->step_frames, BLOCK_STEPS, 0,
                              &gate->bank);
    if (status != STATUS_OK) {
        gate_destroy(gate);
        return status;
    }
    gate_reset(gate, 0);
    *out = gate;
    return STATUS_OK;
}

void gate_reset(struct gate *gate, uint64_t next_frame)
{
    gate->first_frame = next_frame;
    gate->n_steps = 0;
    gate->filled = 0;
    bands_reset(gate->bank);
    gate_low_reset(&gate->low);
    gate->rhythm = (struct gate_rhythm){0};
    gate->arrival = NO_STEP;
    gate->usual_t90 = 0;
    gate->n_onsets = 0;
    for (uint32_t b = 0; b < gate->n_bands; b++) {
        struct band *band = &gate->bands[b];
        band->n_stretches = 0;
        band->open = false;
        band->arrival = NO_STEP;
        band->usual_peak = 0;
        band->floor = (struct gate_floor){0};
    }
}

/* Looks at the bands for the impulse whose arrival was seen: those in which it stands out by now. */
static void mask_arrived(struct gate *gate, const struct gate_masked_sink *sink)
{
    for (uint32_t b = 0; b < gate->n_bands; b++)
        if (gate->bands[b].arrival != gate->arrival)
            gate_mask_band(gate, b, gate->arrival, gate->usual_t90, sink);
}

static void note_onset(struct gate *gate, int64_t onset)
{
    gate->arrival = onset;
    gate->onsets[gate->n_onsets++ % ONSETS] = onset;
}

/* The band that impulses fill most, over its background; -1 where none was heard yet. */
static int leading_band(const struct gate *gate)
{
    int best = -1;
    double most = 0;
    for (uint32_t b = 0; b < gate->n_bands; b++) {
        const struct band *band = &gate->bands[b];
        double ratio = band->background > 0 ? band->usual_peak / band->background : 0;
        if (ratio > most) {
            most = ratio;
            best = (int)b;
        }
    }
    return best;
}

/* An expected impulse is there when the band that it fills most rises to near its usual peak at the expected
 * time: then its bands are masked at once. */
static void expect(struct gate *gate, int64_t step, const struct gate_masked_sink *sink)
{
    double half_s = gate->rhythm.interval_s / 2;
    bool since = gate->arrival == NO_STEP || (double)(step - gate->arrival) * STEP_S > half_s;
    int lead = since ? leading_band(gate) : -1;
    if (lead >= 0 && step >= RISE_STEPS &&
        gate_rhythm_expects(&gate->rhythm, frame_of(gate, step) / gate->rate_hz)) {
        float wanted = (float)ARRIVAL * gate->bands[lead].usual_peak;
        if (power_at(gate, (uint32_t)lead, step) > wanted &&
            power_at(gate, (uint32_t)lead, step - RISE_STEPS) < wanted)
            note_onset(gate, step);
    }
    if (gate->arrival != NO_STEP && step >= gate->arrival &&
        step < gate->arrival + gate->usual_t90 + LATE_BURST_STEPS)
        mask_arrived(gate, sink);
}

/* Steps since the last impulse whose onset is known, of those before `step`; -1: none. */
static int64_t steps_since_onset(const struct gate *gate, int64_t step)
{
    int64_t least = -1;
    for (uint32_t i = 0; i < ONSETS && i < gate->n_onsets; i++) {
        int64_t since = step - gate->onsets[i];
        if (since >= 0 && (least < 0 || since < least))
            least = since;
    }
    return least;
}

static void learn_floors(struct gate *gate, int64_t step)
{
    int64_t since = step >= 0 ? steps_since_onset(gate, step) : -1;
    for (uint32_t b = 0; b < gate->n_bands && since >= 0; b++)
        gate_floor_take(&gate->bands[b].floor, (double)since * STEP_S, power_at(gate, b, step), BINS_STEPS);
}

static void take_step(struct gate *gate, const struct gate_masked_sink *sink)
{
    const size_t at = (size_t)(gate->n_steps % gate->n_memory);
    bands_push(gate->bank, gate->block);
    gate->power[at] = gate_low_step(&gate->low, gate->block);
    for (uint32_t b = 1; b < gate->n_bands; b++)
        gate->power[b * (size_t)gate->n_memory + at] = bands_get_power(gate->bank, b - 1)[0];
    gate->n_steps++;
    for (uint32_t b = 0; b < gate->n_bands; b++)
        if (gate->bands[b].open)
            gate_extend(gate, b, gate->n_steps - 1, sink);
    expect(gate, gate->n_steps - 1, sink);
    learn_floors(gate, gate->n_steps - 1 - FLOOR_LATE_STEPS);
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

/* What the last impulse was at its highest in the band, averaged in dB with those before. */
static void learn_peak(struct gate *gate, uint32_t b, int64_t end)
{
    struct band *band = &gate->bands[b];
    float peak = 0;
    for (int64_t step = gate->arrival - BEFORE_STEPS; step < end && step < gate->n_steps; step++)
        if (step >= 0 && step >= gate->n_steps - gate->n_memory && power_at(gate, b, step) > peak)
            peak = power_at(gate, b, step);
    if (band->arrival != gate->arrival)
        peak = 0;
    band->usual_peak = band->usual_peak > 0 && peak > 0 ? sqrtf(band->usual_peak * peak) : peak;
}

void gate_get_tail(const struct gate *gate, struct gate_tail *out)
{
    out->n = gate->n_bands;
    int64_t since = gate->n_steps > 0 ? steps_since_onset(gate, gate->n_steps - 1) : -1;
    for (uint32_t b = 0; b < gate->n_bands; b++) {
        const struct band *band = &gate->bands[b];
        double ratio = gate_floor_ratio(&band->floor, (double)since * STEP_S);
        const struct stretch *last = newest(band);
        out->bands[b] = (struct gate_tail_band){.low_hz = band->low_hz,
                                                .high_hz = band->high_hz,
                                                .ratio = (float)ratio,
                                                .masked = band->open,
                                                .masked_from = last ? frame_of(gate, last->start) : 0,
                                                .masked_to = last ? frame_of(gate, last->end) : 0};
    }
}

void gate_push_impulse(struct gate *gate, double onset_frame, double t90_s,
                       const struct gate_masked_sink *sink)
{
    int64_t onset = (int64_t)floor((onset_frame - (double)gate->first_frame) / gate->step_frames);
    if (onset < 0 || onset >= gate->n_steps)
        return;
    int64_t t90 = (int64_t)ceil(t90_s / STEP_S);
    int64_t same = t90 > SAME_STEPS ? t90 : SAME_STEPS;
    gate_rhythm_take(&gate->rhythm, onset_frame / gate->rate_hz);
    if (gate->arrival != NO_STEP && onset < gate->arrival - same)
        return; /* a later one was expected, seen and masked since: this one's band is covered, or it was odd
                 */
    if (gate->arrival == NO_STEP || onset > gate->arrival + same)
        note_onset(gate, onset);
    gate->usual_t90 = t90;
    mask_arrived(gate, sink);
    for (uint32_t b = 0; b < gate->n_bands; b++)
        learn_peak(gate, b, onset + t90 + LATE_BURST_STEPS);
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
