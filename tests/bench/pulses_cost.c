/* What the pulse finder costs a sample in noise alone (quiet) and with 200 pulses a second a tenth of the
 * time (busy), and the gate of the own source, as JSON. */
#include "base/random.h"
#include "call/gate.h"
#include "call/pulses.h"
#include "support/bench.h"
#include "support/catalogue.h"
#include "support/clicks.h"
#include <stdio.h>
#include <stdlib.h>

#define SECONDS 10
#define PIECE 4096u

static struct catalogue catalogue;

static void drop(void *context, const struct found_call *call)
{
    (void)context;
    (void)call;
}

static float *make_noise(size_t n, struct random *random)
{
    float *samples = calloc(n, sizeof *samples);
    random_reset(random, 3);
    if (samples)
        clicks_add_noise(samples, n, 1e-3, random);
    return samples;
}

static bool measure_pulses(double rate_hz, bool busy)
{
    size_t n = (size_t)(rate_hz * SECONDS);
    struct random random;
    struct pulses *pulses;
    float *samples = make_noise(n, &random);
    if (!samples || pulses_create(catalogue.classes, catalogue.n_classes, rate_hz, &pulses) != STATUS_OK) {
        free(samples);
        return false;
    }
    for (double t = 4; busy && t < 5; t += random_exponential(&random) / 200)
        clicks_add_gabor(samples, n, rate_hz, t * rate_hz, 0.05, 40e3, 9e-6);
    pulses_reset(pulses, 0);
    double start_s = bench_cpu_s();
    for (size_t at = 0; at + PIECE <= n; at += PIECE)
        pulses_push(pulses, samples + at, PIECE, &(struct found_sink){drop, NULL});
    printf("{\"bench\": \"pulses_cost\", \"rate_hz\": %.0f, \"sea\": \"%s\", \"ns_per_sample\": %.2f}\n",
           rate_hz, busy ? "busy" : "quiet", (bench_cpu_s() - start_s) * 1e9 / (double)n);
    pulses_destroy(pulses);
    free(samples);
    return true;
}

static bool measure_gate(double rate_hz)
{
    size_t n = (size_t)(rate_hz * SECONDS);
    struct random random;
    struct gate *gate;
    float *samples = make_noise(n, &random);
    if (!samples || gate_create(rate_hz, 2, &gate) != STATUS_OK) {
        free(samples);
        return false;
    }
    gate_reset(gate, 0);
    double start_s = bench_cpu_s();
    for (size_t at = 0; at + PIECE <= n; at += PIECE)
        gate_push(gate, samples + at, PIECE, NULL);
    printf("{\"bench\": \"gate_cost\", \"rate_hz\": %.0f, \"ns_per_sample\": %.2f}\n", rate_hz,
           (bench_cpu_s() - start_s) * 1e9 / (double)n);
    gate_destroy(gate);
    free(samples);
    return true;
}

int main(void)
{
    static const double rates_hz[] = {96000, 192000, 384000};
    if (!test_load_catalogue(&catalogue))
        return 3;
    for (int r = 0; r < 3; r++)
        for (int busy = 0; busy < 2; busy++)
            if (!measure_pulses(rates_hz[r], busy))
                return 3;
    return measure_gate(192000) ? 0 : 3;
}
