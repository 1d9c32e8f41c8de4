/* Stretches of time against a plain bitmap. */
#include "support/test.h"

#include "base/random.h"
#include "rule/spans.h"

/* Each stretch as bits of 64 steps. */
static uint64_t bits_of(const struct spans *spans)
{
    uint64_t bits = 0;
    for (uint32_t i = 0; i < spans->n; i++) {
        assert_true(spans->all[i].start_ns < spans->all[i].end_ns);
        assert_true(i == 0 || spans->all[i - 1].end_ns <= spans->all[i].start_ns);
        for (int64_t k = spans->all[i].start_ns; k < spans->all[i].end_ns; k++)
            bits |= UINT64_C(1) << k;
    }
    return bits;
}

static void spans_agree_with_bits(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 5);
    for (int trial = 0; trial < 5000; trial++) {
        struct spans a = {0}, b = {0}, out;
        uint64_t bits_a = 0, bits_b = 0;
        for (int i = 0; i < 8; i++) {
            int64_t start = (int64_t)(random_bits(&random) % 60),
                    end = start + (int64_t)(random_bits(&random) % 5);
            struct spans *into = i % 2 ? &a : &b;
            spans_add(into, start, end);
            for (int64_t k = start; k < end; k++)
                *(i % 2 ? &bits_a : &bits_b) |= UINT64_C(1) << k;
        }
        assert_true(bits_of(&a) == bits_a && bits_of(&b) == bits_b);
        assert_int_equal(spans_total_ns(&a), __builtin_popcountll(bits_a));
        spans_common(&a, &b, &out);
        assert_true(bits_of(&out) == (bits_a & bits_b));
        spans_without(&a, &b, &out);
        assert_true(bits_of(&out) == (bits_a & ~bits_b));
        spans_common(&a, &b, &a); /* in place */
        assert_true(bits_of(&a) == (bits_a & bits_b));
        int most = (int)(random_bits(&random) % 8);
        for (bits_a &= bits_b; __builtin_popcountll(bits_a) > most; bits_a &= bits_a - 1)
            ; /* the lowest bit is the oldest */
        spans_newest(&a, most);
        assert_true(bits_of(&a) == bits_a);
    }
}

static void full_spans_forget_the_oldest(void **state)
{
    (void)state;
    struct spans spans = {0};
    for (int64_t i = 0; i < SPANS_MAX + 3; i++)
        spans_add(&spans, 10 * i, 10 * i + 5);
    assert_int_equal(spans.n, SPANS_MAX);
    assert_int_equal(spans.all[0].start_ns, 30);
    assert_int_equal(spans.all[SPANS_MAX - 1].start_ns, 10 * (SPANS_MAX + 2));
}

/* Hundreds of stretches in a day of 1,440 steps and more, each step a flag: the sum over the last day. */
#define STEPS 6000
#define DAY 1440

static void folded_spans_err_to_one_side(enum spans_full full, uint64_t seed)
{
    static unsigned char flags[STEPS];
    memset(flags, 0, sizeof flags);
    struct random random;
    random_reset(&random, seed);
    struct spans spans = {.full = full};
    int64_t worst = 0;
    unsigned n = 0;
    for (int64_t now = 0; now < STEPS - 12; n++) {
        int64_t start = now + 1 + (int64_t)(random_bits(&random) % 6),
                end = start + 1 + (int64_t)(random_bits(&random) % 5);
        memset(flags + start, 1, (size_t)(end - start));
        now = end;
        spans_forget_before(&spans, now - DAY);
        spans_add(&spans, start, end);
        for (int64_t since = now - DAY; since < now; since += 37) {
            int64_t exact = 0;
            for (int64_t k = since < 0 ? 0 : since; k < now; k++)
                exact += flags[k];
            struct spans late = spans;
            spans_forget_before(&late, since);
            assert_int_equal(spans_since_ns(&spans, since), spans_total_ns(&late));
            int64_t over = spans_total_ns(&late) - exact;
            over = full == SPANS_FOLD_LATER ? over : -over;
            assert_true(over >= 0);
            worst = over > worst ? over : worst;
        }
    }
    printf("# figure seed %llu: %u stretches, about %d a day; the sum errs by %lld of about 700 at most\n",
           (unsigned long long)seed, n, (int)(n * DAY / STEPS), (long long)worst);
    assert_true(n > 800);
    /* One list holds a day in SPANS_MAX pieces: no piece that is cut through errs by more than a few of them.
     */
    assert_true(worst <= 4 * 700 / SPANS_MAX);
}

static void sums_of_hundreds_err_to_the_safe_side(void **state)
{
    (void)state;
    for (uint64_t seed = 1; seed <= 5; seed++) {
        folded_spans_err_to_one_side(SPANS_FOLD_LATER, seed);
        folded_spans_err_to_one_side(SPANS_FOLD_EARLIER, seed);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(spans_agree_with_bits),
        cmocka_unit_test(full_spans_forget_the_oldest),
        cmocka_unit_test(sums_of_hundreds_err_to_the_safe_side),
    };
    return cmocka_run_group_tests_name("spans", tests, NULL, NULL);
}
