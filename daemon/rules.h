/* What a run judges by: the permit, the call catalogue and the criteria that the settings name; and the watch
 * and the tally made of them. */
#ifndef RULES_H
#define RULES_H

#include "base/status.h"
#include "base/text.h"
#include "call/catalogue.h"
#include "level/criterion.h"
#include "rule/permit.h"
#include "rule/tally.h"
#include "rule/watch.h"
#include "settings/reader.h"
#include "settings/site.h"
#include <stdint.h>

struct rules {
    struct permit permit;
    struct catalogue catalogue;
    struct criteria criteria; /* none: nothing is summed */
    struct text permit_text;  /* the permit's whole file */
};

/* Loads all three and adds to problems everything that is wrong. STATUS_BAD_FORMAT when anything was added;
 * STATUS_NO_MEMORY. The caller owns *out. */
enum status rules_load(struct site *site, struct problems *problems, struct rules **out);
void rules_destroy(struct rules *rules);

/* What people must know of the permit before they rely on it, one line each: that it is a demonstration, that
 * its guideline has ended, how many values are unverified, and how many the site states. */
void rules_warn_of_permit(const struct permit *permit, struct text *out);
/* The same with those values one by one, and what the program does not watch. */
void rules_describe_permit(const struct permit *permit, struct text *out);

/* What the site leaves to the catalogue: at what evidence contacts are graded, and how it fades. */
void rules_take_grades(const struct certainty_table *table, struct site *site, struct problems *problems);
/* The settings say where the array's edge is; a zone that begins there without it is a problem. */
void rules_place_zones(const struct site *site, struct rules *rules, struct problems *problems);
/* What the watch is set up with; it borrows the rules. */
void rules_fill_watch(const struct rules *rules, const struct site *site, uint32_t n_streams,
                      const uint32_t *n_channels, struct watch_setup *out);
/* Both borrow the rules. n_channels[i]: of stream i + 1. *out_tally is NULL where there are no criteria. */
enum status rules_create_watch(const struct rules *rules, const struct site *site, uint32_t n_streams,
                               const uint32_t *n_channels, struct watch **out);
enum status rules_create_tally(const struct rules *rules, const struct site *site, uint32_t n_streams,
                               const uint32_t *n_channels, struct tally **out_tally);

#endif
