/* A scene: a described stretch of sea that is simulated. Plain data; config/scenes holds some, and
 * daemon/settings/scene.c loads them. What animals and emitters may give stands in kind.h.
 *
 * Places are in metres from the source's reference point at the surface: x ahead (or north), y to starboard
 * (or east), z down. Times are in seconds since the scene's first frame. Sound travels straight at one speed,
 * spreads spherically and is absorbed at each component's centre frequency; with surface_reflection the sea
 * surface adds a second path of opposite sign. No bottom, no refraction, and noise that is independent from
 * hydrophone to hydrophone: a scene proves the program, not the sea. */
#ifndef SCENE_SCENE_H
#define SCENE_SCENE_H

#include "base/status.h"
#include "call/call.h"
#include "flow.h"
#include "level/calibration.h"
#include <stdbool.h>
#include <stdint.h>

#define SCENE_MAX_ANIMALS 32
#define SCENE_MAX_EMITTERS 32
#define SCENE_MAX_SETTINGS 4
#define SCENE_MAX_MEMBERS 16
#define SCENE_MAX_HAMMERS 4
#define SCENE_MAX_STEPS 16
#define SCENE_MAX_AIRGUNS 4
#define SCENE_MAX_ECHOSOUNDERS 8
#define SCENE_MAX_SHIPS 4
#define SCENE_MAX_LINES 16
#define SCENE_MAX_PULSES 256
#define SCENE_TEXT_SIZE 256

struct scene_place {
    double x_m, y_m, z_m;
};

/* A straight track at constant depth: where it is at time 0, and how it moves from there. */
struct scene_track {
    struct scene_place at_start;
    double course_deg; /* 0 along x, 90 along y */
    double speed_m_s;
};

struct scene_kind; /* what it gives; see kind.h */

/* An animal, or another source of sounds that one kind makes. NAN and 0 leave a value to the kind. */
struct scene_emitter {
    const struct scene_kind *kind;
    struct scene_track track;
    uint32_t members; /* so many of them, each for itself, within spread_m of the track */
    double spread_m;
    double start_s, end_s; /* the first sound begins at start_s, none after end_s */
    /* Towards the hydrophones, dB re 1 uPa m: of a tone its mean-square level over the call, of pulses the
     * zero-to-peak level of the strongest; dB re 1 uPa2 m2 s where the kind states energy; dB re 1 uPa at the
     * hydrophone where it has no place. NAN: the kind's. */
    double source_level_db;
    double interval_s;       /* from one start to the next; of animals within 20 %; NAN: the kind's */
    double pulse_interval_s; /* of a train, within 4 %; NAN: the kind's */
    uint32_t pulses;         /* of a train; 0: the kind's */
    double settings[SCENE_MAX_SETTINGS]; /* what the kind alone has, in its order */
};

struct scene_step {
    double duration_s;
    double blow_interval_s;
    double source_energy_level_db; /* of one blow, dB re 1 uPa2 m2 s; NAN: no blows in this step */
};

/* A pile driver: its steps follow each other from start_s; a soft start is a row of rising steps. */
struct scene_hammer {
    struct scene_track track; /* of the sound's centre */
    double start_s;
    uint32_t n_steps;
    struct scene_step steps[SCENE_MAX_STEPS];
    double interval_spread; /* standard deviation of ln(interval) from blow to blow */
    double level_spread_db; /* standard deviation of the level from blow to blow */
};

struct scene_airguns {
    struct scene_track track;
    double start_s, end_s, shot_interval_s;
    double source_energy_level_db;
    double late_burst_energy_level_db; /* of the burst at 10 to 20 kHz behind each shot; 0: none */
    double reverberation_s;            /* in which what comes back from the sea falls by 60 dB; 0: none */
};

struct scene_echosounder {
    struct scene_track track;
    double start_s, end_s;
    double frequency_hz, ping_s, ping_interval_s;
    double source_level_db; /* mean square over the ping, towards the hydrophones */
};

/* The steady lines of a ship's machinery. */
struct scene_ship {
    struct scene_track track;
    uint32_t n_lines;
    double line_hz[SCENE_MAX_LINES];
    double source_level_db; /* of each line */
};

/* Snaps at random places around the first hydrophone, at random times. */
struct scene_shrimp {
    double snaps_per_s; /* 0: none */
    double source_level_db;
    double radius_m;
};

struct scene_sea {
    double temperature_c, salinity, ph;
    double depth_m; /* at which speed and absorption are taken */
    double latitude_deg;
    bool ambient;              /* noise of wind and ships; false: silence */
    double wind_m_s;           /* at 10 m */
    double shipping;           /* 0 none .. 1 heavy */
    double surface_reflection; /* 0 none .. 1 a mirror (of opposite sign) */
};

struct scene_hydrophone {
    struct scene_place place;
    struct calibration calibration; /* known: samples are full-scale units by it */
};

struct scene {
    uint64_t seed;
    double duration_s;
    double rate_hz;
    struct scene_sea sea;
    uint32_t n_hydrophones, n_animals, n_emitters, n_hammers, n_airguns, n_echosounders, n_ships;
    struct scene_hydrophone hydrophones[FLOW_MAX_CHANNELS];
    struct scene_emitter animals[SCENE_MAX_ANIMALS];
    struct scene_emitter emitters[SCENE_MAX_EMITTERS]; /* what is easily taken for an animal, and is none */
    struct scene_hammer hammers[SCENE_MAX_HAMMERS];
    struct scene_airguns airguns[SCENE_MAX_AIRGUNS];
    struct scene_echosounder echosounders[SCENE_MAX_ECHOSOUNDERS];
    struct scene_ship ships[SCENE_MAX_SHIPS];
    struct scene_shrimp shrimp;
};

/* An empty scene: no source, a temperate sea in a light wind, no hydrophone yet. */
void scene_reset(struct scene *scene);
/* An animal, emitter, hammer ... as the recipes have it, for the whole scene. A name that no kind has leaves
 * the kind NULL, which scene_check refuses. */
struct scene_emitter scene_emitter_of(const char *kind);
/* One of the kind's own settings by its key. STATUS_NOT_FOUND; STATUS_OUT_OF_RANGE. */
enum status scene_emitter_set(struct scene_emitter *emitter, const char *key, double value);
struct scene_hammer scene_hammer_of(void);

/* The n-th thing that makes the scene impossible to render (n = 0, 1, 2 ...): STATUS_OUT_OF_RANGE and a
 * sentence in out_problem; STATUS_OK when there are no more. */
enum status scene_check(const struct scene *scene, uint32_t n, char out_problem[SCENE_TEXT_SIZE]);

/* Where a track is at a time. */
struct scene_place scene_track_at(const struct scene_track *track, double time_s);

#endif
