/* Cuts sound that arrives in pieces of any size into blocks that are aligned to the sample number, so that
 * what follows does not depend on the pieces. */
#ifndef LISTEN_BLOCKS_H
#define LISTEN_BLOCKS_H

#include "base/status.h"
#include "flow.h"

struct blocks;

struct block_sink {
    void (*take)(void *context, const struct block *block);
    void *context;
};

/* A stream of n_channels (1..16) at rate_hz. STATUS_BAD_ARGUMENT, STATUS_NO_MEMORY; the caller owns *out. */
enum status blocks_create(uint32_t stream, uint32_t n_channels, double rate_hz, struct blocks **out);
/* Takes n frames before which `lost` frames were lost. A loss ends the block that was being filled; n = 0
 * with a loss gives a gap block. */
void blocks_push(struct blocks *blocks, uint64_t lost, const float *frames, uint32_t n,
                 const struct block_sink *sink);
/* Gives the block that was being filled. */
void blocks_finish(struct blocks *blocks, const struct block_sink *sink);
void blocks_destroy(struct blocks *blocks);

#endif
