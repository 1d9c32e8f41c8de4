/* Certainty of calls: the logistic law against its closed form, what limits it, and what is shipped. */
#include "support/test.h"

#include "call/certainty.h"
#include "support/catalogue.h"
#include <math.h>
#include <string.h>

static struct certainty_table table_of(double weight, double usual)
{
    struct certainty_table table = {0};
    table.tone.weight[TONE_LENGTH] = weight;
    table.tone.usual[TONE_LENGTH] = usual;
    return table;
}

static void a_usual_call_is_as_certain_as_its_class(void **state)
{
    (void)state;
    const struct certainty_table table = table_of(2, 0.5);
    const struct call_class class = {.form = CALL_TONE, .certainty = 0.8};
    double measures[CALL_MEASURES] = {[TONE_LENGTH] = 0.5};
    assert_near(certainty_find(&table, &class, measures), 0.8, 1e-12);
}

/* Odds of 4 to 1; a weight of ln 2 a unit doubles or halves them: 8 to 1, 2 to 1 (arithmetic). */
static void a_measure_multiplies_the_odds(void **state)
{
    (void)state;
    const struct certainty_table table = table_of(log(2), 1);
    const struct call_class class = {.form = CALL_TONE, .certainty = 0.8};
    const struct call_class train = {.form = CALL_TRAIN, .certainty = 0.8};
    double more[CALL_MEASURES] = {[TONE_LENGTH] = 2}, less[CALL_MEASURES] = {[TONE_LENGTH] = 0};
    assert_near(certainty_find(&table, &class, more), 8.0 / 9, 1e-12);
    assert_near(certainty_find(&table, &class, less), 2.0 / 3, 1e-12);
    assert_near(certainty_find(&table, &train, more), 0.8, 1e-12); /* a train has weights of its own */
}

static void it_stays_within_what_benches_can_say(void **state)
{
    (void)state;
    const struct certainty_table table = table_of(100, 0);
    const struct call_class class = {.form = CALL_TONE, .certainty = 1};
    double more[CALL_MEASURES] = {[TONE_LENGTH] = 50}, less[CALL_MEASURES] = {[TONE_LENGTH] = -50};
    assert_near(certainty_find(&table, &class, more), 0.99, 1e-12);
    assert_near(certainty_find(&table, &class, less), 0.01, 1e-12);
}

/* ln(0.75 / 0.25) = 1.0986 (arithmetic). */
static void evidence_is_the_log_odds_within_its_class(void **state)
{
    (void)state;
    const struct call_class class = {.evidence = 1.5};
    assert_near(certainty_evidence(0.75, &class), 1.0986122887, 1e-9);
    assert_near(certainty_evidence(0.5, &class), 0, 1e-12);
    assert_near(certainty_evidence(0.2, &class), 0, 0); /* a doubtful call speaks for nobody */
    assert_near(certainty_evidence(0.99, &class), 1.5, 0);
}

static void people_are_given_a_word(void **state)
{
    (void)state;
    assert_string_equal(certainty_text(0.49), "doubtful");
    assert_string_equal(certainty_text(0.5), "possible");
    assert_string_equal(certainty_text(0.8), "probable");
}

/* A louder, longer, more regular call must never be the less certain one. */
static void what_is_shipped_has_the_signs_of_nature(void **state)
{
    (void)state;
    static const double tone[CALL_MEASURES] = {
        [TONE_LENGTH] = 1,     [TONE_BEND] = 1,     [TONE_JUMP] = -1,
        [TONE_OCCUPANCY] = -1, [TONE_CONTRAST] = 1, [TONE_STRENGTH] = 1};
    static const double train[CALL_MEASURES] = {
        [TRAIN_EXCESS] = 1,  [TRAIN_STRAYS] = -1,   [TRAIN_JITTER] = -1,  [TRAIN_LIKENESS] = 1,
        [TRAIN_LENGTH] = -1, [TRAIN_BANDWIDTH] = 1, [TRAIN_STRENGTH] = 1,
    };
    static struct catalogue catalogue;
    assert_true(test_load_catalogue(&catalogue));
    const struct certainty_table *table = &catalogue.certainty;
    double sizes[2] = {0, 0};
    for (uint32_t i = 0; i < CALL_MEASURES; i++) {
        assert_true(table->tone.weight[i] * tone[i] >= 0 && table->train.weight[i] * train[i] >= 0);
        assert_true(tone[i] != 0 || table->tone.weight[i] == 0);
        sizes[0] += fabs(table->tone.weight[i]);
        sizes[1] += fabs(table->train.weight[i]);
    }
    assert_true(sizes[0] > 0 && sizes[1] > 0);
    assert_true(table->act_evidence >= table->look_evidence && table->look_evidence > 0);
    assert_true(isfinite(table->look_false_per_hour) && isfinite(table->act_false_per_day));
    assert_string_equal(certainty_measure_name(CALL_TONE, TONE_JUMP), "jump");
    assert_string_equal(certainty_measure_name(CALL_TRAIN, TRAIN_STRENGTH), "strength");
    assert_null(certainty_measure_name(CALL_TRAIN, CALL_MEASURES));
    assert_null(certainty_measure_name(CALL_TONE, TONE_STRENGTH + 1));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_usual_call_is_as_certain_as_its_class),
        cmocka_unit_test(a_measure_multiplies_the_odds),
        cmocka_unit_test(it_stays_within_what_benches_can_say),
        cmocka_unit_test(evidence_is_the_log_odds_within_its_class),
        cmocka_unit_test(people_are_given_a_word),
        cmocka_unit_test(what_is_shipped_has_the_signs_of_nature),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
