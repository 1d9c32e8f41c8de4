/* Recipes; see recipe.h. Where a recipe follows a published measurement it is named; the rest is common
 * practice, no source. */
#include "scene/recipe.h"
#include "base/units.h"
#include <math.h>

static const struct recipe_facts facts[VOICE_COUNT] = {
    [VOICE_TONE] = {"tone", GROUP_UNKNOWN, 160, 0, 60, 0.05},
    /* Au et al. 2006, J. Acoust. Soc. Am. 120, 1103: units of song 151 to 173 dB. */
    [VOICE_HUMPBACK_SONG] = {"humpback song", GROUP_BALEEN_WHALE, 168, 8000, 3.0, 1.5},
    /* Watkins et al. 1987, J. Acoust. Soc. Am. 82, 1901: 20 Hz pulses of 1 s, 7 to 26 s apart, up to 186 dB.
     */
    [VOICE_FIN_PULSE] = {"fin whale pulse", GROUP_BALEEN_WHALE, 186, 200, 1.0, 10},
    [VOICE_BLUE_MOAN] = {"blue whale moan", GROUP_BALEEN_WHALE, 186, 500, 15, 40},
    /* Parks and Tyack 2005, J. Acoust. Soc. Am. 117, 3297: tonal calls 137 to 162 dB (from memory). */
    [VOICE_RIGHT_UPCALL] = {"right whale upcall", GROUP_BALEEN_WHALE, 160, 1000, 1.5, 3},
    [VOICE_DELPHINID_WHISTLE] = {"delphinid whistle", GROUP_DELPHINID, 155, 24000, 1.5, 0.25},
    [VOICE_DELPHINID_CLICKS] = {"delphinid clicks", GROUP_DELPHINID, 200, 44000, 12, 0.5},
    /* Mohl et al. 2003, J. Acoust. Soc. Am. 114, 1143: up to 236 dB on the axis; what is heard is off it. */
    [VOICE_SPERM_CLICKS] = {"sperm whale clicks", GROUP_SPERM_WHALE, 200, 44000, 260, 30},
    /* Zimmer et al. 2005, J. Acoust. Soc. Am. 117, 3919: Cuvier's beaked whale, 214 dB peak to peak on the
       axis. */
    [VOICE_BEAKED_CLICKS] = {"beaked whale clicks", GROUP_BEAKED_WHALE, 195, 150000, 60, 8},
    /* Villadsgaard et al. 2007, J. Exp. Biol. 210, 56: 178 to 205 dB peak to peak in the wild. */
    [VOICE_PORPOISE_CLICKS] = {"porpoise clicks", GROUP_PORPOISE, 180, 324000, 13, 0.4},
};

const struct recipe_facts *recipe_facts(enum scene_voice voice)
{
    return &facts[voice < VOICE_COUNT ? voice : VOICE_TONE];
}

static void partials(struct sound *sound, const double *amplitude, uint32_t n)
{
    sound->n_parts = n;
    for (uint32_t k = 0; k < n; k++)
        sound->parts[k].amplitude = amplitude[k];
}

static void tone(struct sound *out, double length_s, double taper)
{
    *out = (struct sound){.shape = SOUND_TONE, .length_s = length_s, .taper = taper, .n_parts = 1};
    out->parts[0].amplitude = 1;
}

static void make_tone(const struct scene_animal *animal, struct sound *out)
{
    tone(out, animal->length_s, 0.1);
    contour_cubic(&out->contour, (double[4]){animal->frequency_hz, 0, 0, 0}, animal->length_s);
}

/* Song units (Payne and McVay 1971, Science 173, 585): sweeps, harmonic stacks, grunts, cries. Type by type
 * they return alike within 2 %. */
static void make_humpback_unit(struct random *random, uint64_t repertoire, uint32_t unit, struct sound *out)
{
    struct random type;
    random_reset(&type, repertoire * 131 + unit);
    uint32_t form = (unit + (uint32_t)(repertoire & 3)) % 4;
    double vary = 1 + 0.02 * random_normal(random), length_s, knots[5];
    double level[8];
    uint32_t n = 1;
    if (form == 0) { /* sweep */
        length_s = random_between(&type, 0.8, 2.2);
        double from = random_between(&type, 250, 700), to = from * random_between(&type, 1.4, 2.4);
        for (int i = 0; i < 5; i++)
            knots[i] = from + (to - from) * i / 4.0;
        n = 2;
    } else if (form == 1) { /* harmonic stack that arches */
        length_s = random_between(&type, 1.0, 3.0);
        double base = random_between(&type, 150, 450), arch = random_between(&type, 0.1, 0.35);
        for (int i = 0; i < 5; i++)
            knots[i] = base * (1 + arch * sin(0.785398 * i));
        n = 5;
    } else if (form == 2) { /* pulsed grunt */
        length_s = random_between(&type, 0.4, 1.0);
        double base = random_between(&type, 90, 180);
        for (int i = 0; i < 5; i++)
            knots[i] = base * (1 - 0.03 * i);
        n = 6;
    } else { /* cry */
        length_s = random_between(&type, 0.6, 1.8);
        double base = random_between(&type, 600, 1400);
        for (int i = 0; i < 5; i++)
            knots[i] = base * (1 + 0.12 * sin(1.3 * i));
        n = 4;
    }
    for (int i = 0; i < 5; i++)
        knots[i] *= vary;
    tone(out, length_s, 0.25);
    contour_through(&out->contour, knots, 4, length_s);
    out->pulse_rate_hz = form == 2 ? random_between(&type, 15, 45) : 0;
    for (uint32_t k = 0; k < n; k++)
        level[k] = units_amplitude_ratio(-7.0 * k);
    partials(out, level, n);
}

/* Watkins et al. 1987: 23 to 18 Hz in 1 s. */
static void make_fin_pulse(struct sound *out)
{
    tone(out, 1.0, 1.0);
    contour_cubic(&out->contour, (double[4]){23, -5, 0, 0}, 1.0);
}

/* North-East Pacific B call, strongest at its third harmonic near 48 Hz (McDonald et al. 2006, J. Cetacean
 * Res. Manage. 8, 55). */
static void make_blue_moan(struct sound *out)
{
    double knots[7];
    for (int i = 0; i < 7; i++)
        knots[i] = 16.2 - 0.9 * pow(i / 6.0, 1.5);
    tone(out, 15.0, 0.1);
    contour_through(&out->contour, knots, 6, 15.0);
    partials(out, (const double[]){0.5, 0.35, 1.0, 0.2, 0.2}, 5);
}

/* Upsweep that quickens, 95 to 195 Hz (Clark 1982, Anim. Behav. 30, 1060). */
static void make_upcall(struct random *random, struct sound *out)
{
    double vary = 1 + 0.05 * random_normal(random);
    tone(out, random_between(random, 0.7, 1.1), 0.3);
    contour_cubic(&out->contour, (double[4]){95 * vary, 25 * vary, 0, 75 * vary}, out->length_s);
    partials(out, (const double[]){1.0, 0.15}, 2);
}

/* A smooth curve through 4 to 8 knots. Where the sampling rate ends early, so does the whistle's range. */
static void make_whistle(struct random *random, double rate_hz, struct sound *out)
{
    double knots[SOUND_MAX_SEGMENTS + 1];
    uint32_t n = 3 + (uint32_t)(random_bits(random) % 5);
    double length_s = random_between(random, 0.3, 1.5), top_hz = fmin(18000, 0.4 * rate_hz);
    double middle_hz = random_between(random, 6000, 0.8 * top_hz), most = 20000 * length_s / n;
    knots[0] = middle_hz;
    for (uint32_t i = 1; i <= n; i++) {
        double step_hz = random_between(random, -1, 1) * fmin(most, 0.35 * middle_hz);
        knots[i] = fmin(top_hz, fmax(4000, knots[i - 1] + step_hz));
    }
    tone(out, length_s, 0.1);
    contour_through(&out->contour, knots, n, length_s);
    partials(out, (const double[]){1.0, 0.12}, 2);
}

static void pulse(struct sound *out, enum sound_shape shape, const struct sound_part *parts, uint32_t n)
{
    *out = (struct sound){.shape = shape, .n_parts = n};
    for (uint32_t k = 0; k < n; k++)
        out->parts[k] = parts[k];
}

/* Two lobes at 45 and 105 kHz (Au 1993, "The sonar of dolphins"), stretched up to 1.7 times as off the axis.
 */
static void make_delphinid_click(struct random *random, struct sound *out)
{
    double stretch = random_between(random, 1.0, 1.7);
    struct sound_part parts[] = {
        {.amplitude = 0.7, .frequency_hz = 45000 / stretch, .width_s = 9e-6 * stretch},
        {.amplitude = 1.0 / stretch, .frequency_hz = 105000 / stretch, .width_s = 6e-6 * stretch}};
    parts[1].delay_s = 4.5 * (parts[0].width_s - parts[1].width_s);
    pulse(out, SOUND_GAUSS, parts, 2);
}

/* Off the axis: a row of pulses, one inter-pulse interval apart (Norris and Harvey 1972; Mohl 2001). */
static void make_sperm_click(uint64_t repertoire, struct sound *out)
{
    struct random size;
    random_reset(&size, repertoire);
    double interval_s = random_between(&size, 0.0025, 0.008), hz = random_between(&size, 8000, 12000);
    static const double amplitude[] = {0.35, -1.0, 0.35, -0.12, 0.05};
    struct sound_part parts[5];
    for (int i = 0; i < 5; i++)
        parts[i] = (struct sound_part){
            .amplitude = amplitude[i], .frequency_hz = hz, .delay_s = i * interval_s, .width_s = 45e-6};
    pulse(out, SOUND_GAUSS, parts, 5);
}

/* Zimmer et al. 2005: upsweep about 42 kHz, 200 us. */
static void make_beaked_click(struct sound *out)
{
    pulse(out, SOUND_GAUSS,
          &(struct sound_part){.amplitude = 1, .frequency_hz = 42000, .width_s = 65e-6, .chirp_hz_s = 97e6},
          1);
}

/* Narrow band, high frequency: 129 to 145 kHz, some 100 us (Villadsgaard et al. 2007). */
static void make_porpoise_click(struct random *random, struct sound *out)
{
    pulse(out, SOUND_GAMMA,
          &(struct sound_part){.amplitude = 1,
                               .frequency_hz = random_between(random, 129000, 142000),
                               .width_s = random_between(random, 16e-6, 20e-6)},
          1);
}

static uint32_t between(struct random *random, uint32_t low, uint32_t high)
{
    return low + (uint32_t)(random_bits(random) % (high - low + 1));
}

struct rhythm {
    uint32_t pulses;
    double interval_s, low_s, high_s;
    double walk;     /* sd of ln(interval) from one to the next, which is kept */
    double scatter;  /* sd of ln(interval), which is forgotten */
    double sweep_db; /* depth of the beam's sweep over the hydrophones */
};

/* What each animal does with its pulses; an override keeps the interval near one value. */
static struct rhythm rhythm_of(const struct scene_animal *animal, struct random *random, uint64_t repertoire)
{
    struct rhythm rhythm = {0};
    struct random habit;
    random_reset(&habit, repertoire + 17);
    if (animal->voice == VOICE_PORPOISE_CLICKS)
        rhythm = (struct rhythm){
            between(random, 8, 60),        random_between(random, 0.04, 0.09), 0.03, 0.2, 0.04, 0,
            random_between(random, 15, 25)};
    else if (animal->voice == VOICE_DELPHINID_CLICKS)
        rhythm = (struct rhythm){
            between(random, 10, 60),      random_between(random, 0.03, 0.15), 0.01, 0.2, 0, 0.15,
            random_between(random, 6, 15)};
    else if (animal->voice == VOICE_SPERM_CLICKS)
        rhythm = (struct rhythm){between(random, 120, SCENE_MAX_PULSES),
                                 random_between(&habit, 0.55, 0.95),
                                 0.45,
                                 1.0,
                                 0.004,
                                 0.03,
                                 6};
    else
        rhythm = (struct rhythm){between(random, 20, 80), 0.41, 0.35, 0.5, 0, 0.05, 12};
    if (animal->pulses > 0)
        rhythm.pulses = animal->pulses;
    if (isfinite(animal->pulse_interval_s)) {
        rhythm.interval_s = animal->pulse_interval_s;
        rhythm.low_s = 0.8 * rhythm.interval_s;
        rhythm.high_s = 1.2 * rhythm.interval_s;
        rhythm.walk = 0;
        rhythm.scatter = 0.04;
    }
    return rhythm;
}

static void make_train(const struct rhythm *rhythm, struct random *random, struct emission *out)
{
    double at_s = 0, interval_s = rhythm->interval_s;
    out->n_pulses = rhythm->pulses;
    for (uint32_t i = 0; i < rhythm->pulses; i++) {
        double across = rhythm->pulses > 1 ? (double)i / (rhythm->pulses - 1) : 0.5;
        double sweep_db = rhythm->sweep_db * (0.5 - 0.5 * cos(6.283185307179586 * across)) - rhythm->sweep_db;
        out->pulse_s[i] = at_s;
        out->pulse_gain[i] = (float)units_amplitude_ratio(sweep_db);
        interval_s *= exp(rhythm->walk * random_normal(random));
        interval_s = fmin(rhythm->high_s, fmax(rhythm->low_s, interval_s));
        double scattered_s = interval_s * exp(rhythm->scatter * random_normal(random));
        at_s += fmin(rhythm->high_s, fmax(rhythm->low_s, scattered_s));
    }
}

static void make_pulse(enum scene_voice voice, struct random *random, uint64_t repertoire, struct sound *out)
{
    if (voice == VOICE_DELPHINID_CLICKS)
        make_delphinid_click(random, out);
    else if (voice == VOICE_SPERM_CLICKS)
        make_sperm_click(repertoire, out);
    else if (voice == VOICE_BEAKED_CLICKS)
        make_beaked_click(out);
    else
        make_porpoise_click(random, out);
    sound_measure_length(out);
    sound_normalize_peak(out);
}

void recipe_call(const struct scene_animal *animal, double rate_hz, struct random *random,
                 uint64_t repertoire, uint32_t unit, struct emission *out)
{
    out->n_pulses = 0;
    if (animal->voice >= VOICE_DELPHINID_CLICKS) {
        make_pulse(animal->voice, random, repertoire, &out->sound);
        struct rhythm rhythm = rhythm_of(animal, random, repertoire);
        make_train(&rhythm, random, out);
    } else {
        if (animal->voice == VOICE_HUMPBACK_SONG)
            make_humpback_unit(random, repertoire, unit, &out->sound);
        else if (animal->voice == VOICE_FIN_PULSE)
            make_fin_pulse(&out->sound);
        else if (animal->voice == VOICE_BLUE_MOAN)
            make_blue_moan(&out->sound);
        else if (animal->voice == VOICE_RIGHT_UPCALL)
            make_upcall(random, &out->sound);
        else if (animal->voice == VOICE_DELPHINID_WHISTLE)
            make_whistle(random, rate_hz, &out->sound);
        else
            make_tone(animal, &out->sound);
        sound_normalize_mean_square(&out->sound);
    }
    sound_limit_band(&out->sound, rate_hz);
    out->level_db =
        isfinite(animal->source_level_db) ? animal->source_level_db : facts[animal->voice].source_level_db;
    out->amplitude = 1e-6 * units_amplitude_ratio(out->level_db);
}

/* A struck pile: energy from 100 to 500 Hz, rise of 1 to 5 ms, 90 % of the energy in 50 to 100 ms near the
 * pile (common practice, no source). */
void recipe_blow(double rate_hz, struct sound *out)
{
    static const struct sound_part parts[] = {{.amplitude = 1.0, .frequency_hz = 112, .width_s = 0.048},
                                              {.amplitude = 0.8, .frequency_hz = 187, .width_s = 0.042},
                                              {.amplitude = 0.6, .frequency_hz = 341, .width_s = 0.031},
                                              {.amplitude = 0.35, .frequency_hz = 623, .width_s = 0.020},
                                              {.amplitude = 0.2, .frequency_hz = 1310, .width_s = 0.010},
                                              {.amplitude = 0.12, .frequency_hz = 3120, .width_s = 0.005},
                                              {.amplitude = 0.06, .frequency_hz = 7510, .width_s = 0.002}};
    pulse(out, SOUND_DAMPED, parts, sizeof parts / sizeof parts[0]);
    out->rise_s = 0.0015;
    sound_measure_length(out);
    sound_normalize_exposure(out);
    sound_limit_band(out, rate_hz);
}

/* An airgun array: energy below 250 Hz with a weak tail above, 0.1 to 0.2 s near it (common practice, no
 * source).
 */
void recipe_shot(double rate_hz, struct sound *out)
{
    static const struct sound_part parts[] = {{.amplitude = 1.0, .frequency_hz = 28, .width_s = 0.05},
                                              {.amplitude = 1.0, .frequency_hz = 61, .width_s = 0.03},
                                              {.amplitude = 0.7, .frequency_hz = 124, .width_s = 0.015},
                                              {.amplitude = 0.3, .frequency_hz = 410, .width_s = 0.006},
                                              {.amplitude = 0.05, .frequency_hz = 2300, .width_s = 0.002}};
    pulse(out, SOUND_DAMPED, parts, sizeof parts / sizeof parts[0]);
    out->rise_s = 0.002;
    sound_measure_length(out);
    sound_normalize_exposure(out);
    sound_limit_band(out, rate_hz);
}

void recipe_ping(double frequency_hz, double ping_s, struct sound *out)
{
    pulse(out, SOUND_BURST,
          &(struct sound_part){.amplitude = 1, .frequency_hz = frequency_hz, .width_s = ping_s}, 1);
    sound_measure_length(out);
    sound_normalize_exposure(out);
    out->parts[0].amplitude *= sqrt(ping_s);
}

/* Snapping shrimp: a few microseconds wide, to above 200 kHz (Au and Banks 1998, J. Acoust. Soc. Am. 103,
 * 41). */
void recipe_snap(double rate_hz, struct random *random, struct sound *out)
{
    double width_s = random_between(random, 3e-6, 8e-6);
    const struct sound_part parts[] = {
        {.amplitude = 0.1, .frequency_hz = 8000, .width_s = 40e-6},
        {.amplitude = 1, .frequency_hz = 0.2 / width_s, .delay_s = 350e-6, .width_s = width_s}};
    pulse(out, SOUND_GAUSS, parts, 2);
    sound_measure_length(out);
    sound_normalize_peak(out);
    sound_limit_band(out, rate_hz);
}
