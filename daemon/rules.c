/* What a run judges by; see rules.h. */
#include "rules.h"
#include "files.h"
#include "listen/measuring.h"
#include "sea/sound_speed.h"
#include "settings/catalogue.h"
#include "settings/permit.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

void rules_place_zones(const struct site *site, struct rules *rules, struct problems *problems)
{
    double aperture_m = site->source.shape.aperture_m;
    for (uint32_t i = 0; i < rules->permit.n_zones; i++)
        if (rules->permit.zones[i].origin == ORIGIN_ARRAY_EDGE && !(aperture_m > 0))
            problems_add(problems, site->permit, 0, "",
                         "zone '%s' begins at the array's edge: the settings must say source.aperture_m",
                         rules->permit.zones[i].name);
    permit_set_edge(&rules->permit, aperture_m / 2);
}

static bool has_set(const struct criteria *criteria, const char *id)
{
    for (uint32_t i = 0; i < criteria->n_sets; i++)
        if (strcmp(criteria->sets[i].id, id) == 0)
            return true;
    return false;
}

/* A limit of the permit that nobody holds the source against would be passed without a word. */
static void check_limits(const struct site *site, const struct rules *rules, struct problems *problems)
{
    for (uint32_t i = 0; i < rules->permit.n_criteria; i++)
        if (!has_set(&rules->criteria, rules->permit.criteria[i]))
            problems_add(problems, site->permit, 0, "limits.criteria",
                         "names '%s': the settings' source.criteria must name that file too",
                         rules->permit.criteria[i]);
}

void rules_take_grades(const struct certainty_table *table, struct site *site, struct problems *problems)
{
    bool own = site->look_evidence > 0 || site->act_evidence > 0;
    if (!(site->look_evidence > 0))
        site->look_evidence = table->look_evidence;
    if (!(site->act_evidence > 0))
        site->act_evidence = table->act_evidence;
    if (!(site->evidence_decay_s > 0))
        site->evidence_decay_s = table->evidence_decay_s;
    if (own && site->act_evidence < site->look_evidence)
        problems_add(
            problems, site->calls, 0, "grades",
            "with the settings' contact: look_evidence is %g and act_evidence %g; allowed: at least as much",
            site->look_evidence, site->act_evidence);
}

enum status rules_load(struct site *site, struct problems *problems, struct rules **out)
{
    unsigned before = problems->count;
    struct rules *rules = calloc(1, sizeof *rules);
    if (!rules)
        return STATUS_NO_MEMORY;
    enum status permit = permit_load(site->permit, &site->permit_fills, problems, &rules->permit);
    enum status calls = catalogue_load(site->calls, problems, &site->effective, &rules->catalogue);
    enum status criteria =
        source_settings_criteria(&site->source, problems, &site->effective, &rules->criteria);
    if (permit == STATUS_OK && files_read(site->permit, &rules->permit_text) != STATUS_OK)
        problems_add(problems, site->permit, 0, "", "cannot be read as text");
    if (permit == STATUS_OK)
        rules_place_zones(site, rules, problems);
    if (permit == STATUS_OK && criteria == STATUS_OK)
        check_limits(site, rules, problems);
    enum status status = permit != STATUS_OK ? permit : calls != STATUS_OK ? calls : criteria;
    if (calls == STATUS_OK)
        rules_take_grades(&rules->catalogue.certainty, site, problems);
    if (problems->count != before)
        status = STATUS_BAD_FORMAT;
    if (status != STATUS_OK) {
        rules_destroy(rules);
        return status;
    }
    *out = rules;
    return STATUS_OK;
}

void rules_destroy(struct rules *rules)
{
    if (!rules)
        return;
    text_destroy(&rules->permit_text);
    free(rules);
}

static void describe_value(const struct permit_value *value, struct text *out)
{
    text_format(out, "  %s = %s (%s; %s%s%s)\n", value->key, value->text, permit_mark_text(value->mark),
                value->who, *value->who ? ": " : "", value->source);
}

static uint32_t count_marks(const struct permit *permit, bool (*has)(enum value_mark mark))
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < permit->n_values; i++)
        n += has(permit->values[i].mark);
    return n;
}

static bool is_filled(enum value_mark mark)
{
    return mark == MARK_FILLED;
}

void rules_warn_of_permit(const struct permit *permit, struct text *out)
{
    uint32_t n_unverified = count_marks(permit, mark_unverified), n_filled = count_marks(permit, is_filled);
    text_format(out, "permit %s: %s%s%s\n", permit->id, permit->document, *permit->revision ? "; " : "",
                permit->revision);
    if (permit->demonstration)
        text_append(out, "it is a demonstration: never for work\n");
    if (*permit->ended)
        text_format(out, "this guideline has ENDED: it holds no more since %s\n", permit->ended);
    text_format(out, "%u of %u values are unverified%s\n", n_unverified, permit->n_values,
                n_unverified ? ": check each against the document before you rely on it" : "");
    if (n_filled > 0)
        text_format(out, "%u are stated by the settings\n", n_filled);
}

static void describe_values(const struct permit *permit, bool (*has)(enum value_mark mark), const char *what,
                            struct text *out)
{
    if (count_marks(permit, has) > 0)
        text_format(out, "%s\n", what);
    for (uint32_t i = 0; i < permit->n_values; i++)
        if (has(permit->values[i].mark))
            describe_value(&permit->values[i], out);
}

void rules_describe_permit(const struct permit *permit, struct text *out)
{
    char asked[PERMIT_TEXT_SIZE];
    rules_warn_of_permit(permit, out);
    describe_values(permit, mark_unverified, "unverified:", out);
    describe_values(permit, is_filled, "stated by the settings:", out);
    for (uint32_t i = 0; permit_get_unwatched(permit, i, asked); i++)
        text_format(out, "%s  %s\n", i == 0 ? "asked of people, and not watched by the program:\n" : "",
                    asked);
}

/* In the middle of the water; the latitude hardly matters in shallow water. */
static double sound_speed_m_s(const struct site *site)
{
    const struct source_settings *source = &site->source;
    return sea_sound_speed_m_s(source->temperature_c, source->salinity, source->depth_m / 2, 45);
}

static void fill_ranges(const struct site *site, struct ranges_setup *out)
{
    *out = (struct ranges_setup){.moves = site->position.moves,
                                 .oldest_s = site->position.oldest_s,
                                 .source_offset_m = {site->position.offset_m[0], site->position.offset_m[1]},
                                 .has_source = site->source.place.known,
                                 .latitude_deg = site->source.place.latitude_deg,
                                 .longitude_deg = site->source.place.longitude_deg,
                                 .n_streams = site->n_streams};
    for (uint32_t i = 0; i < site->n_streams; i++) {
        const struct place_settings *place = &site->streams[i].place;
        struct ranges_stream *stream = &out->streams[i];
        stream->has_position = place->known;
        stream->latitude_deg = place->latitude_deg;
        stream->longitude_deg = place->longitude_deg;
        for (uint32_t c = 0; c < FLOW_MAX_CHANNELS; c++) {
            const struct channel_settings *channel = &site->streams[i].channels[c];
            stream->place_m[c][0] = channel->x_m;
            stream->place_m[c][1] = channel->y_m;
            stream->place_m[c][2] = channel->z_m;
        }
    }
}

void rules_fill_watch(const struct rules *rules, const struct site *site, uint32_t n_streams,
                      const uint32_t *n_channels, struct watch_setup *out)
{
    struct watch_setup setup = {.permit = &rules->permit,
                                .contact_gap_s = site->contact_gap_s,
                                .look_evidence = site->look_evidence,
                                .act_evidence = site->act_evidence,
                                .evidence_decay_s = site->evidence_decay_s,
                                .sighting_log_spread = site->sighting_log_spread,
                                .silence_s = site->silence_s};
    setup.depth_m = site->source.depth_known ? site->source.depth_m : 0;
    setup.sound_speed_m_s = sound_speed_m_s(site);
    for (uint32_t i = 0; i < n_streams; i++)
        for (uint32_t c = 0; c < FLOW_MAX_CHANNELS; c++)
            setup.range_m[i][c] = channel_range_m(&site->streams[i].channels[c]);
    for (uint32_t i = 0; i < n_streams; i++)
        for (uint32_t c = 0; c < n_channels[i]; c++)
            if (site->streams[i].channels[c].calibration.role != ROLE_MEASURE)
                setup.listening[i] |= 1U << c;
    fill_ranges(site, &setup.ranges);
    *out = setup;
}

enum status rules_create_watch(const struct rules *rules, const struct site *site, uint32_t n_streams,
                               const uint32_t *n_channels, struct watch **out)
{
    struct watch_setup setup;
    rules_fill_watch(rules, site, n_streams, n_channels, &setup);
    return watch_create(&setup, out);
}

/* The widest zone that has an edge. */
static double zone_edge_m(const struct permit *permit)
{
    double edge_m = NAN;
    for (uint32_t i = 0; i < permit->n_zones; i++)
        if (isfinite(permit->zones[i].radius_m) && !(edge_m > permit->zones[i].radius_m))
            edge_m = permit->zones[i].radius_m;
    return edge_m;
}

/* How near its law takes the source for a point: a pile from its own length in the water on, an array from
 * its extent on (common practice, no source). */
static double inner_m(const struct source_settings *source)
{
    if (source->shape.form == SOURCE_LINE)
        return fmax(source->depth_m, EXPOSURE_NEAREST_M);
    return source->shape.form == SOURCE_ARRAY ? fmax(source->shape.aperture_m, EXPOSURE_NEAREST_M)
                                              : EXPOSURE_NEAREST_M;
}

/* Of continuous sound the same channel counts as of impulses. */
static void choose_references(const struct site *site, const uint32_t *n_channels, struct tally_setup *setup)
{
    for (uint32_t i = 0; i < setup->n_streams; i++) {
        struct calibration calibration[FLOW_MAX_CHANNELS];
        for (uint32_t c = 0; c < FLOW_MAX_CHANNELS; c++)
            calibration[c] = site->streams[i].channels[c].calibration;
        setup->reference[i] = measuring_choose(n_channels[i], calibration, setup->range_m[i]).reference;
    }
}

enum status rules_create_tally(const struct rules *rules, const struct site *site, uint32_t n_streams,
                               const uint32_t *n_channels, struct tally **out_tally)
{
    *out_tally = NULL;
    if (rules->criteria.n == 0)
        return STATUS_OK;
    struct tally_setup *setup = calloc(1, sizeof *setup);
    if (!setup)
        return STATUS_NO_MEMORY;
    *setup = (struct tally_setup){.criteria = &rules->criteria,
                                  .sound = site->source.sound,
                                  .n_streams = n_streams,
                                  .shape = site->source.shape,
                                  .loss_n_db = site->source.loss_n_db,
                                  .loss_n_spread_db = site->source.loss_n_spread_db,
                                  .water = absorption_of(site->source.temperature_c, site->source.salinity,
                                                         site->source.depth_m / 2, 8.0),
                                  .sound_speed_m_s = sound_speed_m_s(site),
                                  .level_spread_db = site->source.level_spread_db,
                                  .scatter_db = site->source.scatter_db,
                                  .zone_edge_m = zone_edge_m(&rules->permit),
                                  .soft_start_s = 60 * rules->permit.soft_start.least_minutes,
                                  .n_others = site->source.n_others,
                                  .others = site->source.others,
                                  .inner_m = inner_m(&site->source)};
    for (uint32_t i = 0; i < n_streams; i++)
        for (uint32_t c = 0; c < FLOW_MAX_CHANNELS; c++) {
            const struct channel_settings *channel = &site->streams[i].channels[c];
            setup->role[i][c] = channel->calibration.role;
            bool follows = site->streams[i].place.known || site->position.moves == RANGES_ARRAY;
            setup->range_m[i][c] = follows ? (double)NAN : channel_range_m(channel);
        }
    choose_references(site, n_channels, setup);
    enum status status = tally_create(setup, out_tally);
    free(setup);
    return status;
}
