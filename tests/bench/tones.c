/* What the tone tracer costs: ns a sample and channel on Gaussian noise with a call every 2 s, as JSON. */
#include "call/tones.h"
#include "base/random.h"
#include "support/catalogue.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>

#define SECONDS 20

static void count(void *context, const struct found_call *found)
{
    (void)found;
    ++*(uint32_t *)context;
}

static double now_s(void)
{
    struct timespec t;
    clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

static void run(const struct catalogue *catalogue, double rate_hz)
{
    const uint32_t n = (uint32_t)(SECONDS * rate_hz);
    float *samples = malloc(n * sizeof *samples);
    struct tones *tones = NULL;
    if (!samples || tones_create(catalogue->classes, catalogue->n_classes, rate_hz, &tones) != STATUS_OK)
        exit(3);
    struct random random;
    random_reset(&random, 1);
    for (uint32_t i = 0; i < n; i++) {
        double t = fmod(i / rate_hz, 2.0);
        double call = t < 0.9 ? 0.5 * sin(2 * 3.14159265358979 * (300 * t + 200 * t * t)) : 0;
        samples[i] = (float)(random_normal(&random) * sqrt(rate_hz / 48000) + call);
    }
    uint32_t n_calls = 0;
    struct found_sink sink = {count, &n_calls};
    for (uint32_t i = 0; i < n; i += 2048) /* once to warm up */
        tones_push(tones, samples + i, n - i < 2048 ? n - i : 2048, &sink);
    double start = now_s();
    n_calls = 0;
    for (uint32_t i = 0; i < n; i += 2048)
        tones_push(tones, samples + i, n - i < 2048 ? n - i : 2048, &sink);
    double spent = now_s() - start;
    printf(
        "{\"bench\": \"tones\", \"rate_hz\": %.0f, \"seconds\": %d, \"calls\": %u, \"ns_per_sample\": %.2f, "
        "\"times_real_time\": %.0f}\n",
        rate_hz, SECONDS, n_calls, 1e9 * spent / n, SECONDS / spent);
    tones_destroy(tones);
    free(samples);
}

int main(void)
{
    static struct catalogue catalogue;
    if (!test_load_catalogue(&catalogue))
        return 2;
    run(&catalogue, 48000);
    run(&catalogue, 192000);
    run(&catalogue, 384000);
    return 0;
}
