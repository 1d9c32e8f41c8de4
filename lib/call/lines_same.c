/* Whether two channels have a line in the same phase and equally loud; see lines.h. */
#include "call/lines.h"
#include <math.h>

#define SAME LINES_SAME

/* The frame's complex amplitude at hz, Hann (a single bin of the discrete transform). */
static void amplitude_at(const float *samples, uint32_t n, double step, double out[2])
{
    out[0] = out[1] = 0;
    double re = 1, im = 0, turn_re = cos(step), turn_im = -sin(step);
    double hann = 1, hann_im = 0, hann_re = cos(2 * M_PI / n), hann_turn = sin(2 * M_PI / n);
    for (uint32_t i = 0; i < n; i++) {
        double w = 0.5 * (1 - hann) * samples[i], was = re, hann_was = hann;
        out[0] += w * re;
        out[1] += w * im;
        re = was * turn_re - im * turn_im;
        im = was * turn_im + im * turn_re;
        hann = hann_was * hann_re - hann_im * hann_turn;
        hann_im = hann_was * hann_turn + hann_im * hann_re;
    }
}

bool lines_same_on_both(const struct other_frame *frame, const float *second, double hz, double rate_hz)
{
    double a[2], b[2];
    amplitude_at(frame->samples, frame->n, 2 * M_PI * hz / rate_hz, a);
    amplitude_at(second, frame->n, 2 * M_PI * hz / rate_hz, b);
    double both = a[0] * a[0] + a[1] * a[1] + b[0] * b[0] + b[1] * b[1];
    return (a[0] - b[0]) * (a[0] - b[0]) + (a[1] - b[1]) * (a[1] - b[1]) < SAME * both;
}
