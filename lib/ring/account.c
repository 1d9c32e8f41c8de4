#include "ring/account.h"
#include <math.h>
#include <string.h>

#define BIN_S 0.25
#define HOLD_S 0.25 /* of sound: the most that a decision waits for */
#define HOLD_MARKS                                                                                           \
    16 /* so many agree to the frame: each is late by less than half a frame half of the time */
#define LATEST_BINS 6     /* so few that a wrong slope does not live on the frames that it declares */
#define MANY 8            /* points from which on the second earliest is meant, not the earliest */
#define SLOPE_SPAN_S 1.0  /* below it the nominal rate is better than a measured one */
#define MAX_SLOPE 500e-6  /* a sound device's crystal is within a tenth of it; common practice, no source */
#define LEAST_STEP_S 1e-3 /* a step without the driver's flag is a loss from here up */
#define STEP_TO_NOISE 4.0
#define NOISE_WEIGHT (1.0 / 32)
#define NOISE_AT_START_S 2e-3
#define MAX_NS (INT64_MAX / 4) /* 73 years after the clock's zero */
#define MAX_FRAME_AGE_NS INT64_C(10000000000)

void account_reset(struct account *account, double rate_hz, int64_t origin_ns)
{
    memset(account, 0, sizeof *account);
    account->rate_hz = rate_hz;
    account->origin_ns = origin_ns;
    account->noise_s = NOISE_AT_START_S;
}

/* When the mark's first frame was sampled, seconds since the origin. */
static double sampled_s(const struct account *a, const struct ring_mark *mark)
{
    if (mark->first_ns > 0 && mark->first_ns <= mark->ns && mark->ns - mark->first_ns < MAX_FRAME_AGE_NS)
        return (double)(mark->first_ns - a->origin_ns) * 1e-9;
    return (double)(mark->ns - a->origin_ns) * 1e-9 - mark->n_frames / a->rate_hz;
}

/* The point of a mark whose first frame has this number. */
static struct account_point point_of(const struct account *a, const struct ring_mark *mark, uint64_t frame)
{
    struct account_point p = {.x_s = (double)frame / a->rate_hz};
    p.y_s = sampled_s(a, mark) - p.x_s;
    return p;
}

static double above_line(const struct account *a, struct account_point p)
{
    return p.y_s - (a->offset_s + a->slope * p.x_s);
}

static double step_limit_s(const struct account *a)
{
    return LEAST_STEP_S + STEP_TO_NOISE * a->noise_s;
}

static void insert_sorted(double *sorted, uint32_t n, double value)
{
    for (; n > 0 && sorted[n - 1] > value; n--)
        sorted[n] = sorted[n - 1];
    sorted[n] = value;
}

static double median(const double *sorted, uint32_t n)
{
    return n % 2 ? sorted[n / 2] : 0.5 * (sorted[n / 2 - 1] + sorted[n / 2]);
}

/* Siegel's repeated median of the slopes between the points. */
static double repeated_median_slope(const struct account *a)
{
    double outer[ACCOUNT_BINS], inner[ACCOUNT_BINS];
    for (uint32_t i = 0; i < a->n_bins; i++) {
        uint32_t n = 0;
        for (uint32_t j = 0; j < a->n_bins; j++)
            if (j != i)
                insert_sorted(inner, n++,
                              (a->bins[j].y_s - a->bins[i].y_s) / (a->bins[j].x_s - a->bins[i].x_s));
        insert_sorted(outer, i, median(inner, n));
    }
    return median(outer, a->n_bins);
}

/* The line through the bins' points, at the height of the latest ones. */
static void fit(struct account *a)
{
    double heights[LATEST_BINS];
    uint32_t n = a->n_bins < LATEST_BINS ? a->n_bins : LATEST_BINS;
    a->slope = 0;
    if (a->n_bins >= 2 && a->bins[a->n_bins - 1].x_s - a->bins[0].x_s >= SLOPE_SPAN_S)
        a->slope = repeated_median_slope(a);
    if (!(fabs(a->slope) <= MAX_SLOPE))
        a->slope = 0;
    for (uint32_t i = 0; i < n; i++) {
        const struct account_point *p = &a->bins[a->n_bins - n + i];
        insert_sorted(heights, i, p->y_s - a->slope * p->x_s);
    }
    a->offset_s = median(heights, n);
}

static void begin_bin(struct account *a, struct account_point p)
{
    if (a->n_bins > 0) {
        if (a->bin_points < MANY)
            a->bins[a->n_bins - 1] = a->bin_least;
        fit(a);
    }
    if (a->n_bins == ACCOUNT_BINS)
        memmove(a->bins, a->bins + 1, --a->n_bins * sizeof a->bins[0]);
    a->bins[a->n_bins++] = p;
    a->bin_least = p;
    a->bin_points = 1;
    a->bin_end_s = p.x_s + BIN_S;
}

/* A bin's point is the second earliest of many: one stamp that is too early does no harm. */
static void add_to_bin(struct account *a, struct account_point p)
{
    struct account_point *second = &a->bins[a->n_bins - 1];
    double r = above_line(a, p);
    a->bin_points++;
    if (r < above_line(a, a->bin_least)) {
        *second = a->bin_least;
        a->bin_least = p;
    } else if (a->bin_points == 2 || r < above_line(a, *second)) {
        *second = p;
    }
}

static void add_point(struct account *a, struct account_point p)
{
    double r = above_line(a, p);
    if (!a->has_line) {
        if (a->next_frame == 0) {
            a->offset_s = p.y_s;
            r = 0;
        }
        a->has_line = true;
        a->bin_end_s = p.x_s;
    }
    a->noise_s += NOISE_WEIGHT * (fmin(fabs(r), 0.05) - a->noise_s);
    if (p.x_s >= a->bin_end_s)
        begin_bin(a, p);
    else
        add_to_bin(a, p);
    if (a->n_bins == 1) /* no line yet: the earliest point is the best guess */
        a->offset_s = fmin(a->offset_s, p.y_s);
}

/* Queues a piece; pieces that follow without loss are one. */
static void add_piece(struct account *a, uint64_t skip, uint64_t lost, uint64_t n_frames)
{
    if (a->n_pieces > 0 && skip == 0 && lost == 0) {
        a->pieces[(a->first_piece + a->n_pieces - 1) % ACCOUNT_MAX_PIECES].n_frames += n_frames;
        return;
    }
    struct account_piece *piece = &a->pieces[(a->first_piece + a->n_pieces++) % ACCOUNT_MAX_PIECES];
    piece->skip = skip;
    piece->lost_before = lost;
    piece->n_frames = n_frames;
}

/* Takes a mark for good, with what the driver lost before it. */
static void accept(struct account *a, const struct ring_mark *mark, uint64_t lost)
{
    lost += mark->dropped_before;
    uint64_t covered = a->skip < lost ? a->skip : lost; /* lost frames that were declared before */
    a->skip -= covered;
    lost -= covered;
    uint64_t first = a->next_frame + lost - a->skip;
    uint64_t skip = a->skip < mark->n_frames ? a->skip : mark->n_frames;
    add_point(a, point_of(a, mark, first));
    add_piece(a, skip, lost, mark->n_frames - skip);
    a->skip -= skip;
    a->next_frame += lost + mark->n_frames - skip;
}

/* Decides what the held marks say. */
static void decide(struct account *a)
{
    if (a->n_held == 0)
        return;
    double step_s = a->n_held < MANY ? a->held_least_s : a->held_second_s;
    double frames = round(step_s * a->rate_hz / (1 + a->slope));
    uint64_t lost = 0;
    if (a->absent && frames < 0)
        a->skip = (uint64_t)-frames;
    else if (frames > 0 && (a->absent || a->held[0].overrun || step_s > step_limit_s(a)))
        lost = (uint64_t)frames;
    a->absent = false;
    accept(a, &a->held[0], lost);
    for (uint32_t i = 1; i < a->n_held; i++)
        accept(a, &a->held[i], 0);
    a->n_held = 0;
}

static void hold(struct account *a, const struct ring_mark *mark)
{
    uint64_t frame = a->next_frame;
    for (uint32_t i = 0; i < a->n_held; i++)
        frame += a->held[i].dropped_before + a->held[i].n_frames;
    double r = above_line(a, point_of(a, mark, frame + mark->dropped_before));
    a->held_second_s = a->n_held == 0   ? r
                       : a->n_held == 1 ? fmax(a->held_least_s, r)
                                        : fmin(a->held_second_s, fmax(a->held_least_s, r));
    a->held_least_s = a->n_held == 0 ? r : fmin(a->held_least_s, r);
    a->held[a->n_held++] = *mark;
    double span_s = (double)(mark->ns - a->held[0].ns) * 1e-9;
    if (a->n_held == ACCOUNT_MAX_HELD || span_s >= HOLD_S ||
        (a->n_held >= HOLD_MARKS && span_s >= HOLD_S / 2))
        decide(a);
}

enum status account_push(struct account *account, const struct ring_mark *mark)
{
    struct account *a = account;
    if (mark->ns < 0 || mark->ns > MAX_NS || mark->first_ns < 0 || mark->n_frames == 0)
        return STATUS_BAD_FORMAT;
    if (a->n_pieces + ACCOUNT_MAX_HELD + 1 > ACCOUNT_MAX_PIECES)
        return STATUS_FULL;
    if (a->n_held > 0 && mark->overrun)
        decide(a);
    bool suspect = a->absent || mark->overrun;
    if (a->has_line && !suspect) {
        struct account_point p = point_of(a, mark, a->next_frame - a->skip + mark->dropped_before);
        suspect = above_line(a, p) > step_limit_s(a);
    }
    if (suspect || a->n_held > 0)
        hold(a, mark);
    else
        accept(a, mark, 0);
    return STATUS_OK;
}

enum status account_get(struct account *account, struct account_piece *out)
{
    if (account->n_pieces == 0)
        return STATUS_END;
    *out = account->pieces[account->first_piece];
    account->first_piece = (account->first_piece + 1) % ACCOUNT_MAX_PIECES;
    account->n_pieces--;
    return STATUS_OK;
}

void account_flush(struct account *account)
{
    decide(account);
}

void account_absent(struct account *account, uint64_t total)
{
    account->next_frame = total;
    account->skip = 0;
    account->absent = true;
    account->n_held = 0;
    account->n_pieces = 0;
}

uint64_t account_declare(struct account *account, int64_t now_ns)
{
    double t_s = (double)(now_ns - account->origin_ns) * 1e-9;
    double frame = floor((t_s - account->offset_s) / (1 + account->slope) * account->rate_hz);
    if (!account->absent || account->n_held > 0 || !(frame > (double)account->next_frame))
        return 0;
    uint64_t lost = (uint64_t)frame - account->next_frame;
    account->next_frame += lost;
    return lost;
}

bool account_holds(const struct account *account)
{
    return account->n_held > 0;
}

double account_ppm(const struct account *account)
{
    if (account->n_bins < 2 || account->bins[account->n_bins - 1].x_s - account->bins[0].x_s < SLOPE_SPAN_S)
        return NAN;
    return -1e6 * account->slope / (1 + account->slope);
}
