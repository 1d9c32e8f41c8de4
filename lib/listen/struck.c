/* Tones that begin with an impulse; see struck.h. */
#include "listen/struck.h"
#include <math.h>
#include <string.h>

#define HIGHEST_HZ 5000.0 /* above, too little of a blow rings for long enough */
#define LONGEST_S 1.5
#define NEAR_S 0.05

void struck_reset(struct struck *struck, double rate_hz)
{
    memset(struck, 0, sizeof *struck);
    struck->rate_hz = rate_hz;
}

void struck_take(struct struck *struck, double onset_frame)
{
    struck->onset_frame[struck->n++ % STRUCK_REMEMBERED] = onset_frame;
}

bool struck_begins(const struct struck *struck, const struct call_class *call_class,
                   const struct found_call *found)
{
    double near_frames = (call_class->tone.window_s + NEAR_S) * struck->rate_hz;
    uint32_t n = struck->n < STRUCK_REMEMBERED ? struck->n : STRUCK_REMEMBERED;
    if (call_class->form != CALL_TONE || call_class->high_hz > HIGHEST_HZ ||
        found->end_frame - found->start_frame > LONGEST_S * struck->rate_hz)
        return false;
    for (uint32_t i = 0; i < n; i++)
        if (fabs(found->start_frame - struck->onset_frame[i]) <= near_frames)
            return true;
    return false;
}
