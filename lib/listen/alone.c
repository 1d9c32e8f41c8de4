/* Impulses that stand alone; see alone.h. */
#include "listen/alone.h"
#include "base/units.h"
#include <math.h>

#define RHYTHM 0.05 /* two intervals so much alike are a source's */

void alone_reset(struct alone *alone, const struct call_class *classes, uint32_t n_classes, double rate_hz)
{
    *alone = (struct alone){.classes = classes,
                            .n_classes = n_classes,
                            .rate_hz = rate_hz,
                            .last_onset = -INFINITY,
                            .last_interval = NAN};
}

static bool fits(const struct call_class *class, const struct found_impulse *impulse)
{
    const struct other_shape *sound = &class->sound;
    double background_db = isnan(impulse->background_db) ? -INFINITY : impulse->background_db;
    return sound->manner == MANNER_IMPULSE && impulse->t90_s <= sound->max_s &&
           impulse->rms90_db - background_db >= sound->min_snr_db;
}

void alone_take(struct alone *alone, const struct found_impulse *impulse)
{
    double since = impulse->onset_frame - alone->last_onset;
    bool in_rhythm = fabs(since - alone->last_interval) <= RHYTHM * since;
    alone->last_onset = impulse->onset_frame;
    alone->last_interval = since;
    if (alone->waits && since < alone->classes[alone->waiting.class_index].sound.memory_s * alone->rate_hz)
        alone->waits = false;
    for (uint32_t c = 0; c < alone->n_classes && !alone->waits; c++) {
        const struct call_class *class = &alone->classes[c];
        if (in_rhythm || !fits(class, impulse) || since < class->sound.memory_s * alone->rate_hz)
            continue;
        alone->waits = true;
        alone->waiting =
            (struct found_call){.class_index = c,
                                .start_frame = impulse->onset_frame,
                                .end_frame = impulse->onset_frame + impulse->t90_s * alone->rate_hz,
                                .low_hz = class->low_hz,
                                .high_hz = fmin(class->high_hz, alone->rate_hz / 2),
                                .n_pulses = 1,
                                .snr_db = impulse->rms90_db - impulse->background_db,
                                .mean_square_pa2 = units_power_ratio(impulse->rms90_db) * 1e-12};
    }
}

bool alone_give(struct alone *alone, uint64_t end_frame, bool all, struct found_call *out)
{
    if (!alone->waits)
        return false;
    double memory = alone->classes[alone->waiting.class_index].sound.memory_s * alone->rate_hz;
    if (!all && (double)end_frame < alone->waiting.start_frame + memory)
        return false;
    *out = alone->waiting;
    out->known_frame = end_frame - 1;
    alone->waits = false;
    return true;
}
