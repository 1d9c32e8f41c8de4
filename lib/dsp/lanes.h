/* Four floats at a time, as gcc and clang give them on any processor (their vector extension): for the few
 * loops that every sample passes. Order of additions is fixed, so results do not depend on the compiler's
 * mood. */
#ifndef DSP_LANES_H
#define DSP_LANES_H

#include <stdint.h>
#include <string.h>

#define LANES 4u

typedef float lanes __attribute__((vector_size(16)));
typedef int32_t lane_mask __attribute__((vector_size(16)));

/* From and to memory of any alignment. */
static inline lanes lanes_load(const float *from)
{
    lanes x;
    memcpy(&x, from, sizeof x);
    return x;
}

static inline void lanes_store(float *to, lanes x)
{
    memcpy(to, &x, sizeof x);
}

/* The smaller and the greater of each pair; b where either is NAN. */
static inline lanes lanes_least(lanes a, lanes b)
{
    lane_mask mask = a < b;
    return (lanes)((mask & (lane_mask)a) | (~mask & (lane_mask)b));
}

static inline lanes lanes_greatest(lanes a, lanes b)
{
    lane_mask mask = a > b;
    return (lanes)((mask & (lane_mask)a) | (~mask & (lane_mask)b));
}

static inline double lanes_sum(lanes x)
{
    return ((double)x[0] + x[1]) + ((double)x[2] + x[3]);
}

#endif
