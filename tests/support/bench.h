/* What a bench of the whole watch measures on, and beside what. */
#ifndef SUPPORT_BENCH_H
#define SUPPORT_BENCH_H

#include "level/calibration.h"
#include <stdbool.h>
#include <stdint.h>

struct bench_sound {
    double rate_hz;
    uint32_t n_channels;
    uint64_t n_frames;
    float *frames; /* [n_frames * n_channels] */
    struct calibration calibration;
};

/* CPU time of this thread. */
double bench_cpu_s(void);
/* What one look at that clock costs: it is a system call, and there are many between the stages. */
double bench_clock_cost_s(void);
/* What the process has in memory now. */
double bench_resident_mib(void);
/* Fills sound->frames with the busy scene at its rate, channels and length; the caller frees them. Prints and
 * gives false where it cannot. */
bool bench_render_busy(struct bench_sound *sound);
/* CPU time of the bare spectra of all channels: window, FFTW (single precision, 1024 points, estimated plan),
 * magnitude, half overlapped. */
double bench_bare_spectra_s(const struct bench_sound *sound);

#endif
