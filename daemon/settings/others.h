/* Other sources at work near ours, each with a place and a level that people set.
 *
 *   others = ( { name = "second hammer"; place_m = [900.0, 0.0, 0.0]; sound = "impulsive";
 *                sounds_per_s = 0.7; level_db = 170.0; at_m = 750.0; low_hz = 50.0; high_hz = 1000.0; } );
 *
 * Instead of level_db, low_hz and high_hz: decidecade_hz = [63.0, 80.0]; decidecade_db = [150.0, 151.0]; the
 * level of each. Levels: SPL (re 1 uPa) of a continuous source, SEL (re 1 uPa2 s) of one sound of an
 * impulsive one, at at_m (1: a source level). */
#ifndef SETTINGS_OTHERS_H
#define SETTINGS_OTHERS_H

#include "level/together.h"
#include "settings/reader.h"

/* Reads the list `others` of the group, which may be absent; returns how many there are. Adds problems. */
uint32_t others_read(struct group_reader *source, struct together_other out[TOGETHER_MAX_OTHERS]);

#endif
