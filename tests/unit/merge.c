/* daemon/merge: one order for the events of several threads, and nobody waits for a stream that may be left
 * behind. */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "clock.h"
#include "merge.h"
#include <pthread.h>
#include <stdlib.h>

#define STREAMS 3
#define EVENTS 3000

struct feeder {
    struct merge *merge;
    uint32_t stream;
};

/* Events a millisecond apart, with pauses of random length: threads run as they like. */
static void *feed(void *context)
{
    const struct feeder *feeder = context;
    struct random random;
    random_reset(&random, feeder->stream);
    for (uint64_t i = 1; i <= EVENTS; i++) {
        struct event event = {.kind = EVENT_CALL,
                              .stream = feeder->stream,
                              .counter = i,
                              .known_ns =
                                  (int64_t)i * 1000000 + (int64_t)(random_bits(&random) % 999) * 1000};
        merge_put(feeder->merge, &event);
        merge_progress(feeder->merge, feeder->stream, event.known_ns);
        if (random_bits(&random) % 64 == 0)
            clock_wait_until_ns(clock_monotonic_ns() + (int64_t)(random_bits(&random) % 300000));
    }
    merge_end(feeder->merge, feeder->stream);
    return NULL;
}

static void events_of_threads_come_in_one_order(void **state)
{
    (void)state;
    const bool live[STREAMS] = {false, false, false};
    struct merge *merge;
    assert_int_equal(merge_create(STREAMS, live, 0, &merge), STATUS_OK);
    pthread_t threads[STREAMS];
    struct feeder feeders[STREAMS];
    for (uint32_t i = 0; i < STREAMS; i++) {
        feeders[i] = (struct feeder){merge, i + 1};
        pthread_create(&threads[i], NULL, feed, &feeders[i]);
    }
    struct event event, last = {0};
    uint64_t n = 0, next[STREAMS + 1] = {0};
    int64_t now_ns = 0, passed_ns = 0;
    for (enum status status;
         (status = merge_take(merge, TIME_NS_PER_S / 100, &event, &now_ns)) != STATUS_END;) {
        assert_true(now_ns >= passed_ns); /* time never runs backwards */
        passed_ns = now_ns;
        if (status != STATUS_OK)
            continue;
        assert_true(event.known_ns >= last.known_ns);
        if (event.known_ns == last.known_ns)
            assert_true(event.stream > last.stream);
        assert_int_equal(event.counter, ++next[event.stream]);
        last = event;
        n++;
    }
    assert_int_equal(n, STREAMS * EVENTS);
    for (uint32_t i = 0; i < STREAMS; i++)
        pthread_join(threads[i], NULL);
    merge_destroy(merge);
}

static void a_recording_is_waited_for_and_a_live_stream_is_not(void **state)
{
    (void)state;
    for (int is_live = 0; is_live < 2; is_live++) {
        const bool live[2] = {false, is_live};
        struct merge *merge;
        struct event event;
        int64_t now_ns;
        assert_int_equal(merge_create(2, live, 0, &merge), STATUS_OK);
        merge_progress(merge, 1, 10 * TIME_NS_PER_S);
        assert_int_equal(merge_take(merge, 1000000, &event, &now_ns), STATUS_TIMEOUT);
        assert_int_equal(now_ns, is_live ? 10 * TIME_NS_PER_S - MERGE_LAG_NS : 0);
        assert_int_equal(merge_get_left_behind(merge), is_live ? 2 : 0);
        /* What the slow one says later is taken at the present, not dropped. */
        event = (struct event){.kind = EVENT_CALL, .stream = 2, .counter = 1, .known_ns = TIME_NS_PER_S};
        merge_put(merge, &event);
        merge_progress(merge, 2, TIME_NS_PER_S);
        assert_int_equal(merge_take(merge, 1000000, &event, &now_ns), STATUS_OK);
        assert_int_equal(event.known_ns, is_live ? 10 * TIME_NS_PER_S - MERGE_LAG_NS : TIME_NS_PER_S);
        merge_destroy(merge);
    }
}

struct writer {
    struct merge *merge;
    uint64_t counter;
    enum status status;
};

static void *write_note(void *context)
{
    struct writer *writer = context;
    struct note note;
    note_reset(&note, NOTE_REMARK);
    writer->status = merge_note(writer->merge, &note, &writer->counter);
    return NULL;
}

static void a_note_is_taken_at_the_present_and_answered(void **state)
{
    (void)state;
    const bool live[1] = {true};
    struct merge *merge;
    struct event event;
    int64_t now_ns;
    assert_int_equal(merge_create(1, live, 5 * TIME_NS_PER_S, &merge), STATUS_OK);
    struct writer writer = {.merge = merge};
    pthread_t thread;
    pthread_create(&thread, NULL, write_note, &writer);
    assert_int_equal(merge_take(merge, TIME_NS_PER_S, &event, &now_ns), STATUS_OK);
    assert_int_equal(event.kind, EVENT_NOTE);
    assert_int_equal(event.known_ns, 5 * TIME_NS_PER_S);
    merge_note_taken(merge, 77);
    pthread_join(thread, NULL);
    assert_int_equal(writer.status, STATUS_OK);
    assert_int_equal(writer.counter, 77);
    /* Nobody takes it: the writer is told after a second, not left waiting. */
    int64_t start_ns = clock_monotonic_ns();
    write_note(&writer);
    assert_int_equal(writer.status, STATUS_TIMEOUT);
    assert_true(clock_monotonic_ns() - start_ns < 3 * TIME_NS_PER_S);
    merge_destroy(merge);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(events_of_threads_come_in_one_order),
        cmocka_unit_test(a_recording_is_waited_for_and_a_live_stream_is_not),
        cmocka_unit_test(a_note_is_taken_at_the_present_and_answered),
    };
    return cmocka_run_group_tests_name("merge", tests, NULL, NULL);
}
