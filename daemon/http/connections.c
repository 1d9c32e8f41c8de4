/* Deadlines of connections: a small table, searched in order. */
#include "http/connections.h"
#include <pthread.h>
#include <stdlib.h>
#include <sys/socket.h>

struct place {
    int fd; /* -1: free */
    int64_t deadline_ns;
};

struct connections {
    pthread_mutex_t lock;
    uint32_t max;
    struct place *places;
};

enum status connections_create(uint32_t max, struct connections **out)
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
    if (!place)
        place = find(connections, -1);
    if (place)
        *place = (struct place){.fd = fd, .deadline_ns = deadline_ns};
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
        shutdown(place->fd, SHUT_RDWR);
        place->deadline_ns = -1;
    }
    pthread_mutex_unlock(&connections->lock);
}
