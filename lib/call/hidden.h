/* The last stretches of time in which the own source covers a band: a pulse may become known after the
 * stretch that it lies in. Used by pulses.c, trains.c and tones_unheard.c only. */
#ifndef CALL_HIDDEN_H
#define CALL_HIDDEN_H

#include <stdbool.h>
#include <stdint.h>

#define HIDDEN_REMEMBERED 16

/* Plain data; zeros are none. */
struct hidden {
    uint32_t n; /* so far; rings */
    double start[HIDDEN_REMEMBERED], end[HIDDEN_REMEMBERED];
};

static inline void hidden_add(struct hidden *hidden, double start, double end)
{
    uint32_t at = hidden->n++ % HIDDEN_REMEMBERED;
    hidden->start[at] = start;
    hidden->end[at] = end;
}

/* As hidden_add, or where the newest stretch begins there, it now reaches to `end`. */
static inline void hidden_extend(struct hidden *hidden, double start, double end)
{
    uint32_t newest = (hidden->n + HIDDEN_REMEMBERED - 1) % HIDDEN_REMEMBERED;
    if (hidden->n > 0 && hidden->start[newest] >= start)
        hidden->end[newest] = end;
    else if (end > start)
        hidden_add(hidden, start, end);
}

static inline bool hidden_has(const struct hidden *hidden, double frame)
{
    for (uint32_t i = 0; i < HIDDEN_REMEMBERED && i < hidden->n; i++)
        if (frame >= hidden->start[i] && frame <= hidden->end[i])
            return true;
    return false;
}

/* Whether a stretch lies within so much of it. */
static inline bool hidden_is_near(const struct hidden *hidden, double frame, double reach)
{
    for (uint32_t i = 0; i < HIDDEN_REMEMBERED && i < hidden->n; i++)
        if (frame >= hidden->start[i] - reach && frame <= hidden->end[i] + reach)
            return true;
    return false;
}

#endif
