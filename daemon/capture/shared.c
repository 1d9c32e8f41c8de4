#include "capture/shared.h"
#include <stdio.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <time.h>

#define MAX_SINCE_S 1.0
#define MAX_AGE_S 10.0

static double clock_s(clockid_t clock)
{
    struct timespec t;
    clock_gettime(clock, &t);
    return (double)t.tv_sec + (double)t.tv_nsec * 1e-9;
}

int64_t capture_now_ns(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC_RAW, &t);
    return (int64_t)t.tv_sec * 1000000000 + t.tv_nsec;
}

struct ring_mark capture_stamp(double info_s, double first_s, bool overrun)
{
    /* The first frame's age when the system looked, and the time since then. The system's clock is the wall
     * clock or the monotonic one, as the driver has it. The stamp's own clock is read last: who is put to
     * sleep between the readings stamps too late, which the account expects, and never too early. */
    double age_s = info_s - first_s, since_s = clock_s(CLOCK_REALTIME) - info_s;
    if (!(since_s >= 0 && since_s < MAX_SINCE_S))
        since_s = clock_s(CLOCK_MONOTONIC) - info_s;
    struct ring_mark stamp = {.ns = capture_now_ns(), .overrun = overrun};
    if (since_s >= 0 && since_s < MAX_SINCE_S && age_s > 0 && age_s < MAX_AGE_S)
        stamp.first_ns = stamp.ns - (int64_t)((age_s + since_s) * 1e9);
    if (stamp.first_ns < 0)
        stamp.first_ns = 0;
    return stamp;
}

bool capture_map_ring(int fd, uint32_t n_channels, struct ring *out)
{
    struct stat facts;
    void *memory = MAP_FAILED;
    if (fstat(fd, &facts) == 0 && facts.st_size > 0)
        memory = mmap(NULL, (size_t)facts.st_size, PROT_READ | PROT_WRITE, MAP_SHARED, fd, 0);
    if (memory == MAP_FAILED) {
        fprintf(stderr, "hushwatch-capture: file %d holds no memory that can be shared\n", fd);
        return false;
    }
    if (ring_attach(out, memory, (size_t)facts.st_size) == STATUS_OK && out->n_channels == n_channels)
        return true;
    fprintf(stderr, "hushwatch-capture: file %d holds no ring of %u channels\n", fd, n_channels);
    munmap(memory, (size_t)facts.st_size);
    return false;
}
