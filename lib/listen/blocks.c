/* Pieces of any size into aligned blocks; see blocks.h. */
#include "listen/blocks.h"
#include <stdlib.h>
#include <string.h>

struct blocks {
    uint32_t stream, n_channels, block_frames;
    uint64_t next_frame;  /* number of the first frame that is held or awaited */
    uint64_t lost_before; /* of the held block */
    uint32_t held;
    float *samples; /* [block_frames * n_channels] */
};

enum status blocks_create(uint32_t stream, uint32_t n_channels, double rate_hz, struct blocks **out)
{
    if (n_channels < 1 || n_channels > FLOW_MAX_CHANNELS || !(rate_hz >= 1000))
        return STATUS_BAD_ARGUMENT;
    struct blocks *blocks = calloc(1, sizeof *blocks);
    if (!blocks)
        return STATUS_NO_MEMORY;
    blocks->stream = stream;
    blocks->n_channels = n_channels;
    blocks->block_frames = flow_block_frames(rate_hz);
    blocks->samples = calloc((size_t)blocks->block_frames * n_channels, sizeof *blocks->samples);
    if (!blocks->samples) {
        free(blocks);
        return STATUS_NO_MEMORY;
    }
    *out = blocks;
    return STATUS_OK;
}

static void give(struct blocks *blocks, const struct block_sink *sink)
{
    struct block block = {.stream = blocks->stream,
                          .first_frame = blocks->next_frame,
                          .lost_before = blocks->lost_before,
                          .n_frames = blocks->held,
                          .n_channels = blocks->n_channels,
                          .samples = blocks->samples};
    sink->take(sink->context, &block);
    blocks->next_frame += blocks->held;
    blocks->lost_before = 0;
    blocks->held = 0;
}

void blocks_push(struct blocks *blocks, uint64_t lost, const float *frames, uint32_t n,
                 const struct block_sink *sink)
{
    if (lost > 0) {
        if (blocks->held > 0)
            give(blocks, sink);
        blocks->next_frame += lost;
        blocks->lost_before += lost;
        if (n == 0)
            give(blocks, sink);
    }
    while (n > 0) {
        uint64_t end = (blocks->next_frame / blocks->block_frames + 1) * blocks->block_frames;
        uint32_t room = (uint32_t)(end - blocks->next_frame) - blocks->held;
        uint32_t take = n < room ? n : room;
        memcpy(blocks->samples + (size_t)blocks->held * blocks->n_channels, frames,
               (size_t)take * blocks->n_channels * sizeof *frames);
        blocks->held += take;
        frames += (size_t)take * blocks->n_channels;
        n -= take;
        if (take == room)
            give(blocks, sink);
    }
}

void blocks_finish(struct blocks *blocks, const struct block_sink *sink)
{
    if (blocks->held > 0)
        give(blocks, sink);
}

void blocks_destroy(struct blocks *blocks)
{
    if (!blocks)
        return;
    free(blocks->samples);
    free(blocks);
}
