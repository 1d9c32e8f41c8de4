/* lib/listen/covers: what recognised sounds cover, and how often they are told. Checked by hand. */
#include "support/test.h"

#include "listen/covers.h"

#define RATE 48000.0
enum { WHISTLE, CLICKS, PING, RAIN, SOUNDER, SONAR, SCREW, LINE, SHRIMP, N_CLASSES };

static const struct call_class classes[N_CLASSES] = {
    [WHISTLE] = {.name = "whistle", .animal = true, .form = CALL_TONE, .evidence = 2},
    [CLICKS] = {.name = "clicks", .animal = true, .form = CALL_TRAIN, .evidence = 3},
    [PING] = {.name = "ping", .form = CALL_TONE, .evidence = -5},
    [RAIN] = {.name = "rain", .form = CALL_NOISE, .evidence = 0},
    [SONAR] = {.name = "sonar", .form = CALL_TONE, .evidence = -5, .sound = {.manner = MANNER_BURST}},
    [SCREW] = {.name = "screw", .form = CALL_NOISE, .evidence = -5, .sound = {.manner = MANNER_BEATS}},
    [LINE] = {.name = "line", .form = CALL_TONE, .evidence = -2, .sound = {.manner = MANNER_LINE}},
    [SHRIMP] = {.name = "shrimp", .form = CALL_TRAIN, .evidence = -1, .sound = {.manner = MANNER_SNAPS}},
    [SOUNDER] = {.name = "sounder", .form = CALL_TRAIN, .evidence = -1},
};

static struct found_call sound_of(uint32_t class_index, double start_s, double end_s, double low_hz,
                                  double high_hz)
{
    return (struct found_call){.class_index = class_index,
                               .start_frame = start_s * RATE,
                               .end_frame = end_s * RATE,
                               .known_frame = (uint64_t)(end_s * RATE),
                               .low_hz = low_hz,
                               .high_hz = high_hz};
}

static uint32_t take(struct covers *covers, struct found_call found, uint64_t *against)
{
    const struct joined_call joined = {1, found};
    return covers_take_sound(covers, &joined, against);
}

static void a_sound_before_the_call_withholds_it(void **state)
{
    (void)state;
    static struct covers covers;
    uint64_t against[CALL_MAX_AGAINST];
    covers_reset(&covers, classes, N_CLASSES, RATE);
    assert_int_equal(take(&covers, sound_of(PING, 1, 2, 6900, 7100), against), 0);
    struct found_call call = sound_of(WHISTLE, 1.1, 1.9, 6950, 7050);
    assert_near(covers_evidence(&covers, &call), 0, 0); /* covered: at most what it has is taken */
    call.start_frame = 0.9 * RATE, call.end_frame = 3.5 * RATE;
    assert_near(covers_evidence(&covers, &call), 2, 0); /* most of its time is not */
    call = sound_of(WHISTLE, 1.1, 1.9, 6000, 9000);
    assert_near(covers_evidence(&covers, &call), 2, 0); /* most of its band is not */
    call = sound_of(WHISTLE, 1.1, 1.9, 9000, 9100);
    assert_near(covers_evidence(&covers, &call), 2, 0);
}

static void a_sound_after_the_call_names_it_once(void **state)
{
    (void)state;
    static struct covers covers;
    uint64_t against[CALL_MAX_AGAINST] = {0};
    covers_reset(&covers, classes, N_CLASSES, RATE);
    struct found_call call = sound_of(WHISTLE, 1.1, 1.9, 6950, 7050);
    covers_keep_call(&covers, &call, 7);
    assert_int_equal(take(&covers, sound_of(RAIN, 0, 9, 100, 20000), against), 0); /* says nothing against */
    assert_int_equal(take(&covers, sound_of(PING, 1, 1.4, 6950, 7050), against), 0);
    assert_int_equal(take(&covers, sound_of(PING, 1.5, 2, 6950, 7050), against), 1); /* both together do */
    assert_int_equal(against[0], 7);
    assert_int_equal(take(&covers, sound_of(PING, 1, 2, 6950, 7050), against), 0);
}

/* An echosounder's pings say nothing against a porpoise that clicks in another rhythm. */
static void trains_are_covered_by_their_own_rhythm_only(void **state)
{
    (void)state;
    static struct covers covers;
    uint64_t against[CALL_MAX_AGAINST];
    covers_reset(&covers, classes, N_CLASSES, RATE);
    struct found_call sounder = sound_of(SOUNDER, 0, 10, 110000, 150000);
    sounder.n_pulses = 100, sounder.interval_frames = 0.1 * RATE;
    assert_int_equal(take(&covers, sounder, against), 0);
    struct found_call clicks = sound_of(CLICKS, 2, 4, 110000, 150000);
    clicks.n_pulses = 30, clicks.interval_frames = 0.066 * RATE;
    assert_near(covers_evidence(&covers, &clicks), 3, 0);
    clicks.interval_frames = 0.2002 * RATE; /* each second ping */
    assert_near(covers_evidence(&covers, &clicks), 2, 0);
}

/* What a loud ping has beside it is 25 dB weaker and less than half an octave away, and comes with it. */
static void skirts_of_a_ping_are_doubted(void **state)
{
    (void)state;
    static struct covers covers;
    uint64_t against[CALL_MAX_AGAINST];
    covers_reset(&covers, classes, N_CLASSES, RATE);
    struct found_call ping = sound_of(SONAR, 1, 2, 3500, 3900);
    ping.snr_db = 60;
    take(&covers, ping, against);
    struct found_call call = sound_of(WHISTLE, 1.3, 2, 3000, 3400);
    call.snr_db = 12;
    assert_true(covers_doubts(&covers, &call));
    assert_near(covers_evidence(&covers, &call), 2, 0); /* given */
    call.snr_db = 40;                                   /* as loud as an animal near by */
    assert_false(covers_doubts(&covers, &call));
    call = sound_of(WHISTLE, 1.3, 2, 7000, 8000);
    assert_false(covers_doubts(&covers, &call));
    call = sound_of(WHISTLE, 2.2, 3.6, 3000, 3400); /* goes on when the ping is over */
    assert_false(covers_doubts(&covers, &call));
}

/* A screw that swells 1.65 times a second: trains of its rhythm that barely stand out are of its noise. */
static void noise_that_swells_covers_its_own_rhythm(void **state)
{
    (void)state;
    static struct covers covers;
    uint64_t against[CALL_MAX_AGAINST];
    covers_reset(&covers, classes, N_CLASSES, RATE);
    struct found_call screw = sound_of(SCREW, 0, 10, 2000, 20000);
    screw.interval_frames = RATE / 1.65;
    take(&covers, screw, against);
    struct found_call clicks = sound_of(CLICKS, 8, 19, 200, 400);
    clicks.n_pulses = 18, clicks.interval_frames = RATE / 1.65, clicks.snr_db = 3;
    assert_near(covers_evidence(&covers, &clicks), 0, 0);
    assert_true(covers_doubts(&covers, &clicks));
    clicks.interval_frames = 0.77 * RATE; /* another rhythm: doubted, not withheld */
    assert_near(covers_evidence(&covers, &clicks), 3, 0);
    assert_true(covers_doubts(&covers, &clicks));
    clicks.interval_frames = RATE / 1.65, clicks.snr_db = 12;
    assert_near(covers_evidence(&covers, &clicks), 3, 0);
    assert_false(covers_doubts(&covers, &clicks));
    clicks.snr_db = 3, clicks.start_frame = 21 * RATE, clicks.end_frame = 30 * RATE;
    assert_false(covers_doubts(&covers, &clicks));
}

/* A faint tone above a thruster's line, which is 30 dB stronger, says nothing; a louder or a lower one does.
 */
static void harmonics_of_a_loud_line_are_doubted(void **state)
{
    (void)state;
    static struct covers covers;
    uint64_t against[CALL_MAX_AGAINST];
    covers_reset(&covers, classes, N_CLASSES, RATE);
    struct found_call line = sound_of(LINE, 0, 10, 238, 241);
    line.snr_db = 42;
    take(&covers, line, against);
    struct found_call call = sound_of(WHISTLE, 9, 14, 3800, 4300);
    call.snr_db = 3;
    assert_true(covers_doubts(&covers, &call));
    call.snr_db = 8;
    assert_false(covers_doubts(&covers, &call));
    call = sound_of(WHISTLE, 9, 14, 100, 200);
    call.snr_db = 3;
    assert_false(covers_doubts(&covers, &call));
    call = sound_of(WHISTLE, 71, 74, 3800, 4300);
    call.snr_db = 3;
    assert_false(covers_doubts(&covers, &call));
}

/* A few beats among snaps are doubted, not withheld; a longer train is not. */
static void few_beats_among_snaps_are_doubted(void **state)
{
    (void)state;
    static struct covers covers;
    uint64_t against[CALL_MAX_AGAINST];
    covers_reset(&covers, classes, N_CLASSES, RATE);
    take(&covers, sound_of(SHRIMP, 0, 11, 2000, 200000), against);
    struct found_call clicks = sound_of(CLICKS, 12, 13, 25000, 45000);
    clicks.n_pulses = 6, clicks.interval_frames = 0.2 * RATE, clicks.snr_db = 40;
    assert_true(covers_doubts(&covers, &clicks));
    assert_near(covers_evidence(&covers, &clicks), 3, 0);
    clicks.n_pulses = 20;
    assert_false(covers_doubts(&covers, &clicks));
}

struct told {
    uint32_t n, n_sounds;
    struct found_call last;
};

static void take_gathered(void *context, const struct joined_call *sound, uint32_t n_sounds)
{
    struct told *told = context;
    told->n++;
    told->n_sounds += n_sounds;
    told->last = sound->found;
}

/* A ping each second for a minute: the first at once, then an entry each 10 s; none is lost. */
static void entries_come_at_most_every_ten_seconds(void **state)
{
    (void)state;
    static struct covers covers;
    struct told told = {0};
    const struct gathered_sink sink = {take_gathered, &told};
    uint32_t at_once = 0;
    covers_reset(&covers, classes, N_CLASSES, RATE);
    for (int i = 0; i < 60; i++) {
        const struct joined_call ping = {2, sound_of(PING, i, i + 0.25, 7000, 7000)};
        at_once += covers_gives_now(&covers, &ping, false);
        covers_give(&covers, (uint64_t)((i + 0.5) * RATE), false, &sink);
    }
    assert_int_equal(at_once, 1);
    assert_int_equal(told.n, 5);
    covers_give(&covers, 60 * (uint64_t)RATE, true, &sink);
    assert_int_equal(told.n, 6);
    assert_int_equal(at_once + told.n_sounds, 60);
    assert_near(told.last.end_frame, 59.25 * RATE, 1);
    const struct joined_call ping = {2, sound_of(PING, 61, 61.25, 7000, 7000)};
    assert_true(covers_gives_now(&covers, &ping, true)); /* one that speaks against a call never waits */
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_sound_before_the_call_withholds_it),
        cmocka_unit_test(a_sound_after_the_call_names_it_once),
        cmocka_unit_test(trains_are_covered_by_their_own_rhythm_only),
        cmocka_unit_test(skirts_of_a_ping_are_doubted),
        cmocka_unit_test(noise_that_swells_covers_its_own_rhythm),
        cmocka_unit_test(harmonics_of_a_loud_line_are_doubted),
        cmocka_unit_test(few_beats_among_snaps_are_doubted),
        cmocka_unit_test(entries_come_at_most_every_ten_seconds),
    };
    return cmocka_run_group_tests_name("covers", tests, NULL, NULL);
}
