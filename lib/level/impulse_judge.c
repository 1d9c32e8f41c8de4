/* Whether what a window holds is an impulse, or the echo of one; see level/impulses.h. */
#include "level/impulse_finder.h"
#include <math.h>

#define ECHO 600u       /* cells in which a weaker one is an echo */
#define RISE 16u        /* cells */
#define RISE_RATIO 4.0  /* 6 dB */
#define NEAR_PEAK 0.316 /* 5 dB below */
#define LOW_PART 0.3
#define LONGEST_T90_S 1.0
#define JUDGED_T90_S 0.1
#define SHORT_FRONT_PART 0.55 /* a rectangle has 0.5 */
#define FRONT_PART 0.4
#define TONE_PART 0.65
#define LEAST_DB 8.0
#define BAND_RATIO 10.0 /* 10 dB */

/* Its 8 ms level rises by 6 dB or more within 16 ms, to within 5 dB of its highest. */
static bool is_sudden(struct impulse_finder *finder, uint64_t start, double highest_short)
{
    const double floor = finder->background.total;
    for (uint64_t c = start + RISE; c < finder->cells.next; c++) {
        double now = cells_get(&finder->cells, c)->short_level,
               then = cells_get(&finder->cells, c - RISE)->short_level;
        if (now >= NEAR_PEAK * highest_short && now >= RISE_RATIO * fmax(then, floor))
            return true;
    }
    return false;
}

static bool is_low(struct impulse_finder *finder, const struct impulse_measures *measures, uint64_t start,
                   uint64_t end)
{
    const struct cell_background *background = &finder->background;
    double low = 0, n = (double)(end - start) * finder->cell_frames;
    for (uint64_t c = start; c < end; c++)
        low += cells_get(&finder->cells, c)->total - background->total;
    low *= finder->cell_frames;
    double full = measures->exposure_pa2_s * finder->rate_hz;
    /* The background's own energy scatters by sqrt(2 n): what it may have added to the whole is not held
     * against it. */
    double scatter = 3 * sqrt(2 * n) * (background->square - background->mean * background->mean);
    return low >= LOW_PART * (full - scatter);
}

static bool is_echo(const struct impulse_finder *finder)
{
    if (!finder->had_one)
        return false;
    uint64_t since = finder->window.trigger - finder->last_trigger;
    double ratio = finder->window.highest / finder->last_highest;
    return (since < IMPULSE_NEXT && ratio < 1 / IMPULSE_WEAKER) || (since < ECHO && ratio < IMPULSE_WEAKER);
}

static bool is_tone(const struct impulse_finder *finder, const struct impulse_measures *measures,
                    const struct impulse_window *sound)
{
    return measures->t90_s > JUDGED_T90_S &&
           tone_part_measure(finder->tone_part, sound->pascals, sound->n, (size_t)fmax(measures->t5_frame, 0),
                             (size_t)measures->t95_frame) > TONE_PART;
}

/* Energy falls from the onset, and a longer sound is not one tone at a time. */
static bool is_call(const struct impulse_finder *finder, const struct impulse_measures *measures,
                    const struct impulse_window *sound)
{
    double front = (measures->t50_frame - measures->t5_frame) / (measures->t95_frame - measures->t5_frame);
    if (measures->t90_s <= JUDGED_T90_S)
        return front > SHORT_FRONT_PART;
    return measures->t90_s > LONGEST_T90_S || front > FRONT_PART || is_tone(finder, measures, sound);
}

bool impulse_judge(struct impulse_finder *finder, const struct impulse_measures *measures,
                   const struct impulse_window *sound, uint64_t end)
{
    struct impulse_rejections *rejections = &finder->rejections;
    if (measures->rms90_db < measures->background_db + LEAST_DB)
        rejections->too_weak++;
    else if (is_echo(finder))
        rejections->echo++;
    else if (!is_low(finder, measures, finder->window.start, end))
        rejections->high++;
    else if (!is_sudden(finder, finder->window.start, finder->window.highest_short))
        rejections->slow++;
    else if (is_call(finder, measures, sound))
        rejections->call++;
    else
        return true;
    return false;
}

/* In no band is it far stronger than its impulse: an echo has lost what it has not. */
static bool has_bands_of(const struct impulse_finder *finder, uint64_t from, uint64_t end)
{
    for (uint32_t b = 0; b < CELL_BANDS; b++) {
        double echo = 0, impulse = 0, background = finder->background.look_mean[b];
        for (uint64_t c = finder->held_window.start; c < finder->held_end; c++)
            impulse += cells_get(&finder->cells, c)->band[b] - background;
        for (uint64_t c = from; c < end; c++)
            echo += cells_get(&finder->cells, c)->band[b] - background;
        double scatter = 6 * sqrt((double)(end - from)) * background;
        if (echo > BAND_RATIO * fmax(impulse, 0) + scatter)
            return false;
    }
    return true;
}

bool impulse_judge_echo(struct impulse_finder *finder, const struct impulse_measures *measures,
                        const struct impulse_window *sound, uint64_t from, uint64_t end)
{
    struct impulse_rejections *rejections = &finder->rejections;
    double highest_short = 0;
    for (uint64_t c = from; c < end; c++)
        highest_short = fmax(highest_short, cells_get(&finder->cells, c)->short_level);
    if (measures->rms90_db < measures->background_db + LEAST_DB)
        rejections->too_weak++;
    else if (!is_low(finder, measures, from, end) || !has_bands_of(finder, from, end))
        rejections->high++;
    else if (!is_sudden(finder, from, highest_short))
        rejections->slow++;
    else if (is_tone(finder, measures, sound))
        rejections->call++;
    else
        return true;
    return false;
}
