/* What a scene truly holds at the first hydrophone, against what was recognised as such. */
#ifndef BENCH_CALLS_PRESENT_H
#define BENCH_CALLS_PRESENT_H

#include "bench/calls/chain.h"

/* A sound is plain when its energy is 30 dB over the density of the scene's noise at its middle frequency
 * (E/N0; an ideal detector needs some 15 dB of a pulse, more of what is long and broad). */
#define PRESENT_PLAIN_DB 30

struct present_sound {
    double start_s, end_s;
    bool plain, recognised;
};

struct present {
    uint32_t n, room;
    struct present_sound *sounds; /* in order of their start, source by source; of snaps none */
    bool lasts;                   /* its pieces join */
};

/* All sounds of the scene. False without memory. */
bool present_list(const struct scene *scene, struct present *out);
void present_free(struct present *present);

/* Seconds or sounds, of the plain ones. */
struct present_count {
    double present, recognised;
};

/* Entries of the classes that are named, one or several ("impulse": impulses as they were measured) against
 * the sounds: an entry of n sounds or pulses accounts for at most n that it meets within 0.1 s. Of what
 * lasts: seconds, and those that entries of the class cover. */
struct present_count present_compare(struct present *present, const struct chain *chain,
                                     const char *class_names);

#endif
