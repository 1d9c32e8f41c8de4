/* What a unit of song says for itself, and what it says among others.
 *
 * A single tone of half a second or three is also what ice, fish and machines give. Song is a row of units,
 * one each 1 to 4 s, of several kinds, for minutes (Payne and McVay 1971, Science 173, 585; Au et al. 2006,
 * J. Acoust. Soc. Am. 120, 1103). So a class that states `song` says all that its evidence holds only where
 * within_s held min_units of its group's song, each at least min_unit_s long, of min_kinds kinds: two units
 * are of different kinds when their middle frequencies differ by a third of an octave, or their lengths by
 * half as much again. Else one unit in lone_s says lone_evidence, and the others repeat_evidence: the same
 * cause, heard again, is no new evidence. A bout of bout_units alike within bout_s, which ice hardly gives,
 * says bout_evidence, once in lone_s. A short tone of the group that states no song, but comes among units
 * that are none, is as likely one of theirs: it says SONG_COMPANY_EVIDENCE. The numbers are the project's
 * own. */
#ifndef LISTEN_SONG_H
#define LISTEN_SONG_H

#include "call/catalogue.h"
#include "call/found.h"
#include <stdbool.h>

#define SONG_REMEMBERED 64
#define SONG_COMPANY_UNITS 2    /* within ... */
#define SONG_COMPANY_S 60.0     /* ... before a tone ... */
#define SONG_COMPANY_TONE_S 3.0 /* ... of at most this length */
#define SONG_COMPANY_EVIDENCE 0.3

struct song_unit {
    enum group group;
    double start_frame, length_s, middle_hz;
    bool sung; /* it was among units of song */
};

/* Plain data; reset before use. */
struct song {
    double rate_hz;
    uint32_t n_units; /* so far; a ring */
    struct song_unit units[SONG_REMEMBERED];
    double lone_frame[GROUP_COUNT]; /* when one last spoke for itself */
    double bout_frame[GROUP_COUNT]; /* and when a bout did */
};

void song_reset(struct song *song, double rate_hz);
/* The most that this call says, in log-odds; INFINITY where this file has nothing to say. Remembers it. */
double song_evidence(struct song *song, const struct call_class *call_class, const struct found_call *found);

#endif
