/* Sound for people's ears; see audible.h. */
#include "dsp/audible.h"
#include "dsp/decimate.h"
#include "dsp/filter.h"
#include "dsp/limiter.h"
#include <complex.h>
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define FRAMES_PER_S 100.0
#define HIGH_PASS_HZ 10.0
#define LOWEST_RATE_HZ 44100.0
#define BLOW_RATIO 398.1   /* 26 dB */
#define CALM_RATIO 15.85   /* 12 dB */
#define BLOW_FRAMES 3      /* so many in a row, and so many to rise */
#define BEFORE_FRAMES 2    /* muted before the rise */
#define LONGEST_FRAMES 150 /* what is still loud then is heard, limited */
#define CHUNK 4096
#define TURN 1024 /* samples after which an oscillator is set anew */

static int by_size(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Median of those that are not silent; 0 where all are. */
static double median_power(const double *power, size_t n, double *scratch)
{
    size_t kept = 0;
    for (size_t i = 0; i < n; i++)
        if (power[i] > 0)
            scratch[kept++] = power[i];
    qsort(scratch, kept, sizeof *scratch, by_size);
    return kept ? scratch[kept / 2] : 0;
}

static size_t frame_start(double rate_hz, size_t frame)
{
    return (size_t)((double)frame * rate_hz / FRAMES_PER_S);
}

/* Mean square of each whole frame; returns how many there are. */
static size_t frame_powers(const float *samples, size_t n, double rate_hz, double *power)
{
    size_t frames = 0;
    for (size_t from = 0, to; (to = frame_start(rate_hz, frames + 1)) <= n; from = to) {
        double sum = 0;
        for (size_t i = from; i < to; i++)
            sum += (double)samples[i] * samples[i];
        power[frames++] = to > from ? sum / (double)(to - from) : 0;
    }
    return frames;
}

/* Marks the frames of blows. A frame that is marked is muted whole. */
static void mark_blows(const double *power, size_t n, double usual, bool *muted)
{
    size_t calm = 0; /* the frame after the last calm one */
    for (size_t i = 0; i < n; i++) {
        if (power[i] < CALM_RATIO * usual)
            calm = i + 1;
        size_t loud = i;
        while (loud < n && power[loud] >= BLOW_RATIO * usual)
            loud++;
        if (loud - i < BLOW_FRAMES || i > calm + BLOW_FRAMES)
            continue;
        while (loud < n && power[loud] >= CALM_RATIO * usual)
            loud++;
        size_t end = loud < calm + LONGEST_FRAMES ? loud : calm + LONGEST_FRAMES;
        for (size_t k = calm > BEFORE_FRAMES ? calm - BEFORE_FRAMES : 0; k < end; k++)
            muted[k] = true;
        i = loud - 1;
    }
}

/* Fades out over the frame before a muted one and in over the one after it. */
static void mute_frames(float *samples, size_t n, double rate_hz, const bool *muted, size_t frames)
{
    for (size_t k = 0; k < frames; k++) {
        bool fall = !muted[k] && k + 1 < frames && muted[k + 1], rise = !muted[k] && k > 0 && muted[k - 1];
        if (!muted[k] && !fall && !rise)
            continue;
        size_t from = frame_start(rate_hz, k), to = frame_start(rate_hz, k + 1);
        for (size_t i = from; i < to && i < n; i++) {
            double part = (double)(i - from) / (double)(to - from);
            double gain = muted[k] ? 0 : fmin(fall ? 1 - part : 1, rise ? part : 1);
            samples[i] *= (float)gain;
        }
    }
}

/* How many seconds after n_before were muted goes to out->muted_s. */
static enum status mute_blows(const struct audible_setup *setup, float *samples, size_t n,
                              struct audible *out)
{
    size_t most = (size_t)((double)n * FRAMES_PER_S / setup->rate_hz) + 2, frames;
    double *power = calloc(2 * most, sizeof *power);
    bool *muted = calloc(most, sizeof *muted);
    if (power && muted) {
        frames = frame_powers(samples, n, setup->rate_hz, power);
        mark_blows(power, frames, median_power(power, frames, power + most), muted);
        mute_frames(samples, n, setup->rate_hz, muted, frames);
        for (size_t k = 0; k < frames; k++)
            out->muted_s +=
                muted[k] && frame_start(setup->rate_hz, k) >= setup->n_before ? 1 / FRAMES_PER_S : 0;
    }
    enum status status = power && muted ? STATUS_OK : STATUS_NO_MEMORY;
    free(power);
    free(muted);
    return status;
}

/* exp(2 pi i f t) at a frame's number, exact however large that is. */
static double complex turn(double frequency_hz, double rate_hz, uint64_t frame)
{
    double whole, turns = modf(frequency_hz / rate_hz * (double)(frame % (uint64_t)1e9), &whole);
    double more = (double)(frame / (uint64_t)1e9) * fmod(frequency_hz / rate_hz * 1e9, 1);
    return cexp(2 * M_PI * I * (turns + fmod(more, 1)));
}

static void shift(const struct audible_setup *setup, double centre_hz, float *samples, size_t n)
{
    struct filter real, imaginary;
    double complex down = 1, up = 1, down_step = cexp(-2 * M_PI * I * centre_hz / setup->rate_hz),
                   up_step = cexp(2 * M_PI * I * AUDIBLE_OFFSET_HZ / setup->rate_hz);
    filter_low_pass(8, AUDIBLE_HALF_BAND_HZ, setup->rate_hz, &real);
    imaginary = real;
    for (size_t i = 0; i < n; i++) {
        if (i % TURN == 0) {
            down = conj(turn(centre_hz, setup->rate_hz, setup->first_frame + i));
            up = turn(AUDIBLE_OFFSET_HZ, setup->rate_hz, setup->first_frame + i);
        }
        double complex low = samples[i] * down;
        low = filter_step(&real, creal(low)) + I * filter_step(&imaginary, cimag(low));
        samples[i] = (float)(2 * creal(low * up));
        down *= down_step;
        up *= up_step;
    }
}

/* The greatest divisor that leaves a whole rate of at least LOWEST_RATE_HZ and that the decimator can do. */
static uint32_t pick_factor(double rate_hz)
{
    static const uint32_t primes[] = {2, 3, 5, 7, 11, 13};
    for (uint32_t factor = (uint32_t)(rate_hz / LOWEST_RATE_HZ); factor > 1; factor--) {
        uint32_t rest = factor;
        for (size_t i = 0; i < sizeof primes / sizeof primes[0]; i++)
            while (rest % primes[i] == 0)
                rest /= primes[i];
        if (rest == 1 && fmod(rate_hz, factor) == 0)
            return factor;
    }
    return 1;
}

/* Down to out->rate_hz, without what only let the filters settle. */
static enum status decimate(uint32_t factor, const float *samples, size_t n, size_t n_before,
                            struct audible *out)
{
    struct decimator *decimator;
    float *made = malloc((n / factor + 2) * sizeof *made);
    if (!made)
        return STATUS_NO_MEMORY;
    enum status status = decimator_create(factor, &decimator);
    if (status != STATUS_OK) {
        free(made);
        return status;
    }
    size_t n_made = 0;
    for (size_t at = 0; at < n; at += CHUNK)
        n_made += decimator_push(decimator, samples + at, n - at < CHUNK ? n - at : CHUNK, made + n_made);
    decimator_destroy(decimator);
    size_t before = n_before / factor;
    out->n = n_made > before ? n_made - before : 0;
    memmove(made, made + before, out->n * sizeof *made);
    out->samples = made;
    return STATUS_OK;
}

static enum status set_loudness(double asked_db, struct audible *out)
{
    if (isnan(asked_db)) {
        size_t most = (size_t)((double)out->n * FRAMES_PER_S / out->rate_hz) + 2;
        double *power = calloc(2 * most, sizeof *power);
        if (!power)
            return STATUS_NO_MEMORY;
        size_t frames = frame_powers(out->samples, out->n, out->rate_hz, power);
        double usual = median_power(power, frames, power + most);
        free(power);
        asked_db = usual > 0 ? AUDIBLE_BACKGROUND_DB - 10 * log10(usual) : 0;
    }
    out->gain_db = fmin(asked_db, AUDIBLE_MOST_GAIN_DB);
    size_t reach = (size_t)(out->rate_hz / FRAMES_PER_S);
    return limiter_apply(out->samples, out->n, pow(10, out->gain_db / 20), AUDIBLE_CEILING, reach);
}

static bool is_good(const struct audible_setup *setup, size_t n)
{
    return n > setup->n_before && setup->rate_hz >= 8000 && setup->rate_hz <= 1e6 &&
           (unsigned)setup->form < AUDIBLE_FORM_COUNT &&
           (setup->form != AUDIBLE_SHIFTED || setup->centre_hz > 0) &&
           (isnan(setup->gain_db) || isfinite(setup->gain_db));
}

enum status audible_make(const struct audible_setup *setup, float *samples, size_t n, struct audible *out)
{
    struct filter high;
    struct audible made = {0};
    if (!is_good(setup, n) || filter_high_pass(2, HIGH_PASS_HZ, setup->rate_hz, &high) != STATUS_OK)
        return STATUS_BAD_ARGUMENT;
    for (size_t i = 0; i < n; i++)
        samples[i] = isfinite(samples[i]) ? (float)filter_step(&high, samples[i]) : 0;
    enum status status = mute_blows(setup, samples, n, &made);
    if (status != STATUS_OK)
        return status;
    uint32_t factor = setup->form == AUDIBLE_SLOWED ? 1 : pick_factor(setup->rate_hz);
    made.rate_hz = setup->form == AUDIBLE_SLOWED ? setup->rate_hz / AUDIBLE_SLOWER : setup->rate_hz / factor;
    if (setup->form == AUDIBLE_SHIFTED) {
        double most_hz = fmax(AUDIBLE_HALF_BAND_HZ, setup->rate_hz / 2 - AUDIBLE_HALF_BAND_HZ);
        made.centre_hz = fmin(fmax(setup->centre_hz, AUDIBLE_HALF_BAND_HZ), most_hz);
        if (setup->rate_hz < 4 * AUDIBLE_HALF_BAND_HZ) /* carries no more than what would be shifted */
            made.centre_hz = 0;
        else
            shift(setup, made.centre_hz, samples, n);
    }
    status = decimate(factor, samples, n, setup->n_before, &made);
    if (status == STATUS_OK && made.n > 0)
        status = set_loudness(setup->gain_db, &made);
    if (status != STATUS_OK) {
        audible_destroy(&made);
        return status;
    }
    *out = made;
    return STATUS_OK;
}

void audible_destroy(struct audible *audible)
{
    if (!audible)
        return;
    free(audible->samples);
    audible->samples = NULL;
}

enum status audible_form_from_text(const char *text, enum audible_form *out)
{
    static const char *const words[AUDIBLE_FORM_COUNT] = {
        [AUDIBLE_AS_IS] = "as-is", [AUDIBLE_SLOWED] = "slowed", [AUDIBLE_SHIFTED] = "shifted"};
    for (unsigned i = 0; i < AUDIBLE_FORM_COUNT; i++)
        if (strcmp(text, words[i]) == 0) {
            *out = (enum audible_form)i;
            return STATUS_OK;
        }
    return STATUS_NOT_FOUND;
}
