/* A hard limiter that looks ahead: no sample of its output is beyond the ceiling, and the gain moves
 * smoothly.
 *
 * Method: the gain that each sample needs, min(1, ceiling / |x|); its least value within `reach` samples on
 * either side; the mean of that within `reach` samples on either side. The mean is over values each of which
 * is at most the sample's own need, so the ceiling holds exactly (sliding minimum: Lemire, "Streaming
 * maximum-minimum filter using no more than three comparisons per element", Nordic J. Computing 13, 2006). */
#ifndef DSP_LIMITER_H
#define DSP_LIMITER_H

#include "base/status.h"
#include <stddef.h>

/* Multiplies n samples by gain and limits them, in place. ceiling > 0; reach at least 1. Windows end where
 * the samples do. STATUS_BAD_ARGUMENT, STATUS_NO_MEMORY (8 bytes a sample of reach, samples untouched). */
enum status limiter_apply(float *samples, size_t n, double gain, double ceiling, size_t reach);

#endif
