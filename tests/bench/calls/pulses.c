/* Single pulses of each train class in white Gaussian noise, at 1 false pulse an hour, beside the ideal. */
#include "base/units.h"
#include "bench/calls/calls.h"
#include "support/finder.h"
#include "support/ideal.h"
#include <math.h>
#include <stdlib.h>

#define N_LEVELS 9
#define STEP_DB 0.5
#define FIRST_DB (-2.0) /* of the ideal's 2E/N0 */
#define THRESHOLD_STEP_DB 0.5

/* A rate that carries the class with room to spare, for one class by itself: its band may be far below any
 * input's. */
static double finder_rate(const struct call_class *call_class)
{
    double edge_hz = fmax(call_class->high_hz, call_class->train.guard_high_hz), rate_hz = 125;
    while (rate_hz < 2.5 * edge_hz)
        rate_hz *= 2;
    return rate_hz;
}

struct noise_counts {
    double thresholds[IDEAL_TAIL_STEPS]; /* power over background */
    uint64_t n[IDEAL_TAIL_STEPS], n_hourly;
    double hourly;
};

static void count(void *context, const struct pulse *pulse)
{
    struct noise_counts *counts = context;
    for (int i = 0; i < IDEAL_TAIL_STEPS; i++)
        counts->n[i] += 1 + pulse->snr > counts->thresholds[i];
    counts->n_hourly += 1 + pulse->snr > counts->hourly;
}

static bool count_noise(const struct call_class *call_class, double rate_hz, uint64_t seed, double seconds,
                        struct noise_counts *counts)
{
    struct finder *finder = finder_create(call_class, rate_hz, seed, (struct pulse_sink){count, counts});
    if (!finder)
        return false;
    while ((double)finder->n_frames < seconds * rate_hz) {
        finder_noise(finder);
        finder_push(finder);
    }
    finder_destroy(finder);
    return true;
}

struct hits {
    double threshold, wanted_frame, reach_frames;
    uint32_t n;
};

static void hit(void *context, const struct pulse *pulse)
{
    struct hits *hits = context;
    hits->n +=
        1 + pulse->snr > hits->threshold && fabs(pulse->frame - hits->wanted_frame) < hits->reach_frames;
}

/* Share of n pulses found above the threshold; NAN on failure. */
static double found_share(const struct call_class *call_class, double rate_hz, uint64_t seed,
                          double threshold, double lambda, uint32_t n)
{
    struct hits hits = {.threshold = threshold, .reach_frames = call_class->train.pulse_s * rate_hz};
    struct pulse_sink sink = {hit, &hits};
    struct finder *finder = finder_create(call_class, rate_hz, seed, sink);
    if (!finder)
        return NAN;
    for (int i = 0; i < 200; i++) {
        finder_noise(finder);
        finder_push(finder);
    }
    /* Beyond every echo time. */
    double apart_s = fmax(0.02, 2 * trigger_get_echo(call_class));
    uint32_t apart = 1 + (uint32_t)ceil(apart_s * rate_hz / finder->block_frames);
    for (uint32_t i = 0; i < n * apart; i++) {
        finder_noise(finder);
        if (i % apart == 0) {
            double frame = (0.3 + 0.4 * random_uniform(&finder->random)) * finder->block_frames;
            finder_add_pulse(finder->block, finder->block_frames, rate_hz, frame, lambda, call_class);
            hits.wanted_frame = (double)finder->n_frames + frame;
        }
        finder_push(finder);
    }
    trigger_finish(finder->trigger, &sink);
    finder_destroy(finder);
    return (double)hits.n / n;
}

struct noise_law {
    double rate_hz, seconds, threshold; /* at 1 an hour */
    struct ideal_tail tail;
    double check_hours;
    uint64_t n_check;
};

/* Four thresholds over 10 min with a fitted gamma tail; slow classes, which look seldom, take longer. With
 * check hours, the law is held against as much noise. */
static bool learn_noise(const struct calls_setup *setup, const struct call_class *call_class, uint32_t number,
                        struct noise_law *out)
{
    struct noise_counts counts = {.hourly = INFINITY};
    out->rate_hz = finder_rate(call_class);
    double w_hz = call_class->high_hz - call_class->low_hz;
    out->seconds = 600 * fmax(1, fmin(60, 2000 / w_hz)) * fmin(1, fmax(0.05, setup->scale));
    for (int i = 0; i < IDEAL_TAIL_STEPS; i++)
        counts.thresholds[i] = 1 + units_power_ratio(call_class->train.min_snr_db + i * THRESHOLD_STEP_DB);
    if (!count_noise(call_class, out->rate_hz, calls_seed(setup, 1, number), out->seconds, &counts))
        return false;
    out->tail = ideal_tail_fit(counts.thresholds, counts.n, out->seconds);
    out->threshold = ideal_tail_threshold(&out->tail, 1.0 / 3600);
    out->check_hours = setup->scale > 1 ? 2 * setup->scale : 0;
    counts = (struct noise_counts){.hourly = out->threshold};
    bool done = out->check_hours == 0 || count_noise(call_class, out->rate_hz, calls_seed(setup, 2, number),
                                                     out->check_hours * 3600, &counts);
    out->n_check = counts.n_hourly;
    return done;
}

static json_t *measure(const struct calls_setup *setup, const struct call_class *of, uint32_t number)
{
    struct call_class call_class = *of;
    calls_free_shape(&call_class);
    call_class.train.min_guard_db = -60; /* the guard is no part of the comparison */
    struct noise_law law;
    if (!learn_noise(setup, &call_class, number, &law))
        return NULL;
    double w_hz = call_class.high_hz - call_class.low_hz, t_s = call_class.train.pulse_s;
    double ideal_db = units_power_db(ideal_energy_lambda(w_hz, t_s, 1, 0.9));
    double matched_db = units_power_db(ideal_matched_lambda(w_hz, 1, 0.9));
    double levels[N_LEVELS], pd[N_LEVELS], ideal[N_LEVELS];
    uint32_t n = calls_trials(setup, 1000, 100), tw = (uint32_t)fmax(1, round(w_hz * t_s));
    double ideal_threshold_x = ideal_threshold(tw, 1 / (3600 * w_hz));
    for (int i = 0; i < N_LEVELS; i++) {
        levels[i] = ideal_db + FIRST_DB + STEP_DB * i;
        pd[i] = found_share(&call_class, law.rate_hz, calls_seed(setup, 3, number * N_LEVELS + (uint32_t)i),
                            law.threshold, units_power_ratio(levels[i]), n);
        ideal[i] = ideal_detection(tw, units_power_ratio(levels[i]), ideal_threshold_x);
    }
    double at_db = ideal_crossing(levels, pd, N_LEVELS);
    double amplitude = finder_add_pulse(NULL, 0, law.rate_hz, 0, 1, &call_class);
    double envelope_db = units_amplitude_db(amplitude / sqrt(2 * w_hz / law.rate_hz));
    return json_pack(
        "{s:s, s:f, s:f, s:i, s:f, s:f, s:f, s:o, s:o, s:f, s:f, s:o, s:o, s:f, s:o, s:o, s:o, s:f, s:I}",
        "class", call_class.name, "w_hz", w_hz, "t_s", t_s, "trials", (int)n, "rate_hz", law.rate_hz,
        "noise_s", law.seconds, "tail_shape", law.tail.shape, "pd90_db", calls_number(at_db), "loss_db",
        calls_number(at_db - ideal_db), "ideal_db", ideal_db, "matched_db", matched_db, "over_matched_db",
        calls_number(at_db - matched_db), "pd90_envelope_db", calls_number(at_db + envelope_db),
        "threshold_db", units_power_db(law.threshold - 1), "levels_db", calls_numbers(levels, N_LEVELS), "pd",
        calls_numbers(pd, N_LEVELS), "pd_ideal", calls_numbers(ideal, N_LEVELS), "check_hours",
        law.check_hours, "check_false", (json_int_t)law.n_check);
}

json_t *calls_pulses(const struct calls_setup *setup)
{
    json_t *rows = json_array();
    for (uint32_t c = 0; c < setup->catalogue->n_classes; c++) {
        const struct call_class *call_class = &setup->catalogue->classes[c];
        if (calls_has_train_of(call_class, 8) &&
            json_array_append_new(rows, measure(setup, call_class, c)) != 0)
            return NULL;
    }
    return json_pack("{s:o}", "rows", rows);
}
