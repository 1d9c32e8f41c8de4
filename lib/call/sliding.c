/* Sums of slots over windows; see sliding.h. */
#include "call/sliding.h"

/* Any window. */
static float add_singly(const float *power, uint32_t n, uint32_t window, float *out)
{
    float greatest = 0;
    for (uint32_t i = 0; i < n; i++) {
        out[i] = (float)window_power(power, i, window);
        greatest = out[i] > greatest ? out[i] : greatest;
    }
    return greatest;
}

LANES_WIDE float sliding_means(const float *power, uint32_t n, uint32_t window, float *out)
{
    enum { MARGIN = SLIDING_MOST };
    float store[MARGIN + 2 * SLIDING_MOST + WIDE_LANES];
    float *const sums = store + MARGIN; /* of `have` slots, the last of them power[i - (window - 1)] */
    wide_lanes here, other;
    if (window > SLIDING_MOST || n > SLIDING_MOST)
        return add_singly(power, n, window, out);
    const uint32_t total = n + window - 1;
    memset(store, 0, MARGIN * sizeof *store);
    memcpy(sums, power + 1 - (int64_t)window, total * sizeof *sums);
    memset(sums + total, 0, WIDE_LANES * sizeof *sums);
    memset(out, 0, n * sizeof *out);
    for (uint32_t have = 1, taken = 0; have <= window; have *= 2) {
        if (window & have) {
            for (uint32_t i = 0; i < n; i += WIDE_LANES) {
                wide_load(&here, out + i);
                wide_load(&other, sums + i + window - 1 - taken);
                here += other;
                wide_store(out + i, &here);
            }
            taken += have;
        }
        if (2 * have > window)
            break;
        for (uint32_t i = (total - 1) / WIDE_LANES * WIDE_LANES + WIDE_LANES; i > 0; i -= WIDE_LANES) {
            wide_load(&here, sums + i - WIDE_LANES);
            wide_load(&other, sums + i - WIDE_LANES - have);
            here += other;
            wide_store(sums + i - WIDE_LANES, &here);
        }
    }
    const float scale = 1.0F / (float)window;
    wide_lanes greatest = {0};
    for (uint32_t i = 0; i < n; i += WIDE_LANES) {
        wide_load(&here, out + i);
        here *= scale;
        wide_store(out + i, &here);
        greatest = WIDE_CHOOSE(here > greatest, here, greatest);
    }
    float most = 0;
    for (uint32_t lane = 0; lane < WIDE_LANES; lane++)
        most = greatest[lane] > most ? greatest[lane] : most;
    return most;
}
