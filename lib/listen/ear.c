/* One channel's ear; see ear.h. */
#include "listen/ear.h"
#include "dsp/lanes.h"
#include <math.h>
#include <stdlib.h>

#define GATE_MEMORY_S 3.0 /* an impulse is known at most 1.3 s after its onset */

static enum status create_parts(const struct ear_setup *setup, struct ear *ear)
{
    enum status status = meter_create(setup->rate_hz, ear->relative, &ear->meter);
    if (status == STATUS_OK)
        status = health_create(setup->rate_hz, &setup->calibration, &ear->health);
    if (status == STATUS_OK && setup->finds_impulses)
        status = impulse_finder_create(setup->rate_hz, calibration_pa_per_unit(&setup->calibration),
                                       setup->measures_impulses, &ear->impulses);
    if (status == STATUS_OK && setup->gates)
        status = gate_create(setup->rate_hz, GATE_MEMORY_S, &ear->gate);
    if (status == STATUS_OK && ear->listens)
        status = tones_create(setup->classes, setup->n_classes, setup->rate_hz, &ear->tones);
    if (status == STATUS_OK && ear->listens)
        status = tones_keep_lowered(ear->tones, setup->max_frames);
    if (status == STATUS_OK && ear->listens)
        status = pulses_create(setup->classes, setup->n_classes, setup->rate_hz, &ear->pulses);
    return status;
}

enum status ear_create(const struct ear_setup *setup, struct ear *ear)
{
    *ear = (struct ear){.channel = setup->channel,
                        .listens = setup->calibration.role != ROLE_MEASURE && setup->n_classes > 0,
                        .relative = !setup->calibration.known,
                        .scale = (float)calibration_pa_per_unit(&setup->calibration),
                        .sink = setup->sink};
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
        ear->band_offset_db[b] = calibration_band_offset_db(&setup->calibration, LEVEL_FIRST_BAND + (int)b);
    ear->has_offsets = setup->calibration.known && setup->calibration.n_points > 0;
    ear->samples = calloc(setup->max_frames, sizeof(float));
    ear->pascals = calloc(setup->max_frames, sizeof(float));
    enum status status = ear->samples && ear->pascals ? create_parts(setup, ear) : STATUS_NO_MEMORY;
    if (status != STATUS_OK)
        ear_destroy(ear);
    return status;
}

void ear_destroy(struct ear *ear)
{
    if (!ear)
        return;
    meter_destroy(ear->meter);
    health_destroy(ear->health);
    impulse_finder_destroy(ear->impulses);
    gate_destroy(ear->gate);
    tones_destroy(ear->tones);
    pulses_destroy(ear->pulses);
    free(ear->samples);
    free(ear->pascals);
    *ear = (struct ear){0};
}

static void take_fault(void *context, const struct found_fault *fault)
{
    const struct ear *ear = context;
    ear->sink.fault(ear->sink.context, ear->channel, fault);
}

static void correct_bands(const struct ear *ear, double *band_db, uint32_t n)
{
    for (uint32_t b = 0; b < n && ear->has_offsets; b++)
        band_db[b] += ear->band_offset_db[b];
}

static void take_level(void *context, const struct found_level *found)
{
    struct ear *ear = context;
    const struct fault_sink faults = {take_fault, ear};
    struct found_level level = *found;
    correct_bands(ear, level.band_db, level.n_bands);
    ear->sink.level(ear->sink.context, ear->channel, &level);
    health_take_level(ear->health, &level, &faults);
}

static void take_masked(void *context, const struct gate_masked *masked)
{
    const struct ear *ear = context;
    ear->sink.masked(ear->sink.context, ear->channel, masked);
}

/* The gate does not wait for an echo. */
static void take_heard(void *context, double onset_frame, double t90_s)
{
    struct ear *ear = context;
    const struct gate_masked_sink masked = {take_masked, ear};
    if (ear->gate)
        gate_push_impulse(ear->gate, onset_frame, t90_s, &masked);
}

static void take_impulse(void *context, const struct found_impulse *found)
{
    struct ear *ear = context;
    struct found_impulse corrected = *found;
    const struct found_impulse *impulse = &corrected;
    correct_bands(ear, corrected.band_sel_db, corrected.n_bands);
    ear->sink.impulse(ear->sink.context, ear->channel, impulse);
}

static void take_call(void *context, const struct found_call *call)
{
    const struct ear *ear = context;
    ear->sink.call(ear->sink.context, ear->channel, call);
}

static bool pick_one(struct ear *ear, float sample, uint32_t i)
{
    ear->samples[i] = sample;
    ear->pascals[i] = isfinite(sample) ? sample * ear->scale : 0.0F;
    return isfinite(sample);
}

uint32_t ear_pick(struct ear *ear, const float *frames, uint32_t n, uint32_t n_channels)
{
    const float *from = frames + (ear->channel - 1);
    const lanes scale = {ear->scale, ear->scale, ear->scale, ear->scale};
    lane_mask finite_count = {0};
    uint32_t i = 0, n_finite = 0;
    for (; i + LANES <= n; i += LANES, from += (size_t)LANES * n_channels) {
        const lanes x = {from[0], from[n_channels], from[2 * (size_t)n_channels],
                         from[3 * (size_t)n_channels]};
        const lane_mask finite = x - x == (lanes){0}; /* infinity less itself is no number */
        lanes_store(ear->samples + i, x);
        lanes_store(ear->pascals + i, (lanes)((lane_mask)(x * scale) & finite));
        finite_count -= finite;
    }
    for (uint32_t lane = 0; lane < LANES; lane++)
        n_finite += (uint32_t)finite_count[lane];
    for (; i < n; i++, from += n_channels)
        n_finite += pick_one(ear, *from, i);
    return n - n_finite;
}

bool ear_push(struct ear *ear, const float *frames, uint32_t n, uint32_t n_channels)
{
    const struct fault_sink faults = {take_fault, ear};
    const struct level_sink levels = {take_level, ear};
    const struct impulse_sink impulses = {take_impulse, ear, take_heard};
    const struct found_sink calls = {take_call, ear};
    const struct gate_masked_sink masked = {take_masked, ear};
    uint32_t bad = ear_pick(ear, frames, n, n_channels);
    ear->n_not_finite += bad;
    health_push(ear->health, ear->samples, n, &faults);
    meter_push(ear->meter, ear->pascals, n, &levels);
    if (ear->gate)
        gate_push(ear->gate, ear->pascals, n, &masked);
    if (ear->impulses)
        impulse_finder_push(ear->impulses, ear->pascals, n, &impulses);
    if (ear->listens && ear->tail_of) {
        struct gate_tail tail;
        gate_get_tail(ear->tail_of, &tail);
        tones_hear_tail(ear->tones, &tail);
    }
    if (ear->listens) {
        tones_push(ear->tones, ear->pascals, n, &calls);
        const struct lowered lowered = tones_get_lowered(ear->tones);
        pulses_push_lowered(ear->pulses, ear->pascals, n, &lowered, &calls);
    }
    return bad == 0;
}

void ear_compare(const struct ear *earlier, struct ear *later)
{
    const struct fault_sink faults = {take_fault, later};
    health_compare(earlier->health, later->health, &faults);
}

void ear_finish(struct ear *ear)
{
    const struct fault_sink faults = {take_fault, ear};
    const struct level_sink levels = {take_level, ear};
    const struct impulse_sink impulses = {take_impulse, ear, take_heard};
    const struct found_sink calls = {take_call, ear};
    if (ear->impulses)
        impulse_finder_finish(ear->impulses, &impulses);
    meter_finish(ear->meter, &levels);
    health_finish(ear->health, &faults);
    if (ear->listens) {
        tones_finish(ear->tones, &calls);
        pulses_finish(ear->pulses, &calls);
    }
}

void ear_reset(struct ear *ear, uint64_t next_frame)
{
    ear_finish(ear);
    meter_reset(ear->meter, next_frame);
    health_reset(ear->health, next_frame);
    if (ear->impulses)
        impulse_finder_reset(ear->impulses, next_frame);
    if (ear->gate)
        gate_reset(ear->gate, next_frame);
    if (ear->listens) {
        tones_reset(ear->tones, next_frame);
        pulses_reset(ear->pulses, next_frame);
    }
}
