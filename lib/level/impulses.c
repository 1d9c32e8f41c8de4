/* Finds and measures the impulses of one channel; see level/impulse_finder.h for its parts. */
#include "level/impulse_finder.h"
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
#define FRESH 64u        /* cells in which an echo rises */
#define BACK 32u         /* cells from another onset to its being seen */
#define NEXT_RATIO 6.3   /* 8 dB */
#define QUIET_CELLS 256u /* before a window, from which its bands' background is learned */
#define KEPT_CELLS 1664u /* of samples kept: the longest window, the quiet before it and some */

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
    finder->had_one = finder->holds = false;
    if (finder->bands)
        impulse_bands_reset(finder->bands);
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
    if (!window->follows && !window->resumed && window->start >= finder->quiet_since + QUIET_CELLS)
        impulse_bands_learn(finder->bands, gather(finder, window->start - QUIET_CELLS, window->start),
                            QUIET_CELLS * finder->cell_frames, mean);
    found->n_bands = impulse_bands_count(finder->bands);
    impulse_bands_measure(finder->bands, gather(finder, window->start, end),
                          (uint32_t)(end - window->start) * finder->cell_frames, mean, found->band_sel_db);
}

/* False where nothing stands out. `out_sound` borrows the window's samples until the next one is gathered. */
static bool measure(struct impulse_finder *finder, uint64_t start, uint64_t end,
                    struct impulse_window *out_sound, struct impulse_measures *out)
{
    const struct cell_background *background = &finder->background;
    *out_sound =
        (struct impulse_window){.pascals = gather(finder, start, end),
                                .n = (end - start) * finder->cell_frames,
                                .rate_hz = finder->rate_hz,
                                .mean_pa = background->mean,
                                .background_pa2 = background->square - background->mean * background->mean,
                                .full_scale_pa = finder->full_scale_pa};
    if (impulse_measure(out_sound, out) == STATUS_OK)
        return true;
    finder->rejections.too_weak++;
    return false;
}

static void describe(struct impulse_finder *finder, const struct impulse_measures *measures, uint64_t end,
                     bool overlapped, struct found_impulse *out)
{
    const uint64_t start_frame = finder->start_frame + finder->window.start * finder->cell_frames;
    *out = (struct found_impulse){.onset_frame = (double)start_frame + measures->t5_frame,
                                  .start_frame = start_frame,
                                  .end_frame = finder->start_frame + end * finder->cell_frames,
                                  .sel_db = measures->sel_db,
                                  .peak_db = measures->peak_db,
                                  .peak_to_peak_db = measures->peak_to_peak_db,
                                  .rms90_db = measures->rms90_db,
                                  .t90_s = measures->t90_s,
                                  .background_db = measures->background_db,
                                  .effective_s = measures->effective_s,
                                  .kurtosis = measures->kurtosis,
                                  .window_s = measures->window_s,
                                  .positive_impulse_pa_s = measures->positive_impulse_pa_s,
                                  .clipped = measures->clipped,
                                  .overlapped = overlapped,
                                  .weak = measures->weak};
    measure_bands(finder, end, out);
}

static void tell(const struct impulse_sink *sink, double onset_frame, double t90_s)
{
    if (sink->heard)
        sink->heard(sink->context, onset_frame, t90_s);
}

static void give_held(struct impulse_finder *finder, uint64_t known_frame, const struct impulse_sink *sink)
{
    if (!finder->holds)
        return;
    finder->holds = false;
    finder->held.known_frame = known_frame;
    sink->take(sink->context, &finder->held);
}

/* The last frame of the cell that is being taken. */
static uint64_t frame_now(const struct impulse_finder *finder)
{
    return finder->start_frame + (finder->cells.next + 1) * finder->cell_frames - 1;
}

/* What came after the impulse that is held is its echo, and measured with it, or none of ours. */
static void close_resumed(struct impulse_finder *finder, uint64_t end, bool overlapped,
                          const struct impulse_sink *sink)
{
    const uint64_t from = finder->window.resumed;
    struct impulse_window sound;
    struct impulse_measures measures;
    bool is_echo = measure(finder, from, end, &sound, &measures) &&
                   impulse_judge_echo(finder, &measures, &sound, from, end);
    if (is_echo) {
        tell(sink, (double)(finder->start_frame + from * finder->cell_frames) + measures.t5_frame,
             measures.t90_s);
        finder->rejections.echo++;
        if (measure(finder, finder->window.start, end, &sound, &measures))
            describe(finder, &measures, end, overlapped, &finder->held);
        finder->last_highest = finder->window.highest;
    }
    give_held(finder, frame_now(finder), sink);
}

/* Closes the window before cell `end`, and gives what it holds if that is an impulse; or holds it, while an
 * echo may come. */
static void close_window(struct impulse_finder *finder, uint64_t end, bool overlapped,
                         const struct impulse_sink *sink)
{
    const struct finder_window *window = &finder->window;
    struct impulse_window sound;
    struct impulse_measures measures;
    finder->window.open = false;
    if (window->resumed) {
        close_resumed(finder, end, overlapped, sink);
        return;
    }
    if (!measure(finder, window->start, end, &sound, &measures) ||
        !impulse_judge(finder, &measures, &sound, end))
        return;
    finder->had_one = true;
    finder->last_trigger = window->trigger;
    finder->last_highest = window->highest;
    describe(finder, &measures, end, overlapped, &finder->held);
    tell(sink, finder->held.onset_frame, finder->held.t90_s);
    finder->holds = true;
    finder->held_window = *window;
    finder->held_end = end;
    if (overlapped || finder->cells.next >= window->trigger + IMPULSE_NEXT)
        give_held(finder, frame_now(finder), sink);
}

/* The window of the impulse that is held goes on: what opens it may be an echo. */
static void resume_window(struct impulse_finder *finder)
{
    const uint64_t now = finder->cells.next;
    const uint64_t end = finder->held_end, before = now > BEFORE ? now - BEFORE : 0;
    finder->window = finder->held_window;
    finder->window.open = true;
    finder->window.loud = now;
    finder->window.resumed = before > end ? before : end;
    finder->window.lowest_since = cells_get(&finder->cells, now)->long_level;
    finder->window.weak_highest = finder->window.highest;
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
    return window->weak_highest > 0 && cell->long_level > window->weak_highest / IMPULSE_WEAKER;
}

static void follow_window(struct impulse_finder *finder, const struct cell *cell,
                          const struct impulse_sink *sink)
{
    struct finder_window *window = &finder->window;
    const uint64_t now = finder->cells.next;
    if (background_passes(cell, finder->background.close))
        window->loud = now;
    if (restarts(window, cell)) {
        finder->rejections.echo += !window->resumed;
        give_held(finder, frame_now(finder), sink);
        open_window(finder, now - BACK, true);
        return;
    }
    const bool rising = window->resumed && now - window->resumed < BEFORE + FRESH;
    window->highest_short = fmax(window->highest_short, cell->short_level);
    if (cell->long_level > window->highest && (rising || now - window->trigger < IMPULSE_NEXT))
        window->highest = window->lowest_since = cell->long_level;
    window->lowest_since = rising ? cell->long_level : fmin(window->lowest_since, cell->long_level);
    if (!rising && now - window->trigger >= IMPULSE_NEXT &&
        cell->long_level >= NEXT_RATIO * window->lowest_since &&
        cell->long_level >= IMPULSE_WEAKER * window->highest) {
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
    if (!finder->window.open && finder->holds && now - finder->held_window.trigger >= IMPULSE_NEXT)
        give_held(finder, frame_now(finder), sink);
    if (finder->window.open)
        follow_window(finder, cell, sink);
    else if (finder->background.n_cells >= FIRST_CELLS && background_passes(cell, finder->background.open)) {
        if (finder->holds)
            resume_window(finder);
        else
            open_window(finder, now > BEFORE ? now - BEFORE : 0, false);
    } else if (now >= finder->quiet_since + DELAY)
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

void impulse_finder_finish(struct impulse_finder *finder, const struct impulse_sink *sink)
{
    const uint64_t frames = finder->cells.next * finder->cell_frames + finder->fill;
    give_held(finder, finder->start_frame + frames - 1, sink);
    finder->window.open = false;
}

void impulse_finder_get_rejections(const struct impulse_finder *finder, struct impulse_rejections *out)
{
    *out = finder->rejections;
}
