/* A position that a feed gives, and how a range became known. */
#ifndef PLACE_POSITION_H
#define PLACE_POSITION_H

#include "base/status.h"
#include <stdint.h>

/* Whose position it is. */
enum position_of {
    POSITION_OF_SOURCE, /* the source's reference point */
    POSITION_OF_VESSEL, /* the antenna on the vessel that carries the source or the hydrophones */
    POSITION_OF_COUNT
};

enum position_from { POSITION_FROM_FEED, POSITION_FROM_NOTE, POSITION_FROM_COUNT };

/* WGS84, degrees, north and east positive; directions true; NAN where not known. */
struct position {
    enum position_of of;
    enum position_from from;
    double latitude_deg, longitude_deg;
    double heading_deg;  /* where the vessel points */
    double course_deg;   /* where it goes, over ground */
    double speed_m_s;    /* over ground */
    double accuracy_m;   /* horizontal, as its receiver says */
    int64_t occurred_ns; /* watch time at which it held */
};

/* The direction in which what the vessel carries is laid out: its heading; where that is unknown its course
 * over ground from POSITION_UNDER_WAY_M_S on (slower, the course of a receiver is noise); else NAN. Common
 * practice, no source. */
#define POSITION_UNDER_WAY_M_S 0.5
double position_ahead_deg(const struct position *position);

/* STATUS_OUT_OF_RANGE unless latitude and longitude are those of a place, directions are NAN or 0 to 360,
 * speed and accuracy NAN or 0 and more, and both words of their tables. */
enum status position_check(const struct position *position);

const char *position_of_text(enum position_of of);       /* "source", "vessel"; never NULL */
const char *position_from_text(enum position_from from); /* "feed", "note"; never NULL */

/* How an impulse's range is known, or why not. */
enum range_from {
    RANGE_UNSET,    /* nobody has said it yet */
    RANGE_GEOMETRY, /* from the settings alone: nothing moves */
    RANGE_POSITIONS,
    RANGE_NO_PLACE,  /* the settings do not say where the channel is */
    RANGE_NO_SOURCE, /* the source's position is not known */
    RANGE_NO_VESSEL, /* the vessel's position is not known */
    RANGE_TOO_OLD,   /* the newest position is too old */
    RANGE_NO_HEADING,
    RANGE_FROM_COUNT
};

/* "geometry", "positions", or the reason in words; "" for RANGE_UNSET; never NULL. */
const char *range_from_text(enum range_from from);

#endif
