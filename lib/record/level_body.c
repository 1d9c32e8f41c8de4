/* A minute of levels and what it comes to. */
#include "record/level_body.h"
#include "base/round.h"
#include "base/time.h"
#include "base/units.h"
#include "level/moments.h"
#include "level/percentile.h"
#include "record/body.h"
#include <math.h>

#define MAX_SECONDS 60u
#define HOUR_NS (INT64_C(3600) * TIME_NS_PER_S)

static void drop_oldest(struct level_hour *hour)
{
    percentile_remove(hour->sorted, hour->n, hour->spl_db[hour->oldest]);
    hour->oldest = (hour->oldest + 1) % LEVEL_HOUR_SECONDS;
    hour->n--;
}

void level_hour_take(struct level_hour *hour, const struct level *level)
{
    if (isnan(level->spl_db))
        return;
    while (hour->n > 0 &&
           (hour->n == LEVEL_HOUR_SECONDS || level->start_ns - hour->start_ns[hour->oldest] >= HOUR_NS))
        drop_oldest(hour);
    uint32_t at = (hour->oldest + hour->n) % LEVEL_HOUR_SECONDS;
    hour->start_ns[at] = level->start_ns;
    hour->spl_db[at] = level->spl_db;
    hour->seconds[at] = level->seconds;
    percentile_insert(hour->sorted, hour->n++, level->spl_db);
}

static void put_percentiles(const double *sorted, uint32_t n, struct level_statistics *out)
{
    out->l05_db = percentile_exceeded_db(sorted, n, 5);
    out->l50_db = percentile_exceeded_db(sorted, n, 50);
    out->l95_db = percentile_exceeded_db(sorted, n, 95);
}

void level_hour_get(const struct level_hour *hour, struct level_statistics *out)
{
    double energy = 0, seconds = 0;
    for (uint32_t i = 0; i < hour->n; i++) {
        uint32_t at = (hour->oldest + i) % LEVEL_HOUR_SECONDS;
        energy += units_power_ratio(hour->spl_db[at]) * hour->seconds[at];
        seconds += hour->seconds[at];
    }
    put_percentiles(hour->sorted, hour->n, out);
    out->mean_db = seconds > 0 ? units_power_db(energy / seconds) : NAN;
    out->seconds = seconds;
}

/* The minute's seconds, each counted once whatever was lost of it; the energy mean by the sound in them. */
static void of_minute(const struct level *levels, uint32_t n, struct level_statistics *out)
{
    double sorted[MAX_SECONDS] = {0}, energy = 0, seconds = 0;
    uint32_t known = 0;
    for (uint32_t i = 0; i < n && known < MAX_SECONDS; i++) {
        if (isnan(levels[i].spl_db))
            continue;
        percentile_insert(sorted, known++, levels[i].spl_db);
        energy += units_power_ratio(levels[i].spl_db) * levels[i].seconds;
        seconds += levels[i].seconds;
    }
    put_percentiles(sorted, known, out);
    out->mean_db = seconds > 0 ? units_power_db(energy / seconds) : NAN;
    out->seconds = seconds;
}

static void put_statistics(struct body *body, const char *key, const struct level_statistics *statistics)
{
    struct body object;
    body_object(body, key, &object);
    body_number(&object, "l05_db", statistics->l05_db, ROUND_DECIMALS_DB);
    body_number(&object, "l50_db", statistics->l50_db, ROUND_DECIMALS_DB);
    body_number(&object, "l95_db", statistics->l95_db, ROUND_DECIMALS_DB);
    body_number(&object, "mean_db", statistics->mean_db, ROUND_DECIMALS_DB);
    body_number(&object, "seconds", statistics->seconds, ROUND_DECIMALS_S);
    body_number(&object, "sel_db", statistics->mean_db + units_power_db(statistics->seconds),
                ROUND_DECIMALS_DB);
    body_object_end(&object);
}

/* Remarks for people: nothing is decided from them. */
static void put_research(struct body *body, const struct level *levels, uint32_t n,
                         const struct level_statistics *minute)
{
    struct moments moments = {0};
    for (uint32_t i = 0; i < n; i++)
        moments_add(&moments, &levels[i].moments);
    double kurtosis = moments_kurtosis(&moments);
    double sel_db = minute->mean_db + units_power_db(minute->seconds);
    struct body object;
    body_object(body, "research", &object);
    body_number(&object, "adjusted_sel_db", sel_db + moments_goley_db(kurtosis), ROUND_DECIMALS_DB);
    body_number(&object, "boundary", MOMENTS_IMPULSIVE, 0);
    body_number(&object, "high_hz", levels[0].high_hz, ROUND_DECIMALS_HZ);
    body_number(&object, "kurtosis", kurtosis, ROUND_DECIMALS_KURTOSIS);
    body_number(&object, "low_hz", 0, ROUND_DECIMALS_HZ);
    body_number(&object, "window_s", minute->seconds, ROUND_DECIMALS_S);
    body_object_end(&object);
}

enum measure { BANDS, FAST, PEAK, SECONDS, SEL, SLOW, SPL, START };

static void append_measure(struct text *out, const struct level *level, enum measure measure)
{
    double db = measure == FAST   ? level->fast_max_db
                : measure == PEAK ? level->peak_db
                : measure == SEL  ? level->sel_db
                : measure == SLOW ? level->slow_max_db
                                  : level->spl_db;
    if (measure == BANDS)
        body_append_decibels(out, level->band_db,
                             level->n_bands < LEVEL_MAX_BANDS ? level->n_bands : LEVEL_MAX_BANDS);
    else if (measure == SECONDS)
        text_json_number(out, round_decimals(level->seconds, ROUND_DECIMALS_S), ROUND_DECIMALS_S);
    else if (measure == START)
        body_append_time(out, level->start_ns);
    else
        text_json_number(out, round_decimals(db, ROUND_DECIMALS_DB), ROUND_DECIMALS_DB);
}

static void put_measure(struct body *body, const char *key, const struct level *levels, uint32_t n,
                        enum measure measure)
{
    body_key(body, key);
    text_append(body->out, "[");
    for (uint32_t i = 0; i < n; i++) {
        if (i > 0)
            text_append(body->out, ",");
        append_measure(body->out, &levels[i], measure);
    }
    text_append(body->out, "]");
}

enum status level_body(uint32_t run, uint32_t stream, uint64_t counter, const struct level *levels,
                       uint32_t n, const struct level_statistics *hour, struct text *out)
{
    struct body body;
    struct level_statistics minute;
    of_minute(levels, n, &minute);
    body_begin(&body, out);
    put_measure(&body, "bands", levels, n, BANDS);
    body_integer(&body, "channel", levels[0].channel);
    put_measure(&body, "fast_max_db", levels, n, FAST);
    if (hour)
        put_statistics(&body, "hour", hour);
    body_id(&body, run, stream, "level", counter);
    put_statistics(&body, "minute", &minute);
    put_measure(&body, "peak_db", levels, n, PEAK);
    body_bool(&body, "relative", levels[0].relative);
    put_research(&body, levels, n, &minute);
    put_measure(&body, "seconds", levels, n, SECONDS);
    put_measure(&body, "sel_db", levels, n, SEL);
    put_measure(&body, "slow_max_db", levels, n, SLOW);
    put_measure(&body, "spl_db", levels, n, SPL);
    put_measure(&body, "start_s", levels, n, START);
    body_integer(&body, "stream", stream);
    return body_end(&body);
}
