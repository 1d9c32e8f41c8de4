/* Finds and measures the impulses of one channel. Units of time inside: a slot is about 0.25 ms of samples, a
 * cell 4 slots, about 1 ms. */
#include "level/impulses.h"
#include "level/impulse_bands.h"
#include "level/impulse_cells.h"
#include "level/impulse_measure.h"
#include "level/tone_part.h"
#include <math.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>

#define DELAY 32u        /* cells that the background stays behind, so that an onset is not in it */
#define WARM_UP 40u      /* cells until filters and looks have settled */
#define FIRST_CELLS 500u /* of background before anything is judged */
#define BEFORE 48u       /* cells of the window before the trigger */
#define HOLD 60u         /* cells near the background that end it */
#define LONGEST 1250u    /* cells of a window from its trigger */
#define NEXT 300u        /* cells until another impulse can begin */
#define ECHO 600u        /* cells in which a weaker one is an echo */
#define BACK 32u         /* cells from another onset to its being seen */
#define RISE 16u         /* cells */
#define RISE_RATIO 4.0   /* 6 dB */
#define NEXT_RATIO 6.3   /* 8 dB */
#define NEAR_PEAK 0.316  /* 5 dB below */
#define WEAKER 0.25      /* 6 dB below */
#define LOW_PART 0.3
#define LONGEST_T90_S 1.0
#define JUDGED_T90_S 0.1
#define SHORT_FRONT_PART 0.55 /* a rectangle has 0.5 */
#define FRONT_PART 0.4
#define TONE_PART 0.65
#define LEAST_DB 8.0
#define QUIET_CELLS 256u /* before a window, from which its bands' background is learned */
#define KEPT_CELLS 1664u /* of samples kept: the longest window, the quiet before it and some */

struct finder_window {
    bool open;
    bool follows;                  /* it begins where an overlapped one ends */
    uint64_t start, trigger, loud; /* cells: first, triggered, last one above the close threshold */
    double highest_short;          /* levels so far */
    double highest, lowest_since;  /* long level: highest, lowest since it */
    double weak_highest;           /* the highest before it first fell by NEXT_RATIO; 0 until then */
};

struct impulse_finder {
    double rate_hz, full_scale_pa;
    uint32_t cell_frames;
    float *ring;           /* [KEPT_CELLS * cell_frames], the last samples pushed */
    float *window_samples; /* as many: those of the window that is measured, in one piece */
    uint32_t fill;         /* samples of the cell that is not whole yet */
    uint64_t start_frame;  /* of the last reset */
    uint64_t quiet_since;  /* cell from which the sound may be background */
    struct tone_part *tone_part;
    struct impulse_bands *bands; /* NULL where nobody asks for bands */
    struct cells cells;
    struct cell_background background;
    struct finder_window window;
    bool had_one;
    uint64_t last_trigger; /* of the last impulse given */
    double last_highest;   /* its highest long level */
    struct impulse_rejections rejections;
};

enum status impulse_finder_create(double rate_hz, double full_scale_pa, bool with_bands,
                                  struct impulse_finder **out)
{
    if (!(rate_hz >= 8000) || !(rate_hz <= 1000000) || !(full_scale_pa > 0))
        return STATUS_BAD_ARGUMENT;
    struct impulse_finder *finder = calloc(1, sizeof *finder);
    if (!finder)
        return STATUS_NO_MEMORY;
    finder->rate_hz = rate_hz;
    finder->full_scale_pa = full_scale_pa;
    cells_create(&finder->cells, rate_hz);
    finder->cell_frames = finder->cells.cell_frames;
    const size_t kept = (size_t)KEPT_CELLS * finder->cell_frames;
    finder->ring = malloc(kept * sizeof *finder->ring);
    finder->window_samples = malloc(kept * sizeof *finder->window_samples);
    if (!finder->ring || !finder->window_samples ||
        tone_part_create(finder->cells.slot_frames, &finder->tone_part) ||
        (with_bands &&
         impulse_bands_create(rate_hz, (LONGEST + BEFORE + 1) * finder->cell_frames, &finder->bands))) {
        impulse_finder_destroy(finder);
        return STATUS_NO_MEMORY;
    }
    impulse_finder_reset(finder, 0);
    *out = finder;
    return STATUS_OK;
}

void impulse_finder_destroy(struct impulse_finder *finder)
{
    if (!finder)
        return;
    tone_part_destroy(finder->tone_part);
    impulse_bands_destroy(finder->bands);
    free(finder->ring);
    free(finder->window_samples);
    free(finder);
}

void impulse_finder_reset(struct impulse_finder *finder, uint64_t next_frame)
{
    cells_reset(&finder->cells);
    finder->fill = 0;
    finder->start_frame = next_frame;
    finder->quiet_since = WARM_UP;
    memset(&finder->background, 0, sizeof finder->background);
    memset(&finder->window, 0, sizeof finder->window);
    finder->had_one = false;
    if (finder->bands)
        impulse_bands_reset(finder->bands);
}

/* Its 8 ms level rises by 6 dB or more within 16 ms, to within 5 dB of its highest. */
static bool is_sudden(struct impulse_finder *finder)
{
    const struct finder_window *window = &finder->window;
    const double floor = finder->background.total;
    for (uint64_t c = window->start + RISE; c < finder->cells.next; c++) {
        double now = cells_get(&finder->cells, c)->short_level,
               then = cells_get(&finder->cells, c - RISE)->short_level;
        if (now >= NEAR_PEAK * window->highest_short && now >= RISE_RATIO * fmax(then, floor))
            return true;
    }
    return false;
}

static bool is_low(struct impulse_finder *finder, const struct impulse_measures *measures, uint64_t end)
{
    const struct cell_background *background = &finder->background;
    double low = 0, n = (double)(end - finder->window.start) * finder->cell_frames;
    for (uint64_t c = finder->window.start; c < end; c++)
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
    return (since < NEXT && ratio < 1 / WEAKER) || (since < ECHO && ratio < WEAKER);
}

/* Energy falls from the onset, and a longer sound is not one tone at a time. */
static bool is_call(const struct impulse_finder *finder, const struct impulse_measures *measures,
                    const struct impulse_window *sound)
{
    double front = (measures->t50_frame - measures->t5_frame) / (measures->t95_frame - measures->t5_frame);
    if (measures->t90_s <= JUDGED_T90_S)
        return front > SHORT_FRONT_PART;
    return measures->t90_s > LONGEST_T90_S || front > FRONT_PART ||
           tone_part_measure(finder->tone_part, sound->pascals, sound->n, (size_t)fmax(measures->t5_frame, 0),
                             (size_t)measures->t95_frame) > TONE_PART;
}

/* Counts the reason and returns false when the window holds no impulse. */
static bool judge(struct impulse_finder *finder, const struct impulse_measures *measures,
                  const struct impulse_window *sound, uint64_t end)
{
    struct impulse_rejections *rejections = &finder->rejections;
    if (measures->rms90_db < measures->background_db + LEAST_DB)
        rejections->too_weak++;
    else if (is_echo(finder))
        rejections->echo++;
    else if (!is_low(finder, measures, end))
        rejections->high++;
    else if (!is_sudden(finder))
        rejections->slow++;
    else if (is_call(finder, measures, sound))
        rejections->call++;
    else
        return true;
    return false;
}

static float *ring_at(const struct impulse_finder *finder, uint64_t cell)
{
    return finder->ring + cell % KEPT_CELLS * finder->cell_frames;
}

/* The window's samples in one piece. */
static const float *gather(const struct impulse_finder *finder, uint64_t start, uint64_t end)
{
    const size_t cell_bytes = finder->cell_frames * sizeof(float);
    for (uint64_t c = start; c < end; c++)
        memcpy(finder->window_samples + (c - start) * finder->cell_frames, ring_at(finder, c), cell_bytes);
    return finder->window_samples;
}

/* The quiet before the window, where there was enough of it, then the window itself: which is gathered again.
 */
static void measure_bands(struct impulse_finder *finder, uint64_t end, struct found_impulse *found)
{
    const struct finder_window *window = &finder->window;
    const double mean = finder->background.mean;
    if (!finder->bands)
        return;
    if (!window->follows && window->start >= finder->quiet_since + QUIET_CELLS)
        impulse_bands_learn(finder->bands, gather(finder, window->start - QUIET_CELLS, window->start),
                            QUIET_CELLS * finder->cell_frames, mean);
    found->n_bands = impulse_bands_count(finder->bands);
    impulse_bands_measure(finder->bands, gather(finder, window->start, end),
                          (uint32_t)(end - window->start) * finder->cell_frames, mean, found->band_sel_db);
}

/* Closes the window before cell `end`, and gives what it holds if that is an impulse. */
static void close_window(struct impulse_finder *finder, uint64_t end, bool overlapped,
                         const struct impulse_sink *sink)
{
    const struct cell_background *background = &finder->background;
    const struct finder_window *window = &finder->window;
    uint64_t n = (end - window->start) * finder->cell_frames;
    struct impulse_window sound = {.pascals = gather(finder, window->start, end),
                                   .n = n,
                                   .rate_hz = finder->rate_hz,
                                   .mean_pa = background->mean,
                                   .background_pa2 = background->square - background->mean * background->mean,
                                   .full_scale_pa = finder->full_scale_pa};
    struct impulse_measures measures;
    finder->window.open = false;
    if (impulse_measure(&sound, &measures)) {
        finder->rejections.too_weak++;
        return;
    }
    if (!judge(finder, &measures, &sound, end))
        return;
    finder->had_one = true;
    finder->last_trigger = window->trigger;
    finder->last_highest = window->highest;
    uint64_t start_frame = finder->start_frame + window->start * finder->cell_frames;
    struct found_impulse found = {.onset_frame = (double)start_frame + measures.t5_frame,
                                  .start_frame = start_frame,
                                  .end_frame = start_frame + n,
                                  .known_frame = finder->start_frame +
                                                 (finder->cells.next + 1) * finder->cell_frames - 1,
                                  .sel_db = measures.sel_db,
                                  .peak_db = measures.peak_db,
                                  .peak_to_peak_db = measures.peak_to_peak_db,
                                  .rms90_db = measures.rms90_db,
                                  .t90_s = measures.t90_s,
                                  .background_db = measures.background_db,
                                  .effective_s = measures.effective_s,
                                  .kurtosis = measures.kurtosis,
                                  .window_s = measures.window_s,
                                  .positive_impulse_pa_s = measures.positive_impulse_pa_s,
                                  .clipped = measures.clipped,
                                  .overlapped = overlapped,
                                  .weak = measures.weak};
    measure_bands(finder, end, &found);
    sink->take(sink->context, &found);
}

static void open_window(struct impulse_finder *finder, uint64_t start, bool follows)
{
    const struct cell *cell = cells_get(&finder->cells, finder->cells.next);
    finder->window = (struct finder_window){.open = true,
                                            .follows = follows,
                                            .start = start,
                                            .trigger = finder->cells.next,
                                            .loud = finder->cells.next,
                                            .highest_short = cell->short_level,
                                            .highest = cell->long_level,
                                            .lowest_since = cell->long_level};
}

/* After a window that never came back to the background, the background is what its end was like. */
static void learn_anew(struct impulse_finder *finder)
{
    memset(&finder->background, 0, sizeof finder->background);
    if (finder->bands)
        impulse_bands_reset(finder->bands);
    for (uint32_t k = FIRST_CELLS; k > 0; k--)
        background_learn(&finder->background, cells_get(&finder->cells, finder->cells.next + 1 - k));
}

/* A weak blow of somebody else just before, which has died away again: the window is the strong one's, from
 * where that begins. Together they would look like a sound that grows, and that is no impulse. */
static bool restarts(struct finder_window *window, const struct cell *cell)
{
    if (window->weak_highest <= 0 && window->highest >= NEXT_RATIO * window->lowest_since)
        window->weak_highest = window->highest;
    return window->weak_highest > 0 && cell->long_level > window->weak_highest / WEAKER;
}

static void follow_window(struct impulse_finder *finder, const struct cell *cell,
                          const struct impulse_sink *sink)
{
    struct finder_window *window = &finder->window;
    const uint64_t now = finder->cells.next;
    if (background_passes(cell, finder->background.close))
        window->loud = now;
    if (restarts(window, cell)) {
        finder->rejections.echo++;
        open_window(finder, now - BACK, true);
        return;
    }
    window->highest_short = fmax(window->highest_short, cell->short_level);
    if (cell->long_level > window->highest && now - window->trigger < NEXT)
        window->highest = window->lowest_since = cell->long_level;
    window->lowest_since = fmin(window->lowest_since, cell->long_level);
    if (now - window->trigger >= NEXT && cell->long_level >= NEXT_RATIO * window->lowest_since &&
        cell->long_level >= WEAKER * window->highest) {
        close_window(finder, now - BACK, true, sink);
        open_window(finder, now - BACK, true);
    } else if (now - window->loud >= HOLD) {
        close_window(finder, now + 1, false, sink);
        finder->quiet_since = now + 1;
    } else if (now - window->trigger >= LONGEST) {
        close_window(finder, now + 1, false, sink);
        learn_anew(finder);
        finder->quiet_since = now + 1;
    }
}

static void take_cell(struct impulse_finder *finder, const float *x, const struct impulse_sink *sink)
{
    const struct cell *cell = cells_push(&finder->cells, x);
    const uint64_t now = finder->cells.next;
    if (finder->window.open)
        follow_window(finder, cell, sink);
    else if (finder->background.n_cells >= FIRST_CELLS && background_passes(cell, finder->background.open))
        open_window(finder, now > BEFORE ? now - BEFORE : 0, false);
    else if (now >= finder->quiet_since + DELAY)
        background_learn(&finder->background, cells_get(&finder->cells, now - DELAY));
}

void impulse_finder_push(struct impulse_finder *finder, const float *pascals, uint32_t n,
                         const struct impulse_sink *sink)
{
    while (n) {
        float *cell = ring_at(finder, finder->cells.next);
        uint32_t room = finder->cell_frames - finder->fill, take = n < room ? n : room;
        memcpy(cell + finder->fill, pascals, take * sizeof *pascals);
        finder->fill += take;
        pascals += take;
        n -= take;
        if (finder->fill < finder->cell_frames)
            return;
        take_cell(finder, cell, sink);
        finder->cells.next++;
        finder->fill = 0;
    }
}

void impulse_finder_get_rejections(const struct impulse_finder *finder, struct impulse_rejections *out)
{
    *out = finder->rejections;
}
