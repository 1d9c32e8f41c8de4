/* Units of song; see song.h. */
#include "listen/song.h"
#include <math.h>
#include <string.h>

#define KIND_RATIO 1.26  /* of middle frequencies: a third of an octave */
#define LENGTH_RATIO 1.5 /* of lengths */
#define MAX_KINDS 8

void song_reset(struct song *song, double rate_hz)
{
    memset(song, 0, sizeof *song);
    song->rate_hz = rate_hz;
    for (uint32_t g = 0; g < GROUP_COUNT; g++)
        song->lone_frame[g] = -INFINITY;
}

static bool is_of_kind(const struct song_unit *a, const struct song_unit *b)
{
    return fabs(log(a->middle_hz / b->middle_hz)) < log(KIND_RATIO) &&
           fabs(log(a->length_s / b->length_s)) < log(LENGTH_RATIO);
}

/* Whether the newest units, the last of which is *now, are song. */
static bool is_song(const struct song *song, const struct song_shape *shape, const struct song_unit *now)
{
    const struct song_unit *kinds[MAX_KINDS];
    uint32_t n_kinds = 0, n = 0, held = song->n_units < SONG_REMEMBERED ? song->n_units : SONG_REMEMBERED;
    for (uint32_t i = 0; i < held; i++) {
        const struct song_unit *unit = &song->units[i];
        double since_s = (now->start_frame - unit->start_frame) / song->rate_hz;
        if (unit->group != now->group || unit->length_s < shape->min_unit_s ||
            !(fabs(since_s) <= shape->within_s))
            continue;
        uint32_t k = 0;
        while (k < n_kinds && !is_of_kind(kinds[k], unit))
            k++;
        if (k == n_kinds && n_kinds < MAX_KINDS)
            kinds[n_kinds++] = unit;
        n++;
    }
    return n >= shape->min_units && n_kinds >= shape->min_kinds;
}

double song_evidence(struct song *song, const struct call_class *call_class, const struct found_call *found)
{
    const struct song_shape *shape = &call_class->song;
    if (shape->min_units == 0)
        return INFINITY;
    struct song_unit *unit = &song->units[song->n_units++ % SONG_REMEMBERED];
    *unit = (struct song_unit){.group = call_class->group,
                               .start_frame = found->start_frame,
                               .length_s = (found->end_frame - found->start_frame) / song->rate_hz,
                               .middle_hz = sqrt(found->low_hz * found->high_hz)};
    if (is_song(song, shape, unit))
        return INFINITY;
    double *lone = &song->lone_frame[call_class->group];
    if (found->start_frame - *lone < shape->lone_s * song->rate_hz)
        return shape->repeat_evidence;
    *lone = found->start_frame;
    return shape->lone_evidence;
}
