/* The site's source: what it is, what it makes, how its sound falls, and against what it is judged.
 *
 *   source = { form = "pile"; sound = "impulsive"; loss_n_db = 15.0; loss_n_spread_db = 2.5; level_spread_db
 * = 1.0; criteria = ["criteria/nmfs-2024.cfg"]; }; */
#ifndef SETTINGS_SOURCE_H
#define SETTINGS_SOURCE_H

#include "level/criterion.h"
#include "level/source.h"
#include "level/together.h"
#include "settings/position.h"
#include "settings/reader.h"

#define SOURCE_MAX_SETS 8

struct source_settings {
    struct source_shape shape;
    struct place_settings place; /* where it stays */
    enum criterion_sound sound;  /* impulsive or continuous: set, never guessed */
    double loss_n_db, loss_n_spread_db;
    double temperature_c, salinity, depth_m; /* of the water */
    bool depth_known; /* it was stated; else a value that absorption can do with */
    double level_spread_db;                  /* standard deviation of calibration and place */
    double scatter_db;                       /* of one impulse about the loss law */
    unsigned n_sets;
    char sets[SOURCE_MAX_SETS][512]; /* files of criteria; none: nothing is summed */
    uint32_t n_others;
    struct together_other others[TOGETHER_MAX_OTHERS]; /* at work at the same time: settings/others.h */
};

/* Reads the group `source`, which may be absent; relative paths start at `folder`. Adds problems. */
void source_settings_read(struct group_reader *root, const char *folder, struct source_settings *out);

/* Loads all sets. STATUS_OK also for none. Adds problems; effective may be NULL. */
enum status source_settings_criteria(const struct source_settings *settings, struct problems *problems,
                                     struct text *effective, struct criteria *out);

#endif
