/* Fast and slow exponential averages. */
#include "level/time_weighting.h"
#include <math.h>

struct time_weighting_decay time_weighting_decay(double seconds)
{
    return (struct time_weighting_decay){exp(-seconds / TIME_WEIGHTING_FAST_S),
                                         exp(-seconds / TIME_WEIGHTING_SLOW_S)};
}

void time_weighting_push(struct time_weighting *weighting, double mean_square_pa2,
                         struct time_weighting_decay decay)
{
    weighting->fast_pa2 = mean_square_pa2 + (weighting->fast_pa2 - mean_square_pa2) * decay.fast;
    weighting->slow_pa2 = mean_square_pa2 + (weighting->slow_pa2 - mean_square_pa2) * decay.slow;
    weighting->fast_max_pa2 = fmax(weighting->fast_max_pa2, weighting->fast_pa2);
    weighting->slow_max_pa2 = fmax(weighting->slow_max_pa2, weighting->slow_pa2);
}

void time_weighting_begin(struct time_weighting *weighting)
{
    weighting->fast_max_pa2 = weighting->slow_max_pa2 = 0;
}
