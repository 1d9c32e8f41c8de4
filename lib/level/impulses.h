/* Finds the impulses of a source (blows, shots, detonations) on one channel, without being told when, and
 * measures them (level/impulse_measure.h).
 *
 * Detection. Samples are averaged to about 4 kHz (nulls at its multiples), so that what animals click and
 * whistle above 2 kHz hardly counts, and split into three bands: 15 to 120 Hz, 120 to 600 Hz, above 600 Hz.
 * The mean square of each over a look of 24, 10 and 8 ms is compared once a millisecond with the band's own
 * background. The threshold is the 1 - 1e-9 quantile of a gamma distribution with the background's mean and
 * variance (Wilson and Hilferty, "The distribution of chi-square", PNAS 17, 1931), at least 8 dB: a constant
 * false-alarm rate whatever the noise's colour. The window ends when every band was back near its background
 * for 60 ms, or after 1.25 s.
 *
 * What counts as an impulse (common practice, no source):
 *   strong      some band's look passes its threshold, and rms90 is 8 dB or more above the
 *               background of all bands
 *   single      not within 0.3 s of the impulse before unless 6 dB stronger, nor within 0.6 s when 6 dB
 *               weaker: echo, bubble pulse, second arrival
 *   low         at least 0.3 of its energy lies in the three bands (most of the energy of a blow,
 *               shot or charge lies below 1 kHz; the averaging alone takes 3.9 dB at 2 kHz)
 *   sudden      its 8 ms level rises by 6 dB or more within 16 ms, to within 5 dB of its highest
 *   falling     half the energy within 0.4 T90 of the 5 % point (0.55 where T90 is at most 0.1 s),
 *               T90 at most 1 s
 *   broad       where T90 is above 0.1 s: less than 0.65 of it is one tone at a time above 120 Hz
 *               (level/tone_part.h)
 * Echo. An impulse's energy is that of its whole pulse, with its second arrivals (ISO 18406:2017, from
 * memory). So an impulse waits until 0.3 s after its trigger, and what begins until then, quiet before it or
 * not, is measured with it in one window, if it is strong, low, sudden and broad like the above, at most 6 dB
 * stronger in 32 ms and in none of the three bands 10 dB stronger than the impulse (common practice, no
 * source): what animals click or call just after a blow is not in it.
 *
 * Another impulse that begins in the window (0.3 s or more after its onset, its 32 ms level up by at least
 * 8 dB within the window, at most 6 dB weaker) ends the window, and the first is marked overlapped.
 *
 * Call order: create; push; at a gap or the end finish, then reset; destroy. A window that is open then is
 * dropped: a gap has cut it. */
#ifndef LEVEL_IMPULSES_H
#define LEVEL_IMPULSES_H

#include "base/status.h"
#include "level/level.h"
#include <stdbool.h>
#include <stdint.h>

/* An impulse in frames of the stream; levels as in level/impulse.h. */
struct found_impulse {
    double onset_frame;              /* the 5 % energy point, sub-sample */
    uint64_t start_frame, end_frame; /* the window that was measured */
    uint64_t known_frame;            /* the last frame needed to give it */
    double sel_db, peak_db, peak_to_peak_db, rms90_db, t90_s, background_db;
    double effective_s, kurtosis, window_s, positive_impulse_pa_s;
    bool clipped, overlapped, weak;
    uint32_t n_bands; /* 0 where nobody asks for bands */
    double band_sel_db[LEVEL_MAX_BANDS];
};

struct impulse_sink {
    void (*take)(void *context, const struct found_impulse *impulse);
    void *context;
    /* May be NULL. Of each impulse and each echo as soon as its own window has closed, before take: with its
     * 5 % energy point. */
    void (*heard)(void *context, double onset_frame, double t90_s);
};

/* Why windows that opened were no impulses, since create. */
struct impulse_rejections {
    uint64_t too_weak, echo, high, slow, call;
};

struct impulse_finder;

/* rate_hz 8,000 to 1,000,000; full_scale_pa is the pressure at which the channel clips (INFINITY: not known);
 * with_bands: the decidecades of each impulse too (level/impulse_bands.h), two FFTs an impulse and plans at
 * start. STATUS_BAD_ARGUMENT, STATUS_NO_MEMORY; the caller owns *out. Holds 2 s of sound. */
enum status impulse_finder_create(double rate_hz, double full_scale_pa, bool with_bands,
                                  struct impulse_finder **out);
void impulse_finder_destroy(struct impulse_finder *finder);
/* Forgets the past and the background, which takes 0.6 s to be known again; next_frame is that of the next
 * push. */
void impulse_finder_reset(struct impulse_finder *finder, uint64_t next_frame);
/* What waits for an echo is given; call before a reset and at the end. */
void impulse_finder_finish(struct impulse_finder *finder, const struct impulse_sink *sink);
/* Takes n finite samples. Impulses come when their window ends: about 0.07 s after the sound has fallen to
 * near the background, at least 0.3 s and at most 1.3 s after the onset; independent of how the sound is cut
 * into pushes. */
void impulse_finder_push(struct impulse_finder *finder, const float *pascals, uint32_t n,
                         const struct impulse_sink *sink);
void impulse_finder_get_rejections(const struct impulse_finder *finder, struct impulse_rejections *out);

#endif
