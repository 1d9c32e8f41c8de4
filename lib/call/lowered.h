/* A push's samples at a lower rate, made once for all that want them so. */
#ifndef CALL_LOWERED_H
#define CALL_LOWERED_H

#include <stdint.h>

/* What decimator_create(factor) makes of the samples of one push, having begun with the first sample since
 * the last reset. */
struct lowered {
    uint32_t factor; /* 1: nothing */
    uint32_t n;
    const float *samples; /* valid until the next push */
};

#endif
