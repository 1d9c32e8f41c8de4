/* The busy scene as samples, the clock, the memory, and the bare spectra; see bench.h. */
#include "support/bench.h"
#include "scene/render.h"
#include "settings/scene.h"
#include <fftw3.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>
#include <unistd.h>

double bench_cpu_s(void)
{
    struct timespec now;
    clock_gettime(CLOCK_THREAD_CPUTIME_ID, &now);
    return (double)now.tv_sec + (double)now.tv_nsec * 1e-9;
}

double bench_clock_cost_s(void)
{
    enum { LOOKS = 20000 };
    double start = bench_cpu_s(), end = start;
    for (int i = 0; i < LOOKS; i++)
        end = bench_cpu_s();
    return (end - start) / LOOKS;
}

double bench_resident_mib(void)
{
    unsigned long long size = 0, resident = 0;
    FILE *file = fopen("/proc/self/statm", "r");
    if (!file || fscanf(file, "%llu %llu", &size, &resident) != 2)
        resident = 0;
    if (file)
        fclose(file);
    return (double)resident * (double)sysconf(_SC_PAGESIZE) / 1048576;
}

bool bench_render_busy(struct bench_sound *sound)
{
    static struct scene_file file;
    struct problems problems = {0};
    struct render *render;
    if (scene_load("config/scenes/busy.cfg", &problems, &file) != STATUS_OK) {
        fputs(problems.lines.data ? problems.lines.data : "no scene\n", stderr);
        return false;
    }
    file.scene.rate_hz = sound->rate_hz;
    file.scene.n_hydrophones = sound->n_channels;
    sound->calibration = file.scene.hydrophones[0].calibration;
    sound->calibration.role = ROLE_BOTH;
    sound->frames = malloc(sound->n_frames * sound->n_channels * sizeof(float));
    if (!sound->frames || render_create(&file.scene, &render) != STATUS_OK)
        return false;
    for (uint64_t at = 0; at < sound->n_frames; at += 4096) {
        uint64_t n = sound->n_frames - at < 4096 ? sound->n_frames - at : 4096;
        render_get(render, at, sound->frames + at * sound->n_channels, (uint32_t)n);
    }
    render_destroy(render);
    scene_file_destroy(&file);
    return true;
}

/* Window, FFT, magnitude of one channel, half overlapped. */
double bench_bare_spectra_s(const struct bench_sound *sound)
{
    enum { N = 1024 };
    float *in = fftwf_alloc_real(N), window[N];
    fftwf_complex *out = fftwf_alloc_complex(N / 2 + 1);
    fftwf_plan plan = fftwf_plan_dft_r2c_1d(N, in, out, FFTW_ESTIMATE);
    float *channel = malloc(sound->n_frames * sizeof *channel);
    static volatile float kept;
    double spent = 0;
    for (int i = 0; i < N; i++)
        window[i] = 0.5F - 0.5F * cosf((float)(2 * M_PI * i / N));
    for (uint32_t c = 0; c < sound->n_channels; c++) {
        for (uint64_t i = 0; i < sound->n_frames; i++)
            channel[i] = sound->frames[i * sound->n_channels + c];
        double start = bench_cpu_s();
        for (uint64_t at = 0; at + N <= sound->n_frames; at += N / 2) {
            float magnitude[N / 2 + 1];
            for (int i = 0; i < N; i++)
                in[i] = channel[at + (uint64_t)i] * window[i];
            fftwf_execute(plan);
            for (int k = 0; k <= N / 2; k++)
                magnitude[k] = sqrtf(out[k][0] * out[k][0] + out[k][1] * out[k][1]);
            kept = magnitude[at / N % (N / 2)];
        }
        spent += bench_cpu_s() - start;
    }
    (void)kept;
    free(channel);
    fftwf_destroy_plan(plan);
    fftwf_free(in);
    fftwf_free(out);
    return spent;
}
