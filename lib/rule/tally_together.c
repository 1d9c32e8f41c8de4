/* How far a criterion reaches with the other sources; see tally_together.h. */
#include "rule/tally_together.h"
#include "rule/tally_fill.h"
#include "rule/tally_limits.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

enum status tally_together_create(const struct tally_setup *setup, const struct exposure_setup *exposure,
                                  struct together **out)
{
    const struct together_setup together = {.n_others = setup->n_others,
                                            .others = setup->others,
                                            .loss = exposure->loss,
                                            .how = exposure->how,
                                            .inner_m = setup->inner_m};
    return setup->n_others > 0 ? together_create(&together, out) : STATUS_OK;
}

bool tally_fill_together(struct together *together, struct exposure *exposure,
                         const struct criterion *criterion, uint32_t index, int64_t watch_ns,
                         struct exposure_outcome *out, struct together_reach *out_reach)
{
    struct together_reach reach;
    out->together_m = out->together_low_m = out->together_high_m = NAN;
    out->together_middle_m = out->together_bearing_deg = NAN;
    out->together[0] = '\0';
    out->islands = 0;
    if (!together || together_get(together, exposure, index, criterion, watch_ns, &reach) != STATUS_OK)
        return false;
    /* Held constant near our source, the field can fall short of what ours alone reaches there. */
    out->together_m = fmax(reach.distance_m, out->distance_m);
    out->together_low_m = fmax(reach.low_m, out->distance_low_m);
    out->together_high_m = fmax(reach.high_m, out->distance_high_m);
    tally_distance_text(out->together_m, out->together_low_m, out->together_high_m, out->together);
    out->together_middle_m = reach.middle_m;
    out->together_bearing_deg = reach.middle_bearing_deg;
    out->islands = reach.islands;
    *out_reach = reach;
    return true;
}

bool tally_together_finding(const struct criterion *criterion, const struct together_reach *reach,
                            const struct tally_setup *setup, const char *job, enum zone_grade said,
                            struct finding_outcome *out)
{
    /* As from a channel that only listens: never firm. */
    const struct zone_distance distance = {.zone_m = setup->zone_edge_m,
                                           .distance_m = reach->ours_m,
                                           .low_m = reach->ours_low_m,
                                           .role = ROLE_LISTEN,
                                           .range_m = NAN};
    char met[NOTE_NAME_SIZE], least[NOTE_NAME_SIZE];
    if (!tally_zone_finding(criterion, &distance, job, said, out))
        return false;
    tally_distance_text(reach->ours_m, NAN, NAN, met);
    tally_distance_text(reach->ours_low_m, NAN, NAN, least);
    snprintf(out->code, sizeof out->code, "%s", TALLY_ZONE_TOO_SMALL_TOGETHER);
    snprintf(
        out->detail, sizeof out->detail,
        "with %u other source%s, of set levels, the criterion is met at %s (90 %%: at least %s), beyond the "
        "zone of %.0f m",
        setup->n_others, setup->n_others == 1 ? "" : "s", met, least, setup->zone_edge_m);
    return true;
}

bool tally_is_together_finding(const struct criterion *criterion, const struct finding_outcome *finding)
{
    struct finding_outcome alone = *finding;
    snprintf(alone.code, sizeof alone.code, "%s", TALLY_ZONE_TOO_SMALL);
    return strcmp(finding->code, TALLY_ZONE_TOO_SMALL_TOGETHER) == 0 &&
           tally_is_zone_finding(criterion, &alone);
}
