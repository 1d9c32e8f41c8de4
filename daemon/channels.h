/* What a run says of its channels at its start: their calibrations, and what is wrong with them. */
#ifndef CHANNELS_H
#define CHANNELS_H

#include "base/status.h"
#include "recorder.h"
#include "settings/site.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* The facts of one channel as its settings give them; texts are borrowed from the settings. */
struct channel_facts channels_facts(const struct stream_settings *stream, uint32_t channel, double rate_hz);

/* Writes an entry for each of n_channels of stream `number`, and a health entry for a calibration that is
 * past its due date (by unix_ns) and for a channel whose impulse levels are refused. */
enum status channels_record(struct recorder *recorder, int64_t watch_ns, int64_t unix_ns, uint32_t number,
                            const struct stream_settings *stream, uint32_t n_channels, double rate_hz);

/* Numbers of the channels whose impulse levels are refused, "1, 3", into out[size]; false, and out untouched,
 * where there are none. A channel that only listens measures no impulses, and is none of them. */
bool channels_refused(const struct stream_settings *stream, uint32_t n_channels, char *out, size_t size);

#endif
