/* How certain a call is: the share of calls like it that are right.
 *
 * A logistic model with few terms, one for tones and one for trains: the log-odds of the call's class, which
 * are right as often as its file says (`certainty`), and for each measure its weight times how far it is from
 * what is usual. Weights and what is usual stand in the catalogue's certainty.cfg, fitted on simulated seas
 * (tests/bench/certainty_fit.py) and judged on others; docs/detectors.md has the figures. The shares of other
 * seas differ, which is why people are given a grade and not the number. */
#ifndef CALL_CERTAINTY_H
#define CALL_CERTAINTY_H

#include "call/catalogue.h"

/* What the detectors measure of a tone ... */
enum tone_measure {
    TONE_LENGTH,    /* ln of its duration over the class's shortest */
    TONE_BEND,      /* ln of its departure from a straight line, in bins, and 0.1 */
    TONE_JUMP,      /* ln of its jumps from frame to frame, in bins, and 0.1 */
    TONE_OCCUPANCY, /* ln of the share of the last half minute in which its cells were full, and 0.01 */
    TONE_CONTRAST,  /* dB over the cells beside it */
    TONE_STRENGTH   /* dB over the class's least SNR, at most 15 */
};

/* ... and of a train. */
enum train_measure {
    TRAIN_EXCESS,    /* ln of 1 and the nats by which it is more than chance than its class asks for */
    TRAIN_STRAYS,    /* ln of 0.1 and the pulses at random in one interval */
    TRAIN_JITTER,    /* ln of its jitter over the class's largest, and 0.01 */
    TRAIN_LIKENESS,  /* mean likeness of neighbouring pulses (call/pulse_shape.h), none below 0 */
    TRAIN_LENGTH,    /* size of ln(length of its pulses over the class's) */
    TRAIN_BANDWIDTH, /* ln of the bandwidth of its pulses over that of the class */
    TRAIN_STRENGTH   /* dB over the class's least SNR, at most 30 */
};

/* Name of the i-th measure of a form, as certainty.cfg has it; NULL after the last. */
const char *certainty_measure_name(enum call_form form, uint32_t i);

/* 0 to 1; 0.01 at the least, 0.99 at the most: the benches have no more to say. */
double certainty_find(const struct certainty_table *table, const struct call_class *call_class,
                      const double measures[CALL_MEASURES]);
/* The grade that people are given: "doubtful" below 0.5, "possible", "probable" from 0.8. */
const char *certainty_text(double certainty);
/* Log-odds that a call of that certainty adds to a contact: at least 0 (a doubtful call speaks for nobody and
 * against nobody), at most what the class allows one call. */
double certainty_evidence(double certainty, const struct call_class *call_class);

#endif
