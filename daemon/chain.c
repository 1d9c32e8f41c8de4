/* The whole chain; see chain.h. */
#include "chain.h"
#include "base/time.h"
#include "channels.h"
#include "clock.h"
#include "files.h"
#include "http/server.h"
#include "ledger/ledger.h"
#include "restore.h"
#include "rules.h"
#include "sound/keeping.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define STOP_LIMIT_S 0.6 /* for the disk to take what is left */

struct chain {
    struct chain_setup setup;
    struct rules *rules;
    struct tally *tally; /* NULL where the settings name no criteria */
    struct text inputs;
    uint32_t n_streams;
    struct stream *streams[SITE_MAX_STREAMS];
    struct ledger *ledger;
    struct watch *watch;
    struct restored restored;
    uint32_t run;
    int64_t zero_unix_ns;
    struct run_mark mark;
    const char *start_from;
    struct outbox *outbox;
    struct recorder *recorder;
    struct merge *merge;
    struct watcher *watcher;
    struct board *board;
    struct http *http;
    struct sound_keeping *sound; /* NULL where none is kept */
    struct position_feed *feed;  /* NULL where the settings name none */
    struct timed_note *notes;    /* of all timetables, in watch time */
    unsigned n_notes;
};

void chain_check(struct site *site, struct problems *problems, struct text *remarks)
{
    struct rules *rules = NULL;
    if (*site->permit && *site->calls && rules_load(site, problems, &rules) == STATUS_OK) {
        rules_describe_permit(&rules->permit, remarks);
        rules_destroy(rules);
    }
    for (uint32_t i = 0; i < site->n_streams; i++) {
        const struct input_kind *kind = input_find(site->streams[i].input);
        struct input_facts facts;
        void *input = NULL;
        if (!kind || !kind->is_file)
            continue;
        if (kind->open(&site->streams[i], problems, &input, &facts) == STATUS_OK)
            kind->close(input);
    }
}

static void take_column(void *context, uint32_t stream, const struct column *column)
{
    const struct chain *chain = context;
    if (chain->board)
        board_push_column(chain->board, stream, column);
}

static void take_sound(void *context, uint32_t stream, int64_t start_ns, const float *samples,
                       uint32_t n_frames)
{
    const struct chain *chain = context;
    if (chain->sound)
        keeping_push(chain->sound, stream, start_ns, samples, n_frames);
}

static enum status open_streams(struct chain *chain, struct problems *problems)
{
    struct site *site = chain->setup.site;
    enum status first = STATUS_OK;
    for (uint32_t i = 0; i < site->n_streams; i++) {
        struct stream_setup setup = {.number = i + 1,
                                     .settings = &site->streams[i],
                                     .catalogue = &chain->rules->catalogue,
                                     .goes_on = !chain->setup.scan && site->streams[i].real_pace};
        if (!chain->setup.scan)
            setup.columns = (struct stream_columns){take_column, chain};
        if (!chain->setup.scan)
            setup.sound = (struct stream_sound){take_sound, chain};
        enum status status = stream_open(&setup, problems, &chain->streams[i]);
        chain->n_streams = i + 1;
        if (status != STATUS_OK && first == STATUS_OK)
            first = status;
        if (status == STATUS_OK)
            text_format(&chain->inputs, "%s: %s, %.0f Hz, %u channels\n", site->streams[i].name,
                        site->streams[i].input, stream_get_facts(chain->streams[i])->rate_hz,
                        stream_get_facts(chain->streams[i])->n_channels);
    }
    return first;
}

/* The ledger's sentences name the file where it matters; the others begin with it here. */
static void say_ledger_problem(struct chain *chain, struct problems *problems, const char *problem)
{
    const char *path = chain->setup.site->ledger;
    size_t length = strlen(path);
    bool named = strncmp(problem, path, length) == 0 && problem[length] == ':';
    problems_add(problems, path, 0, "", "%s", named ? problem + length + 2 : problem);
}

static enum status open_ledger(struct chain *chain, struct problems *problems)
{
    char problem[LEDGER_PROBLEM_SIZE] = "";
    const struct site *site = chain->setup.site;
    enum status status =
        ledger_open(site->ledger, chain->setup.scan ? LEDGER_CREATE : LEDGER_WRITE, &chain->ledger, problem);
    if (status != STATUS_OK) {
        chain->ledger = NULL;
        say_ledger_problem(chain, problems, problem);
        return status;
    }
    uint32_t n_channels[SITE_MAX_STREAMS];
    for (uint32_t i = 0; i < chain->n_streams; i++)
        n_channels[i] = stream_get_facts(chain->streams[i])->n_channels;
    status = rules_create_watch(chain->rules, site, chain->n_streams, n_channels, &chain->watch);
    if (status == STATUS_OK)
        status = rules_create_tally(chain->rules, site, chain->n_streams, n_channels, &chain->tally);
    if (status == STATUS_OK)
        status = restore_watch(chain->ledger, chain->watch, chain->tally, &chain->restored, problem);
    if (status != STATUS_OK && *problem)
        say_ledger_problem(chain, problems, problem);
    return status;
}

/* When this run begins: a ledger's first run at watch time 0, a later one after the outage by UTC, never
 * backwards. */
static void date_run(struct chain *chain)
{
    const struct input_facts *facts = stream_get_facts(chain->streams[0]);
    int64_t now_unix_ns = time_round_us(clock_utc_ns());
    chain->start_from = "clock";
    if (chain->setup.scan && chain->setup.has_start) {
        now_unix_ns = chain->setup.start_unix_ns;
        chain->start_from = "option";
    } else if (chain->setup.scan && facts->has_start_utc) {
        now_unix_ns = time_round_us(facts->start_unix_ns);
        chain->start_from = facts->start_source;
    }
    chain->run = chain->restored.last_run + 1;
    chain->zero_unix_ns = chain->restored.last_run ? chain->restored.zero_unix_ns : now_unix_ns;
    watch_set_clock(chain->watch, chain->zero_unix_ns);
    int64_t now_ns = now_unix_ns - chain->zero_unix_ns;
    int64_t last_ns = chain->restored.last_ns;
    chain->mark.outage_start_ns = last_ns;
    chain->mark.outage_end_ns = now_ns > last_ns ? now_ns : last_ns;
}

static int by_time(const void *a, const void *b)
{
    const struct timed_note *x = a, *y = b;
    return (x->at_s > y->at_s) - (x->at_s < y->at_s);
}

/* A note of a timetable, unless the ledger has it from an earlier run. */
static enum status add_note(struct chain *chain, const struct timed_note *timed)
{
    if (chain->restored.last_run && time_from_s(timed->at_s) <= chain->mark.outage_end_ns)
        return STATUS_OK;
    struct timed_note *larger = realloc(chain->notes, (chain->n_notes + 1) * sizeof *larger);
    if (!larger)
        return STATUS_NO_MEMORY;
    chain->notes = larger;
    chain->notes[chain->n_notes++] = *timed;
    return STATUS_OK;
}

static enum status gather_notes(struct chain *chain)
{
    enum status status = STATUS_OK;
    struct timed_note timed;
    for (unsigned i = 0; i < chain->setup.n_notes && status == STATUS_OK; i++)
        status = add_note(chain, &chain->setup.notes[i]);
    for (uint32_t i = 0; i < chain->n_streams; i++)
        while (status == STATUS_OK &&
               stream_next_note(chain->streams[i], &timed.at_s, &timed.note) == STATUS_OK)
            status = add_note(chain, &timed);
    if (chain->n_notes > 0)
        qsort(chain->notes, chain->n_notes, sizeof *chain->notes, by_time);
    return status;
}

static uint32_t count_channels(const struct chain *chain)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < chain->n_streams; i++)
        n += stream_get_facts(chain->streams[i])->n_channels;
    return n;
}

static enum status create_board(struct chain *chain)
{
    const struct site *site = chain->setup.site;
    struct board_setup setup = {.site = site->name,
                                .permit = &chain->rules->permit,
                                .run = chain->run,
                                .unix_at_zero_ns = chain->zero_unix_ns,
                                .n_stations = site->n_stations,
                                .n_streams = chain->n_streams};
    memcpy(setup.stations, site->stations, sizeof setup.stations);
    return board_create(&setup, &chain->board);
}

/* A scan's sound is kept already. */
static enum status create_keeping(struct chain *chain)
{
    struct keeping_setup setup = {.site = chain->setup.site,
                                  .ledger = chain->ledger,
                                  .run = chain->run,
                                  .zero_unix_ns = chain->zero_unix_ns,
                                  .start_ns = chain->mark.outage_end_ns,
                                  .n_streams = chain->n_streams,
                                  .streams = chain->streams};
    return chain->setup.scan ? STATUS_OK : keeping_create(&setup, &chain->sound);
}

static enum status create_threads(struct chain *chain)
{
    bool live[SITE_MAX_STREAMS];
    for (uint32_t i = 0; i < chain->n_streams; i++)
        live[i] = stream_get_facts(chain->streams[i])->live;
    enum status status = merge_create(chain->n_streams, live, chain->mark.outage_end_ns, &chain->merge);
    if (status == STATUS_OK && !chain->setup.scan)
        status = create_board(chain);
    if (status == STATUS_OK)
        status = create_keeping(chain);
    return status;
}

enum status chain_create(const struct chain_setup *setup, struct problems *problems, struct chain **out)
{
    struct chain *chain = calloc(1, sizeof *chain);
    if (!chain)
        return STATUS_NO_MEMORY;
    chain->setup = *setup;
    enum status status = rules_load(setup->site, problems, &chain->rules);
    if (status == STATUS_OK)
        status = open_streams(chain, problems);
    if (status == STATUS_OK)
        status = open_ledger(chain, problems);
    if (status == STATUS_OK) {
        date_run(chain);
        status = gather_notes(chain);
    }
    if (status == STATUS_OK)
        status = create_threads(chain);
    if (status != STATUS_OK) {
        chain_destroy(chain);
        return status;
    }
    *out = chain;
    return STATUS_OK;
}

/* Conclusions that were lost between two commits go in before anything new. */
static void write_missing(struct chain *chain)
{
    for (size_t i = 0; i < chain->restored.n_missing; i++) {
        const struct restored_entry *entry = &chain->restored.missing[i];
        outbox_push(chain->outbox, entry->utc, entry->kind, entry->body);
    }
    restored_destroy(&chain->restored);
}

static enum status begin_record(struct chain *chain)
{
    char build[65], cpu[128];
    const struct site *site = chain->setup.site;
    files_build_id(build);
    files_cpu_name(cpu, sizeof cpu);
    uint32_t n_channels[SITE_MAX_STREAMS];
    for (uint32_t i = 0; i < chain->n_streams; i++)
        n_channels[i] = stream_get_facts(chain->streams[i])->n_channels;
    struct run_facts facts = {.site = site->name,
                              .n_streams = chain->n_streams,
                              .n_channels = n_channels,
                              .settings = site->effective.data,
                              .permit = chain->rules->permit.id,
                              .version = HUSHWATCH_VERSION,
                              .build = build,
                              .cpu = cpu,
                              .command = chain->setup.scan ? "scan" : "watch",
                              .start_from = chain->start_from,
                              .input = chain->inputs.data};
    enum status status = recorder_begin(chain->recorder, &chain->mark, &facts, &chain->rules->permit,
                                        chain->rules->permit_text.data);
    for (uint32_t i = 0; i < chain->n_streams && status == STATUS_OK; i++) {
        const struct input_facts *input = stream_get_facts(chain->streams[i]);
        status = channels_record(chain->recorder, chain->mark.outage_end_ns,
                                 chain->zero_unix_ns + chain->mark.outage_end_ns, i + 1, &site->streams[i],
                                 input->n_channels, input->rate_hz);
    }
    return status;
}

static enum status create_watcher(struct chain *chain)
{
    struct watcher_setup setup = {.merge = chain->merge,
                                  .watch = chain->watch,
                                  .tally = chain->tally,
                                  .recorder = chain->recorder,
                                  .outbox = chain->outbox,
                                  .board = chain->board,
                                  .feed = chain->feed,
                                  .sound = chain->sound,
                                  .run = chain->run,
                                  .zero_unix_ns = chain->zero_unix_ns,
                                  .n_streams = chain->n_streams,
                                  .streams = chain->streams,
                                  .stream_settings = chain->setup.site->streams,
                                  .notes = chain->notes,
                                  .n_notes = chain->n_notes};
    enum status status = watcher_create(&setup, &chain->watcher);
    if (status == STATUS_OK && !chain->setup.scan && chain->restored.last_run > 0)
        watcher_recall(chain->watcher, chain->setup.site->ledger);
    if (status == STATUS_OK)
        watcher_show(chain->watcher, chain->restored.last_ns);
    return status;
}

static void take_position(void *context, const struct position *position)
{
    const struct chain *chain = context;
    merge_position(chain->merge, position);
}

/* A scan hears what was recorded: where the vessel is now says nothing of it. */
static enum status create_feed(struct chain *chain)
{
    const struct position_settings *settings = &chain->setup.site->position;
    if (chain->setup.scan || settings->feed == FEED_NONE)
        return STATUS_OK;
    const struct position_feed_setup setup = {
        .address = settings->address, .port = settings->port, .take = take_position, .context = chain};
    return position_feed_create(&setup, &chain->feed);
}

static void set_committed(void *context, const struct ledger_line *lines, size_t n)
{
    const struct chain *chain = context;
    struct watcher *watcher = __atomic_load_n(&chain->watcher, __ATOMIC_ACQUIRE);
    if (watcher)
        watcher_set_committed(watcher, lines, n);
}

static enum status take_note(void *context, const struct note *note, char out_id[FLOW_ID_SIZE])
{
    struct chain *chain = context;
    return watcher_take_note(chain->watcher, note, out_id);
}

static enum status start_pages(struct chain *chain, struct problems *problems)
{
    if (chain->setup.scan)
        return STATUS_OK;
    const struct site *site = chain->setup.site;
    struct http_setup setup = {.address = site->address,
                               .port = site->port,
                               .board = chain->board,
                               .ledger = site->ledger,
                               .ring = keeping_ring(chain->sound),
                               .store = keeping_clips(chain->sound),
                               .n_hosts = site->n_hosts,
                               .accounts = site->accounts,
                               .certificate = site->certificate,
                               .key = site->key};
    for (uint32_t i = 0; i < site->n_hosts; i++)
        setup.hosts[i] = site->hosts[i];
    for (uint32_t i = 0; i < chain->n_streams; i++)
        setup.listening[i] = keeping_listening_channel(&chain->setup.site->streams[i],
                                                       stream_get_facts(chain->streams[i])->n_channels);
    char clips[SITE_PATH_SIZE + 8]; /* copied */
    snprintf(clips, sizeof clips, "%s/clips", site->sound.folder);
    setup.clips = *site->sound.folder ? clips : NULL;
    const struct http_callbacks callbacks = {take_note, chain};
    return http_start(&setup, &callbacks, problems, &chain->http);
}

enum status chain_start(struct chain *chain, struct problems *problems)
{
    struct outbox_setup outbox = {.ledger = chain->ledger,
                                  .run = chain->run,
                                  .committed = set_committed,
                                  .context = chain,
                                  .wait_for_room = chain->setup.scan};
    enum status status = outbox_create(&outbox, &chain->outbox);
    if (status != STATUS_OK)
        return status;
    status = recorder_create(chain->outbox, chain->run, chain->zero_unix_ns, count_channels(chain),
                             &chain->recorder);
    if (status == STATUS_OK)
        status = create_feed(chain);
    if (status == STATUS_OK)
        status = create_watcher(chain);
    if (status == STATUS_OK)
        status = start_pages(chain, problems);
    if (status != STATUS_OK)
        return status; /* nothing was recorded yet */
    write_missing(chain);
    status = begin_record(chain);
    double skip_s = chain->run > 1 ? time_to_s(chain->mark.outage_end_ns) : 0;
    for (uint32_t i = 0; i < chain->n_streams && status == STATUS_OK; i++) {
        status = stream_prepare(chain->streams[i], chain->run, chain->mark.outage_end_ns, skip_s);
    }
    if (status == STATUS_OK)
        status = watcher_start(chain->watcher, &chain->mark);
    if (status == STATUS_OK && chain->feed)
        status = position_feed_start(chain->feed);
    for (uint32_t i = 0; i < chain->n_streams && status == STATUS_OK; i++)
        status = stream_start(chain->streams[i], chain->merge);
    return status;
}

bool chain_wait(struct chain *chain, double wait_s)
{
    return watcher_wait(chain->watcher, wait_s);
}

enum status chain_stop(struct chain *chain, uint64_t *out_lost)
{
    *out_lost = 0;
    http_stop(chain->http);
    chain->http = NULL;
    position_feed_stop(chain->feed);
    if (chain->merge)
        merge_stop(chain->merge);
    for (uint32_t i = 0; i < chain->n_streams; i++)
        stream_stop(chain->streams[i]);
    keeping_finish(chain->sound);
    watcher_stop(chain->watcher);
    enum status status = STATUS_OK;
    if (chain->outbox)
        status = outbox_destroy(chain->outbox, chain->setup.scan ? 30.0 : STOP_LIMIT_S, out_lost);
    chain->outbox = NULL;
    if (status == STATUS_TIMEOUT)
        chain->ledger = NULL; /* still the writer's */
    ledger_close(chain->ledger);
    chain->ledger = NULL;
    return status;
}

void chain_destroy(struct chain *chain)
{
    if (!chain)
        return;
    uint64_t lost;
    chain_stop(chain, &lost);
    watcher_destroy(chain->watcher);
    position_feed_destroy(chain->feed);
    for (uint32_t i = 0; i < chain->n_streams; i++)
        stream_destroy(chain->streams[i]);
    keeping_destroy(chain->sound);
    merge_destroy(chain->merge);
    recorder_destroy(chain->recorder);
    board_destroy(chain->board);
    watch_destroy(chain->watch);
    tally_destroy(chain->tally);
    restored_destroy(&chain->restored);
    text_destroy(&chain->inputs);
    free(chain->notes);
    rules_destroy(chain->rules);
    free(chain);
}

void chain_get_watcher(struct chain *chain, struct watcher_state *out)
{
    watcher_get_state(chain->watcher, out);
}

void chain_warn(const struct chain *chain, struct text *out)
{
    rules_warn_of_permit(&chain->rules->permit, out);
}

uint32_t chain_get_port(const struct chain *chain)
{
    return chain->http ? http_port(chain->http) : 0;
}

uint32_t chain_count_streams(const struct chain *chain)
{
    return chain->n_streams;
}

struct stream *chain_get_stream(struct chain *chain, uint32_t number)
{
    return chain->streams[number - 1];
}
