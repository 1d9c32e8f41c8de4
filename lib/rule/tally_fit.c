/* The loss law that a job's own blows show; see tally_fit.h. */
#include "rule/tally_fit.h"
#include "base/units.h"
#include "rule/blows.h"
#include "sea/fit.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define MAX_HEARD 8 /* channels that hear one blow */
#define LATE_NS (2 * TIME_NS_PER_S)

/* What one channel measured of a blow. */
struct heard {
    uint32_t stream, channel;
    double range_m, sel_db;
};

struct blow {
    int64_t struck_ns;
    uint32_t n;
    struct heard heard[MAX_HEARD];
};

struct tally_fit {
    struct absorption water;
    double sound_speed_m_s;
    struct fit *fit;
    uint32_t n, next; /* open blows, a ring in the order in which they were first heard */
    struct blow open[BLOWS_KEPT];
    int64_t latest_ns; /* the last that was struck */
    double farthest_m;
    uint64_t n_paired;
    double energy[LEVEL_MAX_BANDS]; /* of the blows, each channel's hearing of one counting as 1 */
    bool grown;                     /* since the last fit */
    bool has_law;
    struct source_law law;
};

enum status tally_fit_create(const struct absorption *water, double sound_speed_m_s, struct tally_fit **out)
{
    struct tally_fit *fit = calloc(1, sizeof *fit);
    if (!fit)
        return STATUS_NO_MEMORY;
    fit->water = *water;
    fit->sound_speed_m_s = sound_speed_m_s;
    enum status status = fit_create(TALLY_FIT_POINTS, 0, &fit->fit);
    if (status != STATUS_OK) {
        tally_fit_destroy(fit);
        return status;
    }
    tally_fit_begin_job(fit);
    *out = fit;
    return STATUS_OK;
}

void tally_fit_destroy(struct tally_fit *fit)
{
    if (!fit)
        return;
    fit_destroy(fit->fit);
    free(fit);
}

void tally_fit_begin_job(struct tally_fit *fit)
{
    fit_reset(fit->fit);
    fit->n = fit->next = 0;
    fit->latest_ns = INT64_MIN;
    fit->farthest_m = 0;
    fit->n_paired = 0;
    memset(fit->energy, 0, sizeof fit->energy);
    fit->grown = fit->has_law = false;
}

/* A blow that was heard on several channels goes into the fit as one source level. */
static void close_blow(struct tally_fit *fit, struct blow *blow)
{
    for (uint32_t i = 0; i < blow->n && blow->n > 1; i++) {
        const struct fit_point point = {
            .source = fit->n_paired, .range_m = blow->heard[i].range_m, .level_db = blow->heard[i].sel_db};
        if (fit_push(fit->fit, &point) == STATUS_OK)
            fit->grown = true;
    }
    fit->n_paired += blow->n > 1;
    blow->n = 0;
}

static struct blow *find_blow(struct tally_fit *fit, int64_t struck_ns)
{
    struct blow *nearest = NULL;
    int64_t least_ns = BLOW_SAME_NS;
    for (uint32_t i = 0; i < fit->n; i++) {
        int64_t off_ns = llabs(struck_ns - fit->open[i].struck_ns);
        if (fit->open[i].n > 0 && off_ns < least_ns) {
            least_ns = off_ns;
            nearest = &fit->open[i];
        }
    }
    return nearest;
}

static struct blow *open_blow(struct tally_fit *fit, int64_t struck_ns)
{
    struct blow *blow = &fit->open[fit->next];
    if (fit->next < fit->n)
        close_blow(fit, blow);
    fit->next = (fit->next + 1) % BLOWS_KEPT;
    fit->n += fit->n < BLOWS_KEPT;
    *blow = (struct blow){.struck_ns = struck_ns};
    return blow;
}

static bool serves(const struct impulse *impulse, double range_m)
{
    return impulse->whose == IMPULSE_OURS && !impulse->relative && !impulse->refused && !impulse->clipped &&
           !impulse->overlapped && !impulse->weak && isfinite(impulse->sel_db) && isfinite(range_m) &&
           range_m > 0;
}

static void add_spectrum(struct tally_fit *fit, const struct impulse *impulse)
{
    double energy[LEVEL_MAX_BANDS] = {0}, sum = 0;
    for (uint32_t b = 0; b < impulse->n_bands && b < LEVEL_MAX_BANDS; b++) {
        energy[b] = isfinite(impulse->band_sel_db[b]) ? units_power_ratio(impulse->band_sel_db[b]) : 0;
        sum += energy[b];
    }
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS && sum > 0; b++)
        fit->energy[b] += energy[b] / sum;
}

void tally_fit_push(struct tally_fit *fit, uint32_t stream, double range_m, const struct impulse *impulse)
{
    if (!serves(impulse, range_m))
        return;
    int64_t struck_ns = blow_struck_ns(impulse->time_ns, range_m, fit->sound_speed_m_s);
    struct blow *blow = find_blow(fit, struck_ns);
    for (uint32_t i = 0; blow && i < blow->n; i++)
        if (blow->heard[i].stream == stream && blow->heard[i].channel == impulse->channel)
            return; /* its echo */
    if (blow && blow->n == MAX_HEARD)
        return;
    if (!blow)
        blow = open_blow(fit, struck_ns);
    blow->heard[blow->n++] = (struct heard){stream, impulse->channel, range_m, impulse->sel_db};
    fit->latest_ns = struck_ns > fit->latest_ns ? struck_ns : fit->latest_ns;
    fit->farthest_m = fmax(fit->farthest_m, range_m);
    add_spectrum(fit, impulse);
}

static void close_complete(struct tally_fit *fit)
{
    uint32_t oldest = fit->n < BLOWS_KEPT ? 0 : fit->next;
    int64_t wait_ns = LATE_NS - blow_struck_ns(0, fit->farthest_m, fit->sound_speed_m_s);
    for (uint32_t i = 0; i < fit->n; i++) {
        struct blow *blow = &fit->open[(oldest + i) % BLOWS_KEPT];
        if (fit->latest_ns - blow->struck_ns > wait_ns)
            close_blow(fit, blow);
    }
}

bool tally_fit_band(const double energy[LEVEL_MAX_BANDS], double from, double to, double *out_low_hz,
                    double *out_high_hz)
{
    double sum = 0, passed = 0;
    int low = -1, high = -1;
    for (int b = 0; b < LEVEL_MAX_BANDS; b++)
        sum += energy[b];
    for (int b = 0; b < LEVEL_MAX_BANDS && sum > 0 && high < 0; b++) {
        passed += energy[b];
        if (low < 0 && passed >= from * sum)
            low = b;
        if (passed >= to * sum)
            high = b;
    }
    if (low < 0 || high < 0)
        return false;
    *out_low_hz = 1000 * pow(10, (LEVEL_FIRST_BAND + low - 0.5) / 10);
    *out_high_hz = 1000 * pow(10, (LEVEL_FIRST_BAND + high + 0.5) / 10);
    return true;
}

/* Of the energy of the blows, dB/m. */
static double mean_absorption_db_m(const struct tally_fit *fit)
{
    double sum = 0, weighted = 0;
    for (int b = 0; b < LEVEL_MAX_BANDS; b++) {
        sum += fit->energy[b];
        weighted +=
            fit->energy[b] * absorption_db_m(&fit->water, 1000 * pow(10, (LEVEL_FIRST_BAND + b) / 10.0));
    }
    return sum > 0 ? weighted / sum : 0;
}

bool tally_fit_update(struct tally_fit *fit)
{
    struct fitted fitted;
    double low_hz, high_hz;
    close_complete(fit);
    if (!fit->grown)
        return false;
    fit->grown = false;
    if (!tally_fit_band(fit->energy, 0.05, 0.95, &low_hz, &high_hz) ||
        fit_set_absorption(fit->fit, mean_absorption_db_m(fit)) != STATUS_OK ||
        fit_get(fit->fit, &fitted) != STATUS_OK)
        return false;
    struct source_law law = source_law_of_fit(&fitted, METRIC_SEL_SINGLE, low_hz, high_hz);
    if (loss_check(&law.loss) != STATUS_OK)
        return false; /* levels that do not fall with range are no law */
    fit->law = law;
    fit->has_law = true;
    return true;
}

const struct source_law *tally_fit_get(const struct tally_fit *fit)
{
    return fit->has_law ? &fit->law : NULL;
}
