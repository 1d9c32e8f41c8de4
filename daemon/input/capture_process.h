/* One life of hushwatch-capture: a process with a ring of its own. It may hang, flood its error output or
 * write anything into the ring; nothing here waits for it or believes it. */
#ifndef INPUT_CAPTURE_PROCESS_H
#define INPUT_CAPTURE_PROCESS_H

#include "base/status.h"
#include "ring/ring.h"
#include <stdbool.h>
#include <sys/types.h>

#define CAPTURE_WORDS_SIZE 4096

struct capture_plan {
    const char *device;
    double rate_hz, latency_s;
    uint32_t n_channels;
};

struct capture_process {
    pid_t pid;     /* 0: none, or already reaped */
    int error_fd;  /* reading end of its error output; -1: none */
    int exit_code; /* once it has ended; -1 when a signal ended it */
    void *memory;  /* of the ring; NULL: none */
    size_t size;
    struct ring ring;
    size_t n_words;
    char words[CAPTURE_WORDS_SIZE]; /* the last of what it wrote to its error output */
};

/* Makes a ring of at least 2 s and starts the program that lies beside this one. It ends with the thread that
 * called this (prctl(2), PR_SET_PDEATHSIG), at the latest with the process. STATUS_SYSTEM with errno, and
 * nothing is left, when that is not possible. */
enum status capture_process_start(struct capture_process *process, const struct capture_plan *plan);

/* Reads some of its error output and sees whether it has ended. Waits for nothing. */
void capture_process_look(struct capture_process *process);

/* Whether it still is there (or has ended and nobody looked yet). */
bool capture_process_is_there(const struct capture_process *process);

/* Ends it at once (SIGKILL); it is gone when capture_process_look has seen so. */
void capture_process_kill(struct capture_process *process);

/* Kills it, waits at most wait_s for its end, and frees its ring. */
void capture_process_end(struct capture_process *process, double wait_s);

/* Frees its ring; the process may still be there. */
void capture_process_release(struct capture_process *process);

/* The last line that the program itself wrote to its error output, without its name; "" when there is none.
 */
void capture_process_get_words(const struct capture_process *process, char *out, size_t size);

#endif
