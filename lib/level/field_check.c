/* A steady tone and its level. */
#include "level/field_check.h"
#include "base/units.h"
#include "level/percentile.h"
#include <math.h>
#include <stdbool.h>
#include <string.h>

enum status field_check_reset(struct field_check *check, double rate_hz, double tone_hz)
{
    struct filter filter;
    if (!(rate_hz >= 8000) || !(rate_hz <= 1000000) || !(tone_hz >= 1) || !(tone_hz <= rate_hz / 4))
        return STATUS_BAD_ARGUMENT;
    enum status status = filter_band_pass(2, tone_hz / M_SQRT2, tone_hz * M_SQRT2, rate_hz, &filter);
    if (status)
        return status;
    memset(check, 0, sizeof *check);
    check->rate_hz = rate_hz;
    check->filter = filter;
    filter_reset(&check->filter);
    return STATUS_OK;
}

static void end_second(struct field_check *check)
{
    const double n = check->rate_hz, mean = check->sum / n;
    if (check->frames > (uint64_t)check->rate_hz && check->n_seconds < FIELD_CHECK_MAX_SECONDS) {
        check->tone_pa2[check->n_seconds] = check->tone / n;
        check->all_pa2[check->n_seconds++] = check->all / n - mean * mean;
    }
    check->tone = check->all = check->sum = 0;
}

void field_check_push(struct field_check *check, const float *pascals, uint32_t n)
{
    const uint64_t rate = (uint64_t)check->rate_hz;
    for (uint32_t i = 0; i < n; i++) {
        double x = pascals[i], y = filter_step(&check->filter, x);
        check->tone += y * y;
        check->all += x * x;
        check->sum += x;
        if (++check->frames % rate == 0)
            end_second(check);
    }
}

static bool is_clear(const struct field_check *check, uint32_t second)
{
    double tone = check->tone_pa2[second];
    return tone > 0 && check->all_pa2[second] - tone <= tone * units_power_ratio(-FIELD_CHECK_CLEAR_DB);
}

enum status field_check_get(const struct field_check *check, struct field_check_result *out)
{
    double sorted[FIELD_CHECK_MAX_SECONDS] = {0}, tone = 0, all = 0, seconds = 0;
    uint32_t n = 0;
    for (uint32_t i = 0; i < check->n_seconds; i++)
        if (is_clear(check, i))
            percentile_insert(sorted, n++, units_spl_db(check->tone_pa2[i]));
    double median = percentile_exceeded_db(sorted, n, 50);
    for (uint32_t i = 0; i < check->n_seconds; i++)
        if (is_clear(check, i) && fabs(units_spl_db(check->tone_pa2[i]) - median) <= FIELD_CHECK_STEADY_DB) {
            tone += check->tone_pa2[i];
            all += check->all_pa2[i];
            seconds++;
        }
    if (seconds < FIELD_CHECK_LEAST_SECONDS)
        return STATUS_NOT_FOUND;
    *out = (struct field_check_result){.measured_db = units_spl_db(tone / seconds),
                                       .rest_db = units_spl_db(fmax(all - tone, 0) / seconds),
                                       .seconds = seconds};
    return STATUS_OK;
}
