/* Low-pass and decimation of one channel, streaming: a chain of FIR stages (Kaiser window method, Oppenheim
 * and Schafer, "Discrete-Time Signal Processing", section 7.6), pass band flat within 0.05 dB up to 0.4
 * of the output rate, and at least 80 dB down what would alias into that pass band. */
#ifndef DSP_DECIMATE_H
#define DSP_DECIMATE_H

#include "base/status.h"
#include <stddef.h>
#include <stdint.h>

struct decimator;

/* Output rate = input rate / factor; factor 1 copies. The output does not depend on how the input is chunked.
 * STATUS_BAD_ARGUMENT for factor 0 or one with a prime factor above 13. */
enum status decimator_create(uint32_t factor, struct decimator **out);
void decimator_reset(struct decimator *decimator);
/* Takes n samples; writes at most n / factor + 1 to out and returns how many. */
size_t decimator_push(struct decimator *decimator, const float *samples, size_t n, float *out);
/* Delay of the filter chain, in input samples: output sample k is the input at k * factor - delay. */
double decimator_get_delay(const struct decimator *decimator);
void decimator_destroy(struct decimator *decimator);

#endif
