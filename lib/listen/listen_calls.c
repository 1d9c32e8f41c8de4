/* Calls and what is no animal's: joined over the channels, withheld or given; see listen.h. */
#include "base/units.h"
#include "call/certainty.h"
#include "listen/listen_inner.h"
#include <math.h>
#include <string.h>

static bool is_hidden(struct listen *listen, const struct found_call *found)
{
    if (listen->gate_channel == 0 ||
        !gate_hides(listen->ears[listen->gate_channel - 1].gate, found->start_frame, found->end_frame,
                    found->low_hz, found->high_hz))
        return false;
    listen->n_hidden[found->class_index]++;
    return true;
}

/* A train is known with its last pulse; a machine's tone whose edges and beats made those pulses is known
 * when it ends. So trains wait for their class's natural delay, at most TRAIN_WAITS_S. */
#define TRAIN_WAITS_S 0.5
#define TONE_WAITS_S 1.0 /* for a machine's tone beside it that goes on */

void listen_take_call(void *context, uint32_t channel, const struct found_call *found)
{
    struct listen *listen = context;
    const struct call_class *class = &listen->setup.catalogue->classes[found->class_index];
    struct found_call call = *found;
    double until = found->end_frame + fmin(class->natural_delay_s, TRAIN_WAITS_S) * listen->setup.rate_hz;
    if (class->animal && class->form == CALL_TRAIN && until > (double)call.known_frame)
        call.known_frame = (uint64_t)until;
    if (class->animal && class->form == CALL_TONE && listen->others && others_hold(listen->others, found))
        call.known_frame += (uint64_t)(TONE_WAITS_S * listen->setup.rate_hz);
    joiner_take(&listen->joiner, channel, &call);
}

static struct event *add_call(struct listen *listen, const struct joined_call *joined)
{
    const struct found_call *found = &joined->found;
    const struct call_class *class = &listen->setup.catalogue->classes[found->class_index];
    const uint64_t last = listen->block_end > 0 ? listen->block_end - 1 : 0; /* at the end nothing waits */
    struct event *event =
        listen_add_event(listen, EVENT_CALL, found->known_frame < last ? found->known_frame : last);
    struct call *call = &event->as.call;
    *call = (struct call){
        .channel = joined->channel,
        .group = class->animal ? class->group : GROUP_UNKNOWN,
        .form = class->form,
        .start_ns = listen_time_at(listen, found->start_frame),
        .end_ns = listen_time_at(listen, found->end_frame),
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
    memcpy(call->measures, found->measures, sizeof call->measures);
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

/* Harmonics of a burst (a deterrent's reach beyond 100 kHz) fill the bands of click classes: what was to be
 * heard there was not. */
static void mask_harmonics(struct listen *listen, const struct found_call *found)
{
    const struct catalogue *catalogue = listen->setup.catalogue;
    for (uint32_t c = 0; c < catalogue->n_classes; c++) {
        const struct call_class *class = &catalogue->classes[c];
        double multiple = ceil(class->low_hz / found->high_hz);
        bool known = false; /* another class has the same band */
        for (uint32_t k = 0; k < c; k++)
            known = known || (catalogue->classes[k].animal && catalogue->classes[k].form == CALL_TRAIN &&
                              catalogue->classes[k].low_hz == class->low_hz &&
                              catalogue->classes[k].high_hz == class->high_hz);
        if (!class->animal || class->form != CALL_TRAIN || known || multiple < 2 ||
            multiple * found->low_hz > class->high_hz || found->harmonics_to_hz < class->low_hz)
            continue;
        struct event *event = listen_add_event(listen, EVENT_UNHEARD, found->known_frame);
        event->as.unheard = (struct unheard){.channel = 0,
                                             .low_hz = class->low_hz,
                                             .high_hz = class->high_hz,
                                             .start_ns = listen_time_at(listen, found->start_frame),
                                             .end_ns = listen_time_at(listen, found->end_frame),
                                             .cause = UNHEARD_OWN_SOURCE};
    }
}

static void take_sound_of_none(struct listen *listen, const struct joined_call *joined)
{
    uint64_t against[CALL_MAX_AGAINST];
    if (joined->found.harmonics_to_hz > 0)
        mask_harmonics(listen, &joined->found);
    uint32_t n_against = covers_take_sound(&listen->covers, joined, against);
    if (!covers_gives_now(&listen->covers, joined, n_against > 0))
        return;
    struct call *call = &add_call(listen, joined)->as.call;
    call->n_sounds = 1;
    call->n_against = n_against;
    memcpy(call->against, against, n_against * sizeof against[0]);
}

/* A tone that just passes its class's limit is what noise gives false_per_hour of; its evidence grows with
 * its level to the whole of the class's at SURE_DB above the limit. So one is no look yet, several are. */
#define SURE_DB 4.0

/* What an animal's call can say at most, where it is heard. */
static double most_evidence(struct listen *listen, const struct found_call *found)
{
    const struct call_class *class = &listen->setup.catalogue->classes[found->class_index];
    double most = song_evidence(&listen->song, class, found);
    if (class->form == CALL_TONE)
        most = fmin(most, class->evidence) *
               fmin(1, fmax(STRUCK_EVIDENCE, (found->snr_db - class->tone.min_snr_db) / SURE_DB));
    bool doubtful = struck_begins(&listen->struck, class, found) || covers_doubts(&listen->covers, found);
    return doubtful ? fmin(most, STRUCK_EVIDENCE) : most;
}

static void take_joined(void *context, const struct joined_call *joined)
{
    struct listen *listen = context;
    const struct found_call *found = &joined->found;
    const struct catalogue *catalogue = listen->setup.catalogue;
    const struct call_class *class = &catalogue->classes[found->class_index];
    bool animal = class->animal;
    if (animal && is_hidden(listen, found))
        return;
    double left = animal ? covers_evidence(&listen->covers, found) : 0; /* of the most that one call has */
    if (animal && left <= 0 && class->evidence > 0) {
        listen->n_covered[found->class_index]++;
        return;
    }
    listen->n_found[found->class_index]++;
    if (!animal) {
        take_sound_of_none(listen, joined);
        return;
    }
    struct event *event = add_call(listen, joined);
    double certainty = certainty_find(&catalogue->certainty, class, found->measures);
    double says = fmin(certainty_evidence(certainty, class), most_evidence(listen, found));
    event->as.call.certainty = certainty;
    event->as.call.evidence = fmax(0, says - (class->evidence - left));
    covers_keep_call(&listen->covers, found, event->counter);
}

/* An impulse that has stood alone long enough. */
static void take_lonely(struct listen *listen, bool all)
{
    struct found_call found;
    if (alone_give(&listen->alone, listen->block_end, all, &found))
        joiner_take(&listen->joiner, listen->measuring.reference, &found);
}

void listen_give_calls(struct listen *listen, bool all)
{
    const struct joined_sink joined = {take_joined, listen};
    const struct gathered_sink gathered = {take_gathered, listen};
    take_lonely(listen, all);
    joiner_give(&listen->joiner, all ? UINT64_MAX : listen->block_end, &joined);
    covers_give(&listen->covers, listen->block_end, all, &gathered);
}

/* ---- what else is recognised */

enum status listen_create_calls(struct listen *listen)
{
    const struct listen_setup *setup = &listen->setup;
    const struct catalogue *catalogue = setup->catalogue;
    bool any = false;
    for (uint32_t i = setup->n_channels; i > listen->strip_channel; i--)
        if (listen->strip_channel > 0 && setup->calibration[i - 1].role != ROLE_MEASURE)
            listen->second_channel = i;
    for (uint32_t c = 0; c < catalogue->n_classes; c++)
        any = any || catalogue->classes[c].sound.manner != MANNER_NONE;
    song_reset(&listen->song, setup->rate_hz);
    struck_reset(&listen->struck, setup->rate_hz);
    covers_reset(&listen->covers, catalogue->classes, catalogue->n_classes, setup->rate_hz);
    alone_reset(&listen->alone, catalogue->classes, catalogue->n_classes, setup->rate_hz);
    if (listen->strip_channel == 0 || !any)
        return STATUS_OK;
    return others_create(catalogue->classes, catalogue->n_classes, setup->rate_hz, listen->second_channel > 0,
                         &listen->others);
}

void listen_take_other(void *context, const struct found_call *found)
{
    struct listen *listen = context;
    joiner_take(&listen->joiner, listen->strip_channel, found);
}

void listen_push_others(struct listen *listen, uint32_t n_frames)
{
    const struct found_sink sink = {listen_take_other, listen};
    if (!listen->others)
        return;
    const float *second = listen->second_channel ? listen->ears[listen->second_channel - 1].pascals : NULL;
    others_push(listen->others, listen->ears[listen->strip_channel - 1].pascals, second, n_frames, &sink);
}

void listen_take_alone(struct listen *listen, const struct found_impulse *found)
{
    alone_take(&listen->alone, found);
    struck_take(&listen->struck, found->onset_frame);
}
