/* lib/listen/blocks: whatever the pieces, the blocks are the same, aligned, and every lost frame is counted.
 */
#include "support/test.h"

#include "base/random.h"
#include "listen/blocks.h"
#include <stdlib.h>

#define CHANNELS 2
#define TOTAL 20000

struct seen {
    uint64_t firsts[256], losts[256];
    uint32_t counts[256], n;
    float *samples; /* every sample that came, by its frame number */
};

static void take(void *context, const struct block *block)
{
    struct seen *seen = context;
    seen->firsts[seen->n] = block->first_frame;
    seen->losts[seen->n] = block->lost_before;
    seen->counts[seen->n++] = block->n_frames;
    if (block->n_frames)
        memcpy(seen->samples + block->first_frame * CHANNELS, block->samples,
               block->n_frames * CHANNELS * sizeof(float));
}

/* Sound of TOTAL frames with 777 frames lost after frame 9000, in pieces of random size. */
static struct seen play(uint64_t seed)
{
    struct seen seen = {.samples = calloc(TOTAL * CHANNELS, sizeof(float))};
    struct block_sink sink = {take, &seen};
    struct blocks *blocks;
    struct random random;
    random_reset(&random, seed);
    assert_int_equal(blocks_create(1, CHANNELS, 48000, &blocks), STATUS_OK);
    float piece[3000 * CHANNELS];
    for (uint64_t at = 0; at < TOTAL;) {
        uint64_t lost = at == 9000 ? 777 : 0;
        uint64_t stop = at < 9000 ? 9000 : TOTAL;
        uint64_t n = 1 + random_bits(&random) % 2999;
        at += lost;
        n = n < stop - at ? n : stop - at;
        for (uint64_t i = 0; i < n * CHANNELS; i++)
            piece[i] = (float)(at * CHANNELS + i);
        blocks_push(blocks, lost, piece, (uint32_t)n, &sink);
        at += n;
    }
    blocks_finish(blocks, &sink);
    blocks_destroy(blocks);
    return seen;
}

static void pieces_do_not_matter(void **state)
{
    (void)state;
    struct seen first = play(1);
    for (uint64_t seed = 2; seed < 12; seed++) {
        struct seen other = play(seed);
        assert_int_equal(other.n, first.n);
        assert_memory_equal(other.firsts, first.firsts, first.n * sizeof first.firsts[0]);
        assert_memory_equal(other.losts, first.losts, first.n * sizeof first.losts[0]);
        assert_memory_equal(other.counts, first.counts, first.n * sizeof first.counts[0]);
        assert_memory_equal(other.samples, first.samples, TOTAL * CHANNELS * sizeof(float));
        free(other.samples);
    }
    uint64_t frames = 0, lost = 0, position = 0;
    for (uint32_t i = 0; i < first.n; i++) {
        assert_int_equal(first.firsts[i], position + first.losts[i]);
        position = first.firsts[i] + first.counts[i];
        /* All but the one cut by the loss and the last end on a multiple of the block. */
        assert_true(position % 2048 == 0 || position == 9000 || position == TOTAL);
        frames += first.counts[i];
        lost += first.losts[i];
    }
    assert_int_equal(lost, 777);
    assert_int_equal(frames, TOTAL - 777);
    for (uint64_t i = 9777 * CHANNELS; i < TOTAL * CHANNELS; i++)
        assert_true(first.samples[i] == (float)i);
    free(first.samples);
}

static void silence_of_the_input_is_a_gap_block(void **state)
{
    (void)state;
    struct seen seen = {.samples = calloc(TOTAL * CHANNELS, sizeof(float))};
    struct block_sink sink = {take, &seen};
    struct blocks *blocks;
    assert_int_equal(blocks_create(1, CHANNELS, 48000, &blocks), STATUS_OK);
    float piece[100 * CHANNELS] = {0};
    blocks_push(blocks, 0, piece, 100, &sink);
    blocks_push(blocks, 12000, NULL, 0, &sink);
    assert_int_equal(seen.n, 2);
    assert_int_equal(seen.counts[0], 100);
    assert_int_equal(seen.counts[1], 0);
    assert_int_equal(seen.losts[1], 12000);
    assert_int_equal(seen.firsts[1], 12100);
    blocks_destroy(blocks);
    free(seen.samples);
}

/* design: at most 4096 frames and at most 50 ms, a power of two. */
static void block_lengths(void **state)
{
    (void)state;
    assert_int_equal(flow_block_frames(8000), 256);
    assert_int_equal(flow_block_frames(48000), 2048);
    assert_int_equal(flow_block_frames(96000), 4096);
    assert_int_equal(flow_block_frames(1e6), 4096);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(pieces_do_not_matter),
        cmocka_unit_test(silence_of_the_input_is_a_gap_block),
        cmocka_unit_test(block_lengths),
    };
    return cmocka_run_group_tests_name("blocks", tests, NULL, NULL);
}
