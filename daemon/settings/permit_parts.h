/* The parts of a permit file, each read by a file of its own; for the permit loader only. */
#ifndef SETTINGS_PERMIT_PARTS_H
#define SETTINGS_PERMIT_PARTS_H

#include "settings/permit_value.h"

/* permit_zones.c: sets of groups, zones, clearance times, unknown distance and species */
void permit_read_sets(struct permit_reader *reader, struct group_reader *root);
void permit_read_zones(struct permit_reader *reader, struct group_reader *root);
void permit_read_clearances(struct permit_reader *reader, struct group_reader *root);
void permit_read_unknown(struct permit_reader *reader, struct group_reader *root);

/* permit_times.c: pre-watch, soft start, breaks, what comes before and between */
void permit_read_times(struct permit_reader *reader, struct group_reader *root);

/* permit_conditions.c: when a start is allowed, outages, override, staff, limits, records, decisions */
void permit_read_conditions(struct permit_reader *reader, struct group_reader *root);

#endif
