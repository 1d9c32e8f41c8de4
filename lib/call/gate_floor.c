/* A band's floor per time since the impulse; see gate_floor.h. */
#include "call/gate_floor.h"
#include <math.h>

#define MOST_STEP 1.41254F /* 1.5 dB */
#define KNOWN 3            /* impulses */

static void learn(struct gate_floor *floor, float power)
{
    float *level = &floor->level[floor->bin];
    uint32_t n = floor->n_learned[floor->bin]++;
    if (n < KNOWN - 1) /* the mean in dB of the first ones */
        *level = n == 0 ? power : powf(*level, (float)n / (float)(n + 1)) * powf(power, 1 / (float)(n + 1));
    else
        *level *= fminf(MOST_STEP, fmaxf(1 / MOST_STEP, sqrtf(power / *level)));
    floor->quiet = 0;
    for (uint32_t bin = 0; bin < GATE_FLOOR_BINS; bin++)
        if (floor->n_learned[bin] >= KNOWN && (floor->quiet <= 0 || floor->level[bin] < floor->quiet))
            floor->quiet = floor->level[bin];
}

void gate_floor_take(struct gate_floor *floor, double time_s, float power, uint32_t steps_a_bin)
{
    uint32_t bin =
        time_s < GATE_FLOOR_BIN_S * GATE_FLOOR_BINS ? (uint32_t)(time_s / GATE_FLOOR_BIN_S) : GATE_FLOOR_BINS;
    if (bin != floor->bin) {
        if (floor->bin < GATE_FLOOR_BINS && 2 * floor->n_steps >= steps_a_bin && floor->sum > 0)
            learn(floor, (float)(floor->sum / floor->n_steps));
        floor->bin = bin;
        floor->n_steps = 0;
        floor->sum = 0;
    }
    floor->sum += power;
    floor->n_steps++;
}

double gate_floor_ratio(const struct gate_floor *floor, double time_s)
{
    if (!(time_s >= 0 && time_s < GATE_FLOOR_BIN_S * GATE_FLOOR_BINS))
        return 1;
    uint32_t bin = (uint32_t)(time_s / GATE_FLOOR_BIN_S);
    if (floor->n_learned[bin] < KNOWN || !(floor->quiet > 0))
        return 1;
    return fmax(1, (double)floor->level[bin] / (double)floor->quiet);
}
