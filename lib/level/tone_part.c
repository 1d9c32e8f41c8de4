/* How much of a window of sound is one tone at a time. */
#include "level/tone_part.h"
#include "dsp/spectrum.h"
#include <stdlib.h>

#define FRAME 256u
#define BINS (FRAME / 2 + 1)
#define FIRST_BIN 2u /* above DC and swell */
#define REACH 2u
#define LOWEST_TONE_BIN 8u /* 125 Hz */

struct tone_part {
    uint32_t slot_frames;
    struct spectrum *spectrum;
};

enum status tone_part_create(uint32_t slot_frames, struct tone_part **out)
{
    struct tone_part *tone_part = calloc(1, sizeof *tone_part);
    if (!tone_part)
        return STATUS_NO_MEMORY;
    tone_part->slot_frames = slot_frames;
    enum status status = spectrum_create(FRAME, WINDOW_HANN, &tone_part->spectrum);
    if (status) {
        free(tone_part);
        return status;
    }
    *out = tone_part;
    return STATUS_OK;
}

void tone_part_destroy(struct tone_part *tone_part)
{
    if (!tone_part)
        return;
    spectrum_destroy(tone_part->spectrum);
    free(tone_part);
}

/* Adds one frame's energy, and that about its strongest bin. */
static void add_frame(struct tone_part *tone_part, const float *slots, double *all, double *tonal)
{
    float power[BINS];
    spectrum_power(tone_part->spectrum, slots, power);
    uint32_t strongest = FIRST_BIN;
    for (uint32_t k = FIRST_BIN; k < BINS; k++) {
        *all += power[k];
        strongest = power[k] > power[strongest] ? k : strongest;
    }
    if (strongest < LOWEST_TONE_BIN)
        return;
    for (uint32_t k = strongest - REACH; k <= strongest + REACH && k < BINS; k++)
        *tonal += power[k];
}

double tone_part_measure(struct tone_part *tone_part, const float *samples, size_t n, size_t from, size_t to)
{
    const uint32_t slot = tone_part->slot_frames;
    double all = 0, tonal = 0;
    for (; from < to; from += (size_t)FRAME / 2 * slot) {
        float slots[FRAME];
        for (uint32_t i = 0; i < FRAME; i++) {
            float sum = 0;
            for (uint32_t j = 0; j < slot; j++) {
                size_t at = from + (size_t)i * slot + j;
                sum += at < n ? samples[at] : 0;
            }
            slots[i] = sum / (float)slot;
        }
        add_frame(tone_part, slots, &all, &tonal);
    }
    return all > 0 ? tonal / all : 0;
}
