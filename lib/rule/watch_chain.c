/* The train of an impulse that a person names, found in what was heard before and after it: impulses of one
 * channel in equal steps, at nearly its level. What the watch took the impulse for at the time says nothing
 * here, for it may have tied two hammers into one train. The method and its numbers are the project's own. */
#include "base/time.h"
#include "rule/watch_inner.h"
#include <math.h>
#include <stdlib.h>

#define SHORTEST_NS (4 * TIME_NS_PER_S / 10)
#define LONGEST_NS (310 * TIME_NS_PER_S)
#define LEVEL_DB 3.0f  /* from the level so far */
#define TOLERANCE 0.1  /* of a step; its root with the steps that were missed */
#define TRIED 24       /* impulses on either side whose distance is tried as a step */
#define TRIED_STEPS 16 /* how far a trial goes on either side */
#define PARTS 3        /* a distance may be this many steps, where those between were missed */
#define MISSED 8       /* steps in a row: then the train is over */
#define EARLIER 64     /* impulses become known nearly in the order of their times */

/* On the way through a train, in one direction. */
struct way {
    const struct watch *watch;
    size_t place;
    int direction; /* 1, -1 */
    double step_ns;
    float level_db;
    int64_t last_ns;
    uint64_t token; /* of the last one */
    uint32_t missed;
};

static bool level_fits(float level_db, float expected_db)
{
    return !(fabsf(level_db - expected_db) > LEVEL_DB);
}

static bool goes_on(const struct way *way, uint64_t token)
{
    return way->direction > 0 ? token + 1 < way->watch->n_heard : token > whose_oldest(way->watch);
}

/* The impulse nearest to the time and near enough to it; false for none. */
static bool find_at(const struct way *way, double at_ns, double tolerance_ns, uint64_t *out)
{
    bool found = false;
    uint32_t beyond = 0;
    for (uint64_t token = way->token; goes_on(way, token) && beyond < EARLIER;) {
        token = way->direction > 0 ? token + 1 : token - 1;
        const struct heard *heard = whose_heard(way->watch, token);
        double away_ns = ((double)heard->time_ns - at_ns) * way->direction;
        beyond += away_ns > tolerance_ns;
        if (whose_place(heard->stream, heard->channel) != way->place || fabs(away_ns) > tolerance_ns ||
            !level_fits(heard->level_db, way->level_db))
            continue;
        if (!found || fabs(away_ns) < fabs((double)whose_heard(way->watch, *out)->time_ns - at_ns))
            *out = token;
        found = true;
    }
    return found;
}

/* One step on, over what was missed; false at the train's end. */
static bool go(struct way *way, uint32_t most_missed)
{
    for (way->missed = 0; way->missed <= most_missed; way->missed++) {
        double steps = way->missed + 1, at_ns = (double)way->last_ns + way->direction * steps * way->step_ns;
        uint64_t token;
        if (!find_at(way, at_ns, TOLERANCE * sqrt(steps) * way->step_ns, &token))
            continue;
        const struct heard *heard = whose_heard(way->watch, token);
        double step_ns = fabs((double)(heard->time_ns - way->last_ns)) / steps;
        way->step_ns += (step_ns - way->step_ns) / 4;
        if (isfinite(heard->level_db) && isfinite(way->level_db))
            way->level_db += (heard->level_db - way->level_db) / 8;
        way->last_ns = heard->time_ns;
        way->token = token;
        return true;
    }
    return false;
}

static struct way start(const struct watch *watch, uint64_t token, int direction, double step_ns)
{
    const struct heard *heard = whose_heard(watch, token);
    return (struct way){.watch = watch,
                        .place = whose_place(heard->stream, heard->channel),
                        .direction = direction,
                        .step_ns = step_ns,
                        .level_db = heard->level_db,
                        .last_ns = heard->time_ns,
                        .token = token};
}

/* How many are met, going no farther than a span on either side. */
static uint32_t try_step(const struct watch *watch, uint64_t token, double step_ns, double span_ns)
{
    uint32_t n = 0;
    for (int direction = -1; direction <= 1; direction += 2) {
        struct way way = start(watch, token, direction, step_ns);
        int64_t start_ns = way.last_ns;
        uint32_t most = isfinite(span_ns) ? PARTS * TRIED_STEPS : TRIED_STEPS;
        for (uint32_t i = 0; i < most && go(&way, 1) && (double)llabs(way.last_ns - start_ns) <= span_ns; i++)
            n++;
    }
    return n;
}

/* The distance to the nearest one that was heard may be several steps. A part of it must meet a quarter more
 * over the same span: more than a few that fall into its steps by chance. */
static double split_step(const struct watch *watch, uint64_t token, double step_ns)
{
    double span_ns = (TRIED_STEPS + 0.5) * step_ns, best_ns = step_ns;
    uint32_t most = step_ns > 0 ? try_step(watch, token, step_ns, span_ns) : 0;
    for (uint32_t parts = 2; parts <= PARTS && step_ns / parts >= SHORTEST_NS; parts++) {
        uint32_t n = try_step(watch, token, step_ns / parts, span_ns);
        if (4 * n > 5 * most) {
            most = n;
            best_ns = step_ns / parts;
        }
    }
    return best_ns;
}

/* 0 where there is none. */
static double find_step(const struct watch *watch, uint64_t token)
{
    uint32_t most = 2; /* four impulses make a train; the named one is not counted */
    double best_ns = 0;
    for (int direction = -1; direction <= 1; direction += 2) {
        const struct way way = start(watch, token, direction, 0);
        uint64_t t = token;
        for (uint32_t tried = 0; tried < TRIED && goes_on(&way, t);) {
            t = direction > 0 ? t + 1 : t - 1;
            const struct heard *heard = whose_heard(watch, t);
            int64_t step_ns = llabs(heard->time_ns - way.last_ns);
            if (step_ns > LONGEST_NS)
                break;
            if (whose_place(heard->stream, heard->channel) != way.place || step_ns < SHORTEST_NS ||
                !level_fits(heard->level_db, way.level_db))
                continue;
            tried++;
            uint32_t n = try_step(watch, token, (double)step_ns, INFINITY);
            if (n > most) {
                most = n;
                best_ns = (double)step_ns;
            }
        }
    }
    return split_step(watch, token, best_ns);
}

void whose_name_train(struct watch *watch, uint64_t token)
{
    double step_ns = find_step(watch, token);
    whose_heard(watch, token)->named = true;
    for (int direction = -1; direction <= 1 && step_ns > 0; direction += 2) {
        struct way way = start(watch, token, direction, step_ns);
        while (go(&way, MISSED))
            whose_heard(watch, way.token)->named = true;
    }
}
