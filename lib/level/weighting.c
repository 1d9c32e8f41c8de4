/* Auditory weighting; see weighting.h for the documents. */
#include "level/weighting.h"
#include "base/units.h"
#include "level/level.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

#define N18 GUIDANCE_NMFS_2018
#define S19 GUIDANCE_SOUTHALL_2019
#define N24 GUIDANCE_NMFS_2024
#define LOW_CETACEANS "low-frequency cetaceans (baleen whales)"
#define HIGH_CETACEANS "high-frequency cetaceans (dolphins, beaked and sperm whales)"
#define VERY_HIGH_CETACEANS "very high-frequency cetaceans (porpoises, Kogia, some dolphins)"
#define PHOCIDS "phocid carnivores (true seals)"
#define OTHERS "otariids and other marine carnivores"

/* Guidance, group, animals, a, b, f1 Hz, f2 Hz, C dB, K dB, hearing range Hz, in air, mark. The parameters of
 * the three guidances come from copies that name table and page. */
static const struct weighting rows[] = {
    {N18, "LF", LOW_CETACEANS, 1.0, 2, 200, 19e3, 0.13, 179, 7, 35e3, false, MARK_SECONDARY},
    {N18, "MF", "mid-frequency cetaceans (dolphins, beaked and sperm whales)", 1.6, 2, 8.8e3, 110e3, 1.20,
     177, 150, 160e3, false, MARK_SECONDARY},
    {N18, "HF", "high-frequency cetaceans (porpoises, Kogia, some dolphins)", 1.8, 2, 12e3, 140e3, 1.36, 152,
     275, 160e3, false, MARK_SECONDARY},
    {N18, "PW", "phocid pinnipeds (true seals) in water", 1.0, 2, 1.9e3, 30e3, 0.75, 180, 50, 86e3, false,
     MARK_SECONDARY},
    {N18, "OW", "otariid pinnipeds (sea lions, fur seals) in water", 2.0, 2, 940, 25e3, 0.64, 198, 60, 39e3,
     false, MARK_SECONDARY},
    {S19, "LF", LOW_CETACEANS, 1.0, 2, 200, 19e3, 0.13, 179, NAN, NAN, false, MARK_SECONDARY},
    {S19, "HF", HIGH_CETACEANS, 1.6, 2, 8.8e3, 110e3, 1.20, 177, NAN, NAN, false, MARK_SECONDARY},
    {S19, "VHF", VERY_HIGH_CETACEANS, 1.8, 2, 12e3, 140e3, 1.36, 152, NAN, NAN, false, MARK_SECONDARY},
    {S19, "SI", "sirenians", 1.8, 2, 4.3e3, 25e3, 2.62, 183, NAN, NAN, false, MARK_SECONDARY},
    {S19, "PCW", PHOCIDS " in water", 1.0, 2, 1.9e3, 30e3, 0.75, 180, NAN, NAN, false, MARK_SECONDARY},
    {S19, "OCW", OTHERS " in water", 2.0, 2, 940, 25e3, 0.64, 198, NAN, NAN, false, MARK_SECONDARY},
    {S19, "PCA", PHOCIDS " in air", 2.0, 2, 750, 8.3e3, 1.50, 132, NAN, NAN, true, MARK_SECONDARY},
    {S19, "OCA", OTHERS " in air", 1.4, 2, 2e3, 20e3, 1.39, 156, NAN, NAN, true, MARK_SECONDARY},
    {N24, "LF", LOW_CETACEANS, 0.99, 5, 168, 26.6e3, 0.12, 177, 7, 36e3, false, MARK_SECONDARY},
    {N24, "HF", HIGH_CETACEANS, 1.55, 5, 1.73e3, 129e3, 0.32, 181, 150, 160e3, false, MARK_SECONDARY},
    {N24, "VHF", VERY_HIGH_CETACEANS, 2.23, 5, 5.93e3, 186e3, 0.91, 160, 200, 165e3, false, MARK_SECONDARY},
    {N24, "PW", "phocid pinnipeds (true seals) in water", 1.63, 5, 810, 68.3e3, 0.29, 175, 40, 90e3, false,
     MARK_SECONDARY},
    /* C is printed as 1.37; its footnote says 1.36, and max W = 0 gives 1.3643. */
    {N24, "OW", "otariid pinnipeds (sea lions, fur seals) in water", 1.58, 5, 2.53e3, 43.8e3, 1.37, 178, 60,
     68e3, false, MARK_SECONDARY},
    {N24, "PA", "phocid pinnipeds (true seals) in air", 2.05, 5, 740, 24.4e3, 0.83, 133, 42, 52e3, true,
     MARK_SECONDARY},
    {N24, "OA", "otariid pinnipeds (sea lions, fur seals) in air", 1.35, 5, 1.75e3, 32.5e3, 1.18, 156, 90,
     40e3, true, MARK_SECONDARY},
    /* max W = 0 gives C = 2.341: f1 and f2 are remembered as rounded. */
    {GUIDANCE_NAVY_2017, "TU", "sea turtles", 1.4, 2, 77, 440, 2.35, NAN, NAN, NAN, false,
     MARK_MEMORY_MEDIUM},
};

#define N_ROWS ((uint32_t)(sizeof rows / sizeof rows[0]))

const struct weighting *weighting_at(uint32_t n)
{
    return n < N_ROWS ? &rows[n] : NULL;
}

const struct weighting *weighting_find(enum guidance guidance, const char *group)
{
    for (uint32_t i = 0; i < N_ROWS; i++)
        if (rows[i].guidance == guidance && strcmp(rows[i].group, group) == 0)
            return &rows[i];
    return NULL;
}

const char *guidance_text(enum guidance guidance)
{
    static const char *const words[GUIDANCE_COUNT] = {"NMFS 2018", "Southall 2019", "NMFS 2024", "Navy 2017"};
    return (unsigned)guidance < GUIDANCE_COUNT ? words[guidance] : "";
}

void weighting_name(const struct weighting *weighting, char out[WEIGHTING_NAME_SIZE])
{
    snprintf(out, WEIGHTING_NAME_SIZE, "%s %s", guidance_text(weighting->guidance), weighting->group);
}

enum status weighting_from_name(const char *name, const struct weighting **out)
{
    for (uint32_t i = 0; i < N_ROWS; i++) {
        char known[WEIGHTING_NAME_SIZE];
        weighting_name(&rows[i], known);
        if (strcmp(known, name) == 0) {
            *out = &rows[i];
            return STATUS_OK;
        }
    }
    return STATUS_NOT_FOUND;
}

/* 10 lg F, in logarithms throughout so that 2a powers of small ratios keep their digits. */
static double shape_db(const struct weighting *w, double frequency_hz)
{
    double x1 = frequency_hz / w->f1_hz, x2 = frequency_hz / w->f2_hz;
    return units_power_db(x1 * x1) * w->a - units_power_db(1 + x1 * x1) * w->a -
           units_power_db(1 + x2 * x2) * w->b;
}

double weighting_db(const struct weighting *weighting, double frequency_hz)
{
    return weighting->c_db + shape_db(weighting, frequency_hz);
}

double weighting_exposure_function_db(const struct weighting *weighting, double frequency_hz)
{
    return weighting->k_db - shape_db(weighting, frequency_hz);
}

double weighting_threshold_db(const struct weighting *weighting)
{
    return weighting->k_db + weighting->c_db;
}

double weighting_band_db(const struct weighting *weighting, int n, enum band_weighting how)
{
    double centre_hz = 1000 * units_power_ratio(n);
    if (how == BAND_WEIGHTING_CENTRE)
        return weighting_db(weighting, centre_hz);
    /* Simpson's rule over 16 intervals: within 3e-5 dB for these smooth curves. */
    double low_hz = centre_hz * units_power_ratio(-0.5), high_hz = centre_hz * units_power_ratio(0.5);
    double step_hz = (high_hz - low_hz) / 16, sum = 0;
    for (int i = 0; i <= 16; i++) {
        double share = i == 0 || i == 16 ? 1 : i % 2 ? 4 : 2;
        sum += share * units_power_ratio(weighting_db(weighting, low_hz + i * step_hz));
    }
    return units_power_db(sum / 48);
}

void weighting_factors(const struct weighting *weighting, enum band_weighting how, uint32_t n_bands,
                       double *out)
{
    for (uint32_t i = 0; i < n_bands; i++)
        out[i] =
            weighting ? units_power_ratio(weighting_band_db(weighting, LEVEL_FIRST_BAND + (int)i, how)) : 1;
}

double weighting_sum_db(const struct weighting *weighting, enum band_weighting how, const double *band_db,
                        uint32_t n_bands)
{
    double sum = 0;
    for (uint32_t i = 0; i < n_bands; i++)
        if (isfinite(band_db[i])) {
            double w_db = weighting ? weighting_band_db(weighting, LEVEL_FIRST_BAND + (int)i, how) : 0;
            sum += units_power_ratio(band_db[i] + w_db);
        }
    return units_power_db(sum);
}

double weighting_effective_quiet_db(double sel_db)
{
    return sel_db - units_power_db(86400);
}
