/* The player: a short queue and its thread. */
#include "http/player.h"
#include "base/time.h"
#include "sound/sound_file.h"
#include <math.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <unistd.h>

#define BEFORE_S 2.0 /* of the ring, for filters to settle and to know what is usual */
#define NICE 10
#define WAV_HEADER 44
#define MOST_FILE_BYTES (256UL << 20)

struct player {
    struct disk_ring *ring;
    struct clip_store *clips;
    pthread_mutex_t lock;
    pthread_cond_t changed;
    pthread_t thread;
    bool has_thread, stopping;
    struct player_item *first, **end;
    uint32_t n_waiting;
};

static void put_32(unsigned char *at, uint32_t value)
{
    for (int i = 0; i < 4; i++)
        at[i] = (unsigned char)(value >> (8 * i));
}

static void put_16(unsigned char *at, uint32_t value)
{
    at[0] = (unsigned char)value;
    at[1] = (unsigned char)(value >> 8);
}

/* RIFF WAVE, PCM (Microsoft and IBM, "Multimedia programming interface", 1991). */
static enum status make_wav(const struct audible *audible, struct player_item *item)
{
    size_t bytes = audible->n * 2;
    unsigned char *wav = malloc(WAV_HEADER + bytes);
    if (!wav)
        return STATUS_NO_MEMORY;
    uint32_t rate = (uint32_t)lround(audible->rate_hz);
    memcpy(wav, "RIFF....WAVEfmt ", 16);
    put_32(wav + 4, (uint32_t)(WAV_HEADER - 8 + bytes));
    put_32(wav + 16, 16);
    put_16(wav + 20, 1);
    put_16(wav + 22, 1);
    put_32(wav + 24, rate);
    put_32(wav + 28, rate * 2);
    put_16(wav + 32, 2);
    put_16(wav + 34, 16);
    memcpy(wav + 36, "data", 4);
    put_32(wav + 40, (uint32_t)bytes);
    for (size_t i = 0; i < audible->n; i++)
        put_16(wav + WAV_HEADER + 2 * i, (uint32_t)(int32_t)lrintf(audible->samples[i] * 32767.0F));
    item->data = wav;
    item->size = WAV_HEADER + bytes;
    item->made_gain_db = audible->gain_db;
    return STATUS_OK;
}

static enum status make_audible(struct player_item *item, float *samples, size_t n, size_t n_before,
                                double rate_hz, uint64_t first_frame, double low_hz, double high_hz)
{
    struct audible audible;
    double middle_hz = isfinite(low_hz) && isfinite(high_hz) ? (low_hz + high_hz) / 2 : rate_hz / 3;
    const struct audible_setup setup = {.form = item->form,
                                        .rate_hz = rate_hz,
                                        .centre_hz = isnan(item->centre_hz) ? middle_hz : item->centre_hz,
                                        .gain_db = item->gain_db,
                                        .first_frame = first_frame,
                                        .n_before = n_before};
    enum status status = audible_make(&setup, samples, n, &audible);
    if (status != STATUS_OK)
        return status;
    status = make_wav(&audible, item);
    audible_destroy(&audible);
    return status;
}

/* A stretch of the ring. Frames are numbered from watch time zero, so that stretches that follow fit
 * together. */
static enum status play_ring(const struct player *player, struct player_item *item)
{
    struct disk_ring_sound sound;
    int64_t before_ns = (int64_t)(BEFORE_S * 1e9),
            from_ns = item->from_ns > before_ns ? item->from_ns - before_ns : 0;
    if (!player->ring)
        return STATUS_NOT_FOUND;
    enum status status =
        disk_ring_read(player->ring, item->stream, item->channel, from_ns, item->to_ns, SIZE_MAX, &sound);
    if (status != STATUS_OK)
        return status;
    size_t n_before = (size_t)llround((double)(item->from_ns - from_ns) * 1e-9 * sound.rate_hz);
    uint64_t first = (uint64_t)llround((double)from_ns * 1e-9 * sound.rate_hz);
    status = sound.n > n_before
                 ? make_audible(item, sound.samples, sound.n, n_before, sound.rate_hz, first, NAN, NAN)
                 : STATUS_NOT_FOUND;
    free(sound.samples);
    return status;
}

static enum status play_clip(const struct clip *clip, struct player_item *item)
{
    struct sound_facts facts;
    enum status status = sound_read_facts(clip->path, &facts);
    if (status != STATUS_OK)
        return STATUS_NOT_FOUND;
    double longest = PLAYER_LONGEST_S * facts.rate_hz;
    size_t n = facts.n_frames < longest ? (size_t)facts.n_frames : (size_t)longest;
    float *samples = malloc(n * sizeof *samples);
    if (!samples)
        return STATUS_NO_MEMORY;
    status = sound_read_channel(clip->path, 1, 0, samples, n);
    if (status == STATUS_OK)
        status = make_audible(item, samples, n, 0, facts.rate_hz, 0, clip->low_hz, clip->high_hz);
    free(samples);
    return status;
}

static enum status read_file(const char *path, struct player_item *item)
{
    FILE *file = fopen(path, "rb");
    if (!file)
        return STATUS_NOT_FOUND;
    long size = fseek(file, 0, SEEK_END) == 0 ? ftell(file) : -1;
    enum status status = size > 0 && (unsigned long)size <= MOST_FILE_BYTES ? STATUS_OK : STATUS_NOT_FOUND;
    unsigned char *data = status == STATUS_OK ? malloc((size_t)size) : NULL;
    if (status == STATUS_OK && !data)
        status = STATUS_NO_MEMORY;
    if (status == STATUS_OK &&
        (fseek(file, 0, SEEK_SET) != 0 || fread(data, 1, (size_t)size, file) != (size_t)size))
        status = STATUS_SYSTEM;
    fclose(file);
    if (status != STATUS_OK) {
        free(data);
        return status;
    }
    item->data = data;
    item->size = (size_t)size;
    return STATUS_OK;
}

static enum status make(const struct player *player, struct player_item *item)
{
    struct clip clip;
    if (item->what == PLAYER_RING)
        return play_ring(player, item);
    if (!player->clips || clip_store_find(player->clips, item->id, &clip) != STATUS_OK)
        return STATUS_NOT_FOUND;
    return item->what == PLAYER_FILE ? read_file(clip.path, item) : play_clip(&clip, item);
}

static void *work(void *context)
{
    struct player *player = context;
    pthread_setname_np(pthread_self(), "player");
    setpriority(PRIO_PROCESS, (id_t)gettid(), NICE); /* of this thread alone (Linux) */
    pthread_mutex_lock(&player->lock);
    for (;;) {
        while (!player->first && !player->stopping)
            pthread_cond_wait(&player->changed, &player->lock);
        struct player_item *item = player->first;
        if (!item)
            break; /* stopping, and nobody waits */
        player->first = item->next;
        if (!player->first)
            player->end = &player->first;
        bool refuse = player->stopping;
        pthread_mutex_unlock(&player->lock);
        item->status = refuse ? STATUS_BUSY : make(player, item);
        pthread_mutex_lock(&player->lock);
        player->n_waiting--;
        MHD_resume_connection(item->connection); /* from here on the item may be gone */
    }
    pthread_mutex_unlock(&player->lock);
    return NULL;
}

enum status player_create(struct disk_ring *ring, struct clip_store *clips, struct player **out)
{
    struct player *player = calloc(1, sizeof *player);
    if (!player)
        return STATUS_NO_MEMORY;
    player->ring = ring;
    player->clips = clips;
    player->end = &player->first;
    pthread_mutex_init(&player->lock, NULL);
    pthread_cond_init(&player->changed, NULL);
    if (pthread_create(&player->thread, NULL, work, player) != 0) {
        player_destroy(player);
        return STATUS_SYSTEM;
    }
    player->has_thread = true;
    *out = player;
    return STATUS_OK;
}

void player_stop(struct player *player)
{
    if (!player || !player->has_thread)
        return;
    pthread_mutex_lock(&player->lock);
    player->stopping = true;
    pthread_cond_broadcast(&player->changed);
    pthread_mutex_unlock(&player->lock);
    pthread_join(player->thread, NULL);
    player->has_thread = false;
}

void player_destroy(struct player *player)
{
    if (!player)
        return;
    player_stop(player);
    pthread_cond_destroy(&player->changed);
    pthread_mutex_destroy(&player->lock);
    free(player);
}

enum status player_submit(struct player *player, struct player_item *item)
{
    enum status status = STATUS_BUSY;
    pthread_mutex_lock(&player->lock);
    if (!player->stopping && player->n_waiting < PLAYER_MAX_WAITING) {
        MHD_suspend_connection(item->connection);
        item->next = NULL;
        *player->end = item;
        player->end = &item->next;
        player->n_waiting++;
        pthread_cond_signal(&player->changed);
        status = STATUS_OK;
    }
    pthread_mutex_unlock(&player->lock);
    return status;
}
