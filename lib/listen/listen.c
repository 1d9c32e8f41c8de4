/* One stream's composition; see listen.h.
 *
 * What the ears find while a block is taken is gathered, put in order of the time at which it became known,
 * numbered and given. Known times stay within the block, so that the order over all blocks is the order of
 * giving. */
#include "listen/listen.h"
#include "base/units.h"
#include "listen/covers.h"
#include "listen/ear.h"
#include "listen/joiner.h"
#include "listen/measuring.h"
#include "listen/strips.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define MAX_PENDING 512
#define MAX_PIECE_S 10.0
#define HOLD_S 0.05 /* how long a call waits for the same call on another channel */

struct listen {
    struct listen_setup setup;
    uint64_t next_frame, block_first, block_end;
    struct ear ears[FLOW_MAX_CHANNELS];
    struct strips *strips;
    uint32_t strip_channel;                    /* the first that listens; 0: none */
    struct measuring measuring;                /* whose impulses are given */
    uint32_t gate_channel;                     /* whose impulses mask what the stream hears; 0: none */
    uint64_t n_hidden[CATALOGUE_MAX_CLASSES];  /* calls that the own source covered */
    uint64_t n_covered[CATALOGUE_MAX_CLASSES]; /* calls that a recognised sound covered */
    uint64_t n_found[CATALOGUE_MAX_CLASSES];
    uint64_t n_impulses;
    struct joiner joiner;
    struct covers covers;
    uint64_t counters[EVENT_NOTE + 1];
    const struct event_sink *sink; /* of the push in progress */
    uint32_t n_pending;
    struct event pending[MAX_PENDING];
};

/* Watch time at which what needed `frame` became known: its end, within the block that is being taken. */
static int64_t known_ns(const struct listen *listen, uint64_t frame)
{
    if (frame + 1 > listen->block_end)
        frame = listen->block_end - 1;
    if (frame < listen->block_first)
        frame = listen->block_first;
    return time_of_frame(&listen->setup.map, frame + 1);
}

static int64_t time_at(const struct listen *listen, double frame)
{
    double whole = floor(frame);
    if (whole < 0)
        whole = frame = 0;
    double rest_ns = (frame - whole) * 1e9 / listen->setup.map.rate_hz;
    return time_round_us(time_of_frame(&listen->setup.map, (uint64_t)whole) + (int64_t)llround(rest_ns));
}

static bool goes_before(const struct event *a, const struct event *b)
{
    return a->known_ns != b->known_ns ? a->known_ns < b->known_ns : a->kind < b->kind;
}

static void give_pending(struct listen *listen)
{
    for (uint32_t i = 1; i < listen->n_pending; i++) {
        struct event event = listen->pending[i];
        uint32_t at = i;
        for (; at > 0 && goes_before(&event, &listen->pending[at - 1]); at--)
            listen->pending[at] = listen->pending[at - 1];
        listen->pending[at] = event;
    }
    for (uint32_t i = 0; i < listen->n_pending; i++) {
        struct event *event = &listen->pending[i];
        if (event->kind != EVENT_CALL) /* sounds name calls: they have theirs already */
            event->counter = ++listen->counters[event->kind];
        listen->sink->take(listen->sink->context, event);
    }
    listen->n_pending = 0;
}

/* Room for one more event of a kind, dated. */
static struct event *add_event(struct listen *listen, enum event_kind kind, uint64_t known_frame)
{
    if (listen->n_pending == MAX_PENDING)
        give_pending(listen);
    struct event *event = &listen->pending[listen->n_pending++];
    memset(event, 0, sizeof *event);
    event->kind = kind;
    event->stream = listen->setup.stream;
    event->run = listen->setup.run;
    event->known_ns = known_ns(listen, known_frame);
    if (kind == EVENT_CALL) /* added in the order in which they are given */
        event->counter = ++listen->counters[kind];
    return event;
}

/* Unheard time in adjoining pieces of at most 10 s. */
static void add_unheard(struct listen *listen, uint32_t channel, uint64_t start, uint64_t end, uint64_t known,
                        enum unheard_cause cause)
{
    uint64_t longest = (uint64_t)(MAX_PIECE_S * listen->setup.rate_hz);
    for (uint64_t at = start; at < end; at += longest) {
        struct event *event = add_event(listen, EVENT_UNHEARD, known);
        event->as.unheard = (struct unheard){
            .channel = channel,
            .low_hz = 0,
            .high_hz = listen->setup.rate_hz / 2,
            .start_ns = time_of_frame(&listen->setup.map, at),
            .end_ns = time_of_frame(&listen->setup.map, end - at < longest ? end : at + longest),
            .cause = cause};
    }
}

static void take_level(void *context, uint32_t channel, const struct found_level *level)
{
    struct listen *listen = context;
    struct event *event = add_event(listen, EVENT_LEVEL, level->known_frame);
    struct level *out = &event->as.level;
    out->channel = channel;
    out->start_ns = time_of_frame(&listen->setup.map, level->start_frame);
    out->seconds = level->frames / listen->setup.rate_hz;
    out->spl_db = level->spl_db;
    out->peak_db = level->peak_db;
    out->sel_db = level->spl_db + units_power_db(out->seconds);
    out->fast_max_db = level->fast_max_db;
    out->slow_max_db = level->slow_max_db;
    out->moments = level->moments;
    out->high_hz = listen->setup.rate_hz / 2;
    out->relative = level->relative;
    out->n_bands = level->n_bands;
    memcpy(out->band_db, level->band_db, sizeof out->band_db);
}

static void take_fault(void *context, uint32_t channel, const struct found_fault *fault)
{
    static const enum unheard_cause causes[HEALTH_CAUSE_COUNT] = {
        [HEALTH_CLIPPING] = UNHEARD_CLIPPING,      [HEALTH_DEAD] = UNHEARD_DEAD_CHANNEL,
        [HEALTH_FROZEN] = UNHEARD_DEAD_CHANNEL,    [HEALTH_TOO_QUIET] = UNHEARD_TOO_QUIET,
        [HEALTH_DUPLICATE] = UNHEARD_DEAD_CHANNEL,
    };
    add_unheard(context, channel, fault->start_frame, fault->end_frame, fault->known_frame,
                causes[fault->cause]);
}

static void take_impulse(void *context, uint32_t channel, const struct found_impulse *found)
{
    struct listen *listen = context;
    if (!measuring_has(&listen->measuring, channel))
        return;
    listen->n_impulses += channel == listen->measuring.reference;
    struct event *event = add_event(listen, EVENT_IMPULSE, found->known_frame);
    const struct ear *ear = &listen->ears[channel - 1];
    struct impulse *impulse = &event->as.impulse;
    *impulse = (struct impulse){.channel = channel,
                                .time_ns = time_at(listen, found->onset_frame),
                                .sel_db = found->sel_db,
                                .peak_db = found->peak_db,
                                .peak_to_peak_db = found->peak_to_peak_db,
                                .rms90_db = found->rms90_db,
                                .t90_s = found->t90_s,
                                .background_db = found->background_db,
                                .effective_s = found->effective_s,
                                .kurtosis = found->kurtosis,
                                .window_s = found->window_s,
                                .positive_impulse_pa_s = ear->relative ? NAN : found->positive_impulse_pa_s,
                                .n_bands = found->n_bands,
                                .relative = ear->relative,
                                .clipped = found->clipped,
                                .overlapped = found->overlapped,
                                .weak = found->weak,
                                .beside = channel != listen->measuring.reference,
                                .whose = IMPULSE_UNKNOWN};
    for (uint32_t b = 0; b < found->n_bands; b++)
        impulse->band_sel_db[b] = found->band_sel_db[b];
    if (!calibration_has_room(&listen->setup.calibration[channel - 1]))
        impulse_refuse_levels(impulse);
}

/* What one channel's source covers it covers for the stream, whose listening channels are close together. */
static void take_masked(void *context, uint32_t channel, const struct gate_masked *masked)
{
    struct listen *listen = context;
    (void)channel;
    for (uint32_t i = 0; i < listen->setup.n_channels; i++)
        if (listen->ears[i].listens)
            pulses_hide(listen->ears[i].pulses, masked->start_frame, masked->end_frame, masked->low_hz,
                        masked->high_hz);
    struct event *event = add_event(listen, EVENT_UNHEARD, listen->block_end - 1);
    event->as.unheard = (struct unheard){.channel = 0,
                                         .low_hz = masked->low_hz,
                                         .high_hz = masked->high_hz,
                                         .start_ns = time_at(listen, masked->start_frame),
                                         .end_ns = time_at(listen, masked->end_frame),
                                         .cause = UNHEARD_OWN_SOURCE};
}

static bool is_hidden(struct listen *listen, const struct found_call *found)
{
    if (listen->gate_channel == 0 ||
        !gate_hides(listen->ears[listen->gate_channel - 1].gate, found->start_frame, found->end_frame,
                    found->low_hz, found->high_hz))
        return false;
    listen->n_hidden[found->class_index]++;
    return true;
}

static void take_call(void *context, uint32_t channel, const struct found_call *found)
{
    struct listen *listen = context;
    joiner_take(&listen->joiner, channel, found);
}

static struct event *add_call(struct listen *listen, const struct joined_call *joined)
{
    const struct found_call *found = &joined->found;
    const struct call_class *class = &listen->setup.catalogue->classes[found->class_index];
    struct event *event = add_event(listen, EVENT_CALL, found->known_frame);
    struct call *call = &event->as.call;
    *call = (struct call){
        .channel = joined->channel,
        .group = class->animal ? class->group : GROUP_UNKNOWN,
        .form = class->form,
        .start_ns = time_at(listen, found->start_frame),
        .end_ns = time_at(listen, found->end_frame),
        .low_hz = found->low_hz,
        .high_hz = found->high_hz,
        .n_pulses = found->n_pulses,
        .interval_s = found->interval_frames > 0 ? found->interval_frames / listen->setup.rate_hz : NAN,
        .snr_db = found->snr_db,
        .level_db = units_spl_db(found->mean_square_pa2),
        .relative = listen->ears[joined->channel - 1].relative,
        .bearing_deg = NAN,
        .mirror_deg = NAN,
        .certainty = class->certainty,
        .evidence = class->evidence};
    memcpy(call->class_name, class->name, sizeof call->class_name);
    return event;
}

/* Sounds that were gathered; what they speak against was said when each became known. */
static void take_gathered(void *context, const struct joined_call *joined, uint32_t n_sounds)
{
    struct listen *listen = context;
    struct joined_call sound = *joined;
    sound.found.known_frame = listen->block_end - 1;
    add_call(listen, &sound)->as.call.n_sounds = n_sounds;
}

static void take_sound_of_none(struct listen *listen, const struct joined_call *joined)
{
    uint64_t against[CALL_MAX_AGAINST];
    uint32_t n_against = covers_take_sound(&listen->covers, joined, against);
    if (!covers_gives_now(&listen->covers, joined, n_against > 0))
        return;
    struct call *call = &add_call(listen, joined)->as.call;
    call->n_sounds = 1;
    call->n_against = n_against;
    memcpy(call->against, against, n_against * sizeof against[0]);
}

static void take_joined(void *context, const struct joined_call *joined)
{
    struct listen *listen = context;
    const struct found_call *found = &joined->found;
    bool animal = listen->setup.catalogue->classes[found->class_index].animal;
    if (animal && is_hidden(listen, found))
        return;
    double evidence = animal ? covers_evidence(&listen->covers, found) : 0;
    if (animal && evidence <= 0 && listen->setup.catalogue->classes[found->class_index].evidence > 0) {
        listen->n_covered[found->class_index]++;
        return;
    }
    listen->n_found[found->class_index]++;
    if (!animal) {
        take_sound_of_none(listen, joined);
        return;
    }
    struct event *event = add_call(listen, joined);
    event->as.call.evidence = evidence;
    covers_keep_call(&listen->covers, found, event->counter);
}

/* The first channel that listens masks the stream: a blow reaches it at another time than a far measuring
 * channel. */
static void choose_channels(struct listen *listen)
{
    const struct listen_setup *setup = &listen->setup;
    for (uint32_t i = setup->n_channels; i > 0; i--)
        if (setup->calibration[i - 1].role != ROLE_MEASURE)
            listen->strip_channel = i;
    listen->measuring = measuring_choose(setup->n_channels, setup->calibration, setup->range_m);
    bool has_source = listen->measuring.reference > 0 && setup->catalogue->n_classes > 0;
    listen->gate_channel = has_source ? listen->strip_channel : 0;
}

static enum status create_ears(struct listen *listen)
{
    const struct listen_setup *setup = &listen->setup;
    struct ear_setup ear = {.rate_hz = setup->rate_hz,
                            .max_frames = flow_block_frames(setup->rate_hz),
                            .classes = setup->catalogue->classes,
                            .n_classes = setup->catalogue->n_classes,
                            .sink = {take_level, take_fault, take_impulse, take_call, take_masked, listen}};
    uint32_t listening = 0;
    for (uint32_t i = 0; i < setup->n_channels; i++) {
        ear.channel = i + 1;
        ear.calibration = setup->calibration[i];
        ear.measures_impulses = measuring_has(&listen->measuring, ear.channel);
        ear.gates = ear.channel == listen->gate_channel;
        ear.finds_impulses = ear.gates || ear.measures_impulses;
        enum status status = ear_create(&ear, &listen->ears[i]);
        if (status != STATUS_OK)
            return status;
        listening += listen->ears[i].listens;
    }
    covers_reset(&listen->covers, setup->catalogue->classes, setup->catalogue->n_classes, setup->rate_hz);
    joiner_reset(&listen->joiner, listening > 1 ? (uint64_t)(HOLD_S * setup->rate_hz) : 0);
    return STATUS_OK;
}

enum status listen_create(const struct listen_setup *setup, struct listen **out)
{
    if (setup->n_channels < 1 || setup->n_channels > FLOW_MAX_CHANNELS || setup->stream < 1 ||
        !(setup->rate_hz >= 8000 && setup->rate_hz <= 1e6) || setup->rate_hz != floor(setup->rate_hz))
        return STATUS_BAD_ARGUMENT;
    struct listen *listen = calloc(1, sizeof *listen);
    if (!listen)
        return STATUS_NO_MEMORY;
    listen->setup = *setup;
    choose_channels(listen);
    enum status status = create_ears(listen);
    if (status == STATUS_OK && listen->strip_channel > 0 && setup->columns.take)
        status =
            strips_create(setup->rate_hz, listen->ears[listen->strip_channel - 1].relative, &listen->strips);
    if (status != STATUS_OK) {
        listen_destroy(listen);
        return status;
    }
    *out = listen;
    return STATUS_OK;
}

void listen_destroy(struct listen *listen)
{
    if (!listen)
        return;
    for (uint32_t i = 0; i < listen->setup.n_channels; i++)
        ear_destroy(&listen->ears[i]);
    strips_destroy(listen->strips);
    free(listen);
}

static void take_gap(struct listen *listen, const struct block *block)
{
    for (uint32_t i = 0; i < listen->setup.n_channels; i++)
        ear_reset(&listen->ears[i], block->first_frame);
    if (listen->strips)
        strips_reset(listen->strips, block->first_frame);
    add_unheard(listen, 0, block->first_frame - block->lost_before, block->first_frame,
                block->first_frame - 1, UNHEARD_GAP);
}

static void take_sound(struct listen *listen, const struct block *block)
{
    uint64_t first = block->first_frame, end = first + block->n_frames;
    for (uint32_t i = 0; i < block->n_channels; i++)
        if (!ear_push(&listen->ears[i], block->samples, block->n_frames, block->n_channels))
            add_unheard(listen, i + 1, first, end, end - 1, UNHEARD_GAP);
    if (listen->strips)
        strips_push(listen->strips, listen->ears[listen->strip_channel - 1].pascals, block->n_frames,
                    &listen->setup.map, &listen->setup.columns);
}

/* Two channels that are bit for bit the same are one hydrophone. */
static void compare_channels(struct listen *listen)
{
    for (uint32_t later = 1; later < listen->setup.n_channels; later++)
        for (uint32_t earlier = 0; earlier < later; earlier++)
            ear_compare(&listen->ears[earlier], &listen->ears[later]);
}

enum status listen_push(struct listen *listen, const struct block *block, const struct event_sink *sink)
{
    if (block->n_channels != listen->setup.n_channels ||
        block->n_frames > flow_block_frames(listen->setup.rate_hz) ||
        block->first_frame != listen->next_frame + block->lost_before)
        return STATUS_BAD_ARGUMENT;
    const struct joined_sink joined = {take_joined, listen};
    const struct gathered_sink gathered = {take_gathered, listen};
    listen->sink = sink;
    listen->block_first = block->n_frames ? block->first_frame : block->first_frame - 1;
    listen->block_end = block->first_frame + block->n_frames;
    if (block->lost_before > 0)
        take_gap(listen, block);
    if (block->n_frames > 0) {
        take_sound(listen, block);
        compare_channels(listen);
    }
    joiner_give(&listen->joiner, listen->block_end, &joined);
    covers_give(&listen->covers, listen->block_end, false, &gathered);
    listen->next_frame = listen->block_end;
    give_pending(listen);
    return STATUS_OK;
}

enum status listen_finish(struct listen *listen, const struct event_sink *sink)
{
    const struct joined_sink joined = {take_joined, listen};
    const struct gathered_sink gathered = {take_gathered, listen};
    if (listen->next_frame == 0)
        return STATUS_OK;
    listen->sink = sink;
    listen->block_first = listen->next_frame - 1;
    listen->block_end = listen->next_frame;
    for (uint32_t i = 0; i < listen->setup.n_channels; i++)
        ear_finish(&listen->ears[i]);
    joiner_give(&listen->joiner, UINT64_MAX, &joined);
    covers_give(&listen->covers, listen->block_end, true, &gathered);
    give_pending(listen);
    return STATUS_OK;
}

int64_t listen_get_time(const struct listen *listen)
{
    return time_of_frame(&listen->setup.map, listen->next_frame);
}

void listen_set_map(struct listen *listen, const struct time_map *map)
{
    listen->setup.map = *map;
}

/* How many candidates each class rejected, by name; out[class_index][rejection]. */
static void get_rejections(const struct listen *listen, uint64_t out[CATALOGUE_MAX_CLASSES][REJECT_COUNT])
{
    uint64_t one[CATALOGUE_MAX_CLASSES][REJECT_COUNT];
    memset(out, 0, sizeof one);
    for (uint32_t i = 0; i < listen->setup.n_channels; i++) {
        if (!listen->ears[i].listens)
            continue;
        memset(one, 0, sizeof one);
        tones_get_rejections(listen->ears[i].tones, one);
        pulses_get_rejections(listen->ears[i].pulses, one);
        for (uint32_t c = 0; c < CATALOGUE_MAX_CLASSES; c++)
            for (uint32_t r = 0; r < REJECT_COUNT; r++)
                out[c][r] += one[c][r];
    }
    for (uint32_t c = 0; c < CATALOGUE_MAX_CLASSES; c++) {
        out[c][REJECT_OWN_SOURCE] += listen->n_hidden[c];
        out[c][REJECT_NOT_AN_ANIMAL] += listen->n_covered[c];
    }
}

static bool can_hear(const struct listen *listen, uint32_t class_index)
{
    for (uint32_t i = 0; i < listen->setup.n_channels; i++) {
        const struct ear *ear = &listen->ears[i];
        if (ear->listens &&
            (tones_can_hear(ear->tones, class_index) || pulses_is_hearable(ear->pulses, class_index)))
            return true;
    }
    return false;
}

static void account_for_impulses(const struct listen *listen, struct class_account *out)
{
    struct impulse_rejections why;
    impulse_finder_get_rejections(listen->ears[listen->measuring.reference - 1].impulses, &why);
    *out = (struct class_account){.name = "impulse",
                                  .hearable = true,
                                  .n_found = listen->n_impulses,
                                  .rejected = {[REJECT_TOO_WEAK] = why.too_weak,
                                               [REJECT_ECHO] = why.echo,
                                               [REJECT_TOO_HIGH] = why.high,
                                               [REJECT_NOT_SUDDEN] = why.slow,
                                               [REJECT_LIKE_A_CALL] = why.call}};
}

uint32_t listen_get_accounts(const struct listen *listen, struct class_account out[LISTEN_MAX_ACCOUNTS])
{
    const struct catalogue *catalogue = listen->setup.catalogue;
    uint64_t rejections[CATALOGUE_MAX_CLASSES][REJECT_COUNT];
    get_rejections(listen, rejections);
    for (uint32_t c = 0; c < catalogue->n_classes; c++) {
        memcpy(out[c].name, catalogue->classes[c].name, sizeof out[c].name);
        out[c].hearable = can_hear(listen, c);
        out[c].n_found = listen->n_found[c];
        memcpy(out[c].rejected, rejections[c], sizeof out[c].rejected);
    }
    if (listen->measuring.reference == 0)
        return catalogue->n_classes;
    account_for_impulses(listen, &out[catalogue->n_classes]);
    return catalogue->n_classes + 1;
}
