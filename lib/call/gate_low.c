/* The lowest band of the gate; see gate_low.h. */
#include "call/gate_low.h"
#include "dsp/lanes.h"
#include <math.h>
#include <string.h>

#define PARTS 4 /* of a step: 800 Hz */
#define ORDER 3

enum status gate_low_create(double rate_hz, uint32_t step_frames, struct gate_low *out)
{
    *out = (struct gate_low){.step_frames = step_frames};
    if (step_frames < 10 * PARTS)
        return STATUS_BAD_ARGUMENT;
    return filter_band_pass(ORDER, GATE_LOW_LOW_HZ, GATE_LOW_HIGH_HZ, PARTS * rate_hz / step_frames,
                            &out->filter);
}

void gate_low_reset(struct gate_low *low)
{
    filter_reset(&low->filter);
    memset(low->recent, 0, sizeof low->recent);
    low->at = 0;
}

static double mean(const float *x, uint32_t n)
{
    lanes sums = {0};
    uint32_t i = 0;
    for (; i + LANES <= n; i += LANES)
        sums += lanes_load(x + i);
    double sum = lanes_sum(sums);
    for (; i < n; i++)
        sum += (double)x[i];
    return sum / n;
}

float gate_low_step(struct gate_low *low, const float *samples)
{
    double power = 0;
    for (uint32_t part = 0; part < PARTS; part++) {
        uint32_t from = part * low->step_frames / PARTS, to = (part + 1) * low->step_frames / PARTS;
        double y = filter_step(&low->filter, mean(samples + from, to - from));
        power += y * y / PARTS;
    }
    low->recent[low->at] = (float)power;
    low->at = (low->at + 1) % GATE_LOW_LOOK;
    double sum = 0;
    for (uint32_t k = 0; k < GATE_LOW_LOOK; k++)
        sum += (double)low->recent[k];
    return (float)(sum / GATE_LOW_LOOK);
}
