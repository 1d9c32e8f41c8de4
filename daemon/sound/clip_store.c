/* Which clips there are; see clip_store.h. */
#include "sound/clip_store.h"
#include <math.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct known_clip {
    char id[FLOW_ID_SIZE], file[SOUND_FILE_SIZE];
    double low_hz, high_hz;
};

struct clip_store {
    char folder[CLIP_PATH_SIZE - SOUND_FILE_SIZE - 1];
    pthread_mutex_t lock; /* guards what follows */
    struct known_clip *all;
    size_t n, capacity;
};

void clip_store_folder(const char *ledger_path, char out[CLIP_PATH_SIZE])
{
    snprintf(out, CLIP_PATH_SIZE, "%s.sound/clips", ledger_path);
}

enum status clip_store_create(const char *folder, struct clip_store **out)
{
    struct clip_store *store = calloc(1, sizeof *store);
    if (!store)
        return STATUS_NO_MEMORY;
    snprintf(store->folder, sizeof store->folder, "%s", folder);
    pthread_mutex_init(&store->lock, NULL);
    *out = store;
    return STATUS_OK;
}

void clip_store_destroy(struct clip_store *store)
{
    if (!store)
        return;
    pthread_mutex_destroy(&store->lock);
    free(store->all);
    free(store);
}

/* A name and nothing more: of letters, digits, points and dashes, not beginning with a point. */
static bool is_plain(const char *file)
{
    static const char allowed[] = "abcdefghijklmnopqrstuvwxyz0123456789.-";
    return *file && *file != '.' && strlen(file) < SOUND_FILE_SIZE && file[strspn(file, allowed)] == '\0';
}

enum status clip_store_add(struct clip_store *store, const char *id, const char *file, double low_hz,
                           double high_hz)
{
    if (!is_plain(file) || strlen(id) >= FLOW_ID_SIZE)
        return STATUS_BAD_ARGUMENT;
    enum status status = STATUS_OK;
    pthread_mutex_lock(&store->lock);
    if (store->n == store->capacity) {
        size_t capacity = store->capacity ? 2 * store->capacity : 64;
        struct known_clip *larger = realloc(store->all, capacity * sizeof *larger);
        status = larger ? STATUS_OK : STATUS_NO_MEMORY;
        if (larger) {
            store->all = larger;
            store->capacity = capacity;
        }
    }
    if (status == STATUS_OK) {
        struct known_clip *clip = &store->all[store->n++];
        *clip = (struct known_clip){.low_hz = low_hz, .high_hz = high_hz};
        snprintf(clip->id, sizeof clip->id, "%s", id);
        snprintf(clip->file, sizeof clip->file, "%s", file);
    }
    pthread_mutex_unlock(&store->lock);
    return status;
}

static enum status take_row(void *context, int n_columns, const char *const *columns)
{
    if (n_columns != 4 || !columns[0] || !columns[1])
        return STATUS_OK;
    double low_hz = columns[2] ? strtod(columns[2], NULL) : NAN;
    double high_hz = columns[3] ? strtod(columns[3], NULL) : NAN;
    enum status status = clip_store_add(context, columns[0], columns[1], low_hz, high_hz);
    return status == STATUS_BAD_ARGUMENT ? STATUS_OK : status;
}

enum status clip_store_load(struct clip_store *store, struct ledger *ledger)
{
    return ledger_select(ledger, "SELECT id, file, low_hz, high_hz FROM sound ORDER BY seq", 0, NULL,
                         take_row, store);
}

enum status clip_store_find(struct clip_store *store, const char *id, struct clip *out)
{
    enum status status = STATUS_NOT_FOUND;
    pthread_mutex_lock(&store->lock);
    for (size_t i = store->n; i > 0 && status != STATUS_OK; i--) {
        const struct known_clip *clip = &store->all[i - 1];
        if (strcmp(clip->id, id) != 0)
            continue;
        *out = (struct clip){.low_hz = clip->low_hz, .high_hz = clip->high_hz};
        memcpy(out->id, clip->id, sizeof out->id);
        snprintf(out->path, sizeof out->path, "%s/%s", store->folder, clip->file);
        status = STATUS_OK;
    }
    pthread_mutex_unlock(&store->lock);
    return status;
}
