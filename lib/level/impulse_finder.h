/* What the files of the impulse finder share; nobody else includes it.
 *
 *   impulses.c       opens, closes and holds windows, and gives impulses
 *   impulse_judge.c  whether what a window holds is an impulse, or the echo of one
 *
 * Units of time inside: a slot is about 0.25 ms of samples, a cell 4 slots, about 1 ms. */
#ifndef LEVEL_IMPULSE_FINDER_H
#define LEVEL_IMPULSE_FINDER_H

#include "level/impulse_bands.h"
#include "level/impulse_cells.h"
#include "level/impulse_measure.h"
#include "level/impulses.h"
#include "level/tone_part.h"

#define IMPULSE_NEXT 300u   /* cells until another impulse can begin */
#define IMPULSE_WEAKER 0.25 /* 6 dB below */

struct finder_window {
    bool open;
    bool follows;                  /* it begins where an overlapped one ends */
    uint64_t start, trigger, loud; /* cells: first, triggered, last one above the close threshold */
    double highest_short;          /* levels so far */
    double highest, lowest_since;  /* long level: highest, lowest since it */
    double weak_highest;           /* the highest before it first fell by NEXT_RATIO; 0 until then */
    uint64_t resumed;              /* where what may be its echo begins; 0: it has not been opened again */
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
    bool holds; /* an impulse whose echo may still come */
    struct found_impulse held;
    struct finder_window held_window;
    uint64_t held_end;
    bool had_one;
    uint64_t last_trigger; /* of the last impulse given */
    double last_highest;   /* its highest long level */
    struct impulse_rejections rejections;
};

/* Counts the reason and returns false when the window, up to cell `end`, holds no impulse. */
bool impulse_judge(struct impulse_finder *finder, const struct impulse_measures *measures,
                   const struct impulse_window *sound, uint64_t end);
/* The same of the echo of the impulse that is held, which begins at cell `from`; measures and sound are its
 * own.
 */
bool impulse_judge_echo(struct impulse_finder *finder, const struct impulse_measures *measures,
                        const struct impulse_window *sound, uint64_t from, uint64_t end);

#endif
