/* The command line of hushwatch-capture. */
#ifndef CAPTURE_OPTIONS_H
#define CAPTURE_OPTIONS_H

#include "base/status.h"
#include <stdbool.h>
#include <stdint.h>
#include <sys/types.h>

struct capture_options {
    bool help, list;
    int memory_fd;      /* of the ring's shared memory */
    pid_t parent;       /* ends with this process; 0: nobody */
    const char *device; /* name or number; of argv */
    double rate_hz, latency_s;
    uint32_t n_channels;
};

extern const char capture_usage[];

/* STATUS_OK; or STATUS_BAD_ARGUMENT after a line on stderr that says what is wrong and what is allowed. */
enum status capture_options_read(int argc, char **argv, struct capture_options *out);

#endif
