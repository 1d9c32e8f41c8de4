/* What a unit of song says for itself, and what it says among others.
 *
 * A single tone of half a second or three is also what ice, fish and machines give. Song is a row of units,
 * one each 1 to 4 s, of several kinds, for minutes (Payne and McVay 1971, Science 173, 585; Au et al. 2006,
 * J. Acoust. Soc. Am. 120, 1103). So a class that states `song` says all that its evidence holds only where
 * within_s held min_units of its group's song, each at least min_unit_s long, of min_kinds kinds: two units
 * are of different kinds when their middle frequencies differ by a third of an octave, or their lengths by
 * half as much again. Else one unit in lone_s says lone_evidence, and the others repeat_evidence: the same
 * cause, heard again, is no new evidence. The numbers are the project's own. */
#ifndef LISTEN_SONG_H
#define LISTEN_SONG_H

#include "call/catalogue.h"
#include "call/found.h"

#define SONG_REMEMBERED 64

struct song_unit {
    enum group group;
    double start_frame, length_s, middle_hz;
};

/* Plain data; reset before use. */
struct song {
    double rate_hz;
    uint32_t n_units; /* so far; a ring */
    struct song_unit units[SONG_REMEMBERED];
    double lone_frame[GROUP_COUNT]; /* when one last spoke for itself */
};

void song_reset(struct song *song, double rate_hz);
/* The most that this call says, in log-odds; INFINITY for a class that states no song. Remembers it. */
double song_evidence(struct song *song, const struct call_class *call_class, const struct found_call *found);

#endif
