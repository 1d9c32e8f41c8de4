/* The stream's state, for the files of lib/listen that share it: listen.c (blocks, levels, faults, impulses),
 * listen_calls.c (calls and what is no animal's) and listen_accounts.c (why nothing was found). */
#ifndef LISTEN_LISTEN_INNER_H
#define LISTEN_LISTEN_INNER_H

#include "call/others.h"
#include "listen/alone.h"
#include "listen/covers.h"
#include "listen/ear.h"
#include "listen/joiner.h"
#include "listen/listen.h"
#include "listen/measuring.h"
#include "listen/song.h"
#include "listen/strips.h"
#include "listen/struck.h"

#define LISTEN_MAX_PENDING 512

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
    struct song song;
    struct struck struck;
    struct covers covers;
    struct others *others;   /* NULL where no channel listens */
    uint32_t second_channel; /* the second that listens; 0: none */
    struct alone alone;      /* impulses of the reference that stand alone */
    uint64_t counters[EVENT_NOTE + 1];
    const struct event_sink *sink; /* of the push in progress */
    uint32_t n_pending;
    struct event pending[LISTEN_MAX_PENDING];
};

/* Room for one more event of a kind, dated. */
struct event *listen_add_event(struct listen *listen, enum event_kind kind, uint64_t known_frame);
/* Watch time of a frame and a part of one. */
int64_t listen_time_at(const struct listen *listen, double frame);

/* Chooses the channels that recognise what is no animal's and creates what they need. */
enum status listen_create_calls(struct listen *listen);
/* A call that a channel found, for the joiner. */
void listen_take_call(void *context, uint32_t channel, const struct found_call *found);
/* A sound that is no animal's, of the channels that recognise them (context: the stream). */
void listen_take_other(void *context, const struct found_call *found);
/* The block's sound, once every ear has it. */
void listen_push_others(struct listen *listen, uint32_t n_frames);
/* An impulse of the reference channel. */
void listen_take_alone(struct listen *listen, const struct found_impulse *found);
/* Gives what may go before end_frame: calls first, then sounds that were gathered; `all`: everything. */
void listen_give_calls(struct listen *listen, bool all);

#endif
