/* Auditory weighting: how much of a sound a group of animals hears, and at what weighted exposure its hearing
 * changes.
 *
 * With F = (f/f1)^(2a) / ([1 + (f/f1)^2]^a [1 + (f/f2)^2]^b):
 *   weighting function  W(f) = C + 10 lg F        (NMFS 2018, equation 1; Southall et al. 2019, equation 2)
 *   exposure function   E(f) = K - 10 lg F = K + C - W(f)
 *   weighted threshold  K + C, the exposure at which temporary threshold shift begins
 *
 * Documents:
 *   NMFS 2018      Technical guidance for assessing the effects of anthropogenic sound on marine mammal
 *                  hearing, version 2.0, NOAA Technical Memorandum NMFS-OPR-59, table 3 (ES2)
 *   Southall 2019  Southall et al., "Marine mammal noise exposure criteria: updated scientific
 *                  recommendations for residual hearing effects", Aquatic Mammals 45(2), table 5
 *   NMFS 2024      Update to the technical guidance, version 3.0, NOAA Technical Memorandum NMFS-OPR-71,
 *                  table 5 (ES2)
 *   Navy 2017      US Navy, Criteria and thresholds for acoustic and explosive effects, Phase III: sea
 *                  turtles only, from memory
 *
 * The same letters mean different animals in different guidances (HF of 2018 is VHF of 2019 and 2024), so a
 * weighted number is nothing without its guidance: `weighting_name` gives both. All of this is read only. */
#ifndef LEVEL_WEIGHTING_H
#define LEVEL_WEIGHTING_H

#include "base/mark.h"
#include "base/status.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define WEIGHTING_NAME_SIZE 32 /* "Southall 2019 VHF" */

enum guidance {
    GUIDANCE_NMFS_2018,
    GUIDANCE_SOUTHALL_2019,
    GUIDANCE_NMFS_2024,
    GUIDANCE_NAVY_2017,
    GUIDANCE_COUNT
};

/* One hearing group of one guidance. */
struct weighting {
    enum guidance guidance;
    const char *group;   /* the guidance's letters: "LF", "VHF" ... */
    const char *animals; /* in words */
    double a, b, f1_hz, f2_hz;
    double c_db;            /* as printed */
    double k_db;            /* NAN where the guidance gives none */
    double low_hz, high_hz; /* generalised hearing range; NAN where not tabulated */
    bool in_air;            /* levels are re 20 uPa: no hydrophone measures them */
    enum value_mark mark;
};

/* How a decidecade's energy is weighted. */
enum band_weighting {
    BAND_WEIGHTING_CENTRE, /* by W at the exact centre: the sum that guidances and reports print */
    BAND_WEIGHTING_ACROSS /* by the mean of 10^(W/10) over the band, as if its spectrum were flat: 0.3 dB more
                             on a steep flank, up to 0.6 dB above f2 */
};

/* The n-th of all rows, NULL after the last. */
const struct weighting *weighting_at(uint32_t n);
/* NULL when the guidance has no such group. */
const struct weighting *weighting_find(enum guidance guidance, const char *group);
/* Reads "NMFS 2024 VHF". STATUS_NOT_FOUND when there is no such guidance or it has no such group. */
enum status weighting_from_name(const char *name, const struct weighting **out);
/* Writes "NMFS 2024 VHF". */
void weighting_name(const struct weighting *weighting, char out[WEIGHTING_NAME_SIZE]);
/* "NMFS 2018", "Southall 2019", "NMFS 2024", "Navy 2017"; never NULL. */
const char *guidance_text(enum guidance guidance);

/* W in dB at a frequency above 0. With C as printed it can pass 0 by up to 0.01 dB. */
double weighting_db(const struct weighting *weighting, double frequency_hz);
/* E in dB re 1 uPa2 s (re (20 uPa)2 s in air); NAN where the guidance gives no K. */
double weighting_exposure_function_db(const struct weighting *weighting, double frequency_hz);
/* K + C. */
double weighting_threshold_db(const struct weighting *weighting);

/* Weight of decidecade n (1000 x 10^(n/10) Hz) in dB. */
double weighting_band_db(const struct weighting *weighting, int n, enum band_weighting how);
/* Factors of energy, 10^(weight/10), of n_bands decidecades from LEVEL_FIRST_BAND up; NULL weighs nothing (1
 * everywhere). */
void weighting_factors(const struct weighting *weighting, enum band_weighting how, uint32_t n_bands,
                       double *out);
/* Weighted SEL or SPL of decidecade levels from LEVEL_FIRST_BAND up: 10 lg sum(10^((L_n + W_n) / 10)). Bands
 * that are NAN or -INFINITY have no energy. -INFINITY when none has. */
double weighting_sum_db(const struct weighting *weighting, enum band_weighting how, const double *band_db,
                        uint32_t n_bands);

/* Effective quiet: the weighted SPL that reaches a weighted SEL in 24 h (Martin, Lucke and Barclay, JASA 147,
 * 2159, 2020): SEL - 10 lg 86400. */
double weighting_effective_quiet_db(double sel_db);

#endif
