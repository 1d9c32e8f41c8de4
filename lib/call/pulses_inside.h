/* What lib/call/pulses.c (the classes) and lib/call/pulses_stages.c (the sound that they share) have in
 * common. Nobody else includes it. */
#ifndef CALL_PULSES_INSIDE_H
#define CALL_PULSES_INSIDE_H

#include "call/bands.h"
#include "call/hidden.h"
#include "call/pulses.h"
#include "call/tied.h"
#include "call/trigger.h"
#include "dsp/decimate.h"

#define PIECE_FRAMES 1024 /* pushed to a decimator at a time */
#define MAX_STAGES 8
#define NOWHERE UINT32_MAX

/* Classes that run at one rate. */
struct stage {
    uint32_t factor;
    double rate_hz;
    uint32_t slot_frames, block_slots, block_frames, history_slots;
    struct decimator *decimator; /* NULL for factor 1 */
    uint32_t from;               /* stage whose samples it takes; NOWHERE: the channel's own */
    double delay_frames;         /* of all decimators before it, in frames of the channel */
    float *decimated;            /* [PIECE_FRAMES + 1] */
    struct bands *bands;
    struct band_edges edges[BANDS_MAX];
    uint32_t n_edges;
    uint32_t filled;
    uint64_t n_blocks; /* since the last reset */
    uint32_t
        tell_blocks; /* trains are told how far the sound has come once in so many, where nothing is found */
    uint32_t n_searches, n_ears;
    struct pulse_search *searches[CATALOGUE_MAX_CLASSES];
    uint32_t ears[CATALOGUE_MAX_CLASSES];
};

/* One hearable class. */
struct ear {
    const struct call_class *call_class;
    uint32_t class_index, stage;
    struct band_parts band, guards[SEARCH_GUARDS];
    struct pulse_search *search; /* one of pulses->searches */
    struct trigger *trigger;
    struct tied tied;
    struct hidden hidden;
    bool behind; /* its trains were not told of the last block */
    uint64_t rejections[REJECT_COUNT];
};

struct pulses {
    double rate_hz;
    uint64_t first_frame, n_frames; /* n_frames: pushed since */
    uint32_t n_stages, n_searches, n_ears, n_classes;
    const struct call_class *classes; /* borrowed */
    struct stage stages[MAX_STAGES];
    struct pulse_search *searches[CATALOGUE_MAX_CLASSES];
    struct ear ears[CATALOGUE_MAX_CLASSES];
    const struct found_sink *sink; /* of the push at hand */
    uint64_t known_frame;
    const struct train *given; /* while the sink has it */
};

/* A class that the rate carries gets an ear, and its bands a stage. STATUS_BAD_ARGUMENT where there are too
 * many. */
enum status stages_add_ear(struct pulses *pulses, const struct call_class *call_class, uint32_t class_index);
/* Once all ears are there. STATUS_NO_MEMORY; what was made is the owner's to destroy. */
enum status stages_create(struct pulses *pulses);
void stages_reset(struct pulses *pulses);
/* Takes at most PIECE_FRAMES of sound, and the same lowered, and calls pulses_search with each block that a
 * stage has full. */
void stages_push(struct pulses *pulses, const float *pascals, uint32_t n, const struct lowered *lowered);
void stages_destroy(struct pulses *pulses);

/* pulses.c: the stage's ears hear the block that its bands have room for. */
void pulses_search(struct pulses *pulses, uint32_t stage);

#endif
