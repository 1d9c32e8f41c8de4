/* What the parts of the gate share: gate.c (what is known of the impulses) and gate_mask.c (what an impulse
 * covers). Nobody else includes it. */
#ifndef CALL_GATE_INNER_H
#define CALL_GATE_INNER_H

#include "call/bands.h"
#include "call/gate.h"
#include "call/gate_floor.h"
#include "call/gate_low.h"
#include "call/gate_rhythm.h"

#define STEP_S 0.005
#define LATE_BURST_STEPS 5   /* 25 ms: a burst that begins so late is still the same event */
#define BEFORE_STEPS 2       /* the 5 % energy point lies after the true onset */
#define BACKGROUND_STEPS 100 /* 0.5 s before the onset */
#define STRETCHES 64
#define ONSETS 8 /* of impulses that may become known late */
#define NO_STEP (-1)

/* A masked stretch, in steps since the last reset; end is exclusive. */
struct stretch {
    int64_t start, end;
};

struct band {
    double low_hz, high_hz;
    struct stretch stretches[STRETCHES]; /* a ring, newest last */
    uint32_t n_stretches;
    bool open; /* the newest stretch has no end yet */
    int64_t open_limit, quiet_since;
    int64_t tail_from;   /* from this step on the band has to fall */
    int64_t stall_steps; /* over how long its fall is judged */
    float stall_ratio;   /* power after less power before that is no fall */
    double background;
    int64_t arrival;  /* of the impulse that this band was last looked at for */
    float usual_peak; /* power, where impulses stand out in this band */
    struct gate_floor floor;
};

struct gate {
    double rate_hz;
    uint32_t step_frames, n_bands;
    uint32_t n_memory; /* steps */
    uint64_t first_frame;
    int64_t n_steps; /* since the last reset */
    uint32_t filled;
    float *block; /* [step_frames] */
    float *power; /* [n_bands][n_memory], a ring */
    struct bands *bank;
    struct gate_low low;
    struct band bands[GATE_BANDS]; /* the lowest is `low`, the others are those of the bank */
    struct gate_rhythm rhythm;
    int64_t arrival, usual_t90; /* steps; of the last impulse, as soon as it was seen */
    int64_t onsets[ONSETS];     /* a ring */
    uint32_t n_onsets;
};

static inline double frame_of(const struct gate *gate, int64_t step)
{
    return (double)gate->first_frame + (double)step * gate->step_frames;
}

static inline float power_at(const struct gate *gate, uint32_t b, int64_t step)
{
    return gate->power[(size_t)b * gate->n_memory + (size_t)(step % gate->n_memory)];
}

static inline struct stretch *newest(const struct band *band)
{
    return band->n_stretches ? (struct stretch *)&band->stretches[(band->n_stretches - 1) % STRETCHES] : NULL;
}

/* gate_mask.c: masks what an impulse with its onset and T90 in these steps covers of the band, as far as it
 * stands out there by now; takes one more step into the band's open stretch, or ends it. */
void gate_mask_band(struct gate *gate, uint32_t b, int64_t onset, int64_t t90,
                    const struct gate_masked_sink *sink);
void gate_extend(struct gate *gate, uint32_t b, int64_t step, const struct gate_masked_sink *sink);

#endif
