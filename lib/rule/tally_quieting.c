/* The quieting measure as outcomes; see tally_quieting.h. */
#include "rule/tally_quieting.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

static void add_reduction(const struct insertion_loss *loss, const struct weighting *weighting,
                          struct source_outcome *out)
{
    char name[WEIGHTING_NAME_SIZE] = "none";
    if (weighting)
        weighting_name(weighting, name);
    for (uint32_t i = 0; i < out->n_reductions; i++)
        if (strcmp(out->reductions[i].weighting, name) == 0)
            return;
    if (out->n_reductions == FLOW_MAX_REDUCTIONS)
        return;
    double db = quieting_reduction_db(loss->without_db, out->insertion_band_db, loss->n_bands, weighting);
    if (!isfinite(db))
        return;
    struct source_reduction *reduction = &out->reductions[out->n_reductions++];
    snprintf(reduction->weighting, sizeof reduction->weighting, "%s", name);
    reduction->db = db;
    reduction->low_db =
        quieting_reduction_db(loss->without_db, out->insertion_band_low_db, loss->n_bands, weighting);
    reduction->high_db =
        quieting_reduction_db(loss->without_db, out->insertion_band_high_db, loss->n_bands, weighting);
}

void tally_fill_quieting(const struct quieting *quieting, const struct criteria *criteria,
                         struct source_outcome *out)
{
    struct insertion_loss loss;
    double falls_db;
    out->insertion_db = out->insertion_low_db = out->insertion_high_db = NAN;
    out->quieting_falls_db = quieting_falls(quieting, &falls_db) ? falls_db : NAN;
    out->n_insertion_bands = out->n_reductions = 0;
    out->n_quieting_off = (uint32_t)quieting->broadband[0][0].n;
    out->n_quieting_on = (uint32_t)quieting->broadband[1][0].n;
    if (quieting_get(quieting, &loss) != STATUS_OK)
        return;
    out->insertion_db = loss.broadband.db;
    out->insertion_low_db = loss.broadband.low_db;
    out->insertion_high_db = loss.broadband.high_db;
    out->n_insertion_bands = loss.n_bands;
    for (uint32_t i = 0; i < loss.n_bands; i++) {
        out->insertion_band_db[i] = loss.band[i].db;
        out->insertion_band_low_db[i] = loss.band[i].low_db;
        out->insertion_band_high_db[i] = loss.band[i].high_db;
    }
    for (uint32_t c = 0; c < criteria->n; c++)
        if (criteria->items[c].weighting)
            add_reduction(&loss, criteria->items[c].weighting, out);
}

bool tally_quieting_finding(const struct quieting *quieting, const char *job, struct finding_outcome *out)
{
    double fall_db;
    if (!quieting_falls(quieting, &fall_db))
        return false;
    *out =
        (struct finding_outcome){.code = TALLY_QUIETING_FALLS, .basis = BASIS_SOUND, .grade = "indicative"};
    snprintf(out->job, sizeof out->job, "%.*s", IMPULSE_JOB_SIZE - 1, job);
    snprintf(out->detail, sizeof out->detail,
             "the quieting measure takes off %.1f dB less than in its first impulses", fall_db);
    return true;
}
