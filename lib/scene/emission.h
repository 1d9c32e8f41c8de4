/* What leaves a source at once: one call, blow, shot, ping, snap or other sound. */
#ifndef SCENE_EMISSION_H
#define SCENE_EMISSION_H

#include "scene/scene.h"
#include "scene/sound.h"
#include <stdint.h>

enum emission_kind {
    EMISSION_CALL, /* of scene.animals */
    EMISSION_BLOW,
    EMISSION_SHOT,
    EMISSION_PING,
    EMISSION_SNAP,
    EMISSION_SOUND /* of scene.emitters */
};

/* How a sound comes to the hydrophones. */
enum emission_reach {
    REACH_SEA,  /* along straight paths */
    REACH_EACH, /* each hydrophone has its own, at the stated level: flow, rain */
    REACH_ALIKE /* all have the same at once, at the stated level: electrical pick-up */
};

struct emission {
    enum emission_kind kind;
    uint32_t source,
        member;      /* the how-manieth animal, hammer ... of the scene, and which of its members: from 1 */
    uint64_t number; /* of this source and member, from 1 */
    double start_s;  /* at the source */
    struct scene_track track;
    enum emission_reach reach;
    struct sound sound; /* of a train: one pulse */
    struct sound
        tail; /* sounds with it, by the same amplitude: reverberation, a second voice; length 0: none */
    double amplitude;  /* Pa m for a sound of 1 */
    double level_db;   /* as the scene states it: source level, peak source level or source energy level */
    uint32_t n_pulses; /* 0: not a train; the sound is given once, at start_s */
    double pulse_s[SCENE_MAX_PULSES]; /* since start_s, rising */
    float pulse_gain[SCENE_MAX_PULSES];
};

/* The longer of its sound and its tail. */
double emission_sound_s(const struct emission *emission);
/* From its start to the end of its (last) sound, at the source. */
double emission_length_s(const struct emission *emission);

#endif
