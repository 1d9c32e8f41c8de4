/* Energy by time; see exposure_buckets.h. */
#include "level/exposure_buckets.h"
#include "base/time.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

enum status buckets_create(struct buckets *buckets, uint32_t n, double width_s, bool ring, int64_t origin_ns)
{
    *buckets =
        (struct buckets){.n = n, .width_s = width_s, .ring = ring, .origin_ns = origin_ns, .empty = true};
    buckets->items = calloc(n, sizeof *buckets->items);
    return buckets->items ? STATUS_OK : STATUS_NO_MEMORY;
}

void buckets_destroy(struct buckets *buckets)
{
    free(buckets->items);
    buckets->items = NULL;
}

void buckets_reset(struct buckets *buckets)
{
    memset(buckets->items, 0, buckets->n * sizeof *buckets->items);
    buckets->empty = true;
}

double buckets_seconds(const struct buckets *buckets, int64_t time_ns)
{
    return time_to_s(time_ns - buckets->origin_ns);
}

int64_t buckets_index(const struct buckets *buckets, int64_t time_ns)
{
    int64_t index = (int64_t)floor(buckets_seconds(buckets, time_ns) / buckets->width_s);
    if (!buckets->ring && index >= buckets->n)
        return (int64_t)buckets->n - 1;
    return !buckets->ring && index < 0 ? 0 : index;
}

int64_t buckets_oldest(const struct buckets *buckets)
{
    return buckets->ring ? buckets->newest - (int64_t)buckets->n + 1 : 0;
}

/* In a ring the slot is the index modulo n. */
static struct bucket *slot(const struct buckets *buckets, int64_t index)
{
    int64_t n = (int64_t)buckets->n;
    return &buckets->items[((index % n) + n) % n];
}

struct bucket *buckets_open(struct buckets *buckets, int64_t time_ns)
{
    if (buckets->empty && !buckets->ring)
        buckets->origin_ns = time_ns;
    int64_t index = buckets_index(buckets, time_ns);
    if (buckets->empty)
        buckets->newest = index;
    buckets->empty = false;
    if (index < buckets_oldest(buckets))
        return NULL;
    if (buckets->ring && index - buckets->newest >= buckets->n)
        memset(buckets->items, 0, buckets->n * sizeof *buckets->items);
    else if (buckets->ring)
        for (int64_t i = buckets->newest + 1; i <= index; i++)
            memset(slot(buckets, i), 0, sizeof(struct bucket));
    if (index > buckets->newest)
        buckets->newest = index;
    return slot(buckets, index);
}

const struct bucket *buckets_find(const struct buckets *buckets, int64_t index)
{
    if (buckets->empty || index > buckets->newest || index < buckets_oldest(buckets))
        return NULL;
    const struct bucket *bucket = slot(buckets, index);
    return bucket->n ? bucket : NULL;
}

void bucket_add(struct bucket *a, const struct bucket *b)
{
    a->first_s = a->n == 0 || (b->n && b->first_s < a->first_s) ? b->first_s : a->first_s;
    a->top_band = a->n == 0 || (b->n && b->top_band > a->top_band) ? b->top_band : a->top_band;
    a->energy += b->energy;
    for (int i = 0; i < LEVEL_MAX_BANDS; i++)
        a->band[i] += b->band[i];
    for (int i = 0; i < BUCKET_QUIET; i++) {
        a->quiet[i] += b->quiet[i];
        a->n_quiet[i] += b->n_quiet[i];
    }
    a->amount += b->amount;
    a->moment_s += b->moment_s;
    a->lg_range += b->lg_range;
    a->n += b->n;
    a->n_unweighted += b->n_unweighted;
    a->n_clipped += b->n_clipped;
    a->n_without_range += b->n_without_range;
}
