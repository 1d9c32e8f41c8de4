/* The field of several sources sounding together, and how far it passes a criterion around the whole.
 *
 * Levels of sources are summed as energies: sources do not keep step with each other. All levels are of one
 * metric and band (SPL, or SEL over the same time); a peak does not add this way. Distances are horizontal;
 * within 1 m of a source its level at 1 m holds. */
#ifndef LEVEL_FIELD_H
#define LEVEL_FIELD_H

#include "base/status.h"
#include "sea/loss.h"
#include <stdint.h>

#define FIELD_MAX_SOURCES 64
#define FIELD_CURVE_A_DECADE 12u
#define FIELD_CURVE_N (6u * FIELD_CURVE_A_DECADE + 1u)

/* A source's level against range where no one law gives it: a weighted sum over bands that fall differently.
 * db[i] at 10^(i / FIELD_CURVE_A_DECADE) m, 1 m to 1,000 km; linear in lg range between, and beyond as at the
 * end; never rising with range; all -INFINITY: silent. */
struct field_curve {
    double db[FIELD_CURVE_N];
};

struct field_source {
    double east_m, north_m; /* from any origin they share */
    double level_db;        /* measured or set, at at_m from the source; -INFINITY: silent */
    double at_m;            /* 1 for a source level; above 0 */
    struct loss loss;
    const struct field_curve *curve; /* borrowed; taken instead of level, at_m and loss; NULL: none */
};

struct field_grid {
    double west_m, south_m; /* the first point */
    double step_m;          /* above 0 */
    uint32_t n_east, n_north;
};

/* How far the field passes a threshold. */
struct field_zone {
    double east_m, north_m; /* what it is measured from */
    double radius_m;        /* farthest point that reaches the threshold; 0 where none does; INFINITY beyond
                               LOSS_FARTHEST_M */
    double bearing_deg;     /* of that point, from north by east; NAN where none */
};

/* STATUS_OUT_OF_RANGE: no source, more than FIELD_MAX_SOURCES, a place or level that is not finite (a level
 * may be -INFINITY), an at_m not above 0, a law that loss_check refuses or a curve that rises or is not
 * finite. */
enum status field_sources_check(const struct field_source *sources, uint32_t n);
/* The range of a curve's i-th level, m. */
double field_curve_range_m(uint32_t i);
/* Level at a place, dB; -INFINITY where all are silent. The sources passed field_sources_check. */
double field_level_db(const struct field_source *sources, uint32_t n, double east_m, double north_m);
/* Levels of a grid, row by row from the south, each from the west: out_db[n_north * n_east].
 * STATUS_OUT_OF_RANGE as field_sources_check and for a bad grid; out_db is untouched then. */
enum status field_grid_db(const struct field_source *sources, uint32_t n, const struct field_grid *grid,
                          double *out_db);
/* The middle of the sources' places: what a zone around the whole is measured from unless the permit says
 * otherwise. */
void field_middle(const struct field_source *sources, uint32_t n, double *out_east_m, double *out_north_m);
/* The zone of a threshold as measured from a place: along 360 bearings and those of the sources the farthest
 * crossing inwards (a mesh of 1/400 of the sources' extent among them, bisection outside), then the best
 * bearing made better by golden section. Radius within 1e-6 of itself outside all sources. */
enum status field_zone_get(const struct field_source *sources, uint32_t n, double east_m, double north_m,
                           double threshold_db, struct field_zone *out);

/* How many islands the zone has: sources that reach the threshold, alone or with the others, at 1 m, less
 * those that a straight line joins to another along which it is never missed (64 points, evenly in lg range
 * from its ends). Writes for each source the lowest number of a source of its island, or n where it reaches
 * nothing; out_island[n], may be NULL. The sources passed field_sources_check. */
uint32_t field_islands(const struct field_source *sources, uint32_t n, double threshold_db,
                       uint32_t *out_island);

#endif
