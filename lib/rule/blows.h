/* One blow counts once, on however many hydrophones it is heard. The rule, for the watch and for the sums:
 *
 *   in a stream   the impulses of one channel, the reference, count (lib/listen/measuring.h); the others are
 *                 marked `beside`: they start no phase, add to no sum, are judged by no limit, and are whose
 * the reference says that the blow is, where it has heard it already of a job      impulses of several
 * streams are one blow when they were struck at the same time: arrival less range over the speed of sound,
 * where the range is known, within BLOW_SAME_NS. That is less than half of the shortest step of a hammer (120
 * blows a minute), and holds 2 % of doubt of range and sound speed to 15 km, and the clocks of two streams,
 * which are told when they are off by 50 ms
 *
 * The same tolerance pairs levels for the loss law (rule/tally_fit.h). Plain data. */
#ifndef RULE_BLOWS_H
#define RULE_BLOWS_H

#include "base/time.h"
#include "level/impulse.h"
#include <stdbool.h>
#include <stdint.h>

#define BLOW_SAME_NS (TIME_NS_PER_S / 5)
#define BLOWS_KEPT 64 /* the last that were counted: at 2 a second those of 32 s, 48 km of sound */

/* When the sound that arrived at time_ns left its source; time_ns itself where the range or the speed is
 * unknown (NAN, 0 or less). */
int64_t blow_struck_ns(int64_t time_ns, double range_m, double sound_speed_m_s);

struct blows {
    uint32_t n, next;
    int64_t struck_ns[BLOWS_KEPT];
    enum impulse_whose whose[BLOWS_KEPT];
};
/* Whether no blow that is kept was struck then; if so it is kept from now on. */
bool blows_add(struct blows *blows, int64_t struck_ns, enum impulse_whose whose);
/* Whose the blow that was struck then is; false where none is kept. */
bool blows_find(const struct blows *blows, int64_t struck_ns, enum impulse_whose *out);

#endif
