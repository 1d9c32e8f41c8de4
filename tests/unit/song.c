/* lib/listen/song: what units say for themselves and among others. Rows of units as Payne and McVay 1971
 * (Science 173, 585) describe song, and rows that are none; checked by hand. */
#include "support/test.h"

#include "base/random.h"
#include "listen/song.h"
#include <math.h>

#define RATE 8000.0

static const struct call_class unit = {.name = "unit",
                                       .group = GROUP_BALEEN_WHALE,
                                       .animal = true,
                                       .form = CALL_TONE,
                                       .evidence = 1.5,
                                       .song = {.min_units = 6,
                                                .min_kinds = 2,
                                                .within_s = 25,
                                                .min_unit_s = 0.5,
                                                .lone_evidence = 1,
                                                .lone_s = 300,
                                                .repeat_evidence = 0.02}};
static const struct call_class free_class = {.name = "upcall", .group = GROUP_BALEEN_WHALE, .evidence = 1.5};

static double say(struct song *song, double start_s, double length_s, double middle_hz)
{
    const struct found_call found = {.start_frame = start_s * RATE,
                                     .end_frame = (start_s + length_s) * RATE,
                                     .low_hz = 0.8 * middle_hz,
                                     .high_hz = middle_hz / 0.8};
    return fmin(unit.evidence, song_evidence(song, &unit, &found));
}

static void a_lone_unit_is_for_the_observer(void **state)
{
    (void)state;
    static struct song song;
    song_reset(&song, RATE);
    assert_near(say(&song, 10, 1, 400), 1, 0);
    for (int i = 1; i < 15; i++)
        assert_near(say(&song, 10 + 20.0 * i, 1, 400 + 50 * i), 0.02, 0);
    assert_near(say(&song, 311, 1, 400), 1, 0); /* after lone_s it may speak again */
    const struct found_call other = {.start_frame = 0, .end_frame = RATE, .low_hz = 100, .high_hz = 200};
    assert_true(isinf(song_evidence(&song, &free_class, &other)));
}

static void units_of_two_kinds_at_the_rate_of_song_are_song(void **state)
{
    (void)state;
    static struct song song;
    song_reset(&song, RATE);
    for (int i = 0; i < 5; i++)
        assert_true(say(&song, 4.0 * i, 1.2, i % 2 ? 300 : 700) < 1.5);
    assert_near(say(&song, 20, 1.2, 700), 1.5, 0);
    assert_near(say(&song, 24, 1.2, 300), 1.5, 0);
    assert_near(say(&song, 60, 1.2, 300), 0.02, 0); /* alone again */
}

static void one_sound_again_and_again_is_none(void **state)
{
    (void)state;
    static struct song song;
    song_reset(&song, RATE);
    for (int i = 0; i < 30; i++)
        assert_true(say(&song, 2.0 * i, 1.2, 500 + 5 * (i % 3)) < 1.5);
    song_reset(&song, RATE);
    for (int i = 0; i < 30; i++) /* short grunts of any pitch */
        assert_true(say(&song, 1.0 * i, 0.25, 200 + 100 * (i % 5)) < 1.5);
}

/* Tones of any pitch that come at random, one in 18 s on average, as ice may give them (lib/scene). */
static void tones_at_random_are_hardly_ever_song(void **state)
{
    (void)state;
    static struct song song;
    struct random random;
    const uint64_t seed = 20261201;
    uint32_t n = 0, n_song = 0;
    double at_s = 0;
    song_reset(&song, RATE);
    random_reset(&random, seed);
    for (; at_s < 24 * 3600; n++) {
        double length_s = random_between(&random, 0.3, 3);
        n_song += say(&song, at_s, length_s, 200 * pow(10, random_uniform(&random))) == 1.5;
        at_s += length_s + 2 + 15 * random_exponential(&random);
    }
    printf("# figure units taken for song of %u tones at random in a day, seed %llu: %u\n", n,
           (unsigned long long)seed, n_song);
    assert_true(n_song <= 8);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_lone_unit_is_for_the_observer),
        cmocka_unit_test(units_of_two_kinds_at_the_rate_of_song_are_song),
        cmocka_unit_test(one_sound_again_and_again_is_none),
        cmocka_unit_test(tones_at_random_are_hardly_ever_song),
    };
    return cmocka_run_group_tests_name("song", tests, NULL, NULL);
}
