/* One channel's ear: everything that listens to and measures one hydrophone. For lib/listen only. */
#ifndef LISTEN_EAR_H
#define LISTEN_EAR_H

#include "base/status.h"
#include "call/found.h"
#include "call/gate.h"
#include "call/pulses.h"
#include "call/tones.h"
#include "level/calibration.h"
#include "level/health.h"
#include "level/impulses.h"
#include "level/meter.h"
#include <stdbool.h>
#include <stdint.h>

/* Where what an ear finds goes, with its channel. */
struct ear_sink {
    void (*level)(void *context, uint32_t channel, const struct found_level *level);
    void (*fault)(void *context, uint32_t channel, const struct found_fault *fault);
    void (*impulse)(void *context, uint32_t channel, const struct found_impulse *impulse);
    void (*call)(void *context, uint32_t channel, const struct found_call *call);
    void (*masked)(void *context, uint32_t channel, const struct gate_masked *masked);
    void *context;
};

/* Members but `sink` belong to the ear. */
struct ear {
    uint32_t channel; /* from 1 */
    bool listens;     /* finds calls */
    bool relative;
    float scale;    /* pascals for a sample of 1.0 */
    float *samples; /* [block], full scale */
    float *pascals; /* [block] */
    uint64_t n_not_finite;
    double band_offset_db[LEVEL_MAX_BANDS]; /* of a sensitivity that varies with frequency */
    bool has_offsets;
    struct meter *meter;
    struct health *health;
    struct impulse_finder *impulses; /* NULL on channels whose impulses nobody asks for */
    struct gate *gate;               /* NULL on all but the channel that gates the stream */
    const struct gate *tail_of;      /* the gate that gates the stream; borrowed, NULL where there is none */
    struct tones *tones;             /* NULL on channels that do not listen, as is pulses */
    struct pulses *pulses;
    struct ear_sink sink; /* borrowed context */
};

struct ear_setup {
    uint32_t channel;
    double rate_hz;
    uint32_t max_frames; /* of a block */
    struct calibration calibration;
    bool finds_impulses;
    bool measures_impulses;           /* their decidecades too */
    bool gates;                       /* says what the impulses that it finds cover */
    const struct call_class *classes; /* borrowed */
    uint32_t n_classes;
    struct ear_sink sink;
};

/* Fills *ear; on failure it holds nothing. STATUS_BAD_ARGUMENT, STATUS_NO_MEMORY. */
enum status ear_create(const struct ear_setup *setup, struct ear *ear);
void ear_destroy(struct ear *ear);
/* Takes its channel of n interleaved frames of n_channels; false when samples among them were not finite
 * (they count as 0). */
bool ear_push(struct ear *ear, const float *frames, uint32_t n, uint32_t n_channels);
/* Its first step: own samples from the interleaved ones into `samples`, as pascals into `pascals`; returns
 * how many were not finite. */
uint32_t ear_pick(struct ear *ear, const float *frames, uint32_t n, uint32_t n_channels);
/* After both took the same frames: `later` has the fault of a duplicate while it equals `earlier`. */
void ear_compare(const struct ear *earlier, struct ear *later);
/* Sound was lost: what is open ends; the next frame is next_frame. */
void ear_reset(struct ear *ear, uint64_t next_frame);
/* The sound has ended. */
void ear_finish(struct ear *ear);

#endif
