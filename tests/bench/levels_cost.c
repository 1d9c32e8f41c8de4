/* What levels cost a channel-second, as JSON, beside scipy's Butterworth decidecades on the same samples in
 * the same run: our meter (SPL, peak, decidecades, running levels of a second) and our impulse finder. scipy
 * does the bands alone, as a bank of third-order band-passes at the input's rate (scipy.signal.sosfilt), so
 * the two are not the same work; only the ratio in one run means anything.
 *
 * usage: levels_cost [RATE_HZ [SECONDS]] */
#include "base/random.h"
#include "level/impulses.h"
#include "level/meter.h"
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>
#include <unistd.h>

static double cpu_s(void)
{
    struct timespec now;
    clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &now);
    return (double)now.tv_sec + (double)now.tv_nsec * 1e-9;
}

static void ignore_level(void *context, const struct found_level *level)
{
    (void)context;
    (void)level;
}

static void ignore_impulse(void *context, const struct found_impulse *impulse)
{
    (void)context;
    (void)impulse;
}

int main(int argc, char **argv)
{
    double rate_hz = argc > 1 ? atof(argv[1]) : 192000;
    double seconds = argc > 2 ? atof(argv[2]) : 10;
    uint32_t n = (uint32_t)(rate_hz * seconds);
    float *samples = malloc(n * sizeof *samples);
    struct random random;
    struct meter *meter;
    struct impulse_finder *finder;
    char path[] = "/tmp/hushwatch-levels-XXXXXX", command[512];
    int file = mkstemp(path);
    random_reset(&random, 1);
    if (!samples || file < 0 || meter_create(rate_hz, false, &meter) != STATUS_OK ||
        impulse_finder_create(rate_hz, 1000, true, &finder) != STATUS_OK)
        return 3;
    for (uint32_t i = 0; i < n; i++)
        samples[i] = (float)random_normal(&random);
    double start = cpu_s();
    for (uint32_t at = 0; at + 4096 <= n; at += 4096)
        meter_push(meter, samples + at, 4096, &(struct level_sink){ignore_level, NULL});
    double meter_s = cpu_s() - start;
    start = cpu_s();
    for (uint32_t at = 0; at + 4096 <= n; at += 4096)
        impulse_finder_push(finder, samples + at, 4096, &(struct impulse_sink){.take = ignore_impulse});
    double impulses_s = cpu_s() - start;
    bool written = write(file, samples, n * sizeof *samples) == (ssize_t)(n * sizeof *samples);
    printf("{\"bench\": \"levels_cost\", \"rate_hz\": %.0f, \"levels_ms_per_channel_second\": %.3f, "
           "\"impulses_ms_per_channel_second\": %.3f, ",
           rate_hz, meter_s / seconds * 1e3, impulses_s / seconds * 1e3);
    fflush(stdout);
    snprintf(command, sizeof command, "/usr/bin/python3 tests/support/levels_bench.py %s %.0f %.9f", path,
             rate_hz, meter_s);
    int code = written ? system(command) : 3;
    meter_destroy(meter);
    impulse_finder_destroy(finder);
    free(samples);
    close(file);
    unlink(path);
    return code == 0 ? 0 : 3;
}
