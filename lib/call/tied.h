/* Ties the pulses of one class: by rhythm (call/trains.h) or, for a class of free rhythm, by likeness alone
 * (call/codas.h). The functions are those of call/trains.h. */
#ifndef CALL_TIED_H
#define CALL_TIED_H

#include "call/codas.h"
#include "call/trains.h"

struct tied {
    struct trains *trains; /* one of the two */
    struct codas *codas;
};

static inline enum status tied_create(const struct call_class *call_class, double rate_hz,
                                      struct noise_rate noise, struct tied *out)
{
    return call_class->train.free_rhythm ? codas_create(call_class, rate_hz, noise, &out->codas)
                                         : trains_create(call_class, rate_hz, noise, &out->trains);
}

static inline void tied_reset(struct tied *tied)
{
    if (tied->codas)
        codas_reset(tied->codas);
    else
        trains_reset(tied->trains);
}

static inline void tied_push(struct tied *tied, const struct pulse *pulse, const struct train_sink *sink,
                             uint64_t *rejections)
{
    if (tied->codas)
        codas_push(tied->codas, pulse, sink, rejections);
    else
        trains_push(tied->trains, pulse, sink, rejections);
}

static inline void tied_advance(struct tied *tied, double frame, const struct train_sink *sink,
                                uint64_t *rejections)
{
    if (tied->codas)
        codas_advance(tied->codas, frame, sink, rejections);
    else
        trains_advance(tied->trains, frame, sink, rejections);
}

static inline void tied_finish(struct tied *tied, const struct train_sink *sink, uint64_t *rejections)
{
    if (tied->codas)
        codas_finish(tied->codas, sink, rejections);
    else
        trains_finish(tied->trains, sink, rejections);
}

static inline void tied_hide(struct tied *tied, double start_frame, double end_frame, uint64_t *rejections)
{
    if (tied->codas)
        codas_hide(tied->codas, start_frame, end_frame, rejections);
    else
        trains_hide(tied->trains, start_frame, end_frame, rejections);
}

static inline void tied_destroy(struct tied *tied)
{
    codas_destroy(tied->codas);
    trains_destroy(tied->trains);
}

#endif
