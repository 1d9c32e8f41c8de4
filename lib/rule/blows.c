/* One blow counts once; see blows.h. */
#include "rule/blows.h"
#include <math.h>
#include <stdlib.h>

int64_t blow_struck_ns(int64_t time_ns, double range_m, double sound_speed_m_s)
{
    double travel_s = range_m / sound_speed_m_s;
    return range_m > 0 && sound_speed_m_s > 0 && isfinite(travel_s) ? time_ns - time_from_s(travel_s)
                                                                    : time_ns;
}

bool blows_find(const struct blows *blows, int64_t struck_ns, enum impulse_whose *out)
{
    int64_t least_ns = BLOW_SAME_NS;
    bool found = false;
    for (uint32_t i = 0; i < blows->n; i++) {
        int64_t off_ns = llabs(struck_ns - blows->struck_ns[i]);
        if (off_ns < least_ns) {
            least_ns = off_ns;
            *out = blows->whose[i];
            found = true;
        }
    }
    return found;
}

bool blows_add(struct blows *blows, int64_t struck_ns, enum impulse_whose whose)
{
    enum impulse_whose before;
    if (blows_find(blows, struck_ns, &before))
        return false;
    blows->struck_ns[blows->next] = struck_ns;
    blows->whose[blows->next] = whose;
    blows->next = (blows->next + 1) % BLOWS_KEPT;
    blows->n += blows->n < BLOWS_KEPT;
    return true;
}
