/* hushwatch fieldcheck: how far a hydrophone's stated sensitivity is from what a tone of known level shows.
 */
#include "base/time.h"
#include "channels.h"
#include "clock.h"
#include "files.h"
#include "input/input.h"
#include "ledger/ledger.h"
#include "level/field_check.h"
#include "record/marks.h"
#include "settings/site.h"
#include "verb/options.h"
#include "verb/verb.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define PIECE_FRAMES 4096

static const char help[] =
    "usage: hushwatch fieldcheck --config FILE --stream N --channel N --level DB --frequency HZ [--ledger "
    "FILE]\n"
    "                            RECORDING\n\n"
    "Listens to a recording of a calibrator's tone (a pistonphone) on one channel of the settings and says "
    "how loud\n"
    "it is with the stated sensitivity, how far that is from the level that the calibrator gives, and how "
    "far the\n"
    "difference has moved since the last check of the same hydrophone. At least 4 s of recording: the first "
    "second\n"
    "is passed over.\n\n"
    "  --level DB      what the calibrator gives at the hydrophone: SPL (rms) in dB re 1 uPa. A level in dB "
    "re 20 uPa\n"
    "                  is 26.02 dB more\n"
    "  --frequency HZ  of the tone\n"
    "  --ledger FILE   where the check is written, and where the last one is looked for; made when it is not "
    "there.\n"
    "                  Not while a watch writes it\n\n"
    "Exit code: 0 good, 1 no steady and clear tone, 2 wrong use or settings, 3 the system failed.\n";

struct check {
    const char *config, *ledger, *recording;
    unsigned long stream, channel;
    double level_db, frequency_hz;
    struct site site;
    double rate_hz;
    struct field_check field;
    struct field_check_result result;
    double last_difference_db; /* NAN where there was no check before */
};

static int wrong_use(const char *what, const char *value)
{
    return options_wrong_use("fieldcheck", what, value);
}

static bool read_number(const char *text, double low, double high, double *out)
{
    char *end;
    double value = strtod(text, &end);
    if (end == text || *end || !(value >= low) || !(value <= high))
        return false;
    *out = value;
    return true;
}

static bool is_taken(struct check *check, int option, const char *text)
{
    double number = 0;
    if (option == 'c')
        check->config = text;
    else if (option == 'L')
        check->ledger = text;
    else if (option == 's' && read_number(text, 1, SITE_MAX_STREAMS, &number))
        check->stream = (unsigned long)number;
    else if (option == 'n' && read_number(text, 1, FLOW_MAX_CHANNELS, &number))
        check->channel = (unsigned long)number;
    else
        return (option == 'd' && read_number(text, 0, 300, &check->level_db)) ||
               (option == 'f' && read_number(text, 1, 250000, &check->frequency_hz));
    return option == 'c' || option == 'L' || number == floor(number);
}

static const char *take_option(void *context, int option, const char *value)
{
    return is_taken(context, option, value) ? NULL : "no good value: ";
}

static int read_options(int argc, char **argv, struct check *check)
{
    static const struct option known[] = {{"config", required_argument, NULL, 'c'},
                                          {"stream", required_argument, NULL, 's'},
                                          {"channel", required_argument, NULL, 'n'},
                                          {"level", required_argument, NULL, 'd'},
                                          {"frequency", required_argument, NULL, 'f'},
                                          {"ledger", required_argument, NULL, 'L'},
                                          {"help", no_argument, NULL, 'h'},
                                          {NULL, 0, NULL, 0}};
    int rest, code = options_read(&(struct options_reading){"fieldcheck", help, known, take_option, check},
                                  argc, argv, &rest);
    if (code != VERB_GOOD)
        return code;
    if (rest + 1 != argc)
        return wrong_use("give one recording", "");
    check->recording = argv[rest];
    if (!check->config || !check->stream || !check->channel || isnan(check->level_db) ||
        isnan(check->frequency_hz))
        return wrong_use("--config, --stream, --channel, --level and --frequency are all needed", "");
    return VERB_GOOD;
}

/* The whole recording's one channel through the check. */
static enum status listen_to(struct check *check, struct problems *problems)
{
    const struct input_kind *kind = input_find("recording");
    struct stream_settings settings = check->site.streams[check->stream - 1];
    struct input_facts facts;
    void *input = NULL;
    snprintf(settings.input, sizeof settings.input, "recording");
    snprintf(settings.files[0], SITE_PATH_SIZE, "%s", check->recording);
    settings.n_files = 1;
    settings.rate_hz = 0;
    settings.real_pace = false;
    enum status status = kind->open(&settings, problems, &input, &facts);
    if (status != STATUS_OK)
        return status;
    if (check->channel > facts.n_channels) {
        problems_add(problems, check->recording, 0, "", "has %u channels, and channel %lu is asked for",
                     facts.n_channels, check->channel);
        kind->close(input);
        return STATUS_OUT_OF_RANGE;
    }
    const struct calibration *calibration = &settings.channels[check->channel - 1].calibration;
    const float scale = (float)calibration_pa_per_unit(calibration);
    float *samples = calloc((size_t)PIECE_FRAMES * facts.n_channels, sizeof *samples), pascals[PIECE_FRAMES];
    check->rate_hz = facts.rate_hz;
    status =
        samples ? field_check_reset(&check->field, facts.rate_hz, check->frequency_hz) : STATUS_NO_MEMORY;
    while (status == STATUS_OK || status == STATUS_TIMEOUT) {
        struct input_piece piece = {0};
        status = kind->read(input, samples, PIECE_FRAMES, &piece);
        for (uint32_t i = 0; status == STATUS_OK && i < piece.n_frames; i++)
            pascals[i] = samples[(size_t)i * facts.n_channels + check->channel - 1] * scale;
        if (status == STATUS_OK)
            field_check_push(&check->field, pascals, piece.n_frames);
    }
    free(samples);
    kind->close(input);
    return status == STATUS_END ? STATUS_OK : status;
}

static enum status keep_last(void *context, int n_columns, const char *const *columns)
{
    double *last = context;
    if (n_columns == 1 && columns[0])
        *last = strtod(columns[0], NULL);
    return STATUS_OK;
}

/* Of the same serial number, or without one of the same stream and channel. */
static enum status find_last(struct ledger *ledger, struct check *check)
{
    const char *serial = check->site.streams[check->stream - 1].channels[check->channel - 1].serial;
    char stream[24], channel[24];
    snprintf(stream, sizeof stream, "%lu", check->stream);
    snprintf(channel, sizeof channel, "%lu", check->channel);
    const char *const by_serial[] = {serial}, *const by_place[] = {stream, channel};
    if (*serial)
        return ledger_select(
            ledger,
            "SELECT difference_db FROM calibration WHERE what = 'field check' AND serial = ?1 "
            "ORDER BY seq DESC LIMIT 1",
            1, by_serial, keep_last, &check->last_difference_db);
    return ledger_select(
        ledger,
        "SELECT difference_db FROM calibration WHERE what = 'field check' AND serial IS NULL AND "
        "stream = CAST(?1 AS INTEGER) AND channel = CAST(?2 AS INTEGER) ORDER BY seq DESC LIMIT 1",
        2, by_place, keep_last, &check->last_difference_db);
}

static double difference_db(const struct check *check)
{
    return check->result.measured_db - check->level_db;
}

static enum status keep_zero(void *context, const struct entry *entry)
{
    return time_parse_utc(entry->utc, context);
}

/* A check is a run of its own, so that a watch that goes on later knows that nothing was heard between. */
static enum status append(struct ledger *ledger, const struct check *check, char problem[LEDGER_PROBLEM_SIZE])
{
    const struct stream_settings *stream = &check->site.streams[check->stream - 1];
    const struct calibration *calibration = &stream->channels[check->channel - 1].calibration;
    struct ledger_tail tail;
    int64_t zero_ns = time_round_us(clock_utc_ns()), now_ns = zero_ns, last_ns = zero_ns;
    enum status status = ledger_get_tail(ledger, &tail);
    if (status == STATUS_OK && tail.seq > 0)
        status = ledger_read(ledger, &(struct ledger_query){.limit = 1}, keep_zero, &zero_ns);
    if (status == STATUS_OK && tail.seq > 0)
        status = time_parse_utc(tail.utc, &last_ns);
    if (status != STATUS_OK)
        return status;
    now_ns = now_ns > last_ns ? now_ns : last_ns;
    char build[65], cpu[128], utc[TIME_UTC_SIZE];
    files_build_id(build);
    files_cpu_name(cpu, sizeof cpu);
    const struct run_mark mark = {last_ns - zero_ns, now_ns - zero_ns};
    const struct run_facts run = {.site = check->site.name,
                                  .settings = check->site.effective.data,
                                  .version = HUSHWATCH_VERSION,
                                  .build = build,
                                  .cpu = cpu,
                                  .command = "fieldcheck",
                                  .start_from = "clock",
                                  .input = check->recording};
    const struct field_check_facts facts = {
        .channel = channels_facts(stream, (uint32_t)check->channel, check->rate_hz),
        .tone_hz = check->frequency_hz,
        .tone_db = check->level_db,
        .measured_db = check->result.measured_db,
        .sensitivity_db = calibration_sensitivity_db(calibration, check->frequency_hz),
        .change_db = difference_db(check) - check->last_difference_db,
        .seconds = check->result.seconds,
        .input = check->recording};
    struct text first = {0}, second = {0};
    status = entry_body_run(tail.run + 1, &mark, zero_ns, &run, &first);
    if (status == STATUS_OK)
        status = entry_body_field_check(tail.run + 1, (uint32_t)check->stream, 1, &facts, &second);
    time_format_utc(now_ns, utc);
    struct ledger_line lines[] = {{utc, "run", first.data, 0}, {utc, "calibration", second.data, 0}};
    if (status == STATUS_OK)
        status = ledger_append(ledger, lines, 2, problem);
    text_destroy(&first);
    text_destroy(&second);
    return status;
}

static int record(struct check *check)
{
    char problem[LEDGER_PROBLEM_SIZE] = "";
    struct ledger *ledger = NULL;
    enum status status = ledger_open(check->ledger, LEDGER_WRITE, &ledger, problem);
    if (status == STATUS_OK)
        status = find_last(ledger, check);
    if (status == STATUS_OK)
        status = append(ledger, check, problem);
    if (status != STATUS_OK)
        fprintf(stderr, "hushwatch fieldcheck: %s%s\n", *problem ? problem : check->ledger,
                *problem ? "" : status_text(status));
    ledger_close(ledger);
    return status == STATUS_OK ? VERB_GOOD : status == STATUS_BUSY ? VERB_WRONG_USE : VERB_SYSTEM;
}

static void say_result(const struct check *check)
{
    const struct channel_settings *channel =
        &check->site.streams[check->stream - 1].channels[check->channel - 1];
    double stated_db = calibration_sensitivity_db(&channel->calibration, check->frequency_hz);
    printf("stream %lu, channel %lu, serial %s: %.0f s of tone at %.1f Hz\n", check->stream, check->channel,
           *channel->serial ? channel->serial : "not stated", check->result.seconds, check->frequency_hz);
    char rest[48] = "too little to tell";
    if (isfinite(check->result.rest_db))
        snprintf(rest, sizeof rest, "%.2f dB re 1 uPa", check->result.rest_db);
    printf("measured %.2f dB re 1 uPa, calibrator %.2f, difference %+.2f dB (all else: %s)\n",
           check->result.measured_db, check->level_db, difference_db(check), rest);
    printf("sensitivity stated %.2f dB re 1 V/uPa, by this check %.2f\n", stated_db,
           stated_db + difference_db(check));
    if (!isnan(check->last_difference_db))
        printf("last check: difference %+.2f dB, so it changed by %+.2f dB\n", check->last_difference_db,
               difference_db(check) - check->last_difference_db);
    else if (check->ledger)
        printf("no check of this hydrophone before\n");
    if (check->ledger)
        printf("%s\n", check->ledger);
}

/* With a sensitivity that varies with frequency, the tone's own is the one that counts. */
static int measure(struct check *check, struct problems *problems)
{
    const struct site *site = &check->site;
    if (check->stream > site->n_streams || (site->streams[check->stream - 1].n_channels > 0 &&
                                            check->channel > site->streams[check->stream - 1].n_channels))
        return wrong_use("the settings have no such stream or channel", "");
    const struct calibration *calibration =
        &site->streams[check->stream - 1].channels[check->channel - 1].calibration;
    if (!calibration->known)
        return wrong_use("the channel has no stated sensitivity and full scale to check", "");
    enum status status = listen_to(check, problems);
    if (problems->lines.data)
        fputs(problems->lines.data, stderr);
    if (status != STATUS_OK) {
        fprintf(stderr, "hushwatch fieldcheck: %s: %s\n", check->recording, status_text(status));
        return status == STATUS_NO_MEMORY || status == STATUS_SYSTEM ? VERB_SYSTEM : VERB_WRONG_USE;
    }
    if (field_check_get(&check->field, &check->result) != STATUS_OK) {
        fprintf(
            stderr,
            "hushwatch fieldcheck: no steady and clear tone at %.1f Hz: at least %u s within %.1f dB, and "
            "everything else %.0f dB below\n",
            check->frequency_hz, FIELD_CHECK_LEAST_SECONDS, FIELD_CHECK_STEADY_DB, FIELD_CHECK_CLEAR_DB);
        return VERB_FOUND_WRONG;
    }
    check->result.measured_db +=
        calibration->sensitivity_db - calibration_sensitivity_db(calibration, check->frequency_hz);
    int code = check->ledger ? record(check) : VERB_GOOD;
    if (code == VERB_GOOD)
        say_result(check);
    return code;
}

int verb_fieldcheck(int argc, char **argv)
{
    static struct check check; /* the site's settings are large */
    struct problems problems = {0};
    check.level_db = check.frequency_hz = check.last_difference_db = NAN;
    int code = read_options(argc, argv, &check);
    if (code != VERB_GOOD)
        return code < 0 ? VERB_GOOD : code;
    if (site_load(check.config, &problems, &check.site) == STATUS_OK)
        code = measure(&check, &problems);
    else {
        fputs(problems.lines.data ? problems.lines.data : "", stderr);
        code = VERB_WRONG_USE;
    }
    site_destroy(&check.site);
    problems_destroy(&problems);
    return code;
}
