/* Other sources at work; see others.h. */
#include "settings/others.h"
#include "base/units.h"
#include <math.h>

static const char *const sound_words[] = {"impulsive", "continuous"}; /* in the order of criterion_sound */

static void clear_bands(struct together_other *other)
{
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
        other->band_db[b] = -INFINITY;
}

/* The decidecade that a frequency, exact or nominal, is the centre of or lies in; counted from
 * LEVEL_FIRST_BAND. */
static int band_of(double frequency_hz)
{
    return (int)lround(10.0 * log10(frequency_hz / 1000.0)) - LEVEL_FIRST_BAND;
}

/* One level, spread evenly over the decidecades of its band. */
static void spread_level(struct together_other *other, double low_hz, double high_hz)
{
    int low = band_of(low_hz), high = band_of(high_hz);
    clear_bands(other);
    for (int b = low; b <= high; b++)
        other->band_db[b] = other->level_db - units_power_db(high - low + 1);
}

static bool read_decidecades(struct group_reader *group, struct together_other *other)
{
    double hz[LEVEL_MAX_BANDS], db[LEVEL_MAX_BANDS], energy = 0;
    unsigned n = group_numbers(group, "decidecade_hz", READER_OPTIONAL, 10, 4e5, hz, LEVEL_MAX_BANDS);
    unsigned levels = group_numbers(group, "decidecade_db", READER_OPTIONAL, 0, 300, db, LEVEL_MAX_BANDS);
    if (n != levels) {
        group_problem(group, n > levels ? "decidecade_hz" : "decidecade_db",
                      "has %u numbers and its counterpart %u; allowed: as many in decidecade_hz as in "
                      "decidecade_db",
                      n > levels ? n : levels, n > levels ? levels : n);
        return true;
    }
    clear_bands(other);
    for (unsigned i = 0; i < n; i++) {
        if (isfinite(other->band_db[band_of(hz[i])]))
            group_problem(group, "decidecade_hz", "names the decidecade of %g Hz twice; allowed: each once",
                          hz[i]);
        other->band_db[band_of(hz[i])] = db[i];
        energy += units_power_ratio(db[i]);
    }
    other->level_db = n ? units_power_db(energy) : 0;
    return n > 0;
}

static void read_level(struct group_reader *group, struct together_other *other)
{
    double low_hz = 10, high_hz = 20000, level_db = 0;
    bool spectrum = read_decidecades(group, other);
    bool whole = group_number(group, "level_db", READER_OPTIONAL, 0, 300, &level_db);
    bool low = group_number(group, "low_hz", READER_OPTIONAL, 10, 4e5, &low_hz);
    bool high = group_number(group, "high_hz", READER_OPTIONAL, 10, 4e5, &high_hz);
    if (spectrum) {
        if (whole || low || high)
            group_problem(group,
                          whole ? "level_db"
                          : low ? "low_hz"
                                : "high_hz",
                          "stands beside decidecade_db; allowed: either level_db with low_hz and high_hz, or "
                          "decidecade_hz with decidecade_db");
        return;
    }
    if (!whole || !low || !high)
        group_problem(
            group,
            !whole ? "level_db"
            : !low ? "low_hz"
                   : "high_hz",
            "is missing; another source has level_db with low_hz and high_hz, or decidecade_hz with "
            "decidecade_db");
    else if (!(low_hz <= high_hz))
        group_problem(group, "high_hz", "is %g; allowed: at least low_hz, %g", high_hz, low_hz);
    else {
        other->level_db = level_db;
        spread_level(other, low_hz, high_hz);
    }
}

static void read_other(struct group_reader *group, struct together_other *other)
{
    double place[3];
    unsigned sound = SOUND_CONTINUOUS;
    *other = (struct together_other){.at_m = 1, .spread_db = 3, .rate_per_s = 1};
    group_string(group, "name", READER_REQUIRED, other->name, sizeof other->name);
    unsigned n = group_numbers(group, "place_m", READER_REQUIRED, -1e5, 1e5, place, 3);
    if (n == 3) {
        other->ahead_m = place[0];
        other->starboard_m = place[1];
    } else if (n > 0)
        group_problem(group, "place_m", "has %u numbers; allowed: [ahead, starboard, down]", n);
    bool known = group_word(group, "sound", READER_REQUIRED, sound_words, 2, &sound);
    other->sound = (enum criterion_sound)sound;
    group_number(group, "at_m", READER_OPTIONAL, 1, 1e5, &other->at_m);
    group_number(group, "level_spread_db", READER_OPTIONAL, 0, 20, &other->spread_db);
    bool rate = group_number(group, "sounds_per_s", READER_OPTIONAL, 1e-4, 1000, &other->rate_per_s);
    if (known && rate != (sound == SOUND_IMPULSIVE))
        group_problem(group, "sounds_per_s",
                      rate ? "is set for continuous sound; allowed: for impulsive sound only"
                           : "is missing; an impulsive source needs it");
    read_level(group, other);
    group_done(group);
}

uint32_t others_read(struct group_reader *source, struct together_other out[TOGETHER_MAX_OTHERS])
{
    unsigned n = group_count(source, "others", READER_OPTIONAL);
    if (n > TOGETHER_MAX_OTHERS) {
        group_problem(source, "others", "lists %u; allowed: at most %d", n, TOGETHER_MAX_OTHERS);
        return 0;
    }
    for (unsigned i = 0; i < n; i++) {
        struct group_reader item;
        group_at(source, "others", i, &item);
        read_other(&item, &out[i]);
    }
    return n;
}
