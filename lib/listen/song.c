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
        song->lone_frame[g] = song->bout_frame[g] = -INFINITY;
}

static bool is_of_kind(const struct song_unit *a, const struct song_unit *b)
{
    return fabs(log(a->middle_hz / b->middle_hz)) < log(KIND_RATIO) &&
           fabs(log(a->length_s / b->length_s)) < log(LENGTH_RATIO);
}

static uint32_t held(const struct song *song)
{
    return song->n_units < SONG_REMEMBERED ? song->n_units : SONG_REMEMBERED;
}

/* Whether a unit of the group, long enough, began within so many seconds of `now`. */
static bool is_near(const struct song *song, const struct song_unit *unit, const struct song_unit *now,
                    double least_s, double within_s)
{
    double since_s = (now->start_frame - unit->start_frame) / song->rate_hz;
    return unit->group == now->group && unit->length_s >= least_s && fabs(since_s) <= within_s;
}

/* Whether the newest units, the last of which is *now, are song. */
static bool is_song(const struct song *song, const struct song_shape *shape, const struct song_unit *now)
{
    const struct song_unit *kinds[MAX_KINDS];
    uint32_t n_kinds = 0, n = 0;
    for (uint32_t i = 0; i < held(song); i++) {
        const struct song_unit *unit = &song->units[i];
        if (!is_near(song, unit, now, shape->min_unit_s, shape->within_s))
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

static bool is_bout(const struct song *song, const struct song_shape *shape, const struct song_unit *now)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < held(song); i++)
        n += is_near(song, &song->units[i], now, shape->min_unit_s, shape->bout_s) &&
             is_of_kind(&song->units[i], now);
    return n >= shape->bout_units;
}

/* A class that states no song: whether its call came among tones of the group that are none. */
static bool is_in_company(const struct song *song, const struct call_class *call_class,
                          const struct song_unit *now)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < held(song); i++)
        n += !song->units[i].sung && is_near(song, &song->units[i], now, 0, SONG_COMPANY_S);
    return call_class->form == CALL_TONE && now->length_s <= SONG_COMPANY_TONE_S && n >= SONG_COMPANY_UNITS;
}

/* Whether it has not spoken for so long; then it has now. */
static bool may_speak(double *last_frame, double now_frame, double after_frames)
{
    bool may = now_frame - *last_frame >= after_frames;
    *last_frame = may ? now_frame : *last_frame;
    return may;
}

double song_evidence(struct song *song, const struct call_class *call_class, const struct found_call *found)
{
    const struct song_shape *shape = &call_class->song;
    struct song_unit now = {.group = call_class->group,
                            .start_frame = found->start_frame,
                            .length_s = (found->end_frame - found->start_frame) / song->rate_hz,
                            .middle_hz = sqrt(found->low_hz * found->high_hz)};
    if (shape->min_units == 0)
        return is_in_company(song, call_class, &now) ? SONG_COMPANY_EVIDENCE : INFINITY;
    struct song_unit *unit = &song->units[song->n_units++ % SONG_REMEMBERED];
    *unit = now;
    unit->sung = is_song(song, shape, unit);
    if (unit->sung)
        return INFINITY;
    double after = shape->lone_s * song->rate_hz;
    bool bout = unit->length_s >= shape->min_unit_s && is_bout(song, shape, unit);
    if (bout && may_speak(&song->bout_frame[now.group], now.start_frame, after))
        return shape->bout_evidence;
    return may_speak(&song->lone_frame[now.group], now.start_frame, after) ? shape->lone_evidence
                                                                           : shape->repeat_evidence;
}
