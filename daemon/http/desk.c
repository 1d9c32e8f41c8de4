/* A desk: a short queue and its thread. */
#include "http/desk.h"
#include <pthread.h>
#include <stdbool.h>
#include <stdlib.h>

struct desk {
    pthread_mutex_t lock;
    pthread_cond_t changed;
    pthread_t thread;
    bool has_thread, stopping;
    desk_work work;
    void *context;
    struct desk_item *first, **end;
    uint32_t n_waiting;
};

static void *serve(void *context)
{
    struct desk *desk = context;
    pthread_mutex_lock(&desk->lock);
    for (;;) {
        while (!desk->first && !desk->stopping)
            pthread_cond_wait(&desk->changed, &desk->lock);
        struct desk_item *item = desk->first;
        if (!item)
            break; /* stopping, and nobody waits */
        desk->first = item->next;
        if (!desk->first)
            desk->end = &desk->first;
        bool refuse = desk->stopping;
        pthread_mutex_unlock(&desk->lock);
        item->status = refuse ? STATUS_BUSY : desk->work(desk->context, item);
        pthread_mutex_lock(&desk->lock);
        desk->n_waiting--;
        MHD_resume_connection(item->connection); /* from here on the item may be gone */
    }
    pthread_mutex_unlock(&desk->lock);
    return NULL;
}

enum status desk_create(desk_work work, void *context, struct desk **out)
{
    struct desk *desk = calloc(1, sizeof *desk);
    if (!desk)
        return STATUS_NO_MEMORY;
    desk->work = work;
    desk->context = context;
    desk->end = &desk->first;
    pthread_mutex_init(&desk->lock, NULL);
    pthread_cond_init(&desk->changed, NULL);
    if (pthread_create(&desk->thread, NULL, serve, desk) != 0) {
        desk_destroy(desk);
        return STATUS_SYSTEM;
    }
    desk->has_thread = true;
    *out = desk;
    return STATUS_OK;
}

void desk_stop(struct desk *desk)
{
    if (!desk || !desk->has_thread)
        return;
    pthread_mutex_lock(&desk->lock);
    desk->stopping = true;
    pthread_cond_broadcast(&desk->changed);
    pthread_mutex_unlock(&desk->lock);
    pthread_join(desk->thread, NULL);
    desk->has_thread = false;
}

void desk_destroy(struct desk *desk)
{
    if (!desk)
        return;
    desk_stop(desk);
    pthread_cond_destroy(&desk->changed);
    pthread_mutex_destroy(&desk->lock);
    free(desk);
}

enum status desk_submit(struct desk *desk, struct desk_item *item)
{
    enum status status = STATUS_BUSY;
    pthread_mutex_lock(&desk->lock);
    if (!desk->stopping && desk->n_waiting < DESK_MAX_WAITING) {
        MHD_suspend_connection(item->connection);
        item->next = NULL;
        *desk->end = item;
        desk->end = &item->next;
        desk->n_waiting++;
        pthread_cond_signal(&desk->changed);
        status = STATUS_OK;
    }
    pthread_mutex_unlock(&desk->lock);
    return status;
}
