/* What is wrong with one channel: clipped, dead, frozen, too quiet to be in the water, a copy of another.
 *
 * Criteria (common practice, no source, where none is named):
 *   clipping    two or more samples in a row at least full scale less one step of 16 bits (1 -
 *               2^-15); clipped runs less than 0.1 s apart are one interval
 *   dead        every sample the same (zeros or any constant) for at least 0.5 s, found in cells of
 *               256 frames
 *   frozen      the last 0.5 s repeat exactly with some period of at most 0.25 s, as a driver does
 *               that plays one buffer over and over; looked for twice a second
 *   too quiet   a second's SPL is at most 0.5 dB above the stated self-noise, or, on a calibrated
 *               channel, each decidecade from 500 Hz to 5 kHz is 10 dB or more below the calmest
 *               sea: 44.5 dB re 1 uPa2/Hz at 1 kHz, falling 17 dB a decade (sea state 0 of Knudsen,
 *               Alford and Emling, "Underwater ambient noise", J. Mar. Res. 7, 1948). Never on a
 *               relative channel. A hydrophone in air can be louder than that.
 *   duplicate   two channels equal in every cell of half a second: least, greatest and sum of its
 *               samples
 *
 * An interval is given in adjoining pieces, the first after half a second, each as long as all before it and
 * at most 10 s, so that a fault is known early and a long one makes few entries.
 *
 * Call order: create; reset at the start and after each gap; push and take_level; finish before a reset or at
 * the end; destroy. */
#ifndef LEVEL_HEALTH_H
#define LEVEL_HEALTH_H

#include "base/status.h"
#include "level/calibration.h"
#include "level/meter.h"
#include <stdbool.h>
#include <stdint.h>

#define HEALTH_LONGEST_PIECE_S 10.0

enum health_cause {
    HEALTH_CLIPPING,
    HEALTH_DEAD,
    HEALTH_FROZEN,
    HEALTH_TOO_QUIET,
    HEALTH_DUPLICATE, /* the channel hears, but only what its twin hears */
    HEALTH_CAUSE_COUNT
};

/* Frames [start_frame, end_frame) in which the channel had the fault. */
struct found_fault {
    enum health_cause cause;
    uint64_t start_frame, end_frame;
    uint64_t known_frame; /* the last frame needed to give it */
};

struct fault_sink {
    void (*take)(void *context, const struct found_fault *fault);
    void *context;
};

struct health_counts {
    uint64_t n_not_finite; /* samples that were NaN or infinite, since create */
    uint64_t n_clipped;    /* samples in clipped runs, since create */
    double dc;             /* mean of the last half second, full scale = 1 */
    bool faulty[HEALTH_CAUSE_COUNT];
};

struct health;

/* rate_hz 8,000 to 1,000,000; the calibration is copied. STATUS_BAD_ARGUMENT, STATUS_NO_MEMORY; the caller
 * owns *out. */
enum status health_create(double rate_hz, const struct calibration *calibration, struct health **out);
void health_destroy(struct health *health);
void health_reset(struct health *health, uint64_t next_frame);
/* Takes n samples as they came, 1.0 = full scale; those not finite are counted and read as 0. */
void health_push(struct health *health, const float *samples, uint32_t n, const struct fault_sink *sink);
/* Judges the level of one second. */
void health_take_level(struct health *health, const struct found_level *level, const struct fault_sink *sink);
/* After all channels of a stream took the same frames: gives `later` the fault of a duplicate while it equals
 * `earlier`. Compare each pair once. */
void health_compare(const struct health *earlier, struct health *later, const struct fault_sink *sink);
/* Gives what is open. Reset must follow. */
void health_finish(struct health *health, const struct fault_sink *sink);
void health_get_counts(const struct health *health, struct health_counts *out);

#endif
