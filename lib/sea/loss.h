/* Propagation loss laws, and the range at which a level has fallen to a threshold (terms of ISO 18405:2017).
 *
 * With r in m, a the absorption in dB/m, lg the logarithm to base ten:
 *   power         N lg r + a r; N = 20 spherical, 10 cylindrical spreading
 *   transition    20 lg r up to r_t, 20 lg r_t + 10 lg(r / r_t) beyond, + a r
 *   damped        10 lg r + (d + a) r: the cone of sound of a struck pile, which the sea floor damps by d at
 *                 each bounce. Lippert, Ainslie and von Estorff, "Pile driving acoustics made simple: damped
 *                 cylindrical spreading model", J. Acoust. Soc. Am. 143, 310 (2018). Only differences
 *                 between two ranges have a meaning: a pile is a line source, and there is no level at 1 m
 *   energy flux   isovelocity water of depth H over a floor that reflects with |R| = exp(-eta theta) up to
 *                 the critical angle theta_c (Weston, "Intensity-range relations in oceanographic acoustics",
 *                 J. Sound Vib. 18, 271 (1971), integrated over grazing angles):
 *                 10 lg(r H / (2 theta_c)) - 10 lg(sqrt(pi) erf(x) / (2 x)) + a r,
 *                 x = theta_c sqrt(eta r / H); 20 lg r near the source, where that is less
 *
 * Every law grows with range, so a threshold has one range. */
#ifndef SEA_LOSS_H
#define SEA_LOSS_H

#include "base/status.h"
#include <stdbool.h>

/* Half the way round the Earth: no isopleth is looked for beyond. */
#define LOSS_FARTHEST_M 2e7

enum loss_law { LOSS_POWER, LOSS_TRANSITION, LOSS_DAMPED, LOSS_ENERGY_FLUX };

/* Plain data; copy freely. Fields of other laws are not read. */
struct loss {
    enum loss_law law;
    double n_db;            /* power: N, dB a decade of range, above 0 */
    double transition_m;    /* transition: r_t, above 0 */
    double damping_db_m;    /* damped: d, 0 or more (loss_damping_db_m) */
    double depth_m;         /* energy flux: H, above 0 */
    double critical_rad;    /* energy flux: theta_c, above 0 to pi / 2 */
    double eta_np_rad;      /* energy flux: eta, Np/rad, 0 or more */
    double absorption_db_m; /* all: a, 0 or more (sea/absorption.h) */
};

/* STATUS_OUT_OF_RANGE when a field that the law reads is not finite or outside what is said above. */
enum status loss_check(const struct loss *loss);

/* Whether the law holds from 1 m on, so that a source level can be worked out with it. */
bool loss_has_source(const struct loss *loss);

/* Propagation loss in dB re 1 m2 at a range above 0 m; for the damped law only differences have a meaning. */
double loss_db(const struct loss *loss, double range_m);

/* What a level falls by from one range to another, dB; negative when `to` is nearer. */
double loss_between_db(const struct loss *loss, double from_m, double to_m);

/* The range where a level of level_db at at_m has become threshold_db. Less than at_m when the threshold is
 * above the level. INFINITY beyond LOSS_FARTHEST_M, 0 nearer than 1 um. Closed form for the power law without
 * absorption, else bisection to 1e-9 of the range. STATUS_OUT_OF_RANGE as loss_check, and for an at_m or
 * levels that are not finite or an at_m not above 0; *out_m is untouched then. */
enum status loss_range_m(const struct loss *loss, double level_db, double at_m, double threshold_db,
                         double *out_m);

/* The same from a source level (dB re 1 uPa m, or re 1 uPa2 m2 s for energy). STATUS_OUT_OF_RANGE also for a
 * law without a source. */
enum status loss_source_range_m(const struct loss *loss, double source_db, double threshold_db,
                                double *out_m);

/* Damping of the cone by the floor, dB/m: -10 tan(grazing) / depth x lg |R|, the loss of one bounce over the
 * way between two bounces, 2 depth / tan(grazing). Depth in m; the grazing angle of the cone in rad, 0 to pi
 * / 2 (loss_cone_rad); |R| the floor's reflection coefficient for it, above 0 to 1. */
double loss_damping_db_m(double depth_m, double grazing_rad, double reflection);
/* The cone's grazing angle, asin(speed in water / speed of the bulge in the pile), rad: 17 degrees for steel
 * (Reinhall and Dahl, J. Acoust. Soc. Am. 130, 1209 (2011)). */
double loss_cone_rad(double water_m_s, double pile_m_s);

/* "N lg r", "spherical then cylindrical", "damped cylindrical", "energy flux"; never NULL. */
const char *loss_law_text(enum loss_law law);

#endif
