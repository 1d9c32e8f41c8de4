/* One call, one event; see joiner.h. */
#include "listen/joiner.h"
#include <string.h>

void joiner_reset(struct joiner *joiner, uint64_t hold_frames)
{
    memset(joiner, 0, sizeof *joiner);
    joiner->hold_frames = hold_frames;
}

static bool is_same(const struct joined_call *a, uint32_t channel, const struct found_call *b)
{
    if (a->channel == channel || a->found.class_index != b->class_index)
        return false;
    double start = a->found.start_frame > b->start_frame ? a->found.start_frame : b->start_frame;
    double end = a->found.end_frame < b->end_frame ? a->found.end_frame : b->end_frame;
    double length_a = a->found.end_frame - a->found.start_frame, length_b = b->end_frame - b->start_frame;
    double shorter = length_a < length_b ? length_a : length_b;
    return end - start >= 0.5 * shorter;
}

bool joiner_take(struct joiner *joiner, uint32_t channel, const struct found_call *found)
{
    uint32_t remembered = joiner->n_given < JOINER_REMEMBERED ? joiner->n_given : JOINER_REMEMBERED;
    for (uint32_t i = 0; i < remembered; i++)
        if (is_same(&joiner->given[i], channel, found))
            return true;
    for (uint32_t i = 0; i < joiner->n_held; i++) {
        struct joined_call *held = &joiner->held[i];
        if (!is_same(held, channel, found))
            continue;
        uint64_t known = held->found.known_frame;
        if (found->snr_db > held->found.snr_db)
            *held = (struct joined_call){channel, *found};
        held->found.known_frame = known;
        return true;
    }
    if (joiner->n_held == JOINER_HELD)
        return false;
    struct joined_call call = {channel, *found};
    call.found.known_frame += joiner->hold_frames;
    uint32_t at = joiner->n_held++;
    for (; at > 0 && joiner->held[at - 1].found.known_frame > call.found.known_frame; at--)
        joiner->held[at] = joiner->held[at - 1];
    joiner->held[at] = call;
    return true;
}

void joiner_give(struct joiner *joiner, uint64_t end_frame, const struct joined_sink *sink)
{
    uint32_t n = 0;
    for (; n < joiner->n_held && joiner->held[n].found.known_frame < end_frame; n++) {
        sink->take(sink->context, &joiner->held[n]);
        joiner->given[joiner->n_given++ % JOINER_REMEMBERED] = joiner->held[n];
    }
    joiner->n_held -= n;
    memmove(joiner->held, joiner->held + n, joiner->n_held * sizeof joiner->held[0]);
}
