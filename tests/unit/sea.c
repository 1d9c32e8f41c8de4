/* lib/sea against published and independently computed values. */
#include "support/test.h"

#include "sea/absorption.h"
#include "sea/noise.h"
#include "sea/sound_speed.h"
#include <math.h>

/* A public table of the equation of Leroy, Robinson and Goldsmith (2008), in the SonarDocs pages on sound
 * speed; its salinity (30) and latitude (0) are not printed and follow from its numbers; two decimals. */
static void sound_speed_agrees_with_the_published_table(void **state)
{
    (void)state;
    static const double depth_m[] = {10, 1000, 5000}, temperature_c[] = {0, 10, 20, 30};
    static const double want[3][4] = {{1442.56, 1483.90, 1516.14, 1540.55},
                                      {1458.62, 1499.98, 1532.31, 1556.85},
                                      {1527.74, 1568.04, 1599.55, 1623.51}};
    for (int d = 0; d < 3; d++)
        for (int t = 0; t < 4; t++)
            assert_near(sea_sound_speed_m_s(temperature_c[t], 30, depth_m[d], 0), want[d][t], 0.0101);
}

/* TEOS-10 (IOC, SCOR and IAPSO 2010; GSW toolbox): an equation of state, not a fit to the same data. The
 * paper claims 0.2 m/s. */
static void sound_speed_agrees_with_teos10(void **state)
{
    (void)state;
    static const double want[][4] = {
        {0, 35, 0, 1449.0063},  {10, 35, 0, 1489.8177},    {15, 35, 50, 1507.4806},
        {20, 35, 0, 1521.3924}, {25, 35, 1000, 1550.9501}, {4, 35, 2000, 1499.7696},
        {8, 33, 30, 1480.4604}, {8, 10, 20, 1451.9909},    {30, 40, 100, 1552.2539}};
    for (size_t i = 0; i < sizeof want / sizeof want[0]; i++)
        assert_near(sea_sound_speed_m_s(want[i][0], want[i][1], want[i][2], 45), want[i][3], 0.2);
}

/* Francois and Garrison's equation worked out apart from this code, to six digits. */
static void absorption_agrees_with_francois_and_garrison(void **state)
{
    (void)state;
    struct absorption cold = absorption_of(10, 35, 0, 8), brackish = absorption_of(8, 10, 20, 7.9),
                      warm = absorption_of(25, 35, 0, 8.1), deep = absorption_of(4, 35, 1000, 8);
    static const double khz[] = {0.1, 1, 10, 50, 130, 200};
    static const double want[6][4] = {{0.00100703, 0.00157613, 0.000692529, 0.00123801},
                                      {0.0601261, 0.0404945, 0.0549395, 0.061029},
                                      {0.962637, 0.327681, 0.696759, 1.00529},
                                      {15.3919, 5.05957, 11.3774, 13.1304},
                                      {41.1118, 15.409, 53.1885, 28.7805},
                                      {54.4462, 24.6641, 86.4074, 39.7709}};
    const struct absorption *water[] = {&cold, &brackish, &warm, &deep};
    for (int i = 0; i < 6; i++)
        for (int w = 0; w < 4; w++)
            assert_near(1e3 * absorption_db_m(water[w], 1e3 * khz[i]) / want[i][w], 1.0, 6e-6);
}

/* Ainslie and McColm, J. Acoust. Soc. Am. 103, 1671 (1998): a simpler equation that its authors hold within
 * 10 % of Francois and Garrison from 100 Hz to 1 MHz. */
static void absorption_is_near_ainslie_and_mccolm(void **state)
{
    (void)state;
    double t = 10, s = 35, z_km = 0.02, ph = 8;
    struct absorption water = absorption_of(t, s, 1e3 * z_km, ph);
    double f1 = 0.78 * sqrt(s / 35) * exp(t / 26), f2 = 42 * exp(t / 17);
    for (double f = 0.1; f < 1000; f *= 1.3) {
        double db_km = 0.106 * f1 * f * f / (f * f + f1 * f1) * exp((ph - 8) / 0.56) +
                       0.52 * (1 + t / 43) * (s / 35) * f2 * f * f / (f * f + f2 * f2) * exp(-z_km / 6) +
                       0.00049 * f * f * exp(-(t / 27 + z_km / 17));
        assert_near(1e3 * absorption_db_m(&water, 1e3 * f) / db_km, 1.0, 0.1);
    }
}

static void pure_water_has_no_relaxation(void **state)
{
    (void)state;
    struct absorption fresh = absorption_of(10, 0, 0, 8);
    assert_true(isfinite(absorption_db_m(&fresh, 1e4)));
    assert_near(absorption_db_m(&fresh, 2e4) / absorption_db_m(&fresh, 1e4), 4.0, 0.5);
}

/* Coates's fit worked out apart from this code: totals for (shipping, wind) = (0.5, 5), (0, 0), (1, 15). */
static void noise_agrees_with_coates(void **state)
{
    (void)state;
    static const double want[][4] = {
        {10, 78.1650, 77.1315, 83.1058},     {50, 72.1736, 62.9831, 82.1310},
        {100, 67.7922, 57.6828, 78.1251},    {500, 62.7560, 46.6225, 74.9615},
        {1000, 60.9549, 44.3005, 73.2196},   {5000, 51.4555, 34.6914, 63.7318},
        {10000, 46.0899, 29.3369, 58.3663},  {50000, 32.8352, 20.7116, 44.9406},
        {100000, 28.9437, 25.1331, 39.1484}, {200000, 31.4076, 31.0291, 35.1276}};
    for (size_t i = 0; i < sizeof want / sizeof want[0]; i++) {
        assert_near(sea_noise_db(want[i][0], 5, 0.5), want[i][1], 1e-4);
        assert_near(sea_noise_db(want[i][0], 0, 0), want[i][2], 1e-4);
        assert_near(sea_noise_db(want[i][0], 15, 1), want[i][3], 1e-4);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(sound_speed_agrees_with_the_published_table),
        cmocka_unit_test(sound_speed_agrees_with_teos10),
        cmocka_unit_test(absorption_agrees_with_francois_and_garrison),
        cmocka_unit_test(absorption_is_near_ainslie_and_mccolm),
        cmocka_unit_test(pure_water_has_no_relaxation),
        cmocka_unit_test(noise_agrees_with_coates),
    };
    return cmocka_run_group_tests_name("sea", tests, NULL, NULL);
}
