/* Ranges from positions; see ranges.h. */
#include "place/ranges.h"
#include "base/time.h"
#include "place/geodesy.h"
#include <math.h>
#include <stddef.h>

#define RADIANS (3.14159265358979323846 / 180)

/* Where something is: a position, and how far from it, metres east and north. */
struct spot {
    struct geodesy_point point;
    double east_m, north_m;
};

void ranges_reset(struct ranges *ranges, const struct ranges_setup *setup)
{
    *ranges = (struct ranges){.setup = *setup};
}

void ranges_take(struct ranges *ranges, const struct position *position)
{
    bool of_source = position->of == POSITION_OF_SOURCE;
    struct position *kept = of_source ? &ranges->source : &ranges->vessel;
    bool *has = of_source ? &ranges->has_source : &ranges->has_vessel;
    if (position_check(position) != STATUS_OK || (*has && position->occurred_ns < kept->occurred_ns))
        return;
    *kept = *position;
    *has = true;
}

void ranges_end_job(struct ranges *ranges)
{
    ranges->has_source = false;
}

static bool too_old(const struct ranges *ranges, const struct position *position, int64_t now_ns)
{
    return time_to_s(now_ns - position->occurred_ns) > ranges->setup.oldest_s;
}

/* What a vessel carries, ahead_m and starboard_m from its antenna. */
static enum range_from carried(const struct ranges *ranges, int64_t now_ns, double ahead_m,
                               double starboard_m, struct spot *out)
{
    const struct position *vessel = &ranges->vessel;
    if (!ranges->has_vessel)
        return RANGE_NO_VESSEL;
    if (too_old(ranges, vessel, now_ns))
        return RANGE_TOO_OLD;
    double ahead = position_ahead_deg(vessel) * RADIANS;
    *out = (struct spot){.point = {vessel->latitude_deg, vessel->longitude_deg}};
    if (ahead_m == 0 && starboard_m == 0)
        return RANGE_POSITIONS;
    if (isnan(ahead))
        return RANGE_NO_HEADING;
    out->east_m = ahead_m * sin(ahead) + starboard_m * cos(ahead);
    out->north_m = ahead_m * cos(ahead) - starboard_m * sin(ahead);
    return RANGE_POSITIONS;
}

static enum range_from source_spot(const struct ranges *ranges, int64_t now_ns, struct spot *out)
{
    const struct ranges_setup *setup = &ranges->setup;
    const struct position *said = &ranges->source;
    bool moves = setup->moves == RANGES_SOURCE;
    bool said_last = ranges->has_source &&
                     (!moves || !ranges->has_vessel || said->occurred_ns >= ranges->vessel.occurred_ns);
    if (said_last) {
        *out = (struct spot){.point = {said->latitude_deg, said->longitude_deg}};
        return moves && too_old(ranges, said, now_ns) ? RANGE_TOO_OLD : RANGE_POSITIONS;
    }
    if (moves)
        return carried(ranges, now_ns, setup->source_offset_m[0], setup->source_offset_m[1], out);
    *out = (struct spot){.point = {setup->latitude_deg, setup->longitude_deg}};
    return setup->has_source ? RANGE_POSITIONS : RANGE_NO_SOURCE;
}

static enum range_from channel_spot(const struct ranges *ranges, const struct ranges_stream *stream,
                                    const double place_m[3], int64_t now_ns, struct spot *out)
{
    if (!stream->has_position)
        return carried(ranges, now_ns, place_m[0], place_m[1], out);
    *out = (struct spot){
        .point = {stream->latitude_deg, stream->longitude_deg}, .east_m = place_m[1], .north_m = place_m[0]};
    return RANGE_POSITIONS;
}

static enum range_from between(const struct ranges *ranges, const struct ranges_stream *stream,
                               const double place_m[3], int64_t now_ns, double *out_m)
{
    struct spot source, channel;
    double east_m, north_m;
    enum range_from from = source_spot(ranges, now_ns, &source);
    if (from == RANGE_POSITIONS)
        from = channel_spot(ranges, stream, place_m, now_ns, &channel);
    if (from != RANGE_POSITIONS)
        return from;
    if (geodesy_local(channel.point, source.point, &east_m, &north_m) != STATUS_OK)
        return RANGE_NO_SOURCE;
    east_m += source.east_m - channel.east_m;
    north_m += source.north_m - channel.north_m;
    *out_m = sqrt(east_m * east_m + north_m * north_m + place_m[2] * place_m[2]);
    return RANGE_POSITIONS;
}

double ranges_get(const struct ranges *ranges, uint32_t stream, uint32_t channel, int64_t now_ns,
                  enum range_from *out_from)
{
    enum range_from from = RANGE_NO_PLACE;
    double range_m = NAN;
    if (stream >= 1 && stream <= ranges->setup.n_streams && channel >= 1 && channel <= RANGES_MAX_CHANNELS) {
        const struct ranges_stream *of = &ranges->setup.streams[stream - 1];
        const double *place_m = of->place_m[channel - 1];
        double length_m = sqrt(place_m[0] * place_m[0] + place_m[1] * place_m[1] + place_m[2] * place_m[2]);
        bool follows = of->has_position || ranges->setup.moves == RANGES_ARRAY;
        if (follows && isfinite(length_m))
            from = between(ranges, of, place_m, now_ns, &range_m);
        else if (!follows && length_m > 0) {
            from = RANGE_GEOMETRY;
            range_m = length_m;
        }
    }
    if (out_from)
        *out_from = from;
    return range_m;
}

bool ranges_wants(const struct ranges *ranges, const struct position *position)
{
    bool of_source = position->of == POSITION_OF_SOURCE;
    const struct position *kept = of_source ? &ranges->source : &ranges->vessel;
    int64_t now_ns = position->occurred_ns;
    if (position_check(position) != STATUS_OK)
        return false;
    if (!(of_source ? ranges->has_source : ranges->has_vessel) ||
        time_to_s(now_ns - kept->occurred_ns) >= RANGES_GAP_S)
        return true;
    struct ranges moved = *ranges;
    ranges_take(&moved, position);
    for (uint32_t s = 1; s <= ranges->setup.n_streams; s++)
        for (uint32_t c = 1; c <= RANGES_MAX_CHANNELS; c++) {
            double before_m = ranges_get(ranges, s, c, now_ns, NULL);
            double after_m = ranges_get(&moved, s, c, now_ns, NULL);
            if (isfinite(before_m) != isfinite(after_m) ||
                fabs(after_m - before_m) > RANGES_CHANGE * before_m)
                return true;
        }
    return false;
}
