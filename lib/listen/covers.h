/* What recognised sounds of machines, of the job and of the sea cover, and how often they are told.
 *
 * An animal's call speaks for nobody when a sound that is known to be something else covers it: the same
 * time and the same band, and for trains the same rhythm. A sound that was known before the call withholds
 * it; a sound that becomes known later names the call, so that the watch takes its evidence back.
 *
 * A tone close beside a machine's and far weaker is as likely its skirt: doubted (covers_doubts). Noise that
 * swells covers trains of its own rhythm that barely stand out of it; on what else barely does it throws
 * doubt (covers_doubts).
 *
 * Sounds of one class come in entries of at most one in COVERS_ENTRY_S: the first at once, those that follow
 * gathered and counted. One that speaks against a call is given at once, with its own times. */
#ifndef LISTEN_COVERS_H
#define LISTEN_COVERS_H

#include "call/catalogue.h"
#include "listen/joiner.h"
#include <stdbool.h>
#include <stdint.h>

#define COVERS_REMEMBERED 64
#define COVERS_ENTRY_S 10.0

struct covered_call {
    uint64_t counter; /* of its event */
    struct found_call found;
};

/* Sounds of one class that wait for their entry. */
struct gathered {
    bool given; /* one was given at given_frame */
    uint64_t given_frame;
    uint32_t n;
    struct joined_call all; /* the loudest's, with the times, the band and the pulses of all */
};

/* Plain data; reset before use. */
struct covers {
    const struct call_class *classes; /* borrowed */
    uint32_t n_classes;
    double rate_hz;
    uint32_t n_sounds, n_calls;                  /* so far; rings */
    struct found_call sounds[COVERS_REMEMBERED]; /* that speak against calls */
    struct covered_call calls[COVERS_REMEMBERED];
    struct gathered gathered[CATALOGUE_MAX_CLASSES];
};

struct gathered_sink {
    void (*take)(void *context, const struct joined_call *sound, uint32_t n_sounds);
    void *context;
};

void covers_reset(struct covers *covers, const struct call_class *classes, uint32_t n_classes,
                  double rate_hz);
/* What an animal's call still says, in log-odds, after the sounds that are known and cover it; 0: nothing. */
double covers_evidence(const struct covers *covers, const struct found_call *call);
/* Whether a call that barely stands out comes while noise swells (a ship's cavitation), which rises so far by
 * itself, or is a tone above a machine's line and 30 dB weaker than it; or a train of few beats while shrimp
 * snap: such a call is no evidence. */
bool covers_doubts(const struct covers *covers, const struct found_call *call);
/* Remembers a call that was given. */
void covers_keep_call(struct covers *covers, const struct found_call *call, uint64_t counter);
/* A sound that is no animal's has become known: remembers it; writes the counters of the calls given before
 * that it covers, each named by one sound only, and returns how many. */
uint32_t covers_take_sound(struct covers *covers, const struct joined_call *sound,
                           uint64_t out_against[CALL_MAX_AGAINST]);
/* Whether this sound is to be given now, alone; else it is gathered. `urgent`: it speaks against a call. */
bool covers_gives_now(struct covers *covers, const struct joined_call *sound, bool urgent);
/* Gives what was gathered and has waited long enough at end_frame; `all`: everything. */
void covers_give(struct covers *covers, uint64_t end_frame, bool all, const struct gathered_sink *sink);

#endif
