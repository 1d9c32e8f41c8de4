/* A field check: how loud a channel hears a tone of known level, such as a pistonphone's.
 *
 * The tone is what a Butterworth band-pass of order 2 lets through that is an octave wide about the stated
 * frequency; its level is that of the mean square of whole seconds. Of the seconds in which everything else
 * is at least 10 dB below, those within 0.2 dB of their median are the tone; there must be 3 or more (limits:
 * common practice, no source). */
#ifndef LEVEL_FIELD_CHECK_H
#define LEVEL_FIELD_CHECK_H

#include "base/status.h"
#include "dsp/filter.h"
#include <stdint.h>

#define FIELD_CHECK_MAX_SECONDS 600u
#define FIELD_CHECK_LEAST_SECONDS 3u
#define FIELD_CHECK_STEADY_DB 0.2
#define FIELD_CHECK_CLEAR_DB 10.0

/* Plain data; reset before use. */
struct field_check {
    double rate_hz;
    struct filter filter;
    uint64_t frames; /* taken */
    double tone, all, sum;
    uint32_t n_seconds;
    double tone_pa2[FIELD_CHECK_MAX_SECONDS], all_pa2[FIELD_CHECK_MAX_SECONDS];
};

struct field_check_result {
    double measured_db; /* SPL of the tone, dB re 1 uPa */
    double rest_db;     /* SPL of everything else in the same seconds */
    double seconds;     /* of steady tone */
};

/* tone_hz: 1 Hz to a quarter of the rate. STATUS_BAD_ARGUMENT. */
enum status field_check_reset(struct field_check *check, double rate_hz, double tone_hz);
/* Takes n samples in pascals; the first second lets the filter settle, what is beyond FIELD_CHECK_MAX_SECONDS
 * is passed over. */
void field_check_push(struct field_check *check, const float *pascals, uint32_t n);
/* STATUS_NOT_FOUND where there is no steady or no clear tone. */
enum status field_check_get(const struct field_check *check, struct field_check_result *out);

#endif
