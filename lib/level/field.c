/* Several sources: levels, grids and the zone around the whole; see the header. */
#include "level/field.h"
#include "base/units.h"
#include <math.h>

#define NEAREST_M 1.0
#define BEARINGS 360u
#define MESH 400u
#define GOLDEN 0.6180339887498949
#define DEGREE (M_PI / 180.0)

enum status field_sources_check(const struct field_source *sources, uint32_t n)
{
    if (n == 0 || n > FIELD_MAX_SOURCES)
        return STATUS_OUT_OF_RANGE;
    for (uint32_t i = 0; i < n; i++) {
        const struct field_source *source = &sources[i];
        if (!isfinite(source->east_m) || !isfinite(source->north_m) || isnan(source->level_db) ||
            source->level_db == (double)INFINITY || !isfinite(source->at_m) || !(source->at_m > 0.0) ||
            loss_check(&source->loss) != STATUS_OK)
            return STATUS_OUT_OF_RANGE;
    }
    return STATUS_OK;
}

double field_level_db(const struct field_source *sources, uint32_t n, double east_m, double north_m)
{
    double sum = 0.0;
    for (uint32_t i = 0; i < n; i++) {
        const struct field_source *source = &sources[i];
        double range = fmax(hypot(east_m - source->east_m, north_m - source->north_m), NEAREST_M);
        sum += units_power_ratio(source->level_db - loss_between_db(&source->loss, source->at_m, range));
    }
    return units_power_db(sum);
}

enum status field_grid_db(const struct field_source *sources, uint32_t n, const struct field_grid *grid,
                          double *out_db)
{
    if (field_sources_check(sources, n) != STATUS_OK || !isfinite(grid->west_m) || !isfinite(grid->south_m) ||
        !isfinite(grid->step_m) || !(grid->step_m > 0.0) || grid->n_east == 0 || grid->n_north == 0)
        return STATUS_OUT_OF_RANGE;
    for (uint32_t row = 0; row < grid->n_north; row++)
        for (uint32_t column = 0; column < grid->n_east; column++)
            out_db[(uint64_t)row * grid->n_east + column] = field_level_db(
                sources, n, grid->west_m + column * grid->step_m, grid->south_m + row * grid->step_m);
    return STATUS_OK;
}

void field_middle(const struct field_source *sources, uint32_t n, double *out_east_m, double *out_north_m)
{
    double east = 0.0, north = 0.0;
    for (uint32_t i = 0; i < n; i++) {
        east += sources[i].east_m / n;
        north += sources[i].north_m / n;
    }
    *out_east_m = east;
    *out_north_m = north;
}

struct ray {
    const struct field_source *sources;
    uint32_t n;
    double east_m, north_m, threshold_db;
    double extent_m; /* of the farthest source: beyond it the field only falls */
};

static double above_db(const struct ray *ray, double bearing, double radius)
{
    return field_level_db(ray->sources, ray->n, ray->east_m + radius * sin(bearing),
                          ray->north_m + radius * cos(bearing)) -
           ray->threshold_db;
}

/* Between a radius that reaches the threshold and a farther one that does not. */
static double bisect(const struct ray *ray, double bearing, double inside, double outside)
{
    for (int i = 0; i < 100 && outside - inside > 1e-9 * outside; i++) {
        double middle =
            inside > 1.0 && outside > 4.0 * inside ? sqrt(inside * outside) : 0.5 * (inside + outside);
        if (above_db(ray, bearing, middle) >= 0.0)
            inside = middle;
        else
            outside = middle;
    }
    return 0.5 * (inside + outside);
}

/* Farthest radius on a bearing that reaches the threshold; -1 where none does. */
static double reach(const struct ray *ray, double bearing)
{
    double edge = ray->extent_m + NEAREST_M;
    if (above_db(ray, bearing, edge) >= 0.0) {
        if (above_db(ray, bearing, LOSS_FARTHEST_M) >= 0.0)
            return INFINITY;
        return bisect(ray, bearing, edge, LOSS_FARTHEST_M);
    }
    for (uint32_t i = MESH; i-- > 0;) {
        double radius = edge * i / MESH;
        if (above_db(ray, bearing, radius) >= 0.0)
            return bisect(ray, bearing, radius, edge * (i + 1) / MESH);
    }
    return -1.0;
}

/* The same towards a source at a distance, whose own zone may be too small for the mesh. */
static double reach_source(const struct ray *ray, double bearing, double distance)
{
    double radius = reach(ray, bearing);
    if (radius >= distance || !(above_db(ray, bearing, distance) >= 0.0))
        return radius;
    double outside = distance + NEAREST_M; /* its level at 1 m holds up to there */
    while (above_db(ray, bearing, outside) >= 0.0 && outside < ray->extent_m + NEAREST_M)
        outside = distance + 2.0 * (outside - distance);
    return bisect(ray, bearing, distance, outside);
}

/* Golden section between the neighbours of the best bearing (Kiefer, Proc. Am. Math. Soc. 4, 502 (1953)). */
static void sharpen(const struct ray *ray, double *bearing, double *radius)
{
    double low = *bearing - DEGREE, high = *bearing + DEGREE;
    double a = high - GOLDEN * (high - low), b = low + GOLDEN * (high - low);
    double at_a = reach(ray, a), at_b = reach(ray, b);
    for (int i = 0; i < 30; i++) {
        if (at_a > at_b) {
            high = b;
            b = a;
            at_b = at_a;
            a = high - GOLDEN * (high - low);
            at_a = reach(ray, a);
        } else {
            low = a;
            a = b;
            at_a = at_b;
            b = low + GOLDEN * (high - low);
            at_b = reach(ray, b);
        }
    }
    double best = at_a > at_b ? a : b;
    if (fmax(at_a, at_b) > *radius) {
        *bearing = best;
        *radius = fmax(at_a, at_b);
    }
}

enum status field_zone_get(const struct field_source *sources, uint32_t n, double east_m, double north_m,
                           double threshold_db, struct field_zone *out)
{
    if (field_sources_check(sources, n) != STATUS_OK || !isfinite(east_m) || !isfinite(north_m) ||
        !isfinite(threshold_db))
        return STATUS_OUT_OF_RANGE;
    struct ray ray = {sources, n, east_m, north_m, threshold_db, 0.0};
    for (uint32_t i = 0; i < n; i++)
        ray.extent_m = fmax(ray.extent_m, hypot(sources[i].east_m - east_m, sources[i].north_m - north_m));
    double best = -1.0, at = NAN;
    for (uint32_t i = 0; i < BEARINGS + n; i++) {
        double bearing = i * 2.0 * M_PI / BEARINGS, radius;
        if (i < BEARINGS) {
            radius = reach(&ray, bearing);
        } else {
            double east = sources[i - BEARINGS].east_m - east_m,
                   north = sources[i - BEARINGS].north_m - north_m;
            bearing = atan2(east, north);
            radius = reach_source(&ray, bearing, hypot(east, north));
        }
        if (radius > best) {
            best = radius;
            at = bearing;
        }
    }
    if (best > 0.0 && isfinite(best))
        sharpen(&ray, &at, &best);
    double degrees = fmod(at / DEGREE + 720.0, 360.0);
    *out = (struct field_zone){east_m, north_m, fmax(best, 0.0), best >= 0.0 ? degrees : (double)NAN};
    return STATUS_OK;
}
