/* One sound as its source gives it: a formula that can be evaluated at any time, so that every hydrophone
 * gets it at its own delay, exactly to a fraction of a sample, and with absorption at each component's
 * frequency. */
#ifndef SCENE_SOUND_H
#define SCENE_SOUND_H

#include "scene/contour.h"
#include <stdint.h>

#define SOUND_MAX_PARTS 16
#define SOUND_MAX_CHIPS 256
#define SOUND_NO_CHIP 255
#define SOUND_MAX_SWELLS 2
#define SOUND_MAX_GAPS 2

enum sound_shape {
    SOUND_TONE,   /* partials k = 1, 2 .. of the contour under a cosine-tapered window */
    SOUND_GAUSS,  /* parts: a sine under a Gaussian of standard deviation width_s (Gabor), with chirp */
    SOUND_GAMMA,  /* parts: (t / width)2 exp(-t / width) cos */
    SOUND_DAMPED, /* parts: (1 - exp(-t / rise)) exp(-t / width) sin */
    SOUND_BURST,  /* parts: a sine for width_s, its ends tapered over a tenth */
    /* Parts: Gaussian noise about frequency_hz, the power's density going as sinc8((f - frequency) width_s),
     * which is -10 dB at 0.42 / width_s to either side; each part rises by a squared sine over rise_s and
     * then decays as exp(-t / decay_s) (0: it lasts). Its mean square is amplitude2 while it lasts. */
    SOUND_NOISE,
    /* Rows of short tones of equal length (chips), each with its ends tapered over a tenth: chip c sounds at
     * frequency_hz + c slot_hz of part 0, SOUND_NO_CHIP is silent. With a chirp_hz_s each is a sweep from
     * frequency_hz, or with an odd c backwards to it. */
    SOUND_CHIPS
};

struct sound_part {
    double amplitude;
    double frequency_hz; /* of a pulse's part; a tone's are multiples of the contour */
    double delay_s;      /* of a pulse's part after the pulse's start */
    double width_s;
    double chirp_hz_s;
    double rise_s, decay_s; /* of noise */
};

struct sound {
    enum sound_shape shape;
    double length_s; /* it is silent before 0 and after this */
    uint32_t n_parts;
    struct sound_part parts[SOUND_MAX_PARTS];
    struct contour contour; /* of a tone */
    double taper; /* of a tone, noise: share of its length that is tapered (Tukey); 1: a Hann window */
    double pulse_rate_hz; /* of a tone: amplitude modulation, as in a grunt; 0 none */
    double rise_s;        /* of damped parts */
    double decay_s;       /* of a tone: exp(-t / decay) from its start; 0: none */
    /* Of a tone, noise: times 1 + depth cos(2 pi hz t). */
    double swell_hz[SOUND_MAX_SWELLS], swell_depth[SOUND_MAX_SWELLS];
    double gap_s[SOUND_MAX_GAPS],
        gap_length_s[SOUND_MAX_GAPS]; /* of a tone: silences within; length 0: none */
    /* What lasts is made of pieces that overlap by their tapers; phase, noise and swells go on across them,
     * counted from origin_s before this piece's start. */
    double origin_s;
    uint64_t seed; /* of noise */
    double chip_s, slot_hz;
    uint32_t n_chips;
    uint8_t chips[SOUND_MAX_CHIPS];
};

/* Frequency at which part k is absorbed. */
double sound_part_hz(const struct sound *sound, uint32_t k);
/* The band it fills, about -10 dB. */
void sound_band(const struct sound *sound, double *low_hz, double *high_hz);

/* Sets length_s of a pulse, of noise or chips from its parts. */
void sound_measure_length(struct sound *sound);
/* Scale the parts so that a tone's mean square over its length is 1, a pulse's peak is 1, a pulse's exposure
 * is 1 s (for blows, whose source is stated as energy); of noise, by what is expected on average (its peak
 * taken as 3 times its strongest rms). */
void sound_normalize_mean_square(struct sound *sound);
void sound_normalize_peak(struct sound *sound);
void sound_normalize_exposure(struct sound *sound);
void sound_scale(struct sound *sound, double factor);

/* A recorder's front end: parts of Gaussian shape that reach above the band of a sampling rate pass through a
 * low-pass, flat within 1 dB up to 0.36 of the rate and 25 dB down at half of it, whose response is a row of
 * Gaussians: of each part there are then up to 7 (where a sound has no room for them: a single Gaussian,
 * standard deviation 0.2 of the rate). Other parts whose frequency is above 0.45 of the rate are silenced,
 * and noise whose band reaches 0.48. */
void sound_limit_band(struct sound *sound, double rate_hz);

/* Adds n values at times t0, t0 + dt ...; part k is multiplied by gain[k], and all by a factor that goes
 * linearly from scale0 at time 0 to scale1 at length_s. Values outside 0..length_s add nothing. Another
 * variant (0: the first) is another noise of the same kind, and a tone of another phase. */
void sound_add(const struct sound *sound, uint64_t variant, const double *gain, double scale0, double scale1,
               double t0, double dt, uint32_t n, float *out);

#endif
