/* A kind of sound that a scene may hold: a call, or what is easily taken for one. Each is one row in a file
 * kind_*.c, beside its published figures and their source, and one line in kind.c. */
#ifndef SCENE_KIND_H
#define SCENE_KIND_H

#include "base/random.h"
#include "call/call.h"
#include "scene/emission.h"
#include "scene/scene.h"
#include <stdbool.h>

/* What the kind alone has beside the keys of every emitter. */
struct kind_setting {
    const char *key; /* NULL ends the list; with its unit, as in scene files */
    double low, high, usual;
};

/* What source_level_db means. */
enum kind_level { LEVEL_MEAN_SQUARE, LEVEL_PEAK, LEVEL_ENERGY };

/* How its signal-to-noise ratio is stated in the truth. */
enum kind_snr {
    SNR_NONE,
    SNR_PULSE, /* 20 lg(envelope's peak / rms noise in its band) */
    SNR_CELL, /* a steady tone of its mean square in a cell of a Hann window of cell_s, over the median of the
                 noise there, mean over the contour */
    SNR_BAND  /* energy over that of the noise in its band and length */
};

/* One sound that is asked for. */
struct kind_order {
    const struct scene_emitter *emitter;
    double rate_hz;
    uint64_t repertoire; /* names the animal: the same value gives the same habits */
    uint64_t number;     /* of this source, from 1 */
    uint32_t unit;       /* of a song: which of the animal's types */
    double since_s;      /* since the emitter's start */
    bool rests;          /* a long pause follows (each 40 to 60 sounds) */
};

struct scene_kind {
    const char *name;  /* in scene files */
    const char *class; /* what it ought to be heard as */
    enum group group;  /* GROUP_UNKNOWN: no animal */
    bool is_animal;    /* belongs in `animals` */
    enum kind_level level;
    enum kind_snr snr;
    double cell_s;          /* of SNR_CELL */
    double source_level_db; /* usual */
    double min_rate_hz;     /* a lower sampling rate does not carry it */
    double max_length_s;    /* of one sound, without pulses or pulse_interval_s of the emitter */
    double min_spacing_s;   /* from one start to the next, without interval_s of the emitter */
    bool is_song;           /* units by phrases */
    bool is_machine;        /* interval_s is kept exactly, by default min_spacing_s */
    bool lasts;             /* without end: made of pieces that join, see sound.h */
    enum emission_reach reach;
    struct kind_setting settings[SCENE_MAX_SETTINGS + 1];
    /* Makes sound (normalised as `level` says; of a train its pulse), tail, pulse times and gains. */
    void (*make)(const struct kind_order *order, struct random *random, struct emission *out);
    /* From one start to the next, after a sound of length_s; NULL: is_machine or lasts. */
    double (*spacing_s)(const struct kind_order *order, double length_s, struct random *random);
    /* Where settings change max_length_s; NULL: none do. */
    double (*length_s)(const struct scene_emitter *emitter);
    /* What is impossible in its settings together at a sampling rate; NULL: nothing. May be NULL itself. */
    const char *(*problem)(const struct scene_emitter *emitter, double rate_hz);
};

/* The n-th kind, NULL after the last; the one of that name, NULL where there is none. */
const struct scene_kind *scene_kind_at(unsigned n);
const struct scene_kind *scene_kind_find(const char *name);

/* One sound of an emitter: its waveform, pulses and level. */
void kind_make(const struct kind_order *order, struct random *random, struct emission *out);

#endif
