/* Limits on tries of a password: after a few that fail, each one more makes whoever tried wait longer.
 * Counted by address and not by name, or anybody could keep an observer out by failing in that name; the
 * daemon checks one password at a time, which bounds what many addresses can try together. */
#ifndef ACCESS_TRIES_H
#define ACCESS_TRIES_H

#include <stdint.h>

#define TRIES_PLACES 128
#define TRIES_FREE 5             /* that may fail before anybody waits */
#define TRIES_LONGEST_S 60       /* the wait doubles up to this */
#define TRIES_FORGET_S (15 * 60) /* after so long without a try all is forgotten */

struct tries_place {
    char key[64];
    uint32_t n_failed;
    int64_t last_ns;
};

struct tries {
    struct tries_place places[TRIES_PLACES];
};

void tries_reset(struct tries *tries);
/* How long the key must still wait; 0: it may try. Times are of the monotonic clock. */
int64_t tries_wait_ns(const struct tries *tries, const char *key, int64_t now_ns);
/* A try that failed. The key that was longest without one makes room where there is none. */
void tries_failed(struct tries *tries, const char *key, int64_t now_ns);
/* A try that was good: the key's count is forgotten. */
void tries_good(struct tries *tries, const char *key);

#endif
