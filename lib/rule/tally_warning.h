/* Early warning: where the levels of a soft start will be at its end, if they go on as they do. For
 * lib/rule/tally only.
 *
 * While the phase is soft start a straight line is laid through the levels of our impulses (level/trend.h)
 * and continued to the end of the soft start: the least time that the permit gives it, since what is fed of
 * the source says no energy. A limit is looked at at its range, a criterion of injury of one impulse
 * (unweighted: peak, SEL) at the zone's edge, where it would be met beyond the zone. Sums are not continued:
 * how many impulses are to come nobody has said; impulses_left tells of them.
 *
 * 'May pass': the line ends over the limit, and its 90 % interval there reaches at most
 * TALLY_WARNING_HALF_DB to each side, so that the first few impulses warn of nothing. 'Will pass': its lower
 * bound, less what moving levels to that range may be wrong by, is over. For people: never a finding. */
#ifndef RULE_TALLY_WARNING_H
#define RULE_TALLY_WARNING_H

#include "flow.h"
#include "level/criterion.h"
#include "level/trend.h"
#include "level/zone_check.h"
#include "rule/tally_limits.h"
#include <stdint.h>

#define TALLY_MAX_WARNINGS 32
#define TALLY_WARNING_HALF_DB 6.0 /* common practice, no source */

struct tally_warning {
    uint32_t criterion; /* its index */
    struct zone_limit limit;
    double move_spread_db; /* of the last impulse's move to the limit's range */
    struct trend trend;    /* x: seconds since the soft start began */
};

/* Plain data. */
struct tally_warnings {
    uint32_t n;
    struct tally_warning items[TALLY_MAX_WARNINGS];
    int64_t start_ns, last_ns; /* of the soft start, and of its last impulse; start -1: there is none now */
    double length_s;           /* the soft start's least; 0: not known, and nothing is warned of */
};

/* zone_edge_m, length_s: NAN or 0 where the permit gives none. */
void tally_warnings_reset(struct tally_warnings *warnings, const struct criteria *criteria,
                          double zone_edge_m, double length_s);
/* Any phase of the watch: a soft start begins, goes on or is over. */
void tally_warnings_phase(struct tally_warnings *warnings, enum phase phase, int64_t watch_ns);
/* The impulses of the job are pushed again. */
void tally_warnings_recount(struct tally_warnings *warnings);
void tally_warnings_push(struct tally_warnings *warnings, const struct impulse *impulse,
                         const struct tally_move *move);
/* The strongest warning, and in words; empty where there is none. */
enum zone_warning tally_warnings_text(const struct tally_warnings *warnings, const struct criteria *criteria,
                                      char out[FLOW_TEXT_SIZE]);

#endif
