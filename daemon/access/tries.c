/* Failed tries: a small table, searched in order. */
#include "access/tries.h"
#include "base/time.h"
#include <stdio.h>
#include <string.h>

void tries_reset(struct tries *tries)
{
    *tries = (struct tries){0};
}

static const struct tries_place *find(const struct tries *tries, const char *key)
{
    for (uint32_t i = 0; i < TRIES_PLACES; i++)
        if (strncmp(tries->places[i].key, key, sizeof tries->places[i].key - 1) == 0)
            return &tries->places[i];
    return NULL;
}

static int64_t wait_after(uint32_t n_failed)
{
    if (n_failed < TRIES_FREE)
        return 0;
    uint32_t doublings = n_failed - TRIES_FREE;
    int64_t wait_s = doublings < 6 ? INT64_C(1) << doublings : TRIES_LONGEST_S;
    return wait_s * TIME_NS_PER_S;
}

int64_t tries_wait_ns(const struct tries *tries, const char *key, int64_t now_ns)
{
    const struct tries_place *place = find(tries, key);
    if (!place)
        return 0;
    int64_t left_ns = place->last_ns + wait_after(place->n_failed) - now_ns;
    return left_ns > 0 ? left_ns : 0;
}

void tries_failed(struct tries *tries, const char *key, int64_t now_ns)
{
    const struct tries_place *known = find(tries, key);
    uint32_t at = 0;
    if (known)
        at = (uint32_t)(known - tries->places);
    else
        for (uint32_t i = 1; i < TRIES_PLACES; i++)
            if (tries->places[i].last_ns < tries->places[at].last_ns)
                at = i;
    struct tries_place *place = &tries->places[at];
    if (!known || now_ns - place->last_ns > TRIES_FORGET_S * TIME_NS_PER_S) {
        *place = (struct tries_place){0};
        snprintf(place->key, sizeof place->key, "%s", key);
    }
    place->n_failed++;
    place->last_ns = now_ns;
}

void tries_good(struct tries *tries, const char *key)
{
    const struct tries_place *known = find(tries, key);
    if (known)
        tries->places[known - tries->places] = (struct tries_place){0};
}
