/* From outcomes to entries: writes each outcome's body, gathers level seconds into minutes, and hands the
 * texts to the outbox. Owned by the watch thread. */
#ifndef RECORDER_H
#define RECORDER_H

#include "base/status.h"
#include "flow.h"
#include "ledger/outbox.h"
#include "record/marks.h"
#include "record/minute.h"
#include <stdbool.h>
#include <stdint.h>

struct recorder;

/* run from 1; zero_unix_ns: UTC of watch time zero; max_channels of all streams together. The outbox is
 * borrowed. */
enum status recorder_create(struct outbox *outbox, uint32_t run, int64_t zero_unix_ns, uint32_t max_channels,
                            struct recorder **out);
void recorder_destroy(struct recorder *recorder);

/* The first entries of a run: what it is, and the permit in force. The run mark's own outcome is then passed
 * over. */
enum status recorder_begin(struct recorder *recorder, const struct run_mark *mark,
                           const struct run_facts *facts, const struct permit *permit,
                           const char *permit_text);

/* The id within a body, which holds exactly one; STATUS_NOT_FOUND. */
enum status recorder_id_of(const char *body, char out[FLOW_ID_SIZE]);

/* One outcome of the watch. STATUS_NO_MEMORY. */
enum status recorder_take(struct recorder *recorder, const struct outcome *outcome);

/* Marks that the daemon makes itself, at a watch time. */
enum status recorder_health(struct recorder *recorder, int64_t watch_ns, uint32_t stream, bool ok,
                            const char *text);
enum status recorder_clock(struct recorder *recorder, int64_t watch_ns, uint32_t stream,
                           const struct clock_facts *facts);
enum status recorder_calibration(struct recorder *recorder, int64_t watch_ns, uint32_t stream,
                                 const struct calibration *calibration, const struct channel_facts *facts);

/* A clip that is on the disk; the facts carry their counter. *out_id is its entry's. */
enum status recorder_sound(struct recorder *recorder, int64_t watch_ns, const struct sound_entry_facts *facts,
                           char out_id[FLOW_ID_SIZE]);

/* Who is given each minute's levels when its entry has been made; before the first outcome. */
void recorder_set_minutes(struct recorder *recorder, const struct minute_sink *sink);

/* What is still held (a minute's levels) goes out; at the end of a run. */
enum status recorder_finish(struct recorder *recorder, int64_t watch_ns);

#endif
