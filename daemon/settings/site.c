/* The site's settings; see site.h. */
#include "settings/site.h"
#include "base/time.h"
#include "input/input.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define MAX_INPUT_KINDS 8

static const char *const role_words[] = {"listen", "measure", "both"};
static const char *const format_words[] = {"s16", "s24", "s32", "f32"};
static const char *const pace_words[] = {"real", "fast"};

/* A path from the settings is relative to the settings file's folder. */
static void resolve(const char *folder, char path[SITE_PATH_SIZE])
{
    if (*path == '\0' || *path == '/' || strcmp(path, "-") == 0)
        return;
    char whole[2 * SITE_PATH_SIZE];
    snprintf(whole, sizeof whole, "%s/%s", folder, path);
    snprintf(path, SITE_PATH_SIZE, "%.*s", SITE_PATH_SIZE - 1, whole);
}

static void read_path(struct group_reader *group, const char *folder, const char *key, bool required,
                      char path[SITE_PATH_SIZE])
{
    if (group_string(group, key, required, path, SITE_PATH_SIZE))
        resolve(folder, path);
}

#define REFERENCE_HZ 250.0 /* of pistonphones: common practice, no source */

/* Sensitivity as one value, or as points against frequency, whose value at REFERENCE_HZ then is the one for
 * what has no frequency. */
static bool read_sensitivity(struct group_reader *group, struct calibration *calibration)
{
    bool one =
        group_number(group, "sensitivity_db", READER_OPTIONAL, -260, -100, &calibration->sensitivity_db);
    unsigned n = group_numbers(group, "sensitivity_points_hz", READER_OPTIONAL, 0.1, 1e6,
                               calibration->point_hz, CALIBRATION_MAX_POINTS);
    unsigned levels = group_numbers(group, "sensitivity_points_db", READER_OPTIONAL, -260, -100,
                                    calibration->point_db, CALIBRATION_MAX_POINTS);
    if (n != levels) {
        group_problem(
            group, n > levels ? "sensitivity_points_hz" : "sensitivity_points_db",
            "has %u numbers and its counterpart %u; allowed: as many in sensitivity_points_hz as in "
            "sensitivity_points_db, at most %d",
            n > levels ? n : levels, n > levels ? levels : n, CALIBRATION_MAX_POINTS);
        return one;
    }
    for (unsigned i = 1; i < n; i++)
        if (!(calibration->point_hz[i] > calibration->point_hz[i - 1])) {
            group_problem(group, "sensitivity_points_hz", "has %g after %g; allowed: rising frequencies",
                          calibration->point_hz[i], calibration->point_hz[i - 1]);
            return one;
        }
    calibration->n_points = n;
    if (!one && n > 0)
        calibration->sensitivity_db = calibration_sensitivity_db(calibration, REFERENCE_HZ);
    return one || n > 0;
}

static void read_date(struct group_reader *group, const char *key, char date[SITE_DATE_SIZE])
{
    char given[32] = "", whole[64];
    int64_t unix_ns;
    if (!group_string(group, key, READER_OPTIONAL, given, sizeof given))
        return;
    snprintf(whole, sizeof whole, "%sT00:00:00Z", given);
    if (strlen(given) != SITE_DATE_SIZE - 1 || time_parse_utc(whole, &unix_ns) != STATUS_OK)
        group_problem(group, key, "is \"%s\"; allowed: a date like 2026-03-01", given);
    else
        memcpy(date, given, SITE_DATE_SIZE);
}

static void read_channel(struct group_reader *group, struct channel_settings *channel)
{
    struct calibration *calibration = &channel->calibration;
    unsigned role = calibration->role;
    group_word(group, "role", READER_OPTIONAL, role_words, 3, &role);
    calibration->role = (enum channel_role)role;
    bool sensitivity = read_sensitivity(group, calibration);
    group_number(group, "gain_db", READER_OPTIONAL, -60, 120, &calibration->gain_db);
    bool volts = group_number(group, "full_scale_v", READER_OPTIONAL, 1e-6, 1000, &calibration->full_scale_v);
    calibration->known = sensitivity && volts;
    if (sensitivity != volts && group->setting)
        group_problem(group, sensitivity ? "full_scale_v" : "sensitivity_db",
                      "is missing; a calibrated channel has both sensitivity_db and full_scale_v");
    group_number(group, "self_noise_db", READER_OPTIONAL, -60, 200, &calibration->self_noise_db);
    group_number(group, "expected_peak_db", READER_OPTIONAL, 100, 300, &calibration->expected_peak_db);
    group_string(group, "serial", READER_OPTIONAL, channel->serial, sizeof channel->serial);
    read_date(group, "certificate_date", channel->certificate_date);
    read_date(group, "due_date", channel->due_date);
    double place[3];
    unsigned n = group_numbers(group, "place_m", READER_OPTIONAL, -1e5, 1e5, place, 3);
    if (n == 3) {
        channel->x_m = place[0];
        channel->y_m = place[1];
        channel->z_m = place[2];
    } else if (n > 0)
        group_problem(group, "place_m", "has %u numbers; allowed: [ahead, starboard, down]", n);
    group_done(group);
}

static void read_channels(struct group_reader *group, struct stream_settings *stream)
{
    for (unsigned i = 0; i < FLOW_MAX_CHANNELS; i++)
        stream->channels[i] = (struct channel_settings){
            .calibration = {.role = ROLE_BOTH, .self_noise_db = NAN, .expected_peak_db = NAN},
            .x_m = NAN,
            .y_m = NAN,
            .z_m = NAN};
    unsigned n = group_count(group, "channels", READER_OPTIONAL);
    if (n > FLOW_MAX_CHANNELS) {
        group_problem(group, "channels", "lists %u; allowed: at most %d", n, FLOW_MAX_CHANNELS);
        return;
    }
    for (unsigned i = 0; i < n; i++) {
        struct group_reader item;
        group_at(group, "channels", i, &item);
        read_channel(&item, &stream->channels[i]);
    }
    if (n == 0)
        return;
    if (stream->n_channels != 0 && stream->n_channels != n)
        group_problem(group, "channels", "lists %u channels, and channel_count is %u", n, stream->n_channels);
    stream->n_channels = n;
}

static void read_files(struct group_reader *group, const char *folder, struct stream_settings *stream)
{
    char path[SITE_PATH_SIZE];
    while (group_text_at(group, "files", stream->n_files, path, sizeof path)) {
        if (stream->n_files == SITE_MAX_FILES) {
            group_problem(group, "files", "lists too many; allowed: at most %d", SITE_MAX_FILES);
            return;
        }
        resolve(folder, path);
        memcpy(stream->files[stream->n_files++], path, sizeof path);
    }
}

static const struct input_kind *read_kind(struct group_reader *group)
{
    const char *words[MAX_INPUT_KINDS];
    unsigned n = 0, chosen = 0;
    for (; n < MAX_INPUT_KINDS && input_kinds[n]; n++)
        words[n] = input_kinds[n]->name;
    group_word(group, "input", READER_REQUIRED, words, n, &chosen);
    return input_kinds[chosen];
}

/* What the chosen kind of input cannot do without. */
static void check_stream(struct group_reader *group, const struct input_kind *kind,
                         const struct stream_settings *stream)
{
    const struct input_needs *needs = &kind->needs;
    if (needs->device && *stream->device == '\0')
        group_problem(group, "device", "is missing; a %s input needs a name or a number", kind->name);
    if (needs->format && stream->rate_hz == 0)
        group_problem(group, "rate_hz", "is missing; a %s input needs it", kind->name);
    if (needs->format && stream->n_channels == 0)
        group_problem(group, "channel_count", "is missing; a %s input needs it, or a list of channels",
                      kind->name);
    if (needs->most_rate_hz > 0 && stream->rate_hz > needs->most_rate_hz)
        group_problem(group, "rate_hz", "is %g; allowed: up to %.0f for a %s (above it, use a pcm input)",
                      stream->rate_hz, needs->most_rate_hz, kind->name);
    if (needs->files && stream->n_files == 0)
        group_problem(group, "files", "is missing; a %s input needs at least one", kind->name);
    if (needs->path && *stream->path == '\0')
        group_problem(group, "path", "is missing; a %s input needs its file", kind->name);
}

static void read_stream(struct group_reader *group, const char *folder, struct stream_settings *stream)
{
    unsigned format = 0, pace = 0;
    double channels = 0;
    stream->latency_s = 0.3;
    group_string(group, "name", READER_OPTIONAL, stream->name, sizeof stream->name);
    const struct input_kind *kind = read_kind(group);
    group_number(group, "rate_hz", READER_OPTIONAL, 8000, 1e6, &stream->rate_hz);
    if (stream->rate_hz != floor(stream->rate_hz))
        group_problem(group, "rate_hz", "is %g; allowed: whole numbers", stream->rate_hz);
    group_number(group, "channel_count", READER_OPTIONAL, 1, FLOW_MAX_CHANNELS, &channels);
    group_string(group, "device", READER_OPTIONAL, stream->device, sizeof stream->device);
    group_number(group, "latency_s", READER_OPTIONAL, 0.2, 2, &stream->latency_s);
    group_word(group, "format", READER_OPTIONAL, format_words, 4, &format);
    read_path(group, folder, "path", READER_OPTIONAL, stream->path);
    group_word(group, "pace", READER_OPTIONAL, pace_words, 2, &pace);
    snprintf(stream->input, sizeof stream->input, "%s", kind->name);
    snprintf(stream->format, sizeof stream->format, "%s", format_words[format]);
    stream->n_channels = (uint32_t)channels;
    stream->real_pace = pace == 0;
    place_settings_read(group, &stream->place);
    read_files(group, folder, stream);
    read_channels(group, stream);
    check_stream(group, kind, stream);
    group_done(group);
}

static void read_streams(struct group_reader *root, struct site *site)
{
    unsigned n = group_count(root, "streams", READER_REQUIRED);
    if (n > SITE_MAX_STREAMS || n == 0) {
        group_problem(root, "streams", "lists %u; allowed: 1 to %d", n, SITE_MAX_STREAMS);
        return;
    }
    for (unsigned i = 0; i < n; i++) {
        struct group_reader item;
        group_at(root, "streams", i, &item);
        snprintf(site->streams[i].name, sizeof site->streams[i].name, "stream %u", i + 1);
        read_stream(&item, site->folder, &site->streams[i]);
    }
    site->n_streams = n;
}

static void read_pages(struct group_reader *root, struct site *site)
{
    struct group_reader pages;
    double port = 8470;
    group_child(root, "pages", READER_OPTIONAL, &pages);
    group_string(&pages, "address", READER_OPTIONAL, site->address, sizeof site->address);
    group_number(&pages, "port", READER_OPTIONAL, 0, 65535, &port);
    site->port = (uint32_t)port;
    read_path(&pages, site->folder, "accounts", READER_OPTIONAL, site->accounts);
    read_path(&pages, site->folder, "certificate", READER_OPTIONAL, site->certificate);
    read_path(&pages, site->folder, "key", READER_OPTIONAL, site->key);
    bool loopback = strcmp(site->address, "localhost") == 0 || strncmp(site->address, "127.", 4) == 0 ||
                    strcmp(site->address, "::1") == 0;
    if (!*site->certificate != !*site->key)
        group_problem(&pages, *site->key ? "certificate" : "key", "is missing; they go together");
    if (!loopback && (!*site->accounts || !*site->certificate))
        group_problem(&pages, "address",
                      "is \"%s\"; allowed without accounts, certificate and key: a loopback address "
                      "(127.0.0.1, ::1)",
                      site->address);
    while (site->n_hosts < SITE_MAX_HOSTS &&
           group_text_at(&pages, "hosts", site->n_hosts, site->hosts[site->n_hosts], NOTE_NAME_SIZE))
        site->n_hosts++;
    while (
        site->n_stations < SITE_MAX_STATIONS &&
        group_text_at(&pages, "stations", site->n_stations, site->stations[site->n_stations], NOTE_NAME_SIZE))
        site->n_stations++;
    if (site->n_stations == 0)
        snprintf(site->stations[site->n_stations++], NOTE_NAME_SIZE, "crew");
    group_done(&pages);
}

static void read_evidence(struct group_reader *root, struct site *site)
{
    struct group_reader contact;
    group_child(root, "contact", READER_OPTIONAL, &contact);
    group_number(&contact, "gap_s", READER_OPTIONAL, 1, 86400, &site->contact_gap_s);
    group_number(&contact, "look_evidence", READER_OPTIONAL, 0, 100, &site->look_evidence);
    group_number(&contact, "act_evidence", READER_OPTIONAL, 0, 100, &site->act_evidence);
    group_number(&contact, "evidence_decay_s", READER_OPTIONAL, 0, 86400, &site->evidence_decay_s);
    group_number(&contact, "sighting_log_spread", READER_OPTIONAL, 0.001, 2, &site->sighting_log_spread);
    if (site->act_evidence > 0 && site->act_evidence < site->look_evidence)
        group_problem(&contact, "act_evidence", "is %g; allowed: at least look_evidence, %g",
                      site->act_evidence, site->look_evidence);
    group_done(&contact);
}

static void read_sound(struct group_reader *root, struct site *site)
{
    struct group_reader group;
    struct sound_settings *sound = &site->sound;
    *sound = (struct sound_settings){.minutes = 30, .most_mib = 16384, .leave_mib = 256, .around_s = 5};
    group_child(root, "sound", READER_OPTIONAL, &group);
    read_path(&group, site->folder, "folder", READER_OPTIONAL, sound->folder);
    group_number(&group, "minutes", READER_OPTIONAL, 0, 1440, &sound->minutes);
    group_number(&group, "most_mib", READER_OPTIONAL, 1, 1e7, &sound->most_mib);
    group_number(&group, "leave_mib", READER_OPTIONAL, 1, 1e6, &sound->leave_mib);
    group_number(&group, "around_s", READER_OPTIONAL, 0, 20, &sound->around_s);
    group_done(&group);
}

/* Streams without a place of their own. */
static unsigned count_free(const struct site *site)
{
    unsigned n = 0;
    for (uint32_t i = 0; i < site->n_streams; i++)
        n += !site->streams[i].place.known;
    return n;
}

static void set_defaults(const char *path, struct site *site)
{
    *site = (struct site){
        .contact_gap_s = 300, .sighting_log_spread = 0.15, .silence_s = 120, .address = "127.0.0.1"};
    const char *slash = strrchr(path, '/');
    if (slash)
        snprintf(site->folder, sizeof site->folder, "%.*s", (int)(slash == path ? 1 : slash - path), path);
    else
        snprintf(site->folder, sizeof site->folder, ".");
}

static void read_site(struct reader *reader, struct site *out)
{
    struct group_reader root = reader_root(reader);
    group_string(&root, "name", READER_REQUIRED, out->name, sizeof out->name);
    read_path(&root, out->folder, "ledger", READER_REQUIRED, out->ledger);
    read_path(&root, out->folder, "permit", READER_REQUIRED, out->permit);
    read_path(&root, out->folder, "calls", READER_REQUIRED, out->calls);
    permit_read_fills(&root, &out->permit_fills);
    group_number(&root, "silence_s", READER_OPTIONAL, 1, 3600, &out->silence_s);
    read_pages(&root, out);
    read_evidence(&root, out);
    read_sound(&root, out);
    source_settings_read(&root, out->folder, &out->source);
    read_streams(&root, out);
    position_settings_read(&root, &out->source.place, count_free(out), &out->position);
    group_done(&root);
}

enum status site_load(const char *path, struct problems *problems, struct site *out)
{
    struct reader reader;
    unsigned before = problems->count;
    set_defaults(path, out);
    if (reader_open(&reader, path, problems, &out->effective) == STATUS_OK)
        read_site(&reader, out);
    reader_close(&reader);
    return problems->count == before ? STATUS_OK : STATUS_BAD_FORMAT;
}

enum status site_load_effective(const char *name, const char *text, size_t length, struct problems *problems,
                                struct site *out)
{
    struct reader reader;
    unsigned before = problems->count;
    set_defaults(name, out);
    if (reader_open_effective(&reader, name, text, length, problems, &out->effective) == STATUS_OK)
        read_site(&reader, out);
    reader_close(&reader);
    return problems->count == before ? STATUS_OK : STATUS_BAD_FORMAT;
}

double channel_range_m(const struct channel_settings *channel)
{
    return sqrt(channel->x_m * channel->x_m + channel->y_m * channel->y_m + channel->z_m * channel->z_m);
}

void site_destroy(struct site *site)
{
    if (site)
        text_destroy(&site->effective);
}
