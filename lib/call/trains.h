/* Trains: pulses of one class tied by rhythm and likeness of level; overlapping trains are told apart.
 *
 * Method: a batch of chains over the pulses (after Gerard, Coraluppi and Zimmer, "Analysis of sperm whale
 * click by MHT", 2008: slowly varying interval and amplitude), searched by dynamic programming over pairs of
 * pulses. A chain's score is its likelihood ratio against pulses that come at random (Poisson) at the rate
 * seen around it: each further pulse at interval I after one of interval J: d = ln(I / (m J)), m - 1 pulses
 * missed, density p_d (1 - p_d)^(m - 1) N(d; s) / I against the rate; a level that differs by A dB costs
 * A^2 / (2 * 6^2), one that looks otherwise what its likeness says (call/pulse_shape.h). The rate is that of
 * strays which could stand in the pulse's place: each counts by the same costs of level and look, a kernel
 * density (Parzen 1962) of the sea's own strays, so that pings and snaps that are far louder, or look unlike,
 * do not speak against a chain. The whole chain is scored with s = max_jitter / 4 and with max_jitter, and
 * with levels that spread by 6 dB and by 2.5 dB, at even odds, and the best one counts. Under randomness the
 * expected ratio of each step is at most 1, so the expected number of chains an hour that ever reach a ratio
 * R is at most 3600 rate / R (Ville's inequality for likelihood ratios, here over the branches). A train is
 * given when R > 3600 rate / false_per_hour: the class's stated rate is a bound in random pulses of any rate,
 * in calm noise as in snapping shrimp, and strong pulses, which noise seldom gives, need fewer of them.
 *
 * How a long train is given: first as soon as it is certain (at least min_pulses), then again, as a call of
 * its own that begins with the pulse after the last one given, at most every 10 s or 4 longest intervals (or
 * 200 pulses), and at its end (once 3.3 intervals have passed without a pulse) if at least 3 pulses are new.
 * So a sperm whale that clicks for an hour is a call each 10 s.
 *
 * A rhythm steadier than min_jitter is a machine's: such a train is held until it has 10 pulses, then counted
 * under that name and given as a machine's (train.machine), and its pulses with it. */
#ifndef CALL_TRAINS_H
#define CALL_TRAINS_H

#include "base/status.h"
#include "call/catalogue.h"
#include "call/found.h"
#include "call/noise_rate.h"
#include "call/train.h"
#include "call/trigger.h"
#include <stdint.h>

#define TRAINS_MAX_MEMBERS 256

struct trains;

/* Of one class in one channel of rate_hz. STATUS_NO_MEMORY. The class is borrowed; the caller owns *out. */
enum status trains_create(const struct call_class *call_class, double rate_hz, struct noise_rate noise,
                          struct trains **out);
void trains_reset(struct trains *trains);
/* Takes the next pulse (in order of arrival). Adds to rejections[REJECT_COUNT]. */
void trains_push(struct trains *trains, const struct pulse *pulse, const struct train_sink *sink,
                 uint64_t *rejections);
/* Says that no pulse before `frame` will come any more: ends the trains that have been silent too long. */
void trains_advance(struct trains *trains, double frame, const struct train_sink *sink, uint64_t *rejections);
/* Ends all trains. */
void trains_finish(struct trains *trains, const struct train_sink *sink, uint64_t *rejections);
/* The pulses that arrived in [start, end] are the own source's: they count for no train. Those that a train
 * has already been given for stay given. Adds to rejections[REJECT_OWN_SOURCE]. */
void trains_hide(struct trains *trains, double start_frame, double end_frame, uint64_t *rejections);
void trains_destroy(struct trains *trains);

#endif
