/* Frames that the own source covers in part: a blow is no tone and no tail of one, and what is called beside
 * it goes on behind it.
 *
 * Short windows: cells of a band that the gate masks within the frame count neither for nor against a path,
 * which keeps its course and its level; no path begins there. Long windows, of which a blow every second or
 * two would leave none: the masked samples are set to 0 before the spectrum, whose power is made good by what
 * they had of the window's energy. */
#include "call/tones_field.h"
#include <math.h>

#define SLOW_S 0.5        /* windows that are longer outlast most blows */
#define LEAST_SHARE 1e-4  /* of a window's energy: the limiter copes with what is less */
#define MOST_SILENCED 0.5 /* of a window's energy */

/* Share of a Hann window's energy before x, a share of its length: the integral of sin^4 over 3/8. */
static double energy_before(double x)
{
    x = fmin(fmax(x, 0), 1);
    return x - 2 / (3 * M_PI) * sin(2 * M_PI * x) + sin(4 * M_PI * x) / (12 * M_PI);
}

/* Where input frame `frame` lies in the frame that is held, 0 at its start, 1 at its end. */
static double place_of(const struct tracer *tracer, double frame)
{
    double sample = (frame - (double)tracer->origin + tracer->setup.late_frames) / tracer->setup.factor;
    return (sample - (double)tracer->n_shifted) / tracer->n;
}

void tracer_set_masked(struct tracer *tracer, uint32_t b, const struct gate_tail_band *band)
{
    struct unheard *unheard = &tracer->unheard[b];
    double low = ceil(band->low_hz / tracer->bin_hz) - tracer->first_bin;
    double high = ceil(band->high_hz / tracer->bin_hz) - tracer->first_bin;
    unheard->low = (uint32_t)fmin(fmax(0, low), tracer->n_bins);
    unheard->high = (uint32_t)fmax(0, fmin(high, tracer->n_bins));
    tracer->is_slow = tracer->setup.window_s > SLOW_S;
    hidden_extend(&unheard->hidden, band->masked_from, band->masked_to);
}

/* Share of the window's energy that the band's masked stretches have. They do not overlap. */
static double share_of(const struct tracer *tracer, const struct unheard *unheard)
{
    const struct hidden *hidden = &unheard->hidden;
    double sum = 0;
    if (unheard->high <= unheard->low)
        return 0;
    for (uint32_t i = 0; i < HIDDEN_REMEMBERED && i < hidden->n; i++) {
        double from = place_of(tracer, hidden->start[i]), to = place_of(tracer, hidden->end[i]);
        if (from < 1 && to > 0)
            sum += energy_before(to) - energy_before(from);
    }
    return sum;
}

uint32_t unheard_silence(struct tracer *tracer)
{
    uint32_t left = tracer->n;
    for (uint32_t b = 0; b < GATE_BANDS && tracer->is_slow; b++) {
        const struct hidden *hidden = &tracer->unheard[b].hidden;
        if (tracer->unheard[b].high <= tracer->unheard[b].low)
            continue;
        for (uint32_t i = 0; i < HIDDEN_REMEMBERED && i < hidden->n; i++) {
            double from = floor(place_of(tracer, hidden->start[i]) * tracer->n);
            double to = ceil(place_of(tracer, hidden->end[i]) * tracer->n);
            for (uint32_t k = (uint32_t)fmax(0, from); k < (uint32_t)fmin(fmax(0, to), tracer->n); k++)
                tracer->held[k] = 0;
        }
    }
    for (uint32_t k = 0; k < tracer->n && tracer->is_slow; k++)
        left -= tracer->held[k] == 0 && left > 1;
    return left;
}

double unheard_make_good(const struct tracer *tracer)
{
    double most = 0;
    for (uint32_t b = 0; b < GATE_BANDS && tracer->is_slow; b++)
        most = fmax(most, share_of(tracer, &tracer->unheard[b]));
    return most > MOST_SILENCED ? 0 : 1 / (1 - most);
}

void unheard_replace(struct tracer *tracer)
{
    for (uint32_t b = 0; b < GATE_BANDS; b++) {
        struct unheard *unheard = &tracer->unheard[b];
        unheard->is_now = !tracer->is_slow && share_of(tracer, unheard) > LEAST_SHARE;
        for (uint32_t k = unheard->low; k < unheard->high && unheard->is_now; k++)
            tracer->power[tracer->first_bin + k] = tracer->smooth[k];
    }
}

void unheard_clear(struct tracer *tracer)
{
    float *snrs = tracer->history_snr + (size_t)tracer_row(tracer, tracer->frame) * tracer->stride;
    for (uint32_t b = 0; b < GATE_BANDS; b++) {
        const struct unheard *unheard = &tracer->unheard[b];
        for (uint32_t k = unheard->low; k < unheard->high && unheard->is_now; k++) {
            tracer->gain[k] = 0;
            snrs[k] = NOT_HEARD;
        }
    }
}
