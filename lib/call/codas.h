/* Codas: short series of pulses of one class that are tied by how they look and how loud they are, whatever
 * their rhythm; those of animals that call at the same time are told apart.
 *
 * Method: the pulses of a stretch are gathered until a longest interval has passed without one, and grouped
 * by likeness (call/alike.h; clustering clicks by their likeness after Gubnitsky and Diamant 2024, arXiv
 * 2407.17119). A group is given as a train when it has min_pulses and its times are less likely by chance
 * than the class allows: each interval I has density 1 / (I ln(max / min)) against the rate of the pulses
 * that were tied to nothing in the last 60 longest intervals and those that noise gives, as in call/trains.h.
 *
 * Call order and ownership are those of call/trains.h. */
#ifndef CALL_CODAS_H
#define CALL_CODAS_H

#include "base/status.h"
#include "call/catalogue.h"
#include "call/noise_rate.h"
#include "call/train.h"
#include "call/trigger.h"
#include <stdint.h>

struct codas;

/* Of one class in one channel of rate_hz. STATUS_NO_MEMORY. The class is borrowed; the caller owns *out. */
enum status codas_create(const struct call_class *call_class, double rate_hz, struct noise_rate noise,
                         struct codas **out);
void codas_reset(struct codas *codas);
/* Takes the next pulse (in order of arrival). Adds to rejections[REJECT_COUNT]. */
void codas_push(struct codas *codas, const struct pulse *pulse, const struct train_sink *sink,
                uint64_t *rejections);
/* Says that no pulse before `frame` will come any more. */
void codas_advance(struct codas *codas, double frame, const struct train_sink *sink, uint64_t *rejections);
void codas_finish(struct codas *codas, const struct train_sink *sink, uint64_t *rejections);
/* The pulses that arrived in [start, end] are the own source's: they count for no coda. */
void codas_hide(struct codas *codas, double start_frame, double end_frame, uint64_t *rejections);
void codas_destroy(struct codas *codas);

#endif
