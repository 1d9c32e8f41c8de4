/* The clips' thread; see clips.h. */
#include "sound/clips.h"
#include "base/time.h"
#include "clock.h"
#include "sound/sound_file.h"
#include <errno.h>
#include <math.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

#define STEP_NS (TIME_NS_PER_S / 5)
#define AGAIN_NS (5 * TIME_NS_PER_S)   /* after a disk that did not take it */
#define LATEST_NS (60 * TIME_NS_PER_S) /* for sound to come, and for a disk to take it */
#define SAID_NS (60 * TIME_NS_PER_S)   /* how long a failure is said */
#define MOST_FRAMES ((size_t)60 * 1000 * 1000)

struct waiting {
    struct clip_request request;
    int64_t asked_ns, next_ns; /* monotonic */
};

struct clips {
    struct clips_setup setup;
    char folder[DISK_RING_PATH_SIZE];
    pthread_t thread;
    bool has_thread;
    uint64_t counters[DISK_RING_MAX_STREAMS + 1]; /* of entries, by stream; the thread's own */
    pthread_mutex_t lock;                         /* guards what follows */
    pthread_cond_t changed;
    bool stopping, finishing, working;
    uint32_t n_waiting, n_done;
    struct waiting waiting[CLIPS_MAX_WAITING];
    struct sound_entry_facts done[CLIPS_MAX_WAITING];
    uint64_t n_failed;
    char problem[DISK_RING_PROBLEM_SIZE];
    int64_t problem_ns; /* monotonic */
};

static void fail(struct clips *clips, const char *why)
{
    pthread_mutex_lock(&clips->lock);
    clips->n_failed++;
    clips->problem_ns = clock_monotonic_ns();
    snprintf(clips->problem, sizeof clips->problem, "%s", why);
    pthread_mutex_unlock(&clips->lock);
}

/* A name that no file has yet: another ledger's clips may be there, and are never touched. */
static enum status write_file(struct clips *clips, const struct disk_ring_sound *sound,
                              struct sound_entry_facts *entry)
{
    char path[2 * DISK_RING_PATH_SIZE], id[FLOW_ID_SIZE];
    enum status status = STATUS_EXISTS;
    flow_id(clips->setup.run, entry->stream, "sound", entry->counter, id);
    for (unsigned again = 1; status == STATUS_EXISTS && again < 1000; again++) {
        if (again == 1)
            snprintf(entry->file, sizeof entry->file, "%s.flac", id);
        else
            snprintf(entry->file, sizeof entry->file, "%s-%u.flac", id, again);
        snprintf(path, sizeof path, "%s/%s", clips->folder, entry->file);
        status =
            sound_write_clip(path, sound->rate_hz, sound->samples, sound->n, entry->sha256, &entry->bytes);
    }
    return status;
}

static enum status keep(struct clips *clips, const struct clip_request *request,
                        struct sound_entry_facts *out)
{
    int64_t longest_ns = (int64_t)(CLIPS_LONGEST_S * 1e9);
    int64_t from_ns =
        request->end_ns - request->start_ns > longest_ns ? request->end_ns - longest_ns : request->start_ns;
    struct disk_ring_sound sound;
    from_ns = from_ns < 0 ? 0 : from_ns;
    enum status status = disk_ring_read(clips->setup.ring, request->stream, request->channel, from_ns,
                                        request->end_ns, MOST_FRAMES, &sound);
    if (status != STATUS_OK)
        return status;
    struct sound_entry_facts entry = {.stream = request->stream,
                                      .channel = request->channel,
                                      .counter = clips->counters[request->stream] + 1,
                                      .start_ns = from_ns,
                                      .end_ns = from_ns + time_from_s((double)sound.n / sound.rate_hz),
                                      .rate_hz = sound.rate_hz,
                                      .missing_s = sound.missing_s,
                                      .reason = request->reason,
                                      .low_hz = request->low_hz,
                                      .high_hz = request->high_hz,
                                      .n_causes = request->n_causes};
    memcpy(entry.causes, request->causes, sizeof entry.causes);
    status = write_file(clips, &sound, &entry);
    free(sound.samples);
    if (status != STATUS_OK)
        return status;
    clips->counters[request->stream]++;
    *out = entry;
    return STATUS_OK;
}

/* Takes a request that is due off the list; with the lock held. */
static bool take_due(struct clips *clips, struct waiting *out)
{
    int64_t now_ns = clock_monotonic_ns();
    for (uint32_t i = 0; i < clips->n_waiting; i++) {
        const struct waiting *one = &clips->waiting[i];
        bool there = clips->finishing || now_ns - one->asked_ns > LATEST_NS ||
                     disk_ring_end_ns(clips->setup.ring, one->request.stream) >= one->request.end_ns;
        if (!there || (now_ns < one->next_ns && !clips->finishing))
            continue;
        *out = *one;
        clips->n_waiting--;
        memmove(&clips->waiting[i], &clips->waiting[i + 1], (clips->n_waiting - i) * sizeof *one);
        return true;
    }
    return false;
}

/* Puts what became of it where it belongs: done, again later, or given up. */
static void settle(struct clips *clips, struct waiting *one, enum status status,
                   const struct sound_entry_facts *entry)
{
    int64_t now_ns = clock_monotonic_ns();
    bool disk = status == STATUS_FULL || status == STATUS_SYSTEM;
    char text[DISK_RING_PROBLEM_SIZE];
    if (status != STATUS_OK) {
        snprintf(text, sizeof text, "the sound of %.50s could not be kept: %s", one->request.causes[0],
                 status == STATUS_NOT_FOUND ? "the ring has none of it"
                 : disk                     ? "the disk did not take it"
                                            : status_text(status));
        if (!disk || clips->finishing || now_ns - one->asked_ns > LATEST_NS * 10)
            fail(clips, text);
    }
    pthread_mutex_lock(&clips->lock);
    if (status == STATUS_OK && clips->n_done < CLIPS_MAX_WAITING) {
        clips->done[clips->n_done++] = *entry;
        clips->problem[0] = '\0';
    } else if (disk && !clips->finishing && now_ns - one->asked_ns <= LATEST_NS * 10 &&
               clips->n_waiting < CLIPS_MAX_WAITING) {
        one->next_ns = now_ns + AGAIN_NS;
        clips->waiting[clips->n_waiting++] = *one;
        clips->problem_ns = now_ns;
        snprintf(clips->problem, sizeof clips->problem, "%s", text);
    } else if (status == STATUS_OK)
        clips->n_failed++;
    clips->working = false;
    pthread_cond_broadcast(&clips->changed);
    pthread_mutex_unlock(&clips->lock);
}

static void *work(void *context)
{
    struct clips *clips = context;
    pthread_setname_np(pthread_self(), "clips");
    pthread_mutex_lock(&clips->lock);
    while (!clips->stopping) {
        struct waiting one;
        if (clips->n_done == CLIPS_MAX_WAITING || !take_due(clips, &one)) {
            int64_t until_ns = clock_monotonic_ns() + STEP_NS;
            struct timespec until = {.tv_sec = until_ns / TIME_NS_PER_S, .tv_nsec = until_ns % TIME_NS_PER_S};
            pthread_cond_timedwait(&clips->changed, &clips->lock, &until);
            continue;
        }
        clips->working = true;
        pthread_mutex_unlock(&clips->lock);
        struct sound_entry_facts entry = {0};
        enum status status = keep(clips, &one.request, &entry);
        settle(clips, &one, status, &entry);
        pthread_mutex_lock(&clips->lock);
    }
    pthread_mutex_unlock(&clips->lock);
    return NULL;
}

enum status clips_create(const struct clips_setup *setup, struct clips **out)
{
    struct clips *clips = calloc(1, sizeof *clips);
    if (!clips)
        return STATUS_NO_MEMORY;
    clips->setup = *setup;
    snprintf(clips->folder, sizeof clips->folder, "%s", setup->folder);
    if (mkdir(clips->folder, 0755) != 0 && errno != EEXIST) {
        clips->problem_ns = clock_monotonic_ns();
        snprintf(clips->problem, sizeof clips->problem, "%.90s cannot be made (%s)", clips->folder,
                 strerror(errno));
    }
    pthread_mutex_init(&clips->lock, NULL);
    pthread_condattr_t monotonic;
    pthread_condattr_init(&monotonic);
    pthread_condattr_setclock(&monotonic, CLOCK_MONOTONIC);
    pthread_cond_init(&clips->changed, &monotonic);
    pthread_condattr_destroy(&monotonic);
    clips->has_thread = pthread_create(&clips->thread, NULL, work, clips) == 0;
    if (!clips->has_thread) {
        clips_destroy(clips);
        return STATUS_SYSTEM;
    }
    *out = clips;
    return STATUS_OK;
}

void clips_destroy(struct clips *clips)
{
    if (!clips)
        return;
    if (clips->has_thread) {
        pthread_mutex_lock(&clips->lock);
        clips->stopping = true;
        pthread_cond_broadcast(&clips->changed);
        pthread_mutex_unlock(&clips->lock);
        pthread_join(clips->thread, NULL);
    }
    pthread_cond_destroy(&clips->changed);
    pthread_mutex_destroy(&clips->lock);
    free(clips);
}

enum status clips_ask(struct clips *clips, const struct clip_request *request)
{
    enum status status = STATUS_FULL;
    pthread_mutex_lock(&clips->lock);
    if (clips->n_waiting < CLIPS_MAX_WAITING) {
        clips->waiting[clips->n_waiting++] =
            (struct waiting){.request = *request, .asked_ns = clock_monotonic_ns()};
        pthread_cond_broadcast(&clips->changed);
        status = STATUS_OK;
    } else {
        clips->n_failed++;
        clips->problem_ns = clock_monotonic_ns();
        snprintf(clips->problem, sizeof clips->problem, "too many sounds to keep at once");
    }
    pthread_mutex_unlock(&clips->lock);
    return status;
}

void clips_finish(struct clips *clips, double limit_s)
{
    if (!clips)
        return;
    int64_t until_ns = clock_monotonic_ns() + (int64_t)(limit_s * 1e9);
    struct timespec until = {.tv_sec = until_ns / TIME_NS_PER_S, .tv_nsec = until_ns % TIME_NS_PER_S};
    pthread_mutex_lock(&clips->lock);
    if (clips->n_waiting > 0) { /* what the ring still has in memory reaches the disk meanwhile */
        int64_t soon_ns = clock_monotonic_ns() + STEP_NS;
        struct timespec soon = {.tv_sec = soon_ns / TIME_NS_PER_S, .tv_nsec = soon_ns % TIME_NS_PER_S};
        while (pthread_cond_timedwait(&clips->changed, &clips->lock, &soon) == 0)
            ;
    }
    clips->finishing = true;
    pthread_cond_broadcast(&clips->changed);
    while ((clips->n_waiting > 0 || clips->working) &&
           pthread_cond_timedwait(&clips->changed, &clips->lock, &until) == 0)
        ;
    pthread_mutex_unlock(&clips->lock);
}

bool clips_take_done(struct clips *clips, struct sound_entry_facts *out)
{
    pthread_mutex_lock(&clips->lock);
    bool any = clips->n_done > 0;
    if (any) {
        *out = clips->done[0];
        clips->n_done--;
        memmove(&clips->done[0], &clips->done[1], clips->n_done * sizeof *out);
    }
    pthread_mutex_unlock(&clips->lock);
    return any;
}

uint64_t clips_get_problem(struct clips *clips, char *out, size_t size)
{
    pthread_mutex_lock(&clips->lock);
    bool old = clock_monotonic_ns() - clips->problem_ns > SAID_NS; /* the health entry stays */
    snprintf(out, size, "%s", old ? "" : clips->problem);
    uint64_t n = clips->n_failed;
    pthread_mutex_unlock(&clips->lock);
    return n;
}
