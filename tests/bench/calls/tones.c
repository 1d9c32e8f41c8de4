/* Tones of each class in white Gaussian noise at 1 false call an hour, beside the non-coherent sum along the
 * true contour at 1 false alarm an hour. */
#include "call/tones.h"
#include "base/units.h"
#include "bench/calls/calls.h"
#include "support/contours.h"
#include "support/ideal.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define N_LEVELS 14
#define FIRST_DB (-3.0)
#define STEP_DB 1.0
#define PIECE 1024

struct bench {
    struct call_class call_class;
    struct tones *tones;
    struct contour_signal signal;
    struct contour_cells cells;
    struct random random;
    float *mixed;
    double rate_hz, looks_per_hour, start_frame, end_frame; /* of the call that is looked for */
    uint64_t next_frame;
    uint32_t n_reference, n_hit, n_other, n_delays;
    double *delays; /* [trials * N_LEVELS], s */
};

/* Any call that covers half of the true one; the first of them counts. */
static void look(void *context, const struct found_call *found)
{
    struct bench *bench = context;
    double common = fmin(found->end_frame, bench->end_frame) - fmax(found->start_frame, bench->start_frame);
    bool hit =
        bench->end_frame > bench->start_frame && common >= 0.5 * (bench->end_frame - bench->start_frame);
    if (hit && bench->delays)
        bench->delays[bench->n_delays++] = ((double)found->known_frame - found->end_frame) / bench->rate_hz;
    bench->n_hit += hit;
    bench->n_other += !hit;
    if (hit)
        bench->end_frame = bench->start_frame;
}

static void push_noise(struct bench *bench, double seconds)
{
    struct found_sink sink = {look, bench};
    float noise[PIECE];
    for (uint64_t left = (uint64_t)(seconds * bench->rate_hz); left > 0;) {
        uint32_t n = left < PIECE ? (uint32_t)left : PIECE;
        for (uint32_t i = 0; i < n; i++)
            noise[i] = (float)random_normal(&bench->random);
        tones_push(bench->tones, noise, n, &sink);
        bench->next_frame += n;
        left -= n;
    }
}

/* One call in noise of unit variance, scaled to the SNR, and noise after it. */
static void try_call(struct bench *bench, double snr_db)
{
    struct contour_signal *signal = &bench->signal;
    struct found_sink sink = {look, bench};
    contour_signal_draw(signal, &bench->call_class, &bench->random);
    contour_cells_find(&bench->cells, signal);
    double now = contour_cells_sum(&bench->cells, signal->samples) / bench->cells.n_frames;
    float gain = (float)sqrt(units_power_ratio(snr_db) / now);
    for (uint32_t i = 0; i < signal->n; i++)
        bench->mixed[i] = gain * signal->samples[i] + (float)random_normal(&bench->random);
    double threshold = ideal_gamma_quantile(bench->cells.n_frames, 1 / bench->looks_per_hour);
    bench->n_reference += contour_cells_sum(&bench->cells, bench->mixed) > threshold;
    bench->start_frame = (double)bench->next_frame;
    bench->end_frame = (double)bench->next_frame + signal->n;
    tones_push(bench->tones, bench->mixed, signal->n, &sink);
    bench->next_frame += signal->n;
    push_noise(bench, 1.5 + 2 * bench->call_class.natural_delay_s);
    bench->end_frame = bench->start_frame;
}

static bool bench_create(struct bench *bench, const struct calls_setup *setup,
                         const struct call_class *call_class, uint32_t number, uint32_t n_trials)
{
    *bench = (struct bench){.call_class = *call_class, .rate_hz = calls_lowest_rate(call_class)};
    bench->call_class.false_per_hour = 1;
    random_reset(&bench->random, calls_seed(setup, 5, number));
    bool good = contour_signal_create(&bench->signal, bench->rate_hz, contour_signal_longest_s(call_class));
    good = contour_cells_create(&bench->cells, call_class->tone.window_s, bench->rate_hz) && good;
    bench->looks_per_hour = 3600 * bench->rate_hz / (bench->cells.n / 2);
    bench->mixed = calloc(bench->signal.room, sizeof(float));
    bench->delays = calloc((size_t)n_trials * N_LEVELS, sizeof(double));
    return good && bench->mixed && bench->delays &&
           tones_create(&bench->call_class, 1, bench->rate_hz, &bench->tones) == STATUS_OK;
}

static void bench_destroy(struct bench *bench)
{
    contour_signal_destroy(&bench->signal);
    contour_cells_destroy(&bench->cells);
    tones_destroy(bench->tones);
    free(bench->mixed);
    free(bench->delays);
}

static json_t *give_row(struct bench *bench, const double *levels, const double *pd, const double *reference,
                        uint32_t n_trials, double noise_hours, uint32_t n_false)
{
    double at_db = ideal_crossing(levels, pd, N_LEVELS);
    double reference_db = ideal_crossing(levels, reference, N_LEVELS);
    return json_pack("{s:s, s:f, s:i, s:i, s:o, s:o, s:o, s:f, s:i, s:o, s:o, s:o, s:o, s:o}", "class",
                     bench->call_class.name, "rate_hz", bench->rate_hz, "fft", (int)bench->cells.n, "trials",
                     (int)n_trials, "pd90_db", calls_number(at_db), "ideal_db", calls_number(reference_db),
                     "loss_db", calls_number(at_db - reference_db), "noise_hours", noise_hours, "noise_false",
                     (int)n_false, "levels_db", calls_numbers(levels, N_LEVELS), "pd",
                     calls_numbers(pd, N_LEVELS), "pd_ideal", calls_numbers(reference, N_LEVELS),
                     "delay_p50_s", calls_number(calls_quantile(bench->delays, bench->n_delays, 0.5)),
                     "delay_p99_s", calls_number(calls_quantile(bench->delays, bench->n_delays, 0.99)));
}

static json_t *measure(const struct calls_setup *setup, const struct call_class *call_class, uint32_t number)
{
    struct bench bench;
    uint32_t n = calls_trials(setup, 200, 20);
    double levels[N_LEVELS], pd[N_LEVELS], reference[N_LEVELS];
    if (!bench_create(&bench, setup, call_class, number, n)) {
        bench_destroy(&bench);
        return NULL;
    }
    push_noise(&bench, 10);
    uint32_t before = bench.n_other;
    double noise_hours = 4 * setup->scale;
    push_noise(&bench, noise_hours * 3600);
    uint32_t n_false = bench.n_other - before;
    for (uint32_t i = 0; i < N_LEVELS; i++) {
        levels[i] = FIRST_DB + STEP_DB * i;
        bench.n_hit = bench.n_reference = 0;
        for (uint32_t k = 0; k < n; k++)
            try_call(&bench, levels[i]);
        pd[i] = bench.n_hit / (double)n;
        reference[i] = bench.n_reference / (double)n;
    }
    json_t *row = give_row(&bench, levels, pd, reference, n, noise_hours, n_false);
    bench_destroy(&bench);
    return row;
}

json_t *calls_tones(const struct calls_setup *setup)
{
    json_t *rows = json_array();
    for (uint32_t c = 0; c < setup->catalogue->n_classes; c++) {
        const struct call_class *call_class = &setup->catalogue->classes[c];
        if (call_class->form == CALL_TONE && call_class->animal &&
            call_class->tone.max_sideband_hz <= 0 && /* one contour is no comb */
            json_array_append_new(rows, measure(setup, call_class, c)) != 0)
            return NULL;
    }
    return json_pack("{s:o}", "rows", rows);
}
