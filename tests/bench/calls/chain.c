/* The whole of one channel's hearing; see chain.h. */
#include "bench/calls/chain.h"
#include "base/time.h"
#include "settings/permit.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

struct scene_hydrophone chain_hydrophone(uint32_t channel)
{
    return (struct scene_hydrophone){.place = {.x_m = 8.0 * channel, .y_m = 6.0 * channel, .z_m = 12},
                                     .calibration = {.known = true,
                                                     .sensitivity_db = -170,
                                                     .full_scale_v = 10,
                                                     .expected_peak_db = NAN,
                                                     .self_noise_db = NAN,
                                                     .role = ROLE_BOTH}};
}

static uint32_t class_named(const struct catalogue *catalogue, const char *name)
{
    uint32_t c = 0;
    while (c + 1 < catalogue->n_classes && strcmp(catalogue->classes[c].name, name) != 0)
        c++;
    return c;
}

/* Room for n more of a growing array; false without memory. */
static bool make_room(void **items, uint32_t *room, uint32_t used, uint32_t n, size_t size)
{
    if (used + n <= *room)
        return true;
    uint32_t more = 2 * (used + n) + 256;
    void *larger = realloc(*items, more * size);
    if (!larger)
        return false;
    *items = larger;
    *room = more;
    return true;
}

static void keep_call(struct chain *chain, const struct event *event)
{
    const struct call *call = &event->as.call;
    void *calls = chain->calls;
    if (!make_room(&calls, &chain->room, chain->n_calls, 1, sizeof *chain->calls))
        return;
    chain->calls = calls;
    chain->calls[chain->n_calls] =
        (struct chain_call){.class_index = class_named(chain->catalogue, call->class_name),
                            .n_pulses = call->n_pulses,
                            .n_sounds = call->n_sounds,
                            .group = call->group,
                            .form = call->form,
                            .start_s = time_to_s(call->start_ns),
                            .end_s = time_to_s(call->end_ns),
                            .low_hz = call->low_hz,
                            .high_hz = call->high_hz,
                            .snr_db = call->snr_db,
                            .delay_s = time_to_s(event->known_ns - call->end_ns),
                            .certainty = call->certainty};
    memcpy(chain->calls[chain->n_calls++].measures, call->measures, sizeof call->measures);
}

static void keep_impulse(struct chain *chain, const struct event *event)
{
    void *impulses = chain->impulses_s;
    if (!make_room(&impulses, &chain->impulses_room, chain->n_impulses, 1, sizeof *chain->impulses_s))
        return;
    chain->impulses_s = impulses;
    chain->impulses_s[chain->n_impulses++] = time_to_s(event->as.impulse.time_ns);
}

static void keep_train(void *context, const struct found_call *found)
{
    struct chain *chain = context;
    void *trains = chain->trains, *arrivals = chain->arrivals;
    bool good = make_room(&trains, &chain->trains_room, chain->n_trains, 1, sizeof *chain->trains);
    chain->trains = trains;
    good = make_room(&arrivals, &chain->arrivals_room, chain->n_arrivals, found->n_pulses, sizeof(double)) &&
           good;
    chain->arrivals = arrivals;
    if (!good || !pulses_get_arrivals(chain->second, chain->arrivals + chain->n_arrivals))
        return;
    for (uint32_t i = 0; i < found->n_pulses; i++)
        chain->arrivals[chain->n_arrivals + i] /= chain->rate_hz;
    chain->trains[chain->n_trains++] = (struct chain_train){.class_index = found->class_index,
                                                            .n_pulses = found->n_pulses,
                                                            .first = chain->n_arrivals,
                                                            .start_s = found->start_frame / chain->rate_hz,
                                                            .end_s = found->end_frame / chain->rate_hz};
    chain->n_arrivals += found->n_pulses;
}

const double *chain_get_arrivals(const struct chain *chain, const struct chain_call *call)
{
    for (uint32_t i = 0; i < chain->n_trains; i++) {
        const struct chain_train *train = &chain->trains[i];
        if (train->class_index == call->class_index && train->n_pulses == call->n_pulses &&
            fabs(train->start_s - call->start_s) < 2e-6 && fabs(train->end_s - call->end_s) < 2e-6)
            return chain->arrivals + train->first;
    }
    return NULL;
}

static void keep_outcome(void *context, const struct outcome *outcome)
{
    struct chain *chain = context;
    if (outcome->kind != OUTCOME_CONTACT)
        return;
    const struct contact_outcome *contact = &outcome->as.contact;
    if (contact->contact < CHAIN_MAX_CONTACTS && contact->grade > chain->grades[contact->contact])
        chain->grades[contact->contact] = (uint8_t)contact->grade;
}

static void take_event(void *context, const struct event *event)
{
    struct chain *chain = context;
    if (event->kind == EVENT_CALL)
        keep_call(chain, event);
    if (event->kind == EVENT_IMPULSE && event->as.impulse.channel == 1)
        keep_impulse(chain, event);
    if (chain->second && event->kind == EVENT_UNHEARD && event->as.unheard.cause == UNHEARD_OWN_SOURCE)
        pulses_hide(chain->second, time_to_s(event->as.unheard.start_ns) * chain->rate_hz,
                    time_to_s(event->as.unheard.end_ns) * chain->rate_hz, event->as.unheard.low_hz,
                    event->as.unheard.high_hz);
    watch_push(chain->watch, event, &(struct outcome_sink){keep_outcome, chain});
}

static void take_block(void *context, const struct block *block)
{
    struct chain *chain = context;
    listen_push(chain->listen, block, &(struct event_sink){take_event, chain});
    if (!chain->second)
        return;
    for (uint32_t i = 0; i < block->n_frames; i++)
        chain->pascals[i] = (float)chain->pa_per_unit * block->samples[i];
    pulses_push(chain->second, chain->pascals, block->n_frames, &(struct found_sink){keep_train, chain});
}

bool chain_create(struct chain *chain, const struct catalogue *catalogue, double rate_hz, uint32_t n_channels,
                  bool arrivals)
{
    struct problems problems = {0};
    const struct calibration calibration = chain_hydrophone(0).calibration;
    *chain = (struct chain){.catalogue = catalogue,
                            .rate_hz = rate_hz,
                            .n_channels = n_channels,
                            .pa_per_unit = calibration_pa_per_unit(&calibration),
                            .pascals = calloc(FLOW_MAX_BLOCK_FRAMES, sizeof(float))};
    struct listen_setup listen = {.stream = 1,
                                  .run = 1,
                                  .n_channels = n_channels,
                                  .rate_hz = rate_hz,
                                  .map = {.rate_hz = rate_hz},
                                  .calibration = {calibration, calibration},
                                  .catalogue = catalogue};
    struct watch_setup watch = {.permit = &chain->permit,
                                .contact_gap_s = 300,
                                .look_evidence = 1,
                                .act_evidence = 3,
                                .evidence_decay_s = 180,
                                .sighting_log_spread = 0.15,
                                .silence_s = 120};
    bool good =
        chain->pascals &&
        (!arrivals ||
         pulses_create(catalogue->classes, catalogue->n_classes, rate_hz, &chain->second) == STATUS_OK) &&
        permit_load("config/permits/demonstration.cfg", NULL, &problems, &chain->permit) == STATUS_OK &&
        listen_create(&listen, &chain->listen) == STATUS_OK &&
        watch_create(&watch, &chain->watch) == STATUS_OK &&
        blocks_create(1, n_channels, rate_hz, &chain->blocks) == STATUS_OK;
    problems_destroy(&problems);
    if (!good)
        chain_destroy(chain);
    return good;
}

void chain_destroy(struct chain *chain)
{
    blocks_destroy(chain->blocks);
    listen_destroy(chain->listen);
    watch_destroy(chain->watch);
    pulses_destroy(chain->second);
    free(chain->pascals);
    free(chain->trains);
    free(chain->arrivals);
    free(chain->calls);
    free(chain->impulses_s);
    *chain = (struct chain){0};
}

void chain_push(struct chain *chain, const float *frames, uint32_t n)
{
    blocks_push(chain->blocks, 0, frames, n, &(struct block_sink){take_block, chain});
}

void chain_finish(struct chain *chain)
{
    blocks_finish(chain->blocks, &(struct block_sink){take_block, chain});
    listen_finish(chain->listen, &(struct event_sink){take_event, chain});
    if (chain->second)
        pulses_finish(chain->second, &(struct found_sink){keep_train, chain});
}

uint32_t chain_count_contacts(const struct chain *chain, enum contact_grade grade)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < CHAIN_MAX_CONTACTS; i++)
        n += chain->grades[i] >= (uint8_t)grade;
    return n;
}
