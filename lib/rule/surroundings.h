/* What the watch is kept in: depth, sea state, visibility and light, as people, positions and the clock say.
 * Plain data. */
#ifndef RULE_SURROUNDINGS_H
#define RULE_SURROUNDINGS_H

#include "rule/note.h"
#include "rule/permit.h"
#include <stdbool.h>
#include <stdint.h>

enum light { LIGHT_UNKNOWN, LIGHT_DAY, LIGHT_DARK };

struct surroundings {
    double depth_m; /* NAN: unknown, as all numbers */
    double visibility_m;
    double sea_state;
    double latitude_deg, longitude_deg; /* of the source: where the sun is looked at */
    bool has_clock;
    int64_t zero_unix_ns;    /* UTC of watch time zero */
    struct permit_start day; /* how the permit bounds the day */
    /* What surroundings_update found last: it holds from one time to just before the other. */
    enum light light;
    int64_t light_from_ns, light_until_ns;
};

/* All unknown. */
void surroundings_reset(struct surroundings *surroundings, const struct permit *permit);
/* Another permit bounds the day from now on. */
void surroundings_set_permit(struct surroundings *surroundings, const struct permit *permit);
/* What a note says of them; what it does not say stays as it was. */
void surroundings_take(struct surroundings *surroundings, const struct note *note);

/* Looks at the sun again where that is due; the others below say what it found. */
void surroundings_update(struct surroundings *surroundings, int64_t now_ns);
/* UTC of watch time zero. */
void surroundings_set_clock(struct surroundings *surroundings, int64_t zero_unix_ns);
void surroundings_set_place(struct surroundings *surroundings, double latitude_deg, double longitude_deg);

/* Day from after_sunrise_minutes after sunrise to before_sunset_minutes before sunset, else dark; unknown
 * where time or place are. */
enum light surroundings_light(const struct surroundings *surroundings);
/* When the light next changes, watch time, to the minute; INT64_MAX where it does not within a year, or nobody
 * knows. */
int64_t surroundings_light_change_ns(const struct surroundings *surroundings);
/* Dark as far as is known. */
bool surroundings_dark(const struct surroundings *surroundings);

#endif
