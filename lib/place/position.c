/* Positions; see position.h. */
#include "place/position.h"
#include <math.h>
#include <stdbool.h>

static const char *const of_words[] = {[POSITION_OF_SOURCE] = "source", [POSITION_OF_VESSEL] = "vessel"};
static const char *const from_words[] = {[POSITION_FROM_FEED] = "feed", [POSITION_FROM_NOTE] = "note"};
static const char *const range_words[] = {
    [RANGE_UNSET] = "",
    [RANGE_GEOMETRY] = "geometry",
    [RANGE_POSITIONS] = "positions",
    [RANGE_NO_PLACE] = "no place of the channel",
    [RANGE_NO_SOURCE] = "no position of the source",
    [RANGE_NO_VESSEL] = "no position of the vessel",
    [RANGE_TOO_OLD] = "position too old",
    [RANGE_NO_HEADING] = "no heading of the vessel",
};

double position_ahead_deg(const struct position *position)
{
    if (isfinite(position->heading_deg))
        return position->heading_deg;
    return position->speed_m_s >= POSITION_UNDER_WAY_M_S ? position->course_deg : NAN;
}

static bool is_direction(double deg)
{
    return isnan(deg) || (deg >= 0 && deg <= 360);
}

static bool is_amount(double x)
{
    return isnan(x) || (x >= 0 && isfinite(x));
}

enum status position_check(const struct position *position)
{
    bool good = (unsigned)position->of < POSITION_OF_COUNT &&
                (unsigned)position->from < POSITION_FROM_COUNT && fabs(position->latitude_deg) <= 90 &&
                fabs(position->longitude_deg) <= 180 && is_direction(position->heading_deg) &&
                is_direction(position->course_deg) && is_amount(position->speed_m_s) &&
                is_amount(position->accuracy_m);
    return good ? STATUS_OK : STATUS_OUT_OF_RANGE;
}

const char *position_of_text(enum position_of of)
{
    return (unsigned)of < POSITION_OF_COUNT ? of_words[of] : "unknown";
}

const char *position_from_text(enum position_from from)
{
    return (unsigned)from < POSITION_FROM_COUNT ? from_words[from] : "unknown";
}

const char *range_from_text(enum range_from from)
{
    return (unsigned)from < RANGE_FROM_COUNT ? range_words[from] : "unknown";
}
