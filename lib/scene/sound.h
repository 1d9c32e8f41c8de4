/* One sound as its source gives it: a formula that can be evaluated at any time, so that every hydrophone
 * gets it at its own delay, exactly to a fraction of a sample, and with absorption at each component's
 * frequency. */
#ifndef SCENE_SOUND_H
#define SCENE_SOUND_H

#include <stdint.h>

#define SOUND_MAX_PARTS 8
#define SOUND_MAX_SEGMENTS 8

/* A frequency that changes smoothly: cubics on equal segments, with the phase worked out at each joint. */
struct contour {
    uint32_t n_segments;
    double length_s;
    double cubic[SOUND_MAX_SEGMENTS][4]; /* Hz, over 0..1 within the segment */
    double cycles[SOUND_MAX_SEGMENTS];   /* phase at the segment's start */
};

/* Through n + 1 knots (Hz) at equal times, tangents as Catmull and Rom (1974) take them. n is 1..8. */
void contour_through(struct contour *contour, const double *knots_hz, uint32_t n, double length_s);
/* One cubic in x = t / length_s: c0 + c1 x + c2 x2 + c3 x3. */
void contour_cubic(struct contour *contour, const double coefficients[4], double length_s);
double contour_hz(const struct contour *contour, double time_s);
/* Phase in cycles since the start. */
double contour_cycles(const struct contour *contour, double time_s);
/* Lowest, highest and mean frequency. */
void contour_extent(const struct contour *contour, double *low_hz, double *high_hz, double *mean_hz);

enum sound_shape {
    SOUND_TONE,   /* partials k = 1, 2 .. of the contour under a cosine-tapered window */
    SOUND_GAUSS,  /* parts: a sine under a Gaussian of standard deviation width_s (Gabor), with chirp */
    SOUND_GAMMA,  /* parts: (t / width)2 exp(-t / width) cos */
    SOUND_DAMPED, /* parts: (1 - exp(-t / rise)) exp(-t / width) sin */
    SOUND_BURST   /* parts: a sine for width_s, its ends tapered over a tenth */
};

struct sound_part {
    double amplitude;
    double frequency_hz; /* of a pulse's part; a tone's are multiples of the contour */
    double delay_s;      /* of a pulse's part after the pulse's start */
    double width_s;
    double chirp_hz_s;
};

struct sound {
    enum sound_shape shape;
    double length_s; /* it is silent before 0 and after this */
    uint32_t n_parts;
    struct sound_part parts[SOUND_MAX_PARTS];
    struct contour contour; /* of a tone */
    double taper;           /* of a tone: share of its length that is tapered (Tukey); 1 is a Hann window */
    double pulse_rate_hz;   /* of a tone: amplitude modulation, as in a grunt; 0 none */
    double rise_s;          /* of damped parts */
};

/* Frequency at which part k is absorbed. */
double sound_part_hz(const struct sound *sound, uint32_t k);
/* The band it fills, about -10 dB. */
void sound_band(const struct sound *sound, double *low_hz, double *high_hz);

/* Sets length_s of a pulse from its parts. */
void sound_measure_length(struct sound *sound);
/* Scale the parts so that a tone's mean square over its length is 1, a pulse's peak is 1, a pulse's exposure
 * is 1 s (for blows, whose source is stated as energy). */
void sound_normalize_mean_square(struct sound *sound);
void sound_normalize_peak(struct sound *sound);
void sound_normalize_exposure(struct sound *sound);

/* A recorder's front end: parts of Gaussian shape that reach above the band of a sampling rate pass through a
 * Gaussian low-pass (standard deviation 0.2 of the rate), which leaves them Gaussian; other parts whose
 * frequency is above 0.45 of the rate are silenced. */
void sound_limit_band(struct sound *sound, double rate_hz);

/* Adds n values at times t0, t0 + dt ...; part k is multiplied by gain[k], and all by a factor that goes
 * linearly from scale0 at time 0 to scale1 at length_s. Values outside 0..length_s add nothing. */
void sound_add(const struct sound *sound, const double *gain, double scale0, double scale1, double t0,
               double dt, uint32_t n, float *out);

#endif
