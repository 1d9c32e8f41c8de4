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
                                                .lone_evidence = 0.3,
                                                .lone_s = 300,
                                                .repeat_evidence = 0.02,
                                                .bout_units = 5,
                                                .bout_s = 60,
                                                .bout_evidence = 1}};
static const struct call_class free_class = {
    .name = "upcall", .group = GROUP_BALEEN_WHALE, .form = CALL_TONE, .evidence = 1.5};

static double say(struct song *song, double start_s, double length_s, double middle_hz)
{
    const struct found_call found = {.start_frame = start_s * RATE,
                                     .end_frame = (start_s + length_s) * RATE,
                                     .low_hz = 0.8 * middle_hz,
                                     .high_hz = middle_hz / 0.8};
    return fmin(unit.evidence, song_evidence(song, &unit, &found));
}

static void a_lone_unit_says_little(void **state)
{
    (void)state;
    static struct song song;
    song_reset(&song, RATE);
    assert_near(say(&song, 10, 1, 400), 0.3, 0);
    for (int i = 1; i < 15; i++)
        assert_near(say(&song, 10 + 20.0 * i, 1, 200 * pow(1.3, i)), 0.02, 0);
    assert_near(say(&song, 311, 1, 400), 0.3, 0); /* after lone_s it may speak again */
}

static double say_other(struct song *song, double start_s, double length_s)
{
    const struct found_call other = {.start_frame = start_s * RATE,
                                     .end_frame = (start_s + length_s) * RATE,
                                     .low_hz = 100,
                                     .high_hz = 200};
    return song_evidence(song, &free_class, &other);
}

/* Of a class that states no song: by itself, among tones that are none, long, long after, among song. */
static void a_tone_among_lone_units_is_doubted(void **state)
{
    (void)state;
    static struct song song;
    song_reset(&song, RATE);
    assert_true(isinf(say_other(&song, 5, 1)));
    say(&song, 10, 1, 400);
    assert_true(isinf(say_other(&song, 15, 1)));
    say(&song, 30, 1, 900);
    assert_near(say_other(&song, 40, 1), SONG_COMPANY_EVIDENCE, 0);
    assert_true(isinf(say_other(&song, 40, 8)));
    assert_true(isinf(say_other(&song, 95, 1)));
    for (int i = 0; i < 12; i++)
        say(&song, 200 + 3.0 * i, 1.2, i % 2 ? 300 : 700);
    assert_true(isinf(say_other(&song, 290, 1)));
}

/* Five of one kind within a minute are for an observer, once in lone_s; five of five kinds are not. */
static void a_bout_of_one_kind_is_a_look(void **state)
{
    (void)state;
    static struct song song;
    song_reset(&song, RATE);
    for (int i = 0; i < 4; i++)
        assert_true(say(&song, 14.0 * i, 1.2, 400) <= 0.3);
    assert_near(say(&song, 56, 1.2, 410), 1, 0);
    assert_near(say(&song, 70, 1.2, 400), 0.02, 0);
    song_reset(&song, RATE);
    for (int i = 0; i < 5; i++)
        assert_true(say(&song, 14.0 * i, 1.2, 200 * pow(1.4, i)) <= 0.3);
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
        cmocka_unit_test(a_lone_unit_says_little),
        cmocka_unit_test(a_tone_among_lone_units_is_doubted),
        cmocka_unit_test(a_bout_of_one_kind_is_a_look),
        cmocka_unit_test(units_of_two_kinds_at_the_rate_of_song_are_song),
        cmocka_unit_test(one_sound_again_and_again_is_none),
        cmocka_unit_test(tones_at_random_are_hardly_ever_song),
    };
    return cmocka_run_group_tests_name("song", tests, NULL, NULL);
}
