/* Sound of the sea made fit for people's ears: as it is, slowed, or shifted down; blows muted, never louder
 * than a fixed ceiling. For people only: nothing is decided from it.
 *
 * as it is: above 10 Hz (Butterworth, second order), at the highest whole fraction of the rate that is at
 *   least 44.1 kHz.
 * slowed: the same samples played ten times slower: 192 kHz become 19.2 kHz, 130 kHz is heard at 13 kHz.
 * shifted: 10 kHz about a centre are moved to lie about 5.3 kHz, at their own pace. Weaver, "A third method
 * of generation and detection of single-sideband signals", Proc. IRE 44 (1956): down to 0 by the centre,
 *   low-pass at 5 kHz (Butterworth, eighth order), up by 5.3 kHz. The lower side is not mirrored.
 *
 * A blow, shot or detonation (own choice, no source): frames of 10 ms, with the 10 Hz high-pass; of which at
 * least three in a row have 26 dB or more over the median frame, and which rose there within 30 ms from less
 * than 12 dB over it. It is muted from 20 ms before the rise until it is back under 12 dB, at most 1.5 s.
 * Clicks are shorter, whistles rise slower or are weaker, and stay. What is no blow is still limited. */
#ifndef DSP_AUDIBLE_H
#define DSP_AUDIBLE_H

#include "base/status.h"
#include <stddef.h>
#include <stdint.h>

#define AUDIBLE_SLOWER 10
#define AUDIBLE_HALF_BAND_HZ 5000.0
#define AUDIBLE_OFFSET_HZ 5300.0
#define AUDIBLE_CEILING 0.25          /* of full scale: 12 dB below it */
#define AUDIBLE_BACKGROUND_DB (-40.0) /* where the usual loudness is put, dB re full scale (rms) */
#define AUDIBLE_MOST_GAIN_DB 140.0

enum audible_form { AUDIBLE_AS_IS, AUDIBLE_SLOWED, AUDIBLE_SHIFTED, AUDIBLE_FORM_COUNT };

struct audible_setup {
    enum audible_form form;
    double rate_hz;       /* 8 kHz to 1 MHz */
    double centre_hz;     /* of the band that is shifted; moved inside what the rate carries */
    double gain_db;       /* NAN: so that the usual loudness comes to AUDIBLE_BACKGROUND_DB */
    uint64_t first_frame; /* number of the first sample: pieces of one sound fit together by it */
    size_t n_before;      /* samples at the beginning that are only there to let the filters settle */
};

struct audible {
    float *samples; /* owned by the caller; at most AUDIBLE_CEILING */
    size_t n;
    double rate_hz;   /* to be played at */
    double gain_db;   /* that was used */
    double centre_hz; /* that was used; 0 unless shifted */
    double muted_s;   /* of the sound after n_before, in its own time */
};

/* Changes samples [n], which it uses for its work. STATUS_BAD_ARGUMENT: nothing to hear, or a setup out of
 * range; STATUS_NO_MEMORY. */
enum status audible_make(const struct audible_setup *setup, float *samples, size_t n, struct audible *out);
void audible_destroy(struct audible *audible);

/* The form of that name, "as-is", "slowed", "shifted"; STATUS_NOT_FOUND. */
enum status audible_form_from_text(const char *text, enum audible_form *out);

#endif
