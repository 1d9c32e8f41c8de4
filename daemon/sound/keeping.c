/* Ring, clips and keeper together; see keeping.h. */
#include "sound/keeping.h"
#include "base/time.h"
#include "sound/clips.h"
#include "sound/keeper.h"
#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

#define FINISH_S 0.5

struct sound_keeping {
    struct disk_ring *ring;
    struct clips *clips;
    struct clip_store *store;
    struct keeper *keeper;
};

uint32_t keeping_listening_channel(const struct stream_settings *settings, uint32_t n_channels)
{
    for (uint32_t i = 0; i < n_channels; i++)
        if (settings->channels[i].calibration.role != ROLE_MEASURE)
            return i + 1;
    return 1;
}

static enum status take_mark(void *context, int n_columns, const char *const *columns)
{
    if (n_columns == 2 && columns[0] && columns[1])
        keeper_ask_mark(context, columns[0], time_from_s(strtod(columns[1], NULL)));
    return STATUS_OK;
}

/* Marks whose sound the ring may still have and that have no clip: the program ended before it was made. */
static enum status ask_again(struct sound_keeping *keeping, const struct keeping_setup *setup)
{
    char since[32];
    const char *parameters[] = {since};
    double since_s = time_to_s(setup->start_ns) - setup->site->sound.minutes * 60;
    snprintf(since, sizeof since, "%.6f", since_s);
    return ledger_select(
        setup->ledger,
        "SELECT id, occurred_s FROM note WHERE note = 'mark' AND occurred_s > CAST(?1 AS REAL) "
        "AND id NOT IN (SELECT value FROM sound, json_each(sound.causes)) ORDER BY seq",
        1, parameters, take_mark, keeping->keeper);
}

static void base_folder(const struct site *site, char out[SITE_PATH_SIZE + 8])
{
    if (*site->sound.folder)
        snprintf(out, SITE_PATH_SIZE + 8, "%s", site->sound.folder);
    else
        snprintf(out, SITE_PATH_SIZE + 8, "%s.sound", site->ledger);
}

static struct disk_ring_stream facts_of(const struct keeping_setup *setup, uint32_t i)
{
    const struct input_facts *facts = stream_get_facts(setup->streams[i]);
    bool paced = facts->live || setup->site->streams[i].real_pace;
    return (struct disk_ring_stream){.rate_hz = facts->rate_hz, .n_channels = paced ? facts->n_channels : 0};
}

static enum status create_ring(const struct keeping_setup *setup, struct sound_keeping *keeping)
{
    const struct sound_settings *settings = &setup->site->sound;
    char base[SITE_PATH_SIZE + 8], folder[SITE_PATH_SIZE + 16];
    base_folder(setup->site, base);
    snprintf(folder, sizeof folder, "%s/ring", base);
    struct disk_ring_setup ring = {.folder = folder,
                                   .minutes = settings->minutes,
                                   .most_bytes = (uint64_t)(settings->most_mib * 1048576),
                                   .leave_bytes = (uint64_t)(settings->leave_mib * 1048576),
                                   .run = setup->run,
                                   .zero_unix_ns = setup->zero_unix_ns,
                                   .n_streams = setup->n_streams};
    for (uint32_t i = 0; i < setup->n_streams; i++)
        ring.streams[i] = facts_of(setup, i);
    return disk_ring_create(&ring, &keeping->ring);
}

static enum status create_keeper(const struct keeping_setup *setup, struct sound_keeping *keeping)
{
    struct keeper_setup keeper = {
        .clips = keeping->clips, .around_s = setup->site->sound.around_s, .n_streams = setup->n_streams};
    for (uint32_t i = 0; i < setup->n_streams; i++)
        if (facts_of(setup, i).n_channels > 0)
            keeper.listening[i] =
                keeping_listening_channel(&setup->site->streams[i], facts_of(setup, i).n_channels);
    return keeper_create(&keeper, &keeping->keeper);
}

enum status keeping_create(const struct keeping_setup *setup, struct sound_keeping **out)
{
    char base[SITE_PATH_SIZE + 8], folder[SITE_PATH_SIZE + 16];
    *out = NULL;
    if (!(setup->site->sound.minutes > 0))
        return STATUS_OK;
    struct sound_keeping *keeping = calloc(1, sizeof *keeping);
    if (!keeping)
        return STATUS_NO_MEMORY;
    base_folder(setup->site, base);
    mkdir(base, 0755); /* what is wrong with it is said of what is in it */
    snprintf(folder, sizeof folder, "%s/clips", base);
    enum status status = create_ring(setup, keeping);
    if (status == STATUS_OK)
        status =
            clips_create(&(struct clips_setup){.folder = folder, .ring = keeping->ring, .run = setup->run},
                         &keeping->clips);
    if (status == STATUS_OK)
        status = clip_store_create(folder, &keeping->store);
    if (status == STATUS_OK)
        status = create_keeper(setup, keeping);
    if (status == STATUS_OK)
        status = clip_store_load(keeping->store, setup->ledger);
    if (status == STATUS_OK)
        status = ask_again(keeping, setup);
    if (status != STATUS_OK) {
        keeping_destroy(keeping);
        return status;
    }
    *out = keeping;
    return STATUS_OK;
}

void keeping_finish(struct sound_keeping *keeping)
{
    if (keeping)
        clips_finish(keeping->clips, FINISH_S);
}

void keeping_destroy(struct sound_keeping *keeping)
{
    if (!keeping)
        return;
    keeper_destroy(keeping->keeper);
    clips_destroy(keeping->clips);
    disk_ring_destroy(keeping->ring);
    clip_store_destroy(keeping->store);
    free(keeping);
}

void keeping_push(void *context, uint32_t stream, int64_t start_ns, const float *samples, uint32_t n_frames)
{
    const struct sound_keeping *keeping = context;
    disk_ring_push(keeping->ring, stream, start_ns, samples, n_frames);
}

void keeping_take(struct sound_keeping *keeping, const struct outcome *outcome)
{
    keeper_take(keeping->keeper, outcome);
}

bool keeping_take_done(struct sound_keeping *keeping, struct sound_entry_facts *out)
{
    return clips_take_done(keeping->clips, out);
}

void keeping_add(struct sound_keeping *keeping, const char *id, const struct sound_entry_facts *facts)
{
    clip_store_add(keeping->store, id, facts->file, facts->low_hz, facts->high_hz);
}

void keeping_get_problem(struct sound_keeping *keeping, char *out, size_t size)
{
    struct disk_ring_state state;
    char clips[DISK_RING_PROBLEM_SIZE];
    disk_ring_get_state(keeping->ring, &state);
    clips_get_problem(keeping->clips, clips, sizeof clips);
    snprintf(out, size, "%s%s%s", state.problem, *state.problem && *clips ? "; " : "", clips);
}

struct disk_ring *keeping_ring(struct sound_keeping *keeping)
{
    return keeping ? keeping->ring : NULL;
}

struct clip_store *keeping_clips(struct sound_keeping *keeping)
{
    return keeping ? keeping->store : NULL;
}
