/* lib/listen: one stream's composition, from blocks to events. */
#include "support/test.h"

#include "base/random.h"
#include "listen/blocks.h"
#include "listen/listen.h"
#include <math.h>
#include <stdlib.h>

#define RATE 48000
#define PI 3.14159265358979323846

static struct catalogue whistles(void)
{
    struct catalogue catalogue = {.n_classes = 1};
    catalogue.classes[0] = (struct call_class){.name = "whistle",
                                               .group = GROUP_DELPHINID,
                                               .form = CALL_TONE,
                                               .animal = true,
                                               .low_hz = 3000,
                                               .high_hz = 20000,
                                               .natural_delay_s = 0.15,
                                               .false_per_hour = 1,
                                               .certainty = 0.8,
                                               .evidence = 2,
                                               .tone = {.window_s = 0.0107,
                                                        .min_snr_db = 10,
                                                        .min_s = 0.2,
                                                        .max_s = 3,
                                                        .min_extent_hz = 500,
                                                        .max_extent_hz = 17000,
                                                        .min_sweep_hz = -INFINITY,
                                                        .max_sweep_hz = INFINITY,
                                                        .max_rate_hz_s = 60000}};
    return catalogue;
}

struct heard {
    uint32_t n;
    struct event *events;
    uint32_t n_columns;
    struct class_account account;  /* of the one class */
    struct class_account impulses; /* of the impulses */
};

struct playing {
    struct listen *listen;
    struct heard *heard;
    int64_t last_known_ns;
};

static void take_event(void *context, const struct event *event)
{
    struct playing *playing = context;
    /* Contract: events come in order of the time at which they became known, and no later than what was
     * heard. */
    assert_true(event->known_ns >= playing->last_known_ns);
    playing->last_known_ns = event->known_ns;
    playing->heard->events = realloc(playing->heard->events, (playing->heard->n + 1) * sizeof *event);
    playing->heard->events[playing->heard->n++] = *event;
}

static void take_block(void *context, const struct block *block)
{
    struct playing *playing = context;
    const struct event_sink sink = {take_event, playing};
    assert_int_equal(listen_push(playing->listen, block, &sink), STATUS_OK);
    assert_true(playing->last_known_ns <= listen_get_time(playing->listen));
}

static void take_column(void *context, const struct column *column)
{
    struct heard *heard = context;
    assert_true(column->high_hz > column->low_hz);
    heard->n_columns++;
}

/* Plays interleaved frames in pieces of random size; `lost` frames are lost before frame `lost_at`. */
static struct heard play(const float *frames, uint64_t n, uint32_t channels, bool calibrated,
                         uint64_t lost_at, uint64_t lost, uint64_t seed)
{
    static struct catalogue catalogue;
    catalogue = whistles();
    struct heard heard = {0};
    struct playing playing = {.heard = &heard, .last_known_ns = 0};
    struct listen_setup setup = {.stream = 1,
                                 .run = 1,
                                 .n_channels = channels,
                                 .rate_hz = RATE,
                                 .map = {.rate_hz = RATE},
                                 .catalogue = &catalogue,
                                 .columns = {take_column, &heard}};
    for (uint32_t i = 0; i < channels; i++)
        setup.calibration[i] = (struct calibration){.known = calibrated,
                                                    .sensitivity_db = -180,
                                                    .full_scale_v = 1,
                                                    .self_noise_db = NAN,
                                                    .role = ROLE_BOTH};
    struct blocks *blocks;
    struct random random;
    random_reset(&random, seed);
    assert_int_equal(listen_create(&setup, &playing.listen), STATUS_OK);
    assert_int_equal(blocks_create(1, channels, RATE, &blocks), STATUS_OK);
    const struct block_sink sink = {take_block, &playing};
    for (uint64_t at = 0; at < n;) {
        uint64_t piece = 1 + random_bits(&random) % 6000, stop = at < lost_at && lost_at < n ? lost_at : n;
        piece = piece < stop - at ? piece : stop - at;
        blocks_push(blocks, at == lost_at ? lost : 0, frames + at * channels, (uint32_t)piece, &sink);
        at += piece;
    }
    blocks_finish(blocks, &sink);
    const struct event_sink events = {take_event, &playing};
    assert_int_equal(listen_finish(playing.listen, &events), STATUS_OK);
    struct class_account accounts[LISTEN_MAX_ACCOUNTS];
    assert_int_equal(listen_get_accounts(playing.listen, accounts), 2);
    heard.account = accounts[0];
    heard.impulses = accounts[1];
    blocks_destroy(blocks);
    listen_destroy(playing.listen);
    return heard;
}

/* Noise of 1e-3 full scale, and a rising whistle of 0.6 s each 2 s on every channel, 3 frames later on each
 * next. */
static float *make_sound(uint64_t n, uint32_t channels, uint64_t seed)
{
    float *frames = calloc(n * channels, sizeof *frames);
    struct random random;
    random_reset(&random, seed);
    for (uint64_t i = 0; i < n; i++)
        for (uint32_t c = 0; c < channels; c++) {
            double t = fmod(((double)i - 3.0 * c) / RATE, 2.0) - 0.7, x = t / 0.6;
            double tone = x > 0 && x < 1 ? sin(PI * x) * sin(2 * PI * (6000 * t + 5000 * t * x)) : 0;
            frames[i * channels + c] = (float)(1e-3 * random_normal(&random) + 4e-3 * tone);
        }
    return frames;
}

static uint32_t count(const struct heard *heard, enum event_kind kind)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < heard->n; i++)
        n += heard->events[i].kind == kind;
    return n;
}

/* ISO 18405 closed form: a sine of 1 Pa amplitude is 116.9897 dB re 1 uPa, its peak 120 dB. -180 dB re 1
 * V/uPa and 1 V: full scale is 1000 Pa. */
static void a_sine_has_its_closed_form_level(void **state)
{
    (void)state;
    float *frames = calloc(4 * RATE, sizeof *frames);
    for (int i = 0; i < 4 * RATE; i++)
        frames[i] = (float)(1e-3 * sin(2 * PI * 1000 * i / RATE));
    struct heard heard = play(frames, 4 * RATE, 1, true, UINT64_MAX, 0, 1);
    assert_int_equal(count(&heard, EVENT_LEVEL), 4);
    assert_true(heard.n_columns >= 3 * 3 * 4);
    for (uint32_t i = 0; i < heard.n; i++)
        if (heard.events[i].kind == EVENT_LEVEL) {
            const struct level *level = &heard.events[i].as.level;
            assert_near(level->spl_db, 116.9897, 0.05);
            assert_near(level->peak_db, 120.0, 0.05);
            assert_near(level->band_db[20], 116.9897, 0.05); /* n = 0, 1 kHz, all of it */
            assert_false(level->relative);
        }
    free(heard.events);
    heard = play(frames, 4 * RATE, 1, false, UINT64_MAX, 0, 1);
    for (uint32_t i = 0; i < heard.n; i++)
        if (heard.events[i].kind == EVENT_LEVEL) {
            assert_true(heard.events[i].as.level.relative);
            assert_near(heard.events[i].as.level.spl_db, 20 * log10(1e-3 / sqrt(2)),
                        0.05); /* dB re full scale */
        }
    free(heard.events);
    free(frames);
}

/* The same sound in other pieces gives the same events, bit for bit. */
static void pieces_do_not_matter(void **state)
{
    (void)state;
    uint64_t n = 20 * RATE;
    float *frames = make_sound(n, 2, 7);
    struct heard first = play(frames, n, 2, true, 9 * RATE + 77, 5000, 1);
    assert_true(count(&first, EVENT_CALL) > 0);
    for (uint64_t seed = 2; seed < 7; seed++) {
        struct heard other = play(frames, n, 2, true, 9 * RATE + 77, 5000, seed);
        assert_int_equal(other.n, first.n);
        for (uint32_t i = 0; i < first.n; i++)
            assert_memory_equal(&other.events[i], &first.events[i], sizeof first.events[i]);
        free(other.events);
    }
    free(first.events);
    free(frames);
}

/* Ten whistles on three channels are ten calls, not thirty. */
static void one_call_on_three_channels_is_one_event(void **state)
{
    (void)state;
    uint64_t n = 20 * RATE;
    float *frames = make_sound(n, 3, 8);
    struct heard heard = play(frames, n, 3, true, UINT64_MAX, 0, 1);
    uint32_t calls = count(&heard, EVENT_CALL);
    printf("# figure whistles given: %u of 10, on 3 channels\n", calls);
    assert_true(calls >= 9 && calls <= 11);
    assert_string_equal(heard.account.name, "whistle");
    assert_true(heard.account.hearable);
    assert_int_equal(heard.account.n_found, calls);
    assert_string_equal(heard.impulses.name, "impulse");
    assert_int_equal(heard.impulses.n_found, count(&heard, EVENT_IMPULSE));
    for (uint32_t i = 0; i < heard.n; i++)
        if (heard.events[i].kind == EVENT_CALL) {
            double late_s = (double)(heard.events[i].known_ns - heard.events[i].as.call.end_ns) * 1e-9;
            assert_true(late_s <= 0.15 + 0.1); /* natural delay and at most 0.1 s */
        }
    free(heard.events);
    free(frames);
}

static void lost_and_broken_sound_is_unheard(void **state)
{
    (void)state;
    uint64_t n = 6 * RATE, lost = UINT64_C(25) * RATE;
    float *frames = make_sound(n, 2, 9);
    for (uint64_t i = 4 * RATE; i < 4 * RATE + 10; i++) {
        frames[2 * i] = NAN;
        frames[2 * i + 1] = i % 2 ? INFINITY : -INFINITY;
    }
    struct heard heard = play(frames, n, 2, true, 2 * RATE, lost, 1);
    int64_t gap_ns = 0, end_ns = 2 * TIME_NS_PER_S;
    uint32_t broken = 0;
    for (uint32_t i = 0; i < heard.n; i++) {
        const struct unheard *unheard = &heard.events[i].as.unheard;
        if (heard.events[i].kind == EVENT_LEVEL)
            assert_true(isfinite(heard.events[i].as.level.spl_db));
        if (heard.events[i].kind != EVENT_UNHEARD || unheard->cause != UNHEARD_GAP)
            continue;
        if (unheard->channel == 0) {
            assert_int_equal(unheard->start_ns, end_ns); /* adjoining pieces of at most 10 s */
            assert_true(unheard->end_ns - unheard->start_ns <= 10 * TIME_NS_PER_S);
            gap_ns += unheard->end_ns - unheard->start_ns;
            end_ns = unheard->end_ns;
        } else
            broken++;
    }
    assert_int_equal(gap_ns, 25 * TIME_NS_PER_S);
    assert_int_equal(broken, 2); /* one block of each channel */
    free(heard.events);
    free(frames);
}

static void bad_setups_are_refused(void **state)
{
    (void)state;
    static struct catalogue catalogue;
    struct listen *listen = NULL;
    struct listen_setup setup = {.stream = 1,
                                 .run = 1,
                                 .n_channels = 17,
                                 .rate_hz = RATE,
                                 .map = {.rate_hz = RATE},
                                 .catalogue = &catalogue};
    assert_int_equal(listen_create(&setup, &listen), STATUS_BAD_ARGUMENT);
    setup.n_channels = 1;
    setup.rate_hz = 4000;
    assert_int_equal(listen_create(&setup, &listen), STATUS_BAD_ARGUMENT);
    setup.rate_hz = 2e6;
    assert_int_equal(listen_create(&setup, &listen), STATUS_BAD_ARGUMENT);
    assert_null(listen);
    listen_destroy(NULL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_sine_has_its_closed_form_level),
        cmocka_unit_test(pieces_do_not_matter),
        cmocka_unit_test(one_call_on_three_channels_is_one_event),
        cmocka_unit_test(lost_and_broken_sound_is_unheard),
        cmocka_unit_test(bad_setups_are_refused),
    };
    return cmocka_run_group_tests_name("listen", tests, NULL, NULL);
}
