/* Fuzzes the watch: any sequence of events in order of time is taken; time never runs backwards, a stop for
 * the crew is not answered by silence, and nothing is read or written out of bounds. */
#include "rule/watch.h"
#include "base/time.h"
#include "settings/permit.h"
#include <math.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

struct taking {
    int64_t last_ns;
};

static void take(void *context, const struct outcome *outcome)
{
    struct taking *taking = context;
    if (outcome->watch_ns < taking->last_ns)
        abort();
    taking->last_ns = outcome->watch_ns;
}

static void make_note(const uint8_t *b, struct note *note)
{
    static const char *const people[] = {"A", "B", "C"};
    static const char *const watches[] = {"visual", "acoustic", "crew"};
    static const char *const states[] = {"off", "soft start", "full power", "stopped", "hold"};
    static const char *const verdicts[] = {"confirm", "dismiss", "left"};
    note_reset(note, (enum note_kind)(b[0] % NOTE_KIND_COUNT));
    note_set(note, "person", people[b[1] % 3], NULL);
    note_set(note, "watch", watches[b[2] % 3], NULL);
    note_set(note, "source_state", states[b[3] % 5], NULL);
    note_set(note, "verdict", verdicts[b[4] % 3], NULL);
    note_set(note, "job", "pile", NULL);
    note_set(note, "answer", b[5] % 2 ? "open" : "close", NULL);
    note->contact = b[6] % 5;
    note->group = (enum group)(b[7] % GROUP_COUNT);
    note->distance_m = b[8] % 4 ? b[8] * 20.0 : NAN;
    note->leaving = b[9] % 5 == 0;
}

static void make_event(const uint8_t *b, int64_t now_ns, uint64_t counter, struct event *event)
{
    static const enum event_kind kinds[] = {EVENT_UNHEARD, EVENT_LEVEL, EVENT_IMPULSE, EVENT_CALL,
                                            EVENT_NOTE,    EVENT_RUN,   EVENT_POSITION};
    memset(event, 0, sizeof *event);
    *event = (struct event){.kind = kinds[b[0] % 7], .run = 1, .counter = counter, .known_ns = now_ns};
    event->stream =
        event->kind == EVENT_NOTE || event->kind == EVENT_RUN || event->kind == EVENT_POSITION ? 0 : 1;
    if (event->kind == EVENT_POSITION)
        event->as.position = (struct position){.of = (enum position_of)(b[1] % POSITION_OF_COUNT),
                                               .latitude_deg = b[2] * 0.7 - 90,
                                               .longitude_deg = b[3] * 1.4 - 180,
                                               .heading_deg = b[4],
                                               .occurred_ns = now_ns};
    if (event->kind == EVENT_NOTE)
        make_note(b + 1, &event->as.note);
    if (event->kind == EVENT_RUN)
        event->as.run_mark = (struct run_mark){now_ns, now_ns};
    if (event->kind == EVENT_CALL) {
        event->as.call = (struct call){.channel = 1,
                                       .class_name = "x",
                                       .group = (enum group)(b[1] % GROUP_COUNT),
                                       .start_ns = now_ns - b[2] * 1000000,
                                       .end_ns = now_ns,
                                       .evidence = b[3] / 32.0,
                                       .bearing_deg = NAN,
                                       .mirror_deg = NAN,
                                       .interval_s = NAN};
    }
    if (event->kind == EVENT_IMPULSE)
        event->as.impulse =
            (struct impulse){.channel = 1, .time_ns = now_ns, .sel_db = 150, .whose = IMPULSE_UNKNOWN};
    if (event->kind == EVENT_UNHEARD)
        event->as.unheard = (struct unheard){.channel = b[1] % 3,
                                             .start_ns = now_ns - b[2] * INT64_C(40000000),
                                             .end_ns = now_ns,
                                             .cause = (enum unheard_cause)(b[3] % 5)};
    if (event->kind == EVENT_LEVEL)
        event->as.level = (struct level){.channel = 1, .start_ns = now_ns, .seconds = 1};
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    enum { STEP = 14 };
    static struct permit permit;
    static struct watch_view view;
    struct problems problems = {0};
    struct watch *watch;
    if (permit.n_zones == 0 &&
        permit_load("config/permits/demonstration.cfg", NULL, &problems, &permit) != STATUS_OK)
        abort();
    struct watch_setup setup = {.permit = &permit,
                                .contact_gap_s = 30,
                                .look_evidence = 1,
                                .act_evidence = 3,
                                .evidence_decay_s = 60,
                                .sighting_log_spread = 0.15,
                                .silence_s = 20,
                                .ranges = {.moves = RANGES_ARRAY, .oldest_s = 60, .n_streams = 1}};
    setup.ranges.streams[0].place_m[0][0] = -100;
    if (watch_create(&setup, &watch) != STATUS_OK)
        abort();
    struct taking taking = {0};
    const struct outcome_sink sink = {take, &taking};
    int64_t now_ns = 0;
    for (size_t at = 0; at + STEP <= size; at += STEP) {
        struct event event;
        now_ns += data[at] * INT64_C(50000000);
        make_event(data + at + 1, now_ns, at + 1, &event);
        if (watch_push(watch, &event, &sink) != STATUS_OK)
            abort();
        if (data[at] % 7 == 0)
            watch_get_view(watch, &view);
    }
    watch_destroy(watch);
    return 0;
}
