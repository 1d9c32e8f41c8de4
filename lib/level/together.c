/* Our source together with others; see together.h. */
#include "level/together.h"
#include "base/time.h"
#include "base/units.h"
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define IMPULSE_S 0.1 /* T90 of another's sound */

/* How each band of another source falls to the ranges of a curve. */
struct falls {
    double db[FIELD_CURVE_N][LEVEL_MAX_BANDS];
    double spread_db[FIELD_CURVE_N][LEVEL_MAX_BANDS];
};

/* When another source sounds: on at first, then each change. */
#define KEPT_CHANGES 64u
struct changes {
    uint32_t n;                       /* ever: 1st, 3rd ... off; 2nd, 4th ... on */
    int64_t changed_ns[KEPT_CHANGES]; /* a ring */
};

enum { LOW, BEST, HIGH, BOUNDS };

struct together {
    struct together_setup setup;
    struct together_other others[TOGETHER_MAX_OTHERS];
    struct changes changes[TOGETHER_MAX_OTHERS];
    struct falls *falls;        /* [n_others] */
    struct field_curve *curves; /* [BOUNDS][n_others + 1], ours first */
};

static bool other_is_good(const struct together_other *other)
{
    return isfinite(other->ahead_m) && isfinite(other->starboard_m) && isfinite(other->level_db) &&
           other->at_m > 0 && isfinite(other->at_m) && other->spread_db >= 0 && isfinite(other->spread_db) &&
           (other->sound == SOUND_CONTINUOUS ||
            (other->sound == SOUND_IMPULSIVE && other->rate_per_s > 0 && isfinite(other->rate_per_s)));
}

enum status together_create(const struct together_setup *setup, struct together **out)
{
    if (setup->n_others < 1 || setup->n_others > TOGETHER_MAX_OTHERS ||
        !(setup->inner_m >= EXPOSURE_NEAREST_M && setup->inner_m < EXPOSURE_FARTHEST_M))
        return STATUS_BAD_ARGUMENT;
    for (uint32_t i = 0; i < setup->n_others; i++)
        if (!other_is_good(&setup->others[i]))
            return STATUS_BAD_ARGUMENT;
    struct together *together = calloc(1, sizeof *together);
    if (!together)
        return STATUS_NO_MEMORY;
    together->setup = *setup;
    memcpy(together->others, setup->others, setup->n_others * sizeof together->others[0]);
    together->setup.others = together->others;
    together->falls = calloc(setup->n_others, sizeof *together->falls);
    together->curves = calloc((size_t)BOUNDS * (setup->n_others + 1), sizeof *together->curves);
    if (!together->falls || !together->curves) {
        together_destroy(together);
        return STATUS_NO_MEMORY;
    }
    together_set_loss(together, &setup->loss);
    *out = together;
    return STATUS_OK;
}

void together_destroy(struct together *together)
{
    if (!together)
        return;
    free(together->falls);
    free(together->curves);
    free(together);
}

uint32_t together_switch(struct together *together, const char *name, bool on, int64_t at_ns)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < together->setup.n_others; i++) {
        struct changes *changes = &together->changes[i];
        if (strcmp(together->others[i].name, name) != 0)
            continue;
        n++;
        if (on != (changes->n % 2 == 0))
            changes->changed_ns[changes->n++ % KEPT_CHANGES] = at_ns;
    }
    return n;
}

/* How long it sounded between two times; before the first change that is kept it goes by that. */
static double seconds_on(const struct changes *changes, int64_t from_ns, int64_t to_ns)
{
    uint32_t first = changes->n > KEPT_CHANGES ? changes->n - KEPT_CHANGES : 0;
    int64_t on_ns = 0, end_ns = to_ns;
    for (uint32_t k = changes->n; k > first && end_ns > from_ns; k--) {
        int64_t at_ns = changes->changed_ns[(k - 1) % KEPT_CHANGES];
        int64_t start_ns = at_ns > from_ns ? at_ns : from_ns;
        if (start_ns < end_ns) {
            on_ns += k % 2 == 0 ? end_ns - start_ns : 0;
            end_ns = start_ns;
        }
    }
    if (end_ns > from_ns && first % 2 == 0)
        on_ns += end_ns - from_ns;
    return time_to_s(on_ns);
}

static void fall_of_band(const struct exposure_loss *loss, double frequency_hz, double from_m, double to_m,
                         double *out_db, double *out_spread_db)
{
    *out_db = loss->n_db * log10(to_m / from_m);
    *out_spread_db = loss->n_spread_db * fabs(log10(to_m / from_m));
    if (loss->between)
        loss->between(loss->context, frequency_hz, from_m, to_m, out_db, out_spread_db);
}

void together_set_loss(struct together *together, const struct exposure_loss *loss)
{
    together->setup.loss = *loss;
    for (uint32_t i = 0; i < together->setup.n_others; i++)
        for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++) {
            if (!isfinite(together->others[i].band_db[b]))
                continue;
            double centre_hz = 1000.0 * pow(10.0, (LEVEL_FIRST_BAND + (int)b) / 10.0);
            for (uint32_t k = 0; k < FIELD_CURVE_N; k++)
                fall_of_band(loss, centre_hz, together->others[i].at_m, field_curve_range_m(k),
                             &together->falls[i].db[k][b], &together->falls[i].spread_db[k][b]);
        }
}

/* What another's levels become for the criterion's metric, dB to add; -INFINITY where it is not added. */
static double metric_db(const struct together_other *other, const struct criterion *criterion, double seconds)
{
    bool impulsive = other->sound == SOUND_IMPULSIVE;
    if (!(seconds > 0))
        return -(double)INFINITY;
    if (criterion->metric == METRIC_SEL_CUMULATIVE)
        return units_power_db(impulsive ? other->rate_per_s * seconds : seconds);
    if (criterion->metric == METRIC_SEL_SINGLE)
        return impulsive ? 0 : -(double)INFINITY;
    if (!impulsive)
        return 0;
    double average_s = criterion->average == AVERAGE_1_S      ? 1.0
                       : criterion->average == AVERAGE_125_MS ? 0.125
                                                              : IMPULSE_S;
    return -units_power_db(fmin(average_s, 1.0 / other->rate_per_s));
}

/* A bound may not rise with range, though its spread grows towards the source. */
static void make_falling(struct field_curve *curve)
{
    for (uint32_t k = FIELD_CURVE_N - 1; k-- > 0;)
        curve->db[k] = fmax(curve->db[k], curve->db[k + 1]);
}

/* The curves of another source for a criterion. */
static void curve_other(const struct together *together, uint32_t i, const struct criterion *criterion,
                        double seconds, struct field_curve *const out[BOUNDS])
{
    const struct together_other *other = &together->others[i];
    double add_db = metric_db(other, criterion, seconds), weight[LEVEL_MAX_BANDS], energy[LEVEL_MAX_BANDS];
    weighting_factors(criterion->weighting, together->setup.how, LEVEL_MAX_BANDS, weight);
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
        energy[b] = isfinite(other->band_db[b]) ? weight[b] * units_power_ratio(other->band_db[b]) : 0;
    for (uint32_t k = 0; k < FIELD_CURVE_N; k++) {
        double sum = 0, spread = 0;
        for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
            if (energy[b] > 0) {
                double part = energy[b] * units_power_ratio(-together->falls[i].db[k][b]);
                sum += part;
                spread += part * together->falls[i].spread_db[k][b];
            }
        /* far away absorption leaves less than a number can hold: as good as nothing */
        double level_db = fmax(units_power_db(sum), -2000.0) + add_db;
        double shift_db = EXPOSURE_SPREADS * hypot(other->spread_db, sum > 0 ? spread / sum : 0);
        out[LOW]->db[k] = level_db - shift_db;
        out[BEST]->db[k] = level_db;
        out[HIGH]->db[k] = level_db + shift_db;
    }
}

/* Our own, as its exposure moves it; held from inner_m inwards. */
static enum status curve_ours(const struct together *together, struct exposure *exposure, uint32_t index,
                              int64_t now_ns, struct field_curve *const out[BOUNDS])
{
    struct exposure_level level;
    for (uint32_t k = 0; k < FIELD_CURVE_N; k++) {
        double range_m = fmax(field_curve_range_m(k), together->setup.inner_m);
        enum status status =
            exposure_get_at(exposure, index, fmin(range_m, EXPOSURE_FARTHEST_M), 0, now_ns, &level);
        if (status != STATUS_OK)
            return status;
        out[LOW]->db[k] = fmax(level.low_db, -2000.0);
        out[BEST]->db[k] = fmax(level.level_db, -2000.0);
        out[HIGH]->db[k] = fmax(level.high_db, -2000.0);
    }
    return STATUS_OK;
}

/* Sources of one bound, ours first. Those that are silent are left out; ours stays. Returns how many. */
static uint32_t place_sources(const struct together *together, int bound,
                              struct field_source out[TOGETHER_MAX_OTHERS + 1])
{
    const struct field_curve *curves = &together->curves[(uint32_t)bound * (together->setup.n_others + 1)];
    uint32_t n = 0;
    for (uint32_t i = 0; i <= together->setup.n_others; i++) {
        const struct together_other *other = i ? &together->others[i - 1] : NULL;
        if (other && !isfinite(curves[i].db[0]))
            continue;
        out[n++] = (struct field_source){.east_m = other ? other->starboard_m : 0,
                                         .north_m = other ? other->ahead_m : 0,
                                         .curve = &curves[i]};
    }
    return n;
}

/* The farthest point of the island that ours, the first, is in; 0 where ours reaches nothing. */
static double reach_of_island(const struct field_source *sources, uint32_t n, double value, double whole_m,
                              uint32_t *out_islands)
{
    struct field_source ours[TOGETHER_MAX_OTHERS + 1];
    uint32_t island[FIELD_MAX_SOURCES], n_ours = 0;
    struct field_zone zone = {.radius_m = 0};
    *out_islands = field_islands(sources, n, value, island);
    if (*out_islands == 0 || island[0] == n)
        return 0;
    if (*out_islands == 1)
        return whole_m;
    for (uint32_t i = 0; i < n; i++)
        if (island[i] == island[0])
            ours[n_ours++] = sources[i];
    (void)field_zone_get(ours, n_ours, 0, 0, value, &zone); /* the same sources were good before */
    return zone.radius_m;
}

static enum status reach_of_whole(const struct together *together, double value, struct together_reach *out)
{
    struct field_source sources[TOGETHER_MAX_OTHERS + 1];
    struct field_zone zone[BOUNDS], around;
    double east_m, north_m;
    for (int bound = HIGH; bound >= LOW; bound--) {
        uint32_t n = place_sources(together, bound, sources);
        enum status status = field_zone_get(sources, n, 0, 0, value, &zone[bound]);
        if (status != STATUS_OK)
            return status;
        if (bound == HIGH)
            continue;
        uint32_t islands;
        double ours_m = reach_of_island(sources, n, value, zone[bound].radius_m, &islands);
        if (bound == LOW) {
            out->ours_low_m = ours_m;
            continue;
        }
        out->ours_m = ours_m;
        out->islands = islands;
        field_middle(sources, n, &east_m, &north_m);
        status = field_zone_get(sources, n, east_m, north_m, value, &around);
        if (status != STATUS_OK)
            return status;
    }
    out->distance_m = zone[BEST].radius_m;
    out->bearing_deg = zone[BEST].bearing_deg;
    out->low_m = zone[LOW].radius_m;
    out->high_m = zone[HIGH].radius_m;
    out->middle_m = around.radius_m;
    out->middle_bearing_deg = around.bearing_deg;
    return STATUS_OK;
}

static double beyond(double distance_m)
{
    return distance_m > EXPOSURE_FARTHEST_M ? (double)INFINITY : distance_m;
}

enum status together_get(struct together *together, struct exposure *exposure, uint32_t index,
                         const struct criterion *criterion, int64_t now_ns, struct together_reach *out)
{
    struct exposure_state state;
    struct together_reach reach;
    uint32_t n = together->setup.n_others + 1;
    if ((criterion->metric != METRIC_SEL_CUMULATIVE && criterion->metric != METRIC_SEL_SINGLE &&
         criterion->metric != METRIC_SPL) ||
        criterion->flee_m_s > 0)
        return STATUS_NOT_FOUND;
    enum status status = exposure_get(exposure, index, now_ns, &state);
    if (status != STATUS_OK || state.first_ns < 0)
        return status == STATUS_OK ? STATUS_NOT_FOUND : status;
    int64_t until_ns = state.first_ns + TIME_NS_PER_S > now_ns ? state.first_ns + TIME_NS_PER_S : now_ns;
    for (uint32_t i = 0; i < n && status == STATUS_OK; i++) {
        struct field_curve *const curves[BOUNDS] = {&together->curves[i], &together->curves[n + i],
                                                    &together->curves[2 * n + i]};
        if (i == 0)
            status = curve_ours(together, exposure, index, now_ns, curves);
        else
            curve_other(together, i - 1, criterion,
                        seconds_on(&together->changes[i - 1], state.first_ns, until_ns), curves);
        for (int bound = LOW; bound < BOUNDS; bound++)
            make_falling(curves[bound]);
    }
    if (status == STATUS_OK)
        status = reach_of_whole(together, criterion->value, &reach);
    if (status != STATUS_OK)
        return status;
    reach.distance_m = beyond(reach.distance_m);
    reach.low_m = beyond(reach.low_m);
    reach.high_m = beyond(reach.high_m);
    reach.middle_m = beyond(reach.middle_m);
    reach.ours_m = beyond(reach.ours_m);
    reach.ours_low_m = beyond(reach.ours_low_m);
    *out = reach;
    return STATUS_OK;
}
