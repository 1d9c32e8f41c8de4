/* One train of impulses: its interval, its level, and how well an impulse fits it. */
#include "base/median.h"
#include "base/time.h"
#include "rule/whose.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

/* Jitter of an interval from one blow to the next, as a share of it: what hammers and shot timers keep to is
 * a few per cent (common practice, no source); learned between these. */
#define LEAST_SPREAD 0.015
#define MOST_SPREAD 0.06
#define LEAST_SPREAD_DB 1.0 /* of the level from blow to blow */
#define MOST_SPREAD_DB 2.5
#define FEW_SPREAD_DB 1.5 /* before there are enough to learn it from */
#define SLOW 20           /* impulses over which another's level is expected to change */
#define SLOW_REACH 0.15   /* an interval farther off, as a share, is no change of it */
#define IN_STEP 0.1       /* steps out of step, on the average */
#define FASTER 0.75
#define SHORTEST_INTERVAL_S 0.4 /* 120 blows a minute, with room */
#define ANCHORS 3               /* a rhythm is carried on from each of the last three impulses */
#define FARTHEST_STEPS 8        /* beyond so many missed blows the phase is lost */
#define SHARE_OFF 0.1           /* of blows that keep no rhythm */
#define SHARE_STEP 0.06         /* of blows at which the energy is changed */
#define SHARE_ANY 0.01          /* of blows at any level */
#define SHARE_MISSED 0.3        /* of blows that are not heard, so that the rhythm is seen with a gap */
#define ANY_LEVEL_DB 60.0       /* the width of "any level" */
#define UNKNOWN_INTERVAL_S 10.0
#define ROOT_TWO_PI 2.50662827463100050
#define MAD_TO_SIGMA 1.4826  /* of a normal distribution */
#define MEAN_TO_SIGMA 1.2533 /* of absolute deviations, likewise: root of pi / 2 */
#define IN_RHYTHM 3.5

static uint32_t kept(const struct whose_train *train)
{
    return train->n < WHOSE_KEPT ? train->n : WHOSE_KEPT;
}

static uint32_t intervals(const struct whose_train *train, double out[WHOSE_KEPT])
{
    uint32_t n = 0;
    for (uint32_t i = 1; i < kept(train); i++)
        out[n++] = time_to_s(train->time_ns[i - 1] - train->time_ns[i]);
    return n;
}

/* How far the intervals are from whole numbers of steps, in steps, on the average: 0.25 at random. */
static double out_of_step(const double *all, uint32_t n, double step_s)
{
    double sum = 0;
    for (uint32_t i = 0; i < n; i++)
        sum += fabs(all[i] / step_s - round(all[i] / step_s));
    return sum / n;
}

/* Missed blows make intervals of two or more: each is folded by one of the shorter ones, not the shortest,
 * which a stray impulse may have made; or by a part of it, where two of two and three show that all had a
 * gap. */
static uint32_t folded_intervals(const struct whose_train *train, double out[WHOSE_KEPT])
{
    double sorted[WHOSE_KEPT];
    uint32_t n = intervals(train, out);
    memcpy(sorted, out, n * sizeof sorted[0]);
    median_sort(sorted, n);
    double one = n ? sorted[n / 3] : NAN;
    for (int parts = 2; n >= 5 && parts <= 3 && out_of_step(out, n, one) > IN_STEP; parts++)
        if (sorted[n / 3] / parts >= SHORTEST_INTERVAL_S &&
            out_of_step(out, n, sorted[n / 3] / parts) < IN_STEP)
            one = sorted[n / 3] / parts;
    for (uint32_t i = 0; i < n && one > 0; i++) {
        double steps = round(out[i] / one);
        out[i] /= steps > 1 ? steps : 1;
    }
    return n;
}

static double last_interval_s(const struct whose_train *train)
{
    double steps[WHOSE_KEPT];
    return median_of(steps, folded_intervals(train, steps));
}

double whose_train_interval_s(const struct whose_train *train)
{
    bool slow = train->owner == OWNER_OTHERS && train->slow_s > 0;
    return slow ? train->slow_s : last_interval_s(train);
}

static void learn_interval(struct whose_train *train)
{
    if (!(train->slow_s > 0)) {
        train->slow_s = train->n >= 4 ? last_interval_s(train) : NAN;
        train->slow_spread = MOST_SPREAD / 2;
        return;
    }
    double step = time_to_s(train->time_ns[0] - train->time_ns[1]), n = round(step / train->slow_s);
    double off = step / n - train->slow_s;
    if (n >= 1 && n <= FARTHEST_STEPS && fabs(off) < SLOW_REACH * train->slow_s) {
        double sigma = fabs(off) / train->slow_s * sqrt(n) * MEAN_TO_SIGMA;
        train->slow_spread += (fmin(sigma, 2 * MOST_SPREAD) - train->slow_spread) / SLOW;
        train->slow_s += off / SLOW;
    } else if (train->n >= WHOSE_KEPT && last_interval_s(train) < FASTER * train->slow_s)
        train->slow_s = last_interval_s(train); /* what was taken for its rhythm was a part of it */
}

static double interval_spread(const struct whose_train *train, double interval_s)
{
    double steps[WHOSE_KEPT];
    uint32_t n = folded_intervals(train, steps);
    if (n < 4)
        return MOST_SPREAD;
    if (train->owner == OWNER_OTHERS && train->slow_spread > 0)
        return train->slow_spread < LEAST_SPREAD ? LEAST_SPREAD : train->slow_spread;
    for (uint32_t i = 0; i < n; i++)
        steps[i] = fabs(steps[i] - interval_s);
    double spread = MAD_TO_SIGMA * median_of(steps, n) / interval_s;
    return spread < LEAST_SPREAD ? LEAST_SPREAD : spread > MOST_SPREAD ? MOST_SPREAD : spread;
}

static uint32_t levels(const struct whose_train *train, double out[WHOSE_KEPT])
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < kept(train) && i < 5; i++)
        if (isfinite(train->level_db[i]))
            out[n++] = train->level_db[i];
    return n;
}

double whose_train_level_db(const struct whose_train *train)
{
    double all[WHOSE_KEPT];
    return median_of(all, levels(train, all));
}

double whose_train_expected_db(const struct whose_train *train)
{
    return train->owner == OWNER_OTHERS ? train->slow_db : whose_train_level_db(train);
}

static double normal(double x, double sigma)
{
    return exp(-0.5 * (x / sigma) * (x / sigma)) / (sigma * ROOT_TWO_PI);
}

static double level_likelihood(const struct whose_train *train, double level_db)
{
    double all[WHOSE_KEPT], middle = whose_train_level_db(train), expected = whose_train_expected_db(train);
    uint32_t n = levels(train, all);
    if (!isfinite(middle) || !isfinite(level_db))
        return 1 / ANY_LEVEL_DB;
    for (uint32_t i = 0; i < n; i++)
        all[i] = fabs(all[i] - middle);
    double sigma = MAD_TO_SIGMA * median_of(all, n), off = level_db - expected;
    sigma = n < 4 ? FEW_SPREAD_DB : sigma < LEAST_SPREAD_DB ? LEAST_SPREAD_DB : sigma;
    sigma = sigma > MOST_SPREAD_DB ? MOST_SPREAD_DB : sigma;
    /* Another's energy steps too, but what suddenly is louder than another's is rather ours. */
    double step = train->owner == OWNER_OTHERS ? 0 : SHARE_STEP;
    bool near = off > -WHOSE_BELOW_DB && off < WHOSE_ABOVE_DB;
    return (1 - step - SHARE_ANY) * normal(off, sigma) +
           (near ? step / (WHOSE_BELOW_DB + WHOSE_ABOVE_DB) : 0) + SHARE_ANY / ANY_LEVEL_DB;
}

/* The best of the predictions from the last impulses; *out_phase says whether it stands out. */
static double time_likelihood(const struct whose_train *train, int64_t time_ns, enum whose_phase *out_phase)
{
    double interval = whose_train_interval_s(train), best = 0;
    double since = time_to_s(time_ns - train->time_ns[0]);
    *out_phase = WHOSE_NO_RHYTHM;
    if (!(interval > 0))
        return 1 / UNKNOWN_INTERVAL_S;
    if (since > (FARTHEST_STEPS + 0.5) * interval)
        return 1 / interval;
    double off = SHARE_OFF / interval, spread = interval_spread(train, interval);
    *out_phase = WHOSE_OFF_RHYTHM;
    for (uint32_t i = 0; i < kept(train) && i < ANCHORS; i++) {
        double after = time_to_s(time_ns - train->time_ns[i]), steps = round(after / interval);
        if (steps < 1 + i || steps > FARTHEST_STEPS + i || since < 0.5 * interval)
            continue;
        double sigma = spread * interval * sqrt(steps), away = after - steps * interval;
        double likelihood = (1 - SHARE_OFF) * pow(SHARE_MISSED, steps - 1 - i) * normal(away, sigma);
        if (fabs(away) < IN_RHYTHM * sigma && likelihood > 0)
            *out_phase = WHOSE_IN_RHYTHM;
        best = likelihood > best ? likelihood : best;
    }
    return best + off;
}

struct whose_fit whose_train_fit(const struct whose_train *train, int64_t time_ns, double level_db)
{
    struct whose_fit fit;
    double time = time_likelihood(train, time_ns, &fit.phase);
    fit.log_likelihood = log(time) + log(level_likelihood(train, level_db));
    return fit;
}

void whose_train_add(struct whose_train *train, int64_t time_ns, double level_db)
{
    memmove(train->time_ns + 1, train->time_ns, (WHOSE_KEPT - 1) * sizeof train->time_ns[0]);
    memmove(train->level_db + 1, train->level_db, (WHOSE_KEPT - 1) * sizeof train->level_db[0]);
    train->time_ns[0] = time_ns;
    train->level_db[0] = level_db;
    train->n += train->n < UINT32_MAX;
    learn_interval(train);
    if (!isfinite(level_db))
        return;
    double share = train->n < SLOW ? 1.0 / train->n : 1.0 / SLOW;
    train->slow_db =
        isfinite(train->slow_db) ? train->slow_db + share * (level_db - train->slow_db) : level_db;
}

/* ---- a train among loose impulses */
#define STEP_TOLERANCE 0.08
#define SAME_LEVEL_DB 3.0
#define LONGEST_INTERVAL_S 310.0 /* mitigation guns fire every 5 min */

/* The loose impulse after `from` nearest to the time, within the tolerance and at the newest's level; or 0.
 */
static uint32_t find_at(const struct whose *whose, uint32_t from, double before_s, double tolerance_s)
{
    uint32_t found = 0;
    double nearest = tolerance_s;
    for (uint32_t i = from + 1; i < whose->n_loose; i++) {
        double away = fabs(time_to_s(whose->loose_ns[0] - whose->loose_ns[i]) - before_s);
        if (away <= nearest && !(fabs(whose->loose_db[i] - whose->loose_db[0]) > SAME_LEVEL_DB)) {
            nearest = away;
            found = i;
        }
    }
    return found;
}

static uint32_t walk(const struct whose *whose, double step_s, uint32_t places[WHOSE_MAX_LOOSE])
{
    uint32_t n = 1, missing = 0;
    double at_s = 0;
    places[0] = 0;
    while (missing < 2 && n < WHOSE_MAX_LOOSE) {
        uint32_t next = find_at(whose, places[n - 1], at_s + step_s, STEP_TOLERANCE * step_s * (1 + missing));
        if (!next) {
            missing++;
            at_s += step_s;
            continue;
        }
        at_s = time_to_s(whose->loose_ns[0] - whose->loose_ns[next]);
        places[n++] = next;
        missing = 0;
    }
    return n;
}

uint32_t whose_find_train(const struct whose *whose, uint32_t places[WHOSE_MAX_LOOSE])
{
    uint32_t best = 0;
    for (uint32_t i = 1; i < whose->n_loose; i++) {
        uint32_t tried[WHOSE_MAX_LOOSE];
        double step = time_to_s(whose->loose_ns[0] - whose->loose_ns[i]);
        if (step < SHORTEST_INTERVAL_S || step > LONGEST_INTERVAL_S)
            continue;
        uint32_t n = walk(whose, step, tried);
        if (n > best) {
            best = n;
            memcpy(places, tried, n * sizeof places[0]);
        }
    }
    return best;
}

/* ---- what people say */
static bool among(int64_t time_ns, uint32_t n, const int64_t *times_ns)
{
    for (uint32_t i = 0; i < n; i++)
        if (times_ns[i] == time_ns)
            return true;
    return false;
}

static void start_anew(struct whose_train *train, enum whose_owner owner)
{
    *train = (struct whose_train){
        .owner = owner, .slow_s = NAN, .slow_db = NAN, .first_db = NAN, .ours_then_db = NAN};
}

/* Of the train what is not among those. */
static void take_away(struct whose_train *train, uint32_t n, const int64_t *times_ns)
{
    const struct whose_train was = *train;
    start_anew(train, was.owner);
    train->told = was.told;
    train->adopted = was.adopted;
    for (uint32_t i = kept(&was); i-- > 0;)
        if (!among(was.time_ns[i], n, times_ns))
            whose_train_add(train, was.time_ns[i], was.level_db[i]);
    if (train->n == kept(&was))
        *train = was; /* none of them was in it */
    else if (train->n == 0)
        train->owner = OWNER_NONE;
}

void whose_tell(struct whose *whose, uint32_t n, const int64_t *times_ns, const double *levels_db, bool ours)
{
    uint32_t left = 0;
    for (uint32_t i = 0; i < WHOSE_MAX_TRAINS; i++) {
        struct whose_train *train = &whose->trains[i];
        if (train->owner != OWNER_NONE)
            take_away(train, n, times_ns);
        if (ours && train->owner == OWNER_OURS)
            train->owner = OWNER_RIVAL;
    }
    for (uint32_t i = 0; i < whose->n_loose; i++)
        if (!among(whose->loose_ns[i], n, times_ns)) {
            whose->loose_ns[left] = whose->loose_ns[i];
            whose->loose_db[left++] = whose->loose_db[i];
        }
    whose->n_loose = left;
    struct whose_train *told = whose_new_train(whose, ours ? OWNER_OURS : OWNER_OTHERS);
    told->told = true;
    for (uint32_t i = 0; i < n; i++)
        whose_train_add(told, times_ns[i], levels_db[i]);
}
