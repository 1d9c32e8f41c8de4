/* From a minute's entry of levels back to its seconds, and from a finding's entry back to the finding. */
#include "base/time.h"
#include "record/entry.h"
#include "record/reading.h"
#include <math.h>

/* A number of an array; NAN where it is null. */
static double item(struct reading *reading, const json_t *array, size_t i)
{
    const json_t *value = json_array_get(array, i);
    if (!json_is_null(value) && !json_is_number(value))
        reading->good = false;
    return json_is_number(value) ? json_number_value(value) : NAN;
}

/* An array with an item a second. */
static const json_t *measure(struct reading *reading, const char *key, size_t n)
{
    const json_t *array = reading_member(reading, key, true);
    if (json_array_size(array) != n)
        reading->good = false;
    return array;
}

static void read_second(struct reading *reading, const json_t *bands, struct level *level)
{
    level->n_bands = (uint32_t)json_array_size(bands);
    if (!json_is_array(bands) || level->n_bands > LEVEL_MAX_BANDS) {
        reading->good = false;
        return;
    }
    for (size_t b = 0; b < level->n_bands; b++)
        level->band_db[b] = item(reading, bands, b);
}

static void read_seconds(struct reading *reading, struct entry_levels *out)
{
    size_t n = json_array_size(reading_member(reading, "start_s", true));
    if (n < 1 || n > ENTRY_LEVELS_MAX) {
        reading->good = false;
        return;
    }
    const json_t *start = measure(reading, "start_s", n), *seconds = measure(reading, "seconds", n);
    const json_t *spl = measure(reading, "spl_db", n), *peak = measure(reading, "peak_db", n);
    const json_t *sel = measure(reading, "sel_db", n), *bands = measure(reading, "bands", n);
    uint32_t channel = reading_count(reading, "channel", true);
    bool relative = reading_bool(reading, "relative", true);
    out->n = (uint32_t)n;
    for (size_t i = 0; i < n && reading->good; i++) {
        struct level *level = &out->seconds[i];
        double start_s = item(reading, start, i);
        if (!(fabs(start_s) < 9e9)) {
            reading->good = false;
            return;
        }
        *level = (struct level){.channel = channel,
                                .start_ns = time_from_s(start_s),
                                .seconds = item(reading, seconds, i),
                                .spl_db = item(reading, spl, i),
                                .peak_db = item(reading, peak, i),
                                .sel_db = item(reading, sel, i),
                                .fast_max_db = NAN,
                                .slow_max_db = NAN,
                                .relative = relative};
        read_second(reading, json_array_get(bands, i), level);
    }
}

enum status entry_levels(const char *body, struct entry_levels *out)
{
    struct reading reading;
    uint64_t counter = 0;
    enum status status = reading_begin(body, &reading);
    if (status != STATUS_OK)
        return status;
    out->n = 0;
    reading_id(&reading, "level", &out->run, &out->stream, &counter);
    read_seconds(&reading, out);
    return reading_end(&reading);
}

enum status entry_finding(const char *body, struct outcome *out)
{
    struct reading reading;
    struct outcome outcome = {.kind = OUTCOME_FINDING};
    struct finding_outcome *finding = &outcome.as.finding;
    enum status status = reading_begin(body, &reading);
    if (status != STATUS_OK)
        return status;
    reading_id(&reading, "finding", &outcome.run, &outcome.stream, &outcome.counter);
    reading_text(&reading, "code", true, finding->code, sizeof finding->code);
    reading_text(&reading, "clause", true, finding->clause, sizeof finding->clause);
    reading_text(&reading, "grade", true, finding->grade, sizeof finding->grade);
    reading_text(&reading, "job", true, finding->job, sizeof finding->job);
    reading_text(&reading, "detail", true, finding->detail, sizeof finding->detail);
    status = reading_end(&reading);
    if (status == STATUS_OK)
        *out = outcome;
    return status;
}
