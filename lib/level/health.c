/* What is wrong with one channel. */
#include "level/health.h"
#include "base/units.h"
#include "dsp/lanes.h"
#include "level/decidecades.h"
#include <math.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>

#define CELL 256u
#define FULL_SCALE (1.0f - 0x1p-15f)
#define CLIP_RUN 2u
#define CLIP_HOLD_S 0.1
#define DEAD_S 0.5
#define CHECK_S 0.5 /* how often copies are looked for, and how much must repeat */
#define LONGEST_PERIOD_S 0.25
#define PATTERN 32u
#define FIRST_PIECE_S 0.5
#define SELF_NOISE_ROOM_DB 0.5
#define CALM_DB 44.5
#define CALM_SLOPE_DB 17.0
#define CALM_MARGIN_DB 10.0
#define CALM_FIRST_BAND (-3) /* 500 Hz */
#define CALM_LAST_BAND 7     /* 5 kHz */

/* An interval that is open, and how much of it was given. */
struct open_fault {
    bool open;
    uint64_t since, given, end;
};

struct cell {
    float least, greatest;
    double sum;
};

struct health {
    double rate_hz;
    struct calibration calibration;
    uint64_t next_frame;
    struct open_fault faults[HEALTH_CAUSE_COUNT];
    uint64_t n_not_finite, n_clipped;
    uint32_t clip_run; /* samples at full scale up to now */
    float constant;    /* the value of every sample since constant_since */
    uint64_t constant_since;
    uint32_t check, keep;   /* frames of a check, and kept from before it */
    uint64_t n_known;       /* frames in history that belong to this run of sound */
    float *history;         /* [keep + check] */
    uint32_t fill, counted; /* of the check's part; how much of it was judged, in whole cells */
    double sum, dc;
    uint64_t digest, last_digest; /* of this check's cells, and of the check before */
    uint64_t last_check;          /* frame after the last check; 0: none */
};

enum status health_create(double rate_hz, const struct calibration *calibration, struct health **out)
{
    if (!(rate_hz >= 8000) || !(rate_hz <= 1000000))
        return STATUS_BAD_ARGUMENT;
    struct health *health = calloc(1, sizeof *health);
    if (!health)
        return STATUS_NO_MEMORY;
    health->rate_hz = rate_hz;
    health->calibration = *calibration;
    health->check = ((uint32_t)(CHECK_S * rate_hz) + CELL - 1) / CELL * CELL;
    health->keep = (uint32_t)(LONGEST_PERIOD_S * rate_hz);
    health->history = calloc(health->keep + health->check, sizeof *health->history);
    if (!health->history) {
        free(health);
        return STATUS_NO_MEMORY;
    }
    health_reset(health, 0);
    *out = health;
    return STATUS_OK;
}

void health_destroy(struct health *health)
{
    if (!health)
        return;
    free(health->history);
    free(health);
}

void health_reset(struct health *health, uint64_t next_frame)
{
    health->next_frame = next_frame;
    memset(health->faults, 0, sizeof health->faults);
    health->clip_run = 0;
    health->constant = NAN;
    health->constant_since = next_frame;
    health->n_known = 0;
    health->fill = health->counted = 0;
    health->sum = health->dc = 0;
    health->digest = health->last_digest = 0;
    health->last_check = 0;
}

static void give(struct health *health, enum health_cause cause, uint64_t end, uint64_t known,
                 const struct fault_sink *sink)
{
    struct open_fault *fault = &health->faults[cause];
    struct found_fault found = {cause, fault->given, end, known};
    fault->given = end;
    sink->take(sink->context, &found);
}

/* The next piece's length: as long as all before it. */
static uint64_t piece_frames(const struct health *health, const struct open_fault *fault)
{
    double frames = fmax((double)(fault->given - fault->since), FIRST_PIECE_S * health->rate_hz);
    return (uint64_t)fmin(frames, HEALTH_LONGEST_PIECE_S * health->rate_hz);
}

static void end_fault(struct health *health, enum health_cause cause, uint64_t known,
                      const struct fault_sink *sink)
{
    struct open_fault *fault = &health->faults[cause];
    while (fault->open && fault->given < fault->end) {
        uint64_t longest = fault->given + (uint64_t)(HEALTH_LONGEST_PIECE_S * health->rate_hz);
        give(health, cause, fault->end < longest ? fault->end : longest, known, sink);
    }
    fault->open = false;
}

/* The fault holds in [from, to): opens an interval or lengthens the open one. */
static void hold_fault(struct health *health, enum health_cause cause, uint64_t from, uint64_t to,
                       uint64_t known, const struct fault_sink *sink)
{
    struct open_fault *fault = &health->faults[cause];
    if (!fault->open) {
        if (from < fault->end) /* no frame twice */
            from = fault->end;
        if (from >= to)
            return;
        *fault = (struct open_fault){.open = true, .since = from, .given = from, .end = from};
    }
    if (to > fault->end)
        fault->end = to;
    while (fault->end - fault->given >= piece_frames(health, fault))
        give(health, cause, fault->given + piece_frames(health, fault), known, sink);
}

static struct cell measure_cell(const float *x)
{
    lanes least = lanes_load(x), greatest = least, sum = {0}, more = {0};
    for (uint32_t i = 0; i < CELL; i += 2 * LANES) {
        lanes v = lanes_load(x + i), w = lanes_load(x + i + LANES);
        least = lanes_least(lanes_least(v, w), least);
        greatest = lanes_greatest(lanes_greatest(v, w), greatest);
        sum += v;
        more += w;
    }
    struct cell cell = {least[0], greatest[0], lanes_sum(sum + more)};
    for (uint32_t j = 1; j < LANES; j++) {
        cell.least = least[j] < cell.least ? least[j] : cell.least;
        cell.greatest = greatest[j] > cell.greatest ? greatest[j] : cell.greatest;
    }
    return cell;
}

static void replace_not_finite(struct health *health, float *x)
{
    for (uint32_t i = 0; i < CELL; i++)
        if (!isfinite(x[i])) {
            x[i] = 0;
            health->n_not_finite++;
        }
}

/* Runs at full scale; the cell begins at frame `at`. */
static void judge_clipping(struct health *health, const float *x, const struct cell *cell, uint64_t at,
                           const struct fault_sink *sink)
{
    struct open_fault *fault = &health->faults[HEALTH_CLIPPING];
    const uint64_t known = at + CELL - 1;
    if (cell->greatest >= FULL_SCALE || cell->least <= -FULL_SCALE) {
        for (uint32_t i = 0; i < CELL; i++) {
            health->clip_run = fabsf(x[i]) >= FULL_SCALE ? health->clip_run + 1 : 0;
            if (health->clip_run < CLIP_RUN)
                continue;
            health->n_clipped += health->clip_run == CLIP_RUN ? CLIP_RUN : 1;
            uint64_t from = at + i + 1 - CLIP_RUN;
            if (fault->open && (double)(from - fault->end) > CLIP_HOLD_S * health->rate_hz &&
                from > fault->end)
                end_fault(health, HEALTH_CLIPPING, known, sink);
            hold_fault(health, HEALTH_CLIPPING, from, at + i + 1, known, sink);
        }
    } else
        health->clip_run = 0;
    if (fault->open && (double)(at + CELL - fault->end) > CLIP_HOLD_S * health->rate_hz)
        end_fault(health, HEALTH_CLIPPING, known, sink);
}

static void judge_dead(struct health *health, const struct cell *cell, uint64_t at,
                       const struct fault_sink *sink)
{
    const uint64_t known = at + CELL - 1;
    bool constant = cell->least == cell->greatest;
    if (!constant || cell->least != health->constant) {
        end_fault(health, HEALTH_DEAD, known, sink);
        health->constant = constant ? cell->least : NAN;
        health->constant_since = at;
    }
    if (constant && (double)(at + CELL - health->constant_since) >= DEAD_S * health->rate_hz)
        hold_fault(health, HEALTH_DEAD, health->constant_since, at + CELL, known, sink);
}

/* FNV-1a (Fowler, Noll, Vo) over a cell's figures. */
static void add_digest(uint64_t *digest, const struct cell *cell)
{
    unsigned char bytes[sizeof cell->least + sizeof cell->greatest + sizeof cell->sum];
    memcpy(bytes, &cell->least, sizeof cell->least);
    memcpy(bytes + sizeof cell->least, &cell->greatest, sizeof cell->greatest);
    memcpy(bytes + sizeof cell->least + sizeof cell->greatest, &cell->sum, sizeof cell->sum);
    for (size_t i = 0; i < sizeof bytes; i++)
        *digest = (*digest ^ bytes[i]) * UINT64_C(0x100000001b3);
}

/* The smallest period of at most keep that ends at the end of the history, by its last few samples; 0: none.
 */
static uint32_t find_period(const float *end, uint32_t longest, uint32_t from)
{
    const float *last = end - PATTERN;
    for (uint32_t lag = from; lag <= longest; lag++) {
        /* Most lags have no sample equal to the last one: they are passed four at a time. */
        while (lag + LANES <= longest && !lanes_any(lanes_load(last - lag - LANES + 1) == lanes_all(last[0])))
            lag += LANES;
        if (last[-(ptrdiff_t)lag] == last[0] && memcmp(last - lag, last, PATTERN * sizeof *last) == 0)
            return lag;
    }
    return 0;
}

static bool is_frozen(const struct health *health)
{
    const uint32_t n = health->keep + health->check;
    if (health->n_known < n)
        return false;
    const float *end = health->history + n;
    const uint32_t longest = health->keep - PATTERN;
    for (uint32_t lag = find_period(end, longest, 1), tries = 0; lag && tries < 8; tries++) {
        if (memcmp(end - health->check, end - health->check - lag, health->check * sizeof *end) == 0)
            return true;
        lag = find_period(end, longest, lag + 1);
    }
    return false;
}

/* Once in half a second, where the history is full. */
static void check_copies(struct health *health, const struct fault_sink *sink)
{
    const uint64_t now = health->next_frame;
    if (is_frozen(health) && !health->faults[HEALTH_DEAD].open)
        hold_fault(health, HEALTH_FROZEN, now - health->check, now, now - 1, sink);
    else
        end_fault(health, HEALTH_FROZEN, now - 1, sink);
    health->last_digest = health->digest;
    health->last_check = now;
    health->digest = 0;
    health->dc = health->sum / health->check;
    health->sum = 0;
    memmove(health->history, health->history + health->check, health->keep * sizeof *health->history);
    health->fill = health->counted = 0;
}

/* Judges every whole cell that was filled. */
static void judge_cells(struct health *health, const struct fault_sink *sink)
{
    while (health->fill - health->counted >= CELL) {
        float *x = health->history + health->keep + health->counted;
        uint64_t at = health->next_frame - (health->fill - health->counted);
        struct cell cell = measure_cell(x);
        if (!isfinite(cell.sum)) {
            replace_not_finite(health, x);
            cell = measure_cell(x);
        }
        judge_clipping(health, x, &cell, at, sink);
        judge_dead(health, &cell, at, sink);
        add_digest(&health->digest, &cell);
        health->sum += cell.sum;
        health->counted += CELL;
    }
}

void health_push(struct health *health, const float *samples, uint32_t n, const struct fault_sink *sink)
{
    while (n) {
        uint32_t left = CELL - health->fill % CELL;
        uint32_t take = n < left ? n : left;
        memcpy(health->history + health->keep + health->fill, samples, take * sizeof *samples);
        health->fill += take;
        health->next_frame += take;
        health->n_known += take;
        samples += take;
        n -= take;
        judge_cells(health, sink);
        if (health->fill == health->check)
            check_copies(health, sink);
    }
}

static bool below_calm_sea(const struct found_level *level)
{
    uint32_t n_judged = 0;
    for (int n = CALM_FIRST_BAND; n <= CALM_LAST_BAND; n++) {
        int band = n - LEVEL_FIRST_BAND;
        if (band >= (int)level->n_bands || isnan(level->band_db[band]))
            continue;
        double width_hz = decidecades_high_hz(n) - decidecades_low_hz(n);
        double calm_db = CALM_DB - CALM_SLOPE_DB * n / 10.0 + units_power_db(width_hz);
        if (level->band_db[band] > calm_db - CALM_MARGIN_DB)
            return false;
        n_judged++;
    }
    return n_judged >= 3;
}

void health_take_level(struct health *health, const struct found_level *level, const struct fault_sink *sink)
{
    if (!health->calibration.known)
        return;
    uint64_t end = level->start_frame + level->frames;
    double self_noise_db = health->calibration.self_noise_db;
    bool quiet = !isnan(self_noise_db) && level->spl_db <= self_noise_db + SELF_NOISE_ROOM_DB;
    if (quiet || below_calm_sea(level))
        hold_fault(health, HEALTH_TOO_QUIET, level->start_frame, end, level->known_frame, sink);
    else
        end_fault(health, HEALTH_TOO_QUIET, level->known_frame, sink);
}

void health_compare(const struct health *earlier, struct health *later, const struct fault_sink *sink)
{
    const uint64_t now = later->last_check;
    struct open_fault *fault = &later->faults[HEALTH_DUPLICATE];
    if (now == 0 || now != earlier->last_check || (fault->open && fault->end >= now))
        return;
    if (later->last_digest == earlier->last_digest && !later->faults[HEALTH_DEAD].open)
        hold_fault(later, HEALTH_DUPLICATE, now - later->check, now, now - 1, sink);
    else if (fault->open && fault->end + later->check < now) /* nor any other pair, for a whole check */
        end_fault(later, HEALTH_DUPLICATE, now - 1, sink);
}

void health_finish(struct health *health, const struct fault_sink *sink)
{
    for (int cause = 0; cause < HEALTH_CAUSE_COUNT; cause++)
        end_fault(health, (enum health_cause)cause, health->next_frame ? health->next_frame - 1 : 0, sink);
}

void health_get_counts(const struct health *health, struct health_counts *out)
{
    *out = (struct health_counts){health->n_not_finite, health->n_clipped, health->dc, {false}};
    for (int cause = 0; cause < HEALTH_CAUSE_COUNT; cause++)
        out->faulty[cause] = health->faults[cause].open;
}
