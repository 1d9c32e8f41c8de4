/* Lost frames, counted from marks against the clock. The truth is a simulated device: a sample clock that
 * runs on whatever happens, read by blocks, with what was lost known to the simulation. */
#include "support/test.h"

#include "base/random.h"
#include "ring/account.h"
#include <math.h>
#include <stdlib.h>

#define ORIGIN_NS INT64_C(7000000000000)

struct device {
    struct random random;
    double rate_hz, true_hz;
    uint32_t period;
    bool tells_age;      /* the driver says how old the first frame is */
    double late_s;       /* mean delay between reading the device's position and stamping it */
    double preempted;    /* the share of blocks whose stamp is late by milliseconds */
    double early;        /* the share of blocks whose stamp is early, by up to 0.1 ms */
    uint64_t next;       /* number of the next frame, on the device's own clock */
    uint64_t ring_frame; /* number of the next frame in the ring */
};

static double sampled_s(const struct device *d, uint64_t frame)
{
    return 0.25 + (double)frame / d->true_hz;
}

/* The mark of the device's next block, read some time after its last frame. */
static struct ring_mark next_mark(struct device *d, uint32_t overrun, uint64_t dropped)
{
    struct ring_mark mark = {.frame = d->ring_frame, .n_frames = d->period, .overrun = overrun};
    mark.dropped_before = dropped;
    double read_s = sampled_s(d, d->next + d->period) + 50e-6 * random_exponential(&d->random);
    if (random_uniform(&d->random) < d->preempted)
        read_s += 0.005 * random_exponential(&d->random);
    double waiting = floor((read_s - 0.25) * d->true_hz) - (double)d->next;
    double stamp_s = read_s + d->late_s * random_exponential(&d->random);
    if (random_uniform(&d->random) < d->preempted)
        stamp_s += 0.01 * random_exponential(&d->random);
    if (random_uniform(&d->random) < d->early)
        stamp_s -= 1e-4 * random_uniform(&d->random);
    mark.ns = ORIGIN_NS + (int64_t)(stamp_s * 1e9);
    if (d->tells_age)
        mark.first_ns = mark.ns - (int64_t)(waiting / d->rate_hz * 1e9);
    d->next += d->period;
    d->ring_frame += d->period;
    return mark;
}

static struct device device_of(uint64_t seed, double rate_hz, double ppm)
{
    struct device d = {.rate_hz = rate_hz, .true_hz = rate_hz * (1 + ppm * 1e-6), .late_s = 1e-6};
    random_reset(&d.random, seed);
    d.period = (uint32_t)(0.0125 * rate_hz);
    d.tells_age = true;
    d.preempted = 0.02;
    d.early = 0.001;
    return d;
}

/* Takes all pieces; returns the lost frames in them and adds the heard ones. */
static uint64_t take(struct account *account, uint64_t *heard)
{
    struct account_piece piece;
    uint64_t lost = 0;
    while (account_get(account, &piece) == STATUS_OK) {
        lost += piece.lost_before;
        *heard += piece.n_frames;
    }
    return lost;
}

struct tally {
    unsigned losses, exact;
    double worst_frames;
};

/* A loss after so many seconds of steady sound; n times. Adds how far each declared loss is from the truth.
 */
static void lose(struct device *d, unsigned n, double steady_s, bool flagged, struct tally *tally)
{
    struct account account;
    account_reset(&account, d->rate_hz, ORIGIN_NS);
    uint64_t heard = 0, declared = 0, true_lost = 0;
    for (unsigned i = 0; i < n; i++) {
        double steady = steady_s * random_between(&d->random, 1, 2);
        for (double s = 0; s < steady || account_holds(&account); s += d->period / d->rate_hz) {
            struct ring_mark mark = next_mark(d, 0, 0);
            assert_int_equal(account_push(&account, &mark), STATUS_OK);
            declared += take(&account, &heard);
        }
        assert_int_equal(heard, d->ring_frame);
        double error = (double)declared - (double)true_lost;
        if (i > 0) {
            tally->losses++;
            tally->exact += error == 0;
            tally->worst_frames = fmax(tally->worst_frames, fabs(error));
            true_lost = declared; /* an error is counted once */
        }
        uint64_t lost = 1 + (uint64_t)(random_uniform(&d->random) * (flagged ? 1.0 : 0.5) * d->rate_hz);
        if (!flagged)
            lost += (uint64_t)(0.02 * d->rate_hz);
        d->next += lost;
        true_lost += lost;
        struct ring_mark mark = next_mark(d, flagged, 0);
        assert_int_equal(account_push(&account, &mark), STATUS_OK);
        declared += take(&account, &heard);
    }
}

static void test_losses_exact_to_the_frame(void **state)
{
    (void)state;
    const double rates[] = {48000, 96000, 192000, 384000}, ppms[] = {0, 40, -100};
    for (int flagged = 1; flagged >= 0; flagged--) {
        struct tally tally = {.losses = 0};
        for (unsigned i = 0; i < 12; i++) {
            struct device d = device_of(100 + i, rates[i % 4], ppms[i / 4]);
            lose(&d, 50, 2.5, flagged, &tally);
        }
        printf(
            "# figure %s losses: %u of %u exact, the worst by %.0f frames; 48 to 384 kHz, -100 to 40 ppm\n",
            flagged ? "flagged" : "unflagged", tally.exact, tally.losses, tally.worst_frames);
        /* At 384 kHz a frame is 2.6 us and a stamp is late by 1 us on average: a frame's error is rare, not
         * impossible. */
        assert_true(tally.exact >= 0.99 * tally.losses && tally.worst_frames <= 1);
    }
}

/* A driver that tells nothing of a block's age: the callback's time is all there is, and how late its
 * earliest is within an eighth of a second bounds the error. */
static void test_losses_without_the_driver(void **state)
{
    (void)state;
    struct tally tally = {.losses = 0};
    for (unsigned i = 0; i < 6; i++) {
        struct device d = device_of(300 + i, 48000, i % 2 ? 50 : -50);
        d.tells_age = false;
        lose(&d, 50, 3, true, &tally);
    }
    printf("# figure without the driver's help: %u of %u exact, the worst by %.0f frames\n", tally.exact,
           tally.losses, tally.worst_frames);
    assert_true(tally.worst_frames <= 48); /* 1 ms: 20 times the mean delay of a reading */
}

/* Nothing is lost and many stamps are late: nothing is declared. */
static void test_late_is_not_lost(void **state)
{
    (void)state;
    for (unsigned i = 0; i < 4; i++) {
        struct device d = device_of(500 + i, 48000, 80);
        d.preempted = 0.4;
        d.tells_age = i % 2;
        struct account account;
        account_reset(&account, d.rate_hz, ORIGIN_NS);
        uint64_t heard = 0, lost = 0;
        for (int k = 0; k < 48000; k++) { /* ten minutes */
            struct ring_mark mark = next_mark(&d, 0, 0);
            assert_int_equal(account_push(&account, &mark), STATUS_OK);
            lost += take(&account, &heard);
        }
        account_flush(&account);
        lost += take(&account, &heard);
        assert_int_equal(lost, 0);
        assert_int_equal(heard, d.ring_frame);
        if (d.tells_age)
            assert_near(account_ppm(&account), 80, 2);
    }
}

static void test_ring_drops_are_exact(void **state)
{
    (void)state;
    struct device d = device_of(600, 192000, 10);
    struct account account;
    account_reset(&account, d.rate_hz, ORIGIN_NS);
    uint64_t heard = 0, lost = 0, dropped = 0;
    for (int k = 0; k < 4000; k++) {
        uint64_t now = random_bits(&d.random) % 8 == 0 ? random_bits(&d.random) % 50000 : 0;
        d.next += now;
        dropped += now;
        struct ring_mark mark = next_mark(&d, 0, now);
        assert_int_equal(account_push(&account, &mark), STATUS_OK);
        lost += take(&account, &heard);
    }
    account_flush(&account);
    lost += take(&account, &heard);
    assert_int_equal(lost, dropped);
}

/* The device goes, the clock declares, a new process comes: its first frames that were declared lost already
 * are skipped, and in all not a frame is missing or counted twice. */
static void test_absence(void **state)
{
    (void)state;
    unsigned exact = 0, n = 0;
    double worst = 0;
    for (unsigned seed = 700; seed < 740; seed++) {
        struct device d = device_of(seed, 48000, 60);
        struct account account;
        account_reset(&account, d.rate_hz, ORIGIN_NS);
        uint64_t heard = 0, total = 0;
        for (int k = 0; k < 400; k++) {
            struct ring_mark mark = next_mark(&d, 0, 0);
            account_push(&account, &mark);
            total += take(&account, &heard);
        }
        total += heard;
        account_absent(&account, total);
        double gone_s = sampled_s(&d, d.next), back_s = gone_s + 2 + 8 * random_uniform(&d.random);
        for (double t = gone_s + 1.5; t < back_s + 0.05; t += 0.25) {
            uint64_t lost = account_declare(&account, ORIGIN_NS + (int64_t)(t * 1e9));
            assert_near((double)(total + lost), (t - 0.25) * d.true_hz, 4);
            total += lost;
        }
        d.next = (uint64_t)((back_s - 0.25) * d.true_hz);
        heard = 0;
        uint64_t skipped = 0, lost = 0;
        uint32_t n_blocks;
        for (n_blocks = 0; n_blocks < 40 || account_holds(&account); n_blocks++) {
            struct ring_mark mark = next_mark(&d, 0, 0);
            account_push(&account, &mark);
            struct account_piece piece;
            while (account_get(&account, &piece) == STATUS_OK) {
                skipped += piece.skip;
                lost += piece.lost_before;
                heard += piece.n_frames;
            }
        }
        assert_int_equal(heard + skipped, n_blocks * d.period);
        double error = (double)(total + lost + heard) - (double)d.next;
        worst = fmax(worst, fabs(error));
        exact += error == 0;
        n++;
    }
    printf("# figure absences of 2 to 10 s: %u of %u exact, the worst by %.0f frames (a block: 600)\n", exact,
           n, worst);
    assert_true(worst <= 600);
}

static void test_garbage_marks(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 900);
    struct account account;
    account_reset(&account, 48000, ORIGIN_NS);
    unsigned n_full = 0;
    for (int k = 0; k < 200000; k++) {
        struct ring_mark mark = {.frame = random_bits(&random), .dropped_before = random_bits(&random) >> 40};
        mark.ns = (int64_t)(random_bits(&random) >> (random_bits(&random) % 64));
        mark.first_ns = (int64_t)random_bits(&random);
        mark.n_frames = (uint32_t)(random_bits(&random) % 65536);
        mark.overrun = random_bits(&random) % 8 == 0;
        struct account_piece piece;
        enum status status = account_push(&account, &mark);
        assert_true(status == STATUS_OK || status == STATUS_FULL || status == STATUS_BAD_FORMAT);
        if (status == STATUS_FULL) { /* then there is something to get, or its reader would wait for ever */
            n_full++;
            assert_int_equal(account_get(&account, &piece), STATUS_OK);
            while (account_get(&account, &piece) == STATUS_OK)
                ;
            assert_int_not_equal(account_push(&account, &mark), STATUS_FULL);
        }
        if (random_bits(&random) % 64 == 0)
            account_absent(&account, account.next_frame);
        account_declare(&account, (int64_t)(random_bits(&random) >> 2));
    }
    assert_true(n_full > 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_losses_exact_to_the_frame),
        cmocka_unit_test(test_losses_without_the_driver),
        cmocka_unit_test(test_late_is_not_lost),
        cmocka_unit_test(test_ring_drops_are_exact),
        cmocka_unit_test(test_absence),
        cmocka_unit_test(test_garbage_marks),
    };
    return cmocka_run_group_tests_name("account", tests, NULL, NULL);
}
