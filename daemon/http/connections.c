/* Deadlines of connections: a small table, searched in order. */
#include "http/connections.h"
#include <pthread.h>
#include <stdbool.h>
#include <stdlib.h>
#include <sys/socket.h>

struct place {
    int fd; /* -1: free */
    uint64_t address;
    uint64_t number;     /* of its opening */
    int64_t deadline_ns; /* negative: it does not wait */
};

struct connections {
    pthread_mutex_t lock;
    uint32_t max, max_waiting;
    uint64_t n_opened;
    struct place *places;
};

enum status connections_create(uint32_t max, uint32_t max_waiting, struct connections **out)
{
    struct connections *connections = calloc(1, sizeof *connections);
    if (!connections)
        return STATUS_NO_MEMORY;
    connections->places = calloc(max, sizeof *connections->places);
    if (!connections->places) {
        free(connections);
        return STATUS_NO_MEMORY;
    }
    connections->max = max;
    connections->max_waiting = max_waiting;
    for (uint32_t i = 0; i < max; i++)
        connections->places[i].fd = -1;
    pthread_mutex_init(&connections->lock, NULL);
    *out = connections;
    return STATUS_OK;
}

void connections_destroy(struct connections *connections)
{
    if (!connections)
        return;
    pthread_mutex_destroy(&connections->lock);
    free(connections->places);
    free(connections);
}

/* The library sees the end and forgets it. */
static void cut(struct place *place)
{
    shutdown(place->fd, SHUT_RDWR);
    place->deadline_ns = -1;
}

static struct place *find(struct connections *connections, int fd)
{
    for (uint32_t i = 0; i < connections->max; i++)
        if (connections->places[i].fd == fd)
            return &connections->places[i];
    return NULL;
}

void connections_set(struct connections *connections, int fd, int64_t deadline_ns)
{
    pthread_mutex_lock(&connections->lock);
    struct place *place = find(connections, fd);
    if (place)
        place->deadline_ns = deadline_ns;
    pthread_mutex_unlock(&connections->lock);
}

static bool waits(const struct place *place)
{
    return place->fd >= 0 && place->deadline_ns >= 0;
}

static uint32_t count_waiting(const struct connections *connections, const uint64_t *address)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < connections->max; i++)
        n += waits(&connections->places[i]) && (!address || connections->places[i].address == *address);
    return n;
}

/* The oldest that waits, of the address of which most wait. */
static struct place *find_least_dear(struct connections *connections)
{
    struct place *found = NULL;
    uint32_t most = 0;
    for (uint32_t i = 0; i < connections->max; i++) {
        struct place *place = &connections->places[i];
        if (!waits(place))
            continue;
        uint32_t n = count_waiting(connections, &place->address);
        if (n > most || (n == most && place->number < found->number)) {
            most = n;
            found = place;
        }
    }
    return found;
}

void connections_open(struct connections *connections, int fd, uint64_t address, int64_t deadline_ns)
{
    pthread_mutex_lock(&connections->lock);
    struct place *place = find(connections, -1);
    if (place)
        *place = (struct place){
            .fd = fd, .address = address, .number = ++connections->n_opened, .deadline_ns = deadline_ns};
    struct place *least =
        count_waiting(connections, NULL) > connections->max_waiting ? find_least_dear(connections) : NULL;
    if (least)
        cut(least);
    pthread_mutex_unlock(&connections->lock);
}

void connections_forget(struct connections *connections, int fd)
{
    pthread_mutex_lock(&connections->lock);
    struct place *place = find(connections, fd);
    if (place)
        place->fd = -1;
    pthread_mutex_unlock(&connections->lock);
}

void connections_cut(struct connections *connections, int64_t now_ns)
{
    pthread_mutex_lock(&connections->lock);
    for (uint32_t i = 0; i < connections->max; i++) {
        struct place *place = &connections->places[i];
        if (place->fd < 0 || place->deadline_ns < 0 || place->deadline_ns > now_ns)
            continue;
        cut(place);
    }
    pthread_mutex_unlock(&connections->lock);
}
