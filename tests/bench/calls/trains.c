/* Trains of 8 pulses with 4 % jitter of each train class in white Gaussian noise, at 0.1 false trains an
 * hour, beside the single-pulse ideal at 1 an hour. */
#include "base/units.h"
#include "bench/calls/calls.h"
#include "call/pulses.h"
#include "support/clicks.h"
#include "support/finder.h"
#include "support/ideal.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define N_LEVELS 8
#define STEP_DB 0.5
#define FIRST_DB (-3.5) /* of the single-pulse ideal's 2E/N0 */
#define N_PULSES 8
#define JITTER 0.04

struct heard {
    uint32_t n;
    double latest_s;
    double rate_hz;
};

static void hear(void *context, const struct found_call *found)
{
    struct heard *heard = context;
    double late_s = ((double)found->known_frame - found->end_frame) / heard->rate_hz;
    heard->n++;
    heard->latest_s = fmax(heard->latest_s, late_s);
}

struct trial {
    const struct call_class *call_class;
    struct pulses *pulses;
    double rate_hz, before_s, interval_s;
    size_t n_frames;
    float *x;
    struct random random;
};

/* One train after some seconds of sea; whether it was given. */
static bool try_train(struct trial *trial, double lambda, double *out_delay_s)
{
    struct heard heard = {.rate_hz = trial->rate_hz};
    struct found_sink sink = {hear, &heard};
    memset(trial->x, 0, trial->n_frames * sizeof *trial->x);
    clicks_add_noise(trial->x, trial->n_frames, 1, &trial->random);
    double t_s = trial->before_s, interval_s = trial->interval_s;
    for (int k = 0; k < N_PULSES; k++) {
        finder_add_pulse(trial->x, trial->n_frames, trial->rate_hz, t_s * trial->rate_hz, lambda,
                         trial->call_class);
        interval_s *= exp(JITTER * random_normal(&trial->random)); /* the interval walks */
        t_s += interval_s;
    }
    pulses_reset(trial->pulses, 0);
    pulses_push(trial->pulses, trial->x, (uint32_t)trial->n_frames, &sink);
    pulses_finish(trial->pulses, &sink);
    *out_delay_s = heard.latest_s;
    return heard.n > 0;
}

static bool trial_create(const struct calls_setup *setup, const struct call_class *call_class,
                         uint32_t number, struct trial *out)
{
    const struct train_shape *train = &call_class->train;
    *out = (struct trial){.call_class = call_class, .rate_hz = calls_lowest_rate(call_class)};
    out->interval_s = sqrt(train->min_interval_s * train->max_interval_s);
    out->before_s = 20 * train->max_interval_s;
    double after_s = call_class->natural_delay_s + 0.2;
    out->n_frames = (size_t)((out->before_s + (N_PULSES + 1) * out->interval_s + after_s) * out->rate_hz);
    random_reset(&out->random, calls_seed(setup, 4, number));
    out->x = calloc(out->n_frames, sizeof *out->x);
    return out->x && out->rate_hz > 0 &&
           pulses_create(call_class, 1, out->rate_hz, &out->pulses) == STATUS_OK;
}

static json_t *measure(const struct calls_setup *setup, const struct call_class *of, uint32_t number)
{
    struct call_class call_class = *of;
    calls_free_shape(&call_class);
    struct trial trial;
    call_class.false_per_hour = 0.1;
    if (!trial_create(setup, &call_class, number, &trial))
        return NULL;
    double w_hz = call_class.high_hz - call_class.low_hz;
    double ideal_db = units_power_db(ideal_energy_lambda(w_hz, call_class.train.pulse_s, 1, 0.9));
    /* Slow classes cost minutes of sound a trial. */
    double sound_s = (double)trial.n_frames / 48000;
    uint32_t n = calls_trials(setup, sound_s > 20 ? 100 : 200, 10);
    double levels[N_LEVELS], pd[N_LEVELS], *delays = calloc((size_t)n * N_LEVELS, sizeof(double));
    uint32_t n_delays = 0;
    for (int i = 0; delays && i < N_LEVELS; i++) {
        uint32_t given = 0;
        levels[i] = ideal_db + FIRST_DB + STEP_DB * i;
        for (uint32_t k = 0; k < n; k++)
            if (try_train(&trial, units_power_ratio(levels[i]), &delays[n_delays]))
                given++, n_delays++;
        pd[i] = (double)given / n;
    }
    double at_db = ideal_crossing(levels, pd, N_LEVELS);
    json_t *row =
        json_pack("{s:s, s:f, s:f, s:i, s:o, s:f, s:o, s:o, s:o, s:o, s:o}", "class", call_class.name,
                  "rate_hz", trial.rate_hz, "interval_s", trial.interval_s, "trials", (int)n, "pd90_db",
                  calls_number(at_db), "ideal_db", ideal_db, "gain_db", calls_number(ideal_db - at_db),
                  "levels_db", calls_numbers(levels, N_LEVELS), "pd", calls_numbers(pd, N_LEVELS),
                  "delay_p50_s", calls_number(calls_quantile(delays, n_delays, 0.5)), "delay_p99_s",
                  calls_number(calls_quantile(delays, n_delays, 0.99)));
    pulses_destroy(trial.pulses);
    free(trial.x);
    free(delays);
    return row;
}

json_t *calls_trains(const struct calls_setup *setup)
{
    json_t *rows = json_array();
    for (uint32_t c = 0; c < setup->catalogue->n_classes; c++) {
        const struct call_class *call_class = &setup->catalogue->classes[c];
        if (calls_has_train_of(call_class, 8) && call_class->train.min_pulses <= N_PULSES &&
            json_array_append_new(rows, measure(setup, call_class, c)) != 0)
            return NULL;
    }
    return json_pack("{s:o}", "rows", rows);
}
