/* lib/level/calibration and field_check: the chain's closed forms (IEC 60565 conventions), sensitivity
 * against frequency, room over the expected peak, and what counts as a calibrator's tone. */
#include "support/test.h"

#include "base/random.h"
#include "base/units.h"
#include "level/calibration.h"
#include "level/field_check.h"
#include <math.h>
#include <stdlib.h>

/* Full scale: 20 lg(V / m) with the gain taken off, m = 10^(M / 20) V/uPa; a step of 24 and 16 bits is 2^-23
 * and 2^-15 of it. Sensitivity, gain, volts; full-scale peak level, pascals a step. */
static void chains_have_their_full_scale(void **state)
{
    (void)state;
    static const double chains[4][6] = {{-180, 0, 1.0, 180.000, 0.000119209, 0.0305176},
                                        {-200, 20, 5.0, 193.979, 0.000596046, 0.152588},
                                        {-211, 40, 2.5, 178.959, 0.000105743, 0.0270701},
                                        {-165, 0, 2.5, 172.959, 5.29969e-05, 0.0135672}};
    for (int i = 0; i < 4; i++) {
        const double *row = chains[i];
        struct calibration chain = {
            .known = true, .sensitivity_db = row[0], .gain_db = row[1], .full_scale_v = row[2]};
        assert_near(calibration_clip_db(&chain), row[3], 0.0005);
        assert_near(calibration_pa_per_unit(&chain) / row[4] / 0x1p23, 1, 1e-5);
        assert_near(calibration_pa_per_unit(&chain) / row[5] / 0x1p15, 1, 1e-5);
    }
}

/* "-180 dB re 1 V/uPa" is 1e-9 V for 1 uPa, 1000 uV for 1 Pa (IEC 60565 conventions); 1 V full scale. A sine
 * that fills the chain has an SPL 3.0103 dB below its peak. */
static void a_sensitivity_is_volts_a_pascal(void **state)
{
    (void)state;
    static const double rows[][2] = {{-165, 5623.4133}, {-170, 3162.2777}, {-180, 1000}, {-193, 223.8721},
                                     {-200, 100},       {-211, 28.1838},   {-220, 10}};
    for (int i = 0; i < 7; i++) {
        struct calibration channel = {.known = true, .sensitivity_db = rows[i][0], .full_scale_v = 1};
        assert_near(1e6 / calibration_pa_per_unit(&channel) / rows[i][1], 1, 2e-6);
    }
    struct calibration chain = {.known = true, .sensitivity_db = -200, .gain_db = 20, .full_scale_v = 5};
    double peak_pa = calibration_pa_per_unit(&chain);
    assert_near(units_spl_db(peak_pa * peak_pa / 2), 190.969, 5.1e-4);
    assert_near(units_peak_db(peak_pa), 193.979, 5.1e-4);
}

/* Linear in lg f: half way between 100 Hz and 1 kHz is 316.23 Hz. */
static void sensitivity_varies_with_frequency(void **state)
{
    (void)state;
    struct calibration channel = {.known = true,
                                  .sensitivity_db = -180,
                                  .full_scale_v = 1,
                                  .n_points = 3,
                                  .point_hz = {100, 1000, 10000},
                                  .point_db = {-184, -180, -181}};
    assert_near(calibration_sensitivity_db(&channel, 20), -184, 0);
    assert_near(calibration_sensitivity_db(&channel, 316.227766), -182, 1e-6);
    assert_near(calibration_sensitivity_db(&channel, 1000), -180, 0);
    assert_near(calibration_sensitivity_db(&channel, 3162.27766), -180.5, 1e-6);
    assert_near(calibration_sensitivity_db(&channel, 50000), -181, 0);
    /* Less sensitive than assumed: the sound was louder. n = -5 is 316.23 Hz (IEC 61260-1). */
    assert_near(calibration_band_offset_db(&channel, -5), 2, 1e-6);
    channel.known = false;
    assert_near(calibration_band_offset_db(&channel, -5), 0, 0);
    channel.n_points = 0;
    assert_near(calibration_sensitivity_db(&channel, 5), -180, 0);
}

static void room_over_the_peak_is_six_decibels(void **state)
{
    (void)state;
    struct calibration channel = {
        .known = true, .sensitivity_db = -180, .full_scale_v = 1, .expected_peak_db = NAN};
    assert_true(calibration_has_room(&channel)); /* it clips at 180 dB */
    channel.expected_peak_db = 173.99;
    assert_true(calibration_has_room(&channel));
    channel.expected_peak_db = 174.01;
    assert_false(calibration_has_room(&channel));
    channel.known = false; /* relative levels are compared with nothing */
    assert_true(calibration_has_room(&channel));
}

#define RATE 48000.0

/* seconds of a sine of 1 Pa (SPL 116.9897 dB: 10 lg of half over 1e-12), then as many of silence, noise over
 * both. */
static enum status measure(double hz, double seconds, double drift_db, double noise_pa,
                           struct field_check_result *out)
{
    struct field_check *check = calloc(1, sizeof *check);
    struct random random;
    random_reset(&random, 9);
    assert_non_null(check);
    assert_int_equal(field_check_reset(check, RATE, 250), STATUS_OK);
    for (int i = 0; i < (int)(2 * seconds * RATE); i++) {
        double t = i / RATE, gain = t < seconds ? pow(10, drift_db * t / 20) : 0;
        float x = (float)(0.2 + gain * sin(2 * M_PI * hz * t) + noise_pa * random_normal(&random));
        field_check_push(check, &x, 1);
    }
    enum status status = field_check_get(check, out);
    free(check);
    return status;
}

static void a_tone_is_steady_and_clear(void **state)
{
    (void)state;
    struct field_check_result got;
    for (int k = -1; k <= 1; k++) { /* 1 % off, as a pistonphone may be */
        assert_int_equal(measure(250 * (1 + 0.01 * k), 8, 0, 0.001, &got), STATUS_OK);
        assert_near(got.measured_db, 116.9897, 0.01);
        assert_near(got.seconds, 7, 0);
    }
    assert_int_equal(measure(250, 8, 0, 0.1, &got), STATUS_OK);
    assert_near(got.measured_db, 116.9897, 0.05);
    assert_near(got.rest_db, 100, 1); /* noise of 0.1 Pa rms, less its part in the band */
    assert_int_equal(measure(250, 8, 0.5, 0.001, &got), STATUS_NOT_FOUND); /* 0.5 dB/s: two seconds agree */
    assert_int_equal(measure(250, 8, 0, 0.5, &got), STATUS_NOT_FOUND);     /* the rest 3 dB below */
    assert_int_equal(measure(1000, 8, 0, 0.001, &got), STATUS_NOT_FOUND);  /* another tone */
    assert_int_equal(measure(250, 3, 0, 0.001, &got), STATUS_NOT_FOUND);   /* too short */
    static struct field_check check;
    assert_int_equal(field_check_reset(&check, 1000, 250), STATUS_BAD_ARGUMENT);
    assert_int_equal(field_check_reset(&check, RATE, 20000), STATUS_BAD_ARGUMENT);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(chains_have_their_full_scale),
        cmocka_unit_test(a_sensitivity_is_volts_a_pascal),
        cmocka_unit_test(sensitivity_varies_with_frequency),
        cmocka_unit_test(room_over_the_peak_is_six_decibels),
        cmocka_unit_test(a_tone_is_steady_and_clear),
    };
    return cmocka_run_group_tests_name("calibration", tests, NULL, NULL);
}
