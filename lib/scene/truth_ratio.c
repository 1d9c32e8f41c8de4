/* Signal-to-noise ratios of the truth; see truth_ratio.h. */
#include "scene/truth_ratio.h"
#include "base/units.h"
#include "scene/noise.h"
#include <math.h>

#define STEPS 128
#define HANN_NOISE_BINS                                                                                      \
    1.5 /* equivalent noise bandwidth of a Hann window (Harris 1978, Proc. IEEE 66, 51)                      \
         */
#define LN_2 0.6931471805599453 /* median over mean of a cell's power in Gaussian noise */

static double density_pa2(const struct scene *scene, double hz)
{
    return 1e-12 * units_power_ratio(noise_level_db(fmax(1, hz), scene->sea.wind_m_s, scene->sea.shipping));
}

/* Mean square of the noise from low_hz to high_hz: a sum over the logarithm of frequency. */
static double band_noise(const struct scene *scene, double low_hz, double high_hz)
{
    double sum = 0, top_hz = fmin(high_hz, scene->rate_hz / 2), from_hz = fmax(1, low_hz);
    double step = log(top_hz / from_hz) / STEPS;
    for (int i = 0; i < STEPS; i++) {
        double hz = from_hz * exp((i + 0.5) * step);
        sum += density_pa2(scene, hz) * hz * step;
    }
    return sum;
}

static double cell_ratio(const struct scene *scene, const struct scene_kind *kind,
                         const struct emission *emission, double exposure)
{
    const struct sound *sound = &emission->sound;
    uint32_t n = emission->n_pulses > 0 ? emission->n_pulses : 1, strongest = 0;
    double power[2] = {0, 0}, sum = 0;
    for (uint32_t k = 0; k < sound->n_parts; k++) {
        double a2 = sound->parts[k].amplitude * sound->parts[k].amplitude;
        power[0] += a2;
        if (a2 > power[1]) {
            power[1] = a2;
            strongest = k;
        }
    }
    double mean_square = exposure / (n * sound->length_s) * power[1] / power[0];
    for (int i = 0; i < STEPS; i++) {
        double hz = sound->parts[0].frequency_hz;
        if (sound->shape == SOUND_TONE)
            hz = (strongest + 1) * contour_hz(&sound->contour, (i + 0.5) / STEPS * sound->length_s);
        sum += mean_square / (LN_2 * density_pa2(scene, hz) * HANN_NOISE_BINS / kind->cell_s);
    }
    return sum / STEPS;
}

double truth_ratio_db(const struct scene *scene, const struct scene_kind *kind,
                      const struct emission *emission, double exposure, double peak)
{
    double low_hz, high_hz;
    uint32_t n = emission->n_pulses > 0 ? emission->n_pulses : 1;
    if (!kind || kind->snr == SNR_NONE || !scene->sea.ambient || emission->reach != REACH_SEA)
        return NAN;
    if (kind->snr == SNR_CELL)
        return units_power_db(cell_ratio(scene, kind, emission, exposure));
    sound_band(&emission->sound, &low_hz, &high_hz);
    double noise = band_noise(scene, low_hz, high_hz);
    if (kind->snr == SNR_PULSE)
        return units_power_db(peak * peak / noise);
    return units_power_db(exposure / (n * emission->sound.length_s * noise));
}
