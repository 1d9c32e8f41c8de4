/* What one pulse looks like. */
#include "call/pulse_shape.h"
#include "base/units.h"
#include "dsp/lanes.h"
#include <fftw3.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define PULSE_LENGTHS 6.0 /* of the segment, over the class's pulse_s */
#define TAPER 0.25        /* of the segment, at either end */
#define MOST_FRAMES 4096
#define BAND_BINS 16 /* at least, in the class's band */
#define LENGTH_RATIO 0.1
#define SWEEP_RATIO 0.158 /* 8 dB */
#define WIDE_RATIO 4.0    /* a band so wide is divided in equal ratios, a narrower one in equal steps */
#define MOST_DOUBT_DB 20.0
#define FIRST_LAG 3.0     /* pulse lengths: before it a pulse is its own echo */
#define REACH_PULSES 50.0 /* of the autocorrelation, likewise */
#define NOISE_ROOT 0.9    /* mean of the square root of a slot's noise power over the root of its mean */
#define NOISE_SPREAD 0.4  /* and its standard deviation; both between those of 1 and 4 degrees of freedom */
/* Judgements, no source: how much neighbouring clicks of one animal differ, how much more those of two; parts
 * of a spectrum that lie side by side are not independent; profiles of one animal correlate by more than
 * ECHO_MIDDLE. */
#define ALIKE_DB 3.0F
#define APART_DB 6.0F
#define PARTS_WEIGHT 0.5F
#define ECHO_WEIGHT 8.0F
#define ECHO_MIDDLE 0.5F
#define LEAST_ECHO 0.02 /* what stands out less is no structure */

struct pulse_shaper {
    double rate_hz, low_hz, high_hz;
    uint32_t n, segment;                       /* of the transform, and of the sound in it */
    uint32_t edge_bins[PULSE_SHAPE_BANDS + 1]; /* part b is [edge b, edge b + 1) */
    double window_energy;
    uint32_t bin_slots;        /* of the envelope: half a pulse */
    uint32_t reach, first_lag; /* bins */
    double lag_step;           /* bins */
    float *window, *frame, *noise;
    fftwf_complex *bins, *analytic;
    fftwf_plan forward, backward;
    float *envelope; /* [envelope_room]: 3 * reach and zeros */
};

/* Of the envelope, with room for whole vectors that begin within it. */
static size_t envelope_room(const struct pulse_shaper *shaper)
{
    return 3 * (size_t)shaper->reach + 2 * WIDE_LANES;
}

static void find_edges(struct pulse_shaper *shaper)
{
    double ratio = shaper->high_hz / shaper->low_hz;
    for (uint32_t b = 0; b <= PULSE_SHAPE_BANDS; b++) {
        double part = (double)b / PULSE_SHAPE_BANDS;
        double hz = ratio > WIDE_RATIO ? shaper->low_hz * pow(ratio, part)
                                       : shaper->low_hz + part * (shaper->high_hz - shaper->low_hz);
        uint32_t bin = (uint32_t)lround(hz * shaper->n / shaper->rate_hz);
        shaper->edge_bins[b] = bin < shaper->n / 2 ? bin : shaper->n / 2;
    }
}

static void find_window(struct pulse_shaper *shaper)
{
    uint32_t taper = (uint32_t)fmax(1, TAPER * shaper->segment);
    shaper->window_energy = 0;
    for (uint32_t i = 0; i < shaper->segment; i++) {
        uint32_t from_end = i < shaper->segment - 1 - i ? i : shaper->segment - 1 - i;
        double w = from_end >= taper ? 1 : (1 - cos(M_PI * (from_end + 0.5) / taper)) / 2;
        shaper->window[i] = (float)w;
        shaper->window_energy += w * w;
    }
}

enum status pulse_shaper_create(const struct call_class *call_class, double rate_hz, uint32_t slot_frames,
                                struct pulse_shaper **out)
{
    struct pulse_shaper *shaper = calloc(1, sizeof *shaper);
    if (!shaper)
        return STATUS_NO_MEMORY;
    double pulse_s = call_class->train.pulse_s, slot_s = slot_frames / rate_hz;
    shaper->rate_hz = rate_hz;
    shaper->low_hz = call_class->low_hz;
    shaper->high_hz = call_class->high_hz;
    shaper->segment = (uint32_t)fmin(MOST_FRAMES, fmax(16, round(PULSE_LENGTHS * pulse_s * rate_hz)));
    double need = fmax(shaper->segment, BAND_BINS * rate_hz / (call_class->high_hz - call_class->low_hz));
    shaper->n = 32;
    while (shaper->n < need && shaper->n < MOST_FRAMES)
        shaper->n *= 2;
    shaper->bin_slots = (uint32_t)fmax(1, round(pulse_s / slot_s / 2));
    double bin_s = shaper->bin_slots * slot_s;
    double reach_s =
        fmin(fmin(PULSE_SHAPE_REACH_S, REACH_PULSES * pulse_s), call_class->train.min_interval_s / 2);
    shaper->first_lag = (uint32_t)ceil(FIRST_LAG * pulse_s / bin_s);
    shaper->reach = (uint32_t)fmax(reach_s / bin_s, shaper->first_lag + PULSE_SHAPE_LAGS);
    shaper->lag_step = (double)(shaper->reach - shaper->first_lag) / PULSE_SHAPE_LAGS;
    shaper->window = calloc(shaper->segment, sizeof(float));
    shaper->envelope = calloc(envelope_room(shaper), sizeof(float));
    shaper->noise = calloc(shaper->n / 2 + 1, sizeof(float));
    shaper->frame = fftwf_alloc_real(shaper->n);
    shaper->bins = fftwf_alloc_complex(shaper->n / 2 + 1);
    shaper->analytic = fftwf_alloc_complex(shaper->n);
    if (!shaper->window || !shaper->envelope || !shaper->noise || !shaper->frame || !shaper->bins ||
        !shaper->analytic) {
        pulse_shaper_destroy(shaper);
        return STATUS_NO_MEMORY;
    }
    shaper->forward = fftwf_plan_dft_r2c_1d((int)shaper->n, shaper->frame, shaper->bins, FFTW_ESTIMATE);
    shaper->backward =
        fftwf_plan_dft_1d((int)shaper->n, shaper->analytic, shaper->analytic, FFTW_BACKWARD, FFTW_ESTIMATE);
    if (!shaper->forward || !shaper->backward) {
        pulse_shaper_destroy(shaper);
        return STATUS_NO_MEMORY;
    }
    find_edges(shaper);
    find_window(shaper);
    *out = shaper;
    return STATUS_OK;
}

uint32_t pulse_shaper_frames(const struct pulse_shaper *shaper)
{
    return shaper->segment / 2 + 1;
}

uint32_t pulse_shaper_slots(const struct pulse_shaper *shaper)
{
    return shaper->reach * shaper->bin_slots;
}

/* The segment around the arrival, its transform in bins[], and its class's part, analytic, in analytic[]. */
static void transform(struct pulse_shaper *shaper, const struct pulse_sound *sound)
{
    memset(shaper->frame, 0, shaper->n * sizeof(float));
    int64_t half = shaper->segment / 2;
    for (int64_t i = 0; i < (int64_t)shaper->segment; i++)
        if (i - half >= -sound->samples_before && i - half < sound->samples_after)
            shaper->frame[i] = sound->samples[i - half] * shaper->window[i];
    fftwf_execute(shaper->forward);
    memset(shaper->analytic, 0, shaper->n * sizeof *shaper->analytic);
    for (uint32_t k = shaper->edge_bins[0]; k < shaper->edge_bins[PULSE_SHAPE_BANDS]; k++)
        memcpy(shaper->analytic[k], shaper->bins[k], sizeof shaper->bins[k]);
    fftwf_execute(shaper->backward);
}

static double power_of(const fftwf_complex value)
{
    return (double)value[0] * value[0] + (double)value[1] * value[1];
}

/* Noise that the background explains, of each bin of the band. */
static void find_noise(struct pulse_shaper *shaper, const struct noise_density *density)
{
    double bin_hz = shaper->rate_hz / shaper->n, gain = shaper->rate_hz / 2 * shaper->window_energy;
    for (uint32_t k = shaper->edge_bins[0]; k < shaper->edge_bins[PULSE_SHAPE_BANDS]; k++)
        shaper->noise[k] = (float)(gain * noise_density_at(density, k * bin_hz));
}

static void find_spectrum(const struct pulse_shaper *shaper, struct pulse_shape *out)
{
    double bin_hz = shaper->rate_hz / shaper->n, sum = 0, moment = 0, square = 0, greatest = -1;
    for (uint32_t k = shaper->edge_bins[0]; k < shaper->edge_bins[PULSE_SHAPE_BANDS]; k++) {
        double power = power_of(shaper->bins[k]), excess = fmax(0, power - 2 * (double)shaper->noise[k]);
        sum += excess;
        moment += excess * k;
        square += excess * k * k;
        if (power > greatest) {
            greatest = power;
            out->peak_hz = (float)(k * bin_hz);
        }
    }
    double centre = sum > 0 ? moment / sum : out->peak_hz / bin_hz;
    out->centroid_hz = (float)(centre * bin_hz);
    out->bandwidth_hz = (float)(sum > 0 ? sqrt(fmax(0, square / sum - centre * centre)) * bin_hz : 0);
}

static void find_parts(const struct pulse_shaper *shaper, struct pulse_shape *out)
{
    double energy[PULSE_SHAPE_BANDS], noise[PULSE_SHAPE_BANDS], total = 0;
    for (uint32_t b = 0; b < PULSE_SHAPE_BANDS; b++) {
        energy[b] = noise[b] = 0;
        for (uint32_t k = shaper->edge_bins[b]; k < shaper->edge_bins[b + 1]; k++) {
            energy[b] += power_of(shaper->bins[k]);
            noise[b] += (double)shaper->noise[k];
        }
        total += energy[b];
    }
    for (uint32_t b = 0; b < PULSE_SHAPE_BANDS; b++) {
        double bins = (double)shaper->edge_bins[b + 1] - shaper->edge_bins[b];
        double free = fmax(1, bins * shaper->segment / shaper->n), noise_energy = noise[b];
        double spread = noise_energy / sqrt(free), found = fmax(energy[b] - noise_energy, spread);
        found = fmax(found, 1e-4 * total); /* the window's leakage */
        double doubt = sqrt(spread * spread + 2 * found * noise_energy / free) / fmax(found, 1e-300);
        out->bands_db[b] = (float)units_power_db(fmax(found, 1e-300) / fmax(total, 1e-300));
        out->doubt_db[b] = (float)fmin(MOST_DOUBT_DB, bins > 0 ? 10 / M_LN10 * doubt : MOST_DOUBT_DB);
    }
}

/* Places before and after `at` where the power falls below a level, between samples. */
static void find_extent(const struct pulse_shaper *shaper, uint32_t at, double level, double *out_from,
                        double *out_to)
{
    uint32_t from = at, to = at;
    while (from > 0 && power_of(shaper->analytic[from - 1]) >= level)
        from--;
    while (to + 1 < shaper->segment && power_of(shaper->analytic[to + 1]) >= level)
        to++;
    double in = power_of(shaper->analytic[from]), out = from > 0 ? power_of(shaper->analytic[from - 1]) : 0;
    *out_from = from - fmin(1, (in - level) / fmax(in - out, 1e-300));
    in = power_of(shaper->analytic[to]);
    out = to + 1 < shaper->segment ? power_of(shaper->analytic[to + 1]) : 0;
    *out_to = to + fmin(1, (in - level) / fmax(in - out, 1e-300));
}

/* Slope of the instantaneous frequency, by least squares weighted with the power. */
static double slope_between(const struct pulse_shaper *shaper, double from, double to)
{
    double w = 0, wt = 0, wf = 0, wtt = 0, wtf = 0;
    for (uint32_t i = (uint32_t)ceil(from); i + 1 <= to; i++) {
        const float *z = shaper->analytic[i], *next = shaper->analytic[i + 1];
        double real = (double)next[0] * z[0] + (double)next[1] * z[1];
        double imaginary = (double)next[1] * z[0] - (double)next[0] * z[1];
        double weight = hypot(real, imaginary), t = (i + 0.5) / shaper->rate_hz;
        double hz = atan2(imaginary, real) / (2 * M_PI) * shaper->rate_hz;
        if (hz < 0)
            hz += shaper->rate_hz;
        w += weight;
        wt += weight * t;
        wf += weight * hz;
        wtt += weight * t * t;
        wtf += weight * t * hz;
    }
    double spread = w * wtt - wt * wt;
    return spread > 1e-12 * w * wtt ? (w * wtf - wt * wf) / spread : 0;
}

static void find_time_course(const struct pulse_shaper *shaper, struct pulse_shape *out)
{
    uint32_t at = shaper->segment / 4;
    for (uint32_t i = at; i < shaper->segment - shaper->segment / 4; i++)
        if (power_of(shaper->analytic[i]) > power_of(shaper->analytic[at]))
            at = i;
    double greatest = power_of(shaper->analytic[at]), from, to;
    find_extent(shaper, at, LENGTH_RATIO * greatest, &from, &to);
    out->length_s = (float)((to - from) / shaper->rate_hz);
    find_extent(shaper, at, SWEEP_RATIO * greatest, &from, &to);
    out->sweep_hz_s = (float)slope_between(shaper, from, to);
}

/* Each power's root, less the noise's, where there is power; gives the sum of their squares. n is padded to
 * whole vectors with what has no power. */
LANES_WIDE static float take_roots(float *envelope, uint32_t n, float per_bin, float noise)
{
    wide_lanes power, energy = {0};
    const wide_lanes none = {0};
    for (uint32_t i = 0; i < n; i += WIDE_LANES) {
        wide_load(&power, envelope + i);
        const wide_mask heard = power > none;
        for (uint32_t lane = 0; lane < WIDE_LANES; lane++)
            power[lane] = sqrtf(power[lane] * per_bin);
        power = WIDE_CHOOSE(heard, power - noise, none);
        wide_store(envelope + i, &power);
        energy += power * power;
    }
    float sum = 0;
    for (uint32_t lane = 0; lane < WIDE_LANES; lane++)
        sum += energy[lane];
    return sum;
}

/* Root of the power over the noise's, in bins from one reach before the arrival to two after it; gives its
 * energy. */
static double find_envelope(struct pulse_shaper *shaper, const struct pulse_sound *sound)
{
    const int64_t reach = shaper->reach, per_bin = shaper->bin_slots;
    const int64_t before = sound->slots_before > 0 ? sound->slots_before / per_bin : 0;
    const int64_t after = sound->slots_after > 0 ? sound->slots_after / per_bin : 0;
    const int64_t first = before < reach ? -before : -reach, end = after < 2 * reach ? after : 2 * reach;
    const float *power = sound->power + first * per_bin;
    memset(shaper->envelope, 0, envelope_room(shaper) * sizeof *shaper->envelope);
    for (int64_t bin = first; bin < end; bin++, power += per_bin) {
        float sum = 0;
        for (int64_t slot = 0; slot < per_bin; slot++)
            sum += power[slot];
        shaper->envelope[bin + reach] = sum;
    }
    const uint32_t n = (3 * shaper->reach + WIDE_LANES - 1) / WIDE_LANES * WIDE_LANES;
    return (double)take_roots(shaper->envelope, n, 1.0F / (float)per_bin,
                              (float)(NOISE_ROOT * sqrt(sound->background_pa2)));
}

/* Of a profile and itself, summed over lags from `from` to `to`. Zeros follow the profile (envelope_room). */
LANES_WIDE static float sum_products(const float *profile, uint32_t n, uint32_t from, uint32_t to)
{
    wide_lanes sums = {0}, more = {0}, a, b;
    for (uint32_t lag = from; lag < to; lag++)
        for (uint32_t i = 0; i < n - lag; i += 2 * WIDE_LANES) {
            wide_load(&a, profile + i);
            wide_load(&b, profile + i + lag);
            sums += a * b;
            wide_load(&a, profile + i + WIDE_LANES);
            wide_load(&b, profile + i + WIDE_LANES + lag);
            more += a * b;
        }
    sums += more;
    double sum = 0;
    for (uint32_t lane = 0; lane < WIDE_LANES / 2; lane++)
        sum += (double)sums[lane] + (double)sums[lane + WIDE_LANES / 2];
    return (float)sum;
}

static void find_echoes(struct pulse_shaper *shaper, const struct pulse_sound *sound, struct pulse_shape *out)
{
    uint32_t n = 3 * shaper->reach;
    double energy = find_envelope(shaper, sound);
    double spread = NOISE_SPREAD * sqrt(sound->background_pa2 / shaper->bin_slots),
           variance = spread * spread;
    double one = (2 * energy * variance + n * variance * variance) / fmax(energy * energy, 1e-300);
    out->echoes_doubt = (float)sqrt(one * fmax(1, shaper->lag_step) + LEAST_ECHO * LEAST_ECHO);
    for (uint32_t l = 0; l < PULSE_SHAPE_LAGS; l++) {
        uint32_t from = shaper->first_lag + (uint32_t)(l * shaper->lag_step);
        uint32_t to = shaper->first_lag + (uint32_t)((l + 1) * shaper->lag_step);
        out->echoes[l] = sum_products(shaper->envelope, n, from, to) / (float)fmax(energy, 1e-30);
    }
}

void pulse_shaper_get(struct pulse_shaper *shaper, const struct pulse_sound *sound, struct pulse_shape *out)
{
    find_noise(shaper, &sound->density);
    transform(shaper, sound);
    find_spectrum(shaper, out);
    find_parts(shaper, out);
    find_time_course(shaper, out);
    find_echoes(shaper, sound, out);
    pulse_shape_centre(out);
}

void pulse_shape_centre(struct pulse_shape *shape)
{
    float mean = 0, energy = 0;
    for (uint32_t l = 0; l < PULSE_SHAPE_LAGS; l++)
        mean += shape->echoes[l] / PULSE_SHAPE_LAGS;
    for (uint32_t l = 0; l < PULSE_SHAPE_LAGS; l++) {
        shape->echoes[l] -= mean;
        energy += shape->echoes[l] * shape->echoes[l];
    }
    shape->echoes_energy = energy;
}

void pulse_shaper_destroy(struct pulse_shaper *shaper)
{
    if (!shaper)
        return;
    if (shaper->forward)
        fftwf_destroy_plan(shaper->forward);
    if (shaper->backward)
        fftwf_destroy_plan(shaper->backward);
    free(shaper->window);
    free(shaper->envelope);
    free(shaper->noise);
    fftwf_free(shaper->frame);
    fftwf_free(shaper->bins);
    fftwf_free(shaper->analytic);
    free(shaper);
}

/* ln(1 + x) for x of 0 to 4 within 0.5 % (Pade): compared are every two pulses of a stretch. */
static inline float ln_one_more(float x)
{
    return x * (60 + x * (60 + 11 * x)) / (60 + x * (90 + x * (36 + 3 * x)));
}

/* Of the spectra: the log-likelihood ratio of each part's difference, normal with one spread or the wider
 * one. */
static float likeness_of_parts(const struct pulse_shape *a, const struct pulse_shape *b)
{
    const float wider = APART_DB * APART_DB;
    float sum = 0;
    for (uint32_t i = 0; i < PULSE_SHAPE_BANDS; i++) {
        float alike = ALIKE_DB * ALIKE_DB + a->doubt_db[i] * a->doubt_db[i] + b->doubt_db[i] * b->doubt_db[i];
        float difference = a->bands_db[i] - b->bands_db[i], ratio = wider / alike;
        sum += ln_one_more(ratio) - difference * difference * ratio / (alike + wider);
    }
    return PARTS_WEIGHT / 2 * sum;
}

/* Of what follows: the correlation of the two profiles, as far as they are more than noise. */
static float likeness_of_echoes(const struct pulse_shape *a, const struct pulse_shape *b)
{
    float aa = a->echoes_energy, bb = b->echoes_energy, ab = 0;
    for (uint32_t i = 0; i < PULSE_SHAPE_LAGS; i++)
        ab += a->echoes[i] * b->echoes[i];
    float more_a = aa - PULSE_SHAPE_LAGS * a->echoes_doubt * a->echoes_doubt;
    float more_b = bb - PULSE_SHAPE_LAGS * b->echoes_doubt * b->echoes_doubt;
    if (more_a <= 0 || more_b <= 0)
        return 0;
    return ECHO_WEIGHT * sqrtf(more_a * more_b) * (ab - ECHO_MIDDLE * sqrtf(aa * bb)) / (aa * bb);
}

double pulse_shape_likeness(const struct pulse_shape *a, const struct pulse_shape *b)
{
    return (double)likeness_of_parts(a, b) + likeness_of_echoes(a, b);
}

double pulse_shape_alike_spectra(const struct pulse_shape *a, const struct pulse_shape *b)
{
    return (double)likeness_of_parts(a, b);
}
