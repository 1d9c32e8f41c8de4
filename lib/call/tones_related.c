/* How two contours stand to each other; see tones_related.h. */
#include "call/tones_related.h"
#include <math.h>

#define HARMONIC_OVERLAP 0.6
#define HARMONIC_ERROR 0.02
#define MAX_HARMONIC 10
#define LOW_MULTIPLES 5 /* higher ones lie so close that any frequency is near one */
#define FIRST_HARMONICS 6.0
#define HIGHEST_OVERTONE 25.0
#define MOSTLY 0.7          /* of the common time */
#define SWEEPS 0.1          /* of its frequency: what has a course that another can keep to */
#define APART_ERROR 0.04    /* beyond which a ratio is not kept ... */
#define APART_MOSTLY 0.5    /* ... for this share of the time */
#define OVERTONE_WEAKER 0.1 /* share of the mean square of the sound in which it lies */
#define FAR_WEAKER 0.01
#define ECHO_S 0.5

double related_duration(const struct contour *c)
{
    return c->end_frame - c->start_frame;
}

double related_overlap(const struct contour *a, const struct contour *b)
{
    return fmin(a->end_frame, b->end_frame) - fmax(a->start_frame, b->start_frame);
}

static double shorter(const struct contour *a, const struct contour *b)
{
    return fmin(related_duration(a), related_duration(b));
}

static double hz_at(const struct contour *c, double frame)
{
    double x = (frame - c->start_frame) / related_duration(c) * (TRACE_POINTS - 1);
    x = fmin(fmax(x, 0), TRACE_POINTS - 1.0);
    uint32_t i = (uint32_t)fmin(x, TRACE_POINTS - 2.0);
    return c->hz[i] + (x - i) * (c->hz[i + 1] - c->hz[i]);
}

/* Share of the common time in which the frequencies stand as i to j, within the tolerance. */
static double share_in_ratio(const struct contour *a, const struct contour *b, double ratio, double error,
                             double tolerance_hz)
{
    double start = fmax(a->start_frame, b->start_frame), length = related_overlap(a, b);
    uint32_t good = 0;
    for (uint32_t i = 0; i < TRACE_POINTS; i++) {
        double frame = start + length * (i + 0.5) / TRACE_POINTS;
        double wanted = ratio * hz_at(b, frame);
        good += fabs(hz_at(a, frame) - wanted) < error * wanted + tolerance_hz;
    }
    return good / (double)TRACE_POINTS;
}

/* Mean ratio over the common time. */
static double ratio_of(const struct contour *a, const struct contour *b)
{
    double start = fmax(a->start_frame, b->start_frame), length = related_overlap(a, b), sum = 0;
    for (uint32_t i = 0; i < TRACE_POINTS; i++) {
        double frame = start + length * (i + 0.5) / TRACE_POINTS;
        sum += log(hz_at(a, frame) / hz_at(b, frame));
    }
    return exp(sum / TRACE_POINTS);
}

/* Share of the common time in which they keep their mean ratio; none where it is higher than overtones go. */
static double share_kept(const struct contour *a, const struct contour *b, double error)
{
    double ratio = ratio_of(a, b);
    if (ratio > HIGHEST_OVERTONE || ratio < 1 / HIGHEST_OVERTONE)
        return 0;
    return share_in_ratio(a, b, ratio, error, fmax(a->bin_hz, ratio * b->bin_hz) / 2);
}

/* How far it goes in the common time, as a share of its frequency. */
static double sweep_within(const struct contour *c, const struct contour *other)
{
    double start = fmax(c->start_frame, other->start_frame), length = related_overlap(c, other);
    double low = INFINITY, high = 0;
    for (uint32_t i = 0; i < TRACE_POINTS; i++) {
        double hz = hz_at(c, start + length * (i + 0.5) / TRACE_POINTS);
        low = fmin(low, hz);
        high = fmax(high, hz);
    }
    return high - low > 4 * c->bin_hz ? (high - low) / high : 0;
}

bool related_is_same_line(const struct contour *a, const struct contour *b)
{
    return related_overlap(a, b) >= 0.3 * shorter(a, b) &&
           share_in_ratio(a, b, 1, 0, 2.5 * fmax(a->bin_hz, b->bin_hz)) >= MOSTLY;
}

/* Near a low multiple of the other most of the time, though it may go from one to the next. */
static bool keeps_to_multiples(const struct contour *high, const struct contour *low)
{
    double start = fmax(high->start_frame, low->start_frame), length = related_overlap(high, low);
    uint32_t good = 0;
    for (uint32_t i = 0; i < TRACE_POINTS; i++) {
        double frame = start + length * (i + 0.5) / TRACE_POINTS;
        double ratio = hz_at(high, frame) / hz_at(low, frame), whole = round(ratio);
        good += whole >= 2 && whole <= LOW_MULTIPLES && fabs(ratio - whole) < APART_ERROR * whole;
    }
    return good >= APART_MOSTLY * TRACE_POINTS;
}

bool related_is_harmonic(const struct contour *a, const struct contour *b)
{
    if (related_overlap(a, b) < HARMONIC_OVERLAP * shorter(a, b))
        return false;
    const struct contour *high = a->hz[TRACE_POINTS / 2] > b->hz[TRACE_POINTS / 2] ? a : b;
    const struct contour *low = high == a ? b : a;
    double middle = fmax(a->start_frame, b->start_frame) + related_overlap(a, b) / 2;
    double ratio = round(hz_at(high, middle) / hz_at(low, middle));
    if (ratio >= 2 && ratio <= MAX_HARMONIC &&
        share_in_ratio(high, low, ratio, HARMONIC_ERROR, low->bin_hz / 2) >= MOSTLY)
        return true;
    if (keeps_to_multiples(high, low))
        return true;
    return sweep_within(a, b) >= SWEEPS && sweep_within(b, a) >= SWEEPS &&
           share_in_ratio(high, low, ratio_of(high, low), HARMONIC_ERROR, low->bin_hz / 2) >= MOSTLY;
}

bool related_is_apart(const struct contour *a, const struct contour *b)
{
    return sweep_within(a, b) >= SWEEPS && sweep_within(b, a) >= SWEEPS &&
           share_kept(a, b, APART_ERROR) < APART_MOSTLY;
}

/* It sweeps, and not as the other does (which may stand still), and lies so far above that it is not a path
 * from one of its first harmonics to the next. */
static bool has_own_course(const struct contour *c, const struct contour *other)
{
    return related_overlap(c, other) > 0 && sweep_within(c, other) >= SWEEPS &&
           ratio_of(c, other) > FIRST_HARMONICS && share_kept(c, other, APART_ERROR) < APART_MOSTLY;
}

bool related_is_overtone(double rate_hz, const struct contour *weak, const struct contour *strong)
{
    if (weak->low_hz <= strong->high_hz || weak->mean_square >= OVERTONE_WEAKER * strong->mean_square)
        return false;
    bool within = related_overlap(weak, strong) >= HARMONIC_OVERLAP * related_duration(weak);
    bool begun = weak->start_frame >= strong->start_frame &&
                 weak->start_frame < strong->end_frame + ECHO_S / 2 * rate_hz &&
                 weak->end_frame < strong->end_frame + ECHO_S * rate_hz;
    return (within || (begun && weak->mean_square < FAR_WEAKER * strong->mean_square)) &&
           !has_own_course(weak, strong);
}
