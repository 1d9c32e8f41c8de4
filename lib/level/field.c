/* Several sources: levels, grids and the zone around the whole; see the header. */
#include "level/field.h"
#include "base/units.h"
#include <math.h>
#include <stdbool.h>

#define NEAREST_M 1.0
#define BEARINGS 360u
#define MESH 400u
#define LINE_POINTS 64
#define GOLDEN 0.6180339887498949
#define DEGREE (M_PI / 180.0)

double field_curve_range_m(uint32_t i)
{
    return pow(10.0, (double)i / FIELD_CURVE_A_DECADE);
}

static bool curve_is_good(const struct field_curve *curve)
{
    if (curve->db[0] == -(double)INFINITY)
        return true;
    for (uint32_t i = 0; i < FIELD_CURVE_N; i++)
        if (!isfinite(curve->db[i]) || (i > 0 && curve->db[i] > curve->db[i - 1]))
            return false;
    return true;
}

static double curve_db(const struct field_curve *curve, double range_m)
{
    if (curve->db[0] == -(double)INFINITY)
        return -(double)INFINITY;
    double x = log10(range_m) * FIELD_CURVE_A_DECADE;
    uint32_t i = x < FIELD_CURVE_N - 2 ? (uint32_t)x : FIELD_CURVE_N - 2;
    return curve->db[i] + (x - i) * (curve->db[i + 1] - curve->db[i]);
}

static double source_db(const struct field_source *source, double range_m)
{
    if (source->curve)
        return curve_db(source->curve, range_m);
    return source->level_db - loss_between_db(&source->loss, source->at_m, range_m);
}

enum status field_sources_check(const struct field_source *sources, uint32_t n)
{
    if (n == 0 || n > FIELD_MAX_SOURCES)
        return STATUS_OUT_OF_RANGE;
    for (uint32_t i = 0; i < n; i++) {
        const struct field_source *source = &sources[i];
        if (!isfinite(source->east_m) || !isfinite(source->north_m))
            return STATUS_OUT_OF_RANGE;
        if (source->curve ? !curve_is_good(source->curve)
                          : isnan(source->level_db) || source->level_db == (double)INFINITY ||
                                !isfinite(source->at_m) || !(source->at_m > 0.0) ||
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
        sum += units_power_ratio(source_db(source, range));
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
    double extent_m;                   /* of the farthest source: beyond it the field only falls */
    double alone_m[FIELD_MAX_SOURCES]; /* where no source is so near, the threshold is not reached */
};

/* Farthest radius on a bearing where a source is near enough; -1 where none ever is. */
static double near_enough(const struct ray *ray, double bearing)
{
    double farthest = -1.0;
    for (uint32_t i = 0; i < ray->n; i++) {
        double east = ray->sources[i].east_m - ray->east_m, north = ray->sources[i].north_m - ray->north_m;
        double along = east * sin(bearing) + north * cos(bearing);
        double aside = east * cos(bearing) - north * sin(bearing);
        double chord = ray->alone_m[i] * ray->alone_m[i] - aside * aside;
        if (ray->alone_m[i] > 0.0 && chord >= 0.0)
            farthest = fmax(farthest, along + sqrt(chord));
    }
    return farthest;
}

/* n sources reach the threshold only where one of them is within 10 lg n of it. */
static void bound_sources(struct ray *ray)
{
    double threshold_db = ray->threshold_db - units_power_db(ray->n) - 1e-6;
    for (uint32_t i = 0; i < ray->n; i++) {
        double inside = NEAREST_M, outside = 2.0 * NEAREST_M;
        ray->alone_m[i] = 0.0;
        if (source_db(&ray->sources[i], inside) < threshold_db)
            continue;
        while (outside < LOSS_FARTHEST_M && source_db(&ray->sources[i], outside) >= threshold_db) {
            inside = outside;
            outside *= 2.0;
        }
        for (int k = 0; k < 20; k++) {
            double middle = 0.5 * (inside + outside);
            if (source_db(&ray->sources[i], middle) >= threshold_db)
                inside = middle;
            else
                outside = middle;
        }
        ray->alone_m[i] = outside;
    }
}

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

/* Farthest radius on a bearing that reaches the threshold; -1 where none does beyond `least` (less one step
 * of the mesh). */
static double reach(const struct ray *ray, double bearing, double least)
{
    double edge = ray->extent_m + NEAREST_M, start = near_enough(ray, bearing);
    if (start < least || start < 0.0 || (least > edge && above_db(ray, bearing, least) < 0.0))
        return -1.0;
    if (above_db(ray, bearing, edge) >= 0.0) {
        if (above_db(ray, bearing, LOSS_FARTHEST_M) >= 0.0)
            return INFINITY;
        return bisect(ray, bearing, edge, LOSS_FARTHEST_M);
    }
    uint32_t from = start < edge ? (uint32_t)(start / edge * MESH) + 1 : MESH;
    for (uint32_t i = from; i-- > 0 && edge * (i + 1) / MESH >= least;) {
        double radius = edge * i / MESH;
        if (above_db(ray, bearing, radius) >= 0.0)
            return bisect(ray, bearing, radius, edge * (i + 1) / MESH);
    }
    return -1.0;
}

/* The same towards a source at a distance, whose own zone may be too small for the mesh. */
static double reach_source(const struct ray *ray, double bearing, double distance)
{
    double radius = reach(ray, bearing, 0.0);
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
    double least = 0.9 * *radius; /* what is worse by so much is not between the neighbours */
    double at_a = reach(ray, a, least), at_b = reach(ray, b, least);
    for (int i = 0; i < 30; i++) {
        if (at_a > at_b) {
            high = b;
            b = a;
            at_b = at_a;
            a = high - GOLDEN * (high - low);
            at_a = reach(ray, a, least);
        } else {
            low = a;
            a = b;
            at_a = at_b;
            b = low + GOLDEN * (high - low);
            at_b = reach(ray, b, least);
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
    struct ray ray = {
        .sources = sources, .n = n, .east_m = east_m, .north_m = north_m, .threshold_db = threshold_db};
    for (uint32_t i = 0; i < n; i++)
        ray.extent_m = fmax(ray.extent_m, hypot(sources[i].east_m - east_m, sources[i].north_m - north_m));
    bound_sources(&ray);
    double best = -1.0, at = NAN;
    for (uint32_t i = 0; i < n + BEARINGS; i++) { /* the sources first: what they reach saves the others */
        double bearing, radius;
        if (i < n) {
            double east = sources[i].east_m - east_m, north = sources[i].north_m - north_m;
            bearing = atan2(east, north);
            radius = reach_source(&ray, bearing, hypot(east, north));
        } else {
            bearing = (i - n) * 2.0 * M_PI / BEARINGS;
            radius = reach(&ray, bearing, best);
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

/* Whether a straight line between two sources reaches the threshold all along. */
static bool joined(const struct field_source *sources, uint32_t n, uint32_t a, uint32_t b,
                   double threshold_db)
{
    double east = sources[b].east_m - sources[a].east_m, north = sources[b].north_m - sources[a].north_m;
    double length = hypot(east, north);
    for (int i = 0; i <= LINE_POINTS / 2 && length > NEAREST_M; i++) {
        double part = 0.5 * pow(0.5 * length / NEAREST_M, 2.0 * i / LINE_POINTS - 1.0);
        for (int end = 0; end < 2; end++) {
            double at = end ? 1.0 - part : part;
            if (field_level_db(sources, n, sources[a].east_m + at * east, sources[a].north_m + at * north) <
                threshold_db)
                return false;
        }
    }
    return true;
}

uint32_t field_islands(const struct field_source *sources, uint32_t n, double threshold_db,
                       uint32_t *out_island)
{
    uint32_t island[FIELD_MAX_SOURCES], count = 0;
    for (uint32_t i = 0; i < n; i++) {
        bool reaches = field_level_db(sources, n, sources[i].east_m, sources[i].north_m) >= threshold_db;
        island[i] = reaches ? i : n;
        count += reaches;
    }
    for (uint32_t a = 0; a < n; a++)
        for (uint32_t b = a + 1; b < n; b++) {
            uint32_t low = island[a] < island[b] ? island[a] : island[b];
            uint32_t high = island[a] < island[b] ? island[b] : island[a];
            if (high == n || low == high || !joined(sources, n, a, b, threshold_db))
                continue;
            for (uint32_t i = 0; i < n; i++)
                if (island[i] == high)
                    island[i] = low;
            count--;
        }
    for (uint32_t i = 0; out_island && i < n; i++)
        out_island[i] = island[i];
    return count;
}
