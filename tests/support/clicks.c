/* Synthetic pulses. */
#include "support/clicks.h"
#include <math.h>

void clicks_add_gabor(float *out, size_t n, double rate_hz, double frame, double amplitude,
                      double frequency_hz, double sigma_s)
{
    double reach = 6 * sigma_s * rate_hz;
    for (double k = fmax(0, ceil(frame - reach)); k < fmin((double)n, frame + reach); k++) {
        double t = (k - frame) / rate_hz;
        out[(size_t)k] +=
            (float)(amplitude * exp(-t * t / (2 * sigma_s * sigma_s)) * cos(2 * M_PI * frequency_hz * t));
    }
}

void clicks_add_porpoise(float *out, size_t n, double rate_hz, double frame, double amplitude,
                         double frequency_hz, double tau_s)
{
    for (double k = fmax(0, ceil(frame)); k < fmin((double)n, frame + 20 * tau_s * rate_hz); k++) {
        double t = (k - frame) / rate_hz, x = t / tau_s; /* x^2 exp(-x) is 4 / e^2 at its greatest */
        out[(size_t)k] +=
            (float)(amplitude * exp(2) / 4 * x * x * exp(-x) * cos(2 * M_PI * frequency_hz * t));
    }
}

void clicks_add_noise(float *out, size_t n, double deviation, struct random *random)
{
    for (size_t k = 0; k < n; k++)
        out[k] += (float)(deviation * random_normal(random));
}
