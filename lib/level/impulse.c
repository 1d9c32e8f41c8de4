/* What an impulse keeps when its levels are refused. */
#include "level/impulse.h"
#include <math.h>

void impulse_refuse_levels(struct impulse *impulse)
{
    impulse->refused = true;
    impulse->sel_db = impulse->peak_db = impulse->peak_to_peak_db = impulse->rms90_db = NAN;
    impulse->positive_impulse_pa_s = NAN;
    for (uint32_t b = 0; b < impulse->n_bands; b++)
        impulse->band_sel_db[b] = NAN;
}
