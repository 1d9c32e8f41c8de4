/* lib/place/geodesy: against a published line, closed forms and integrals of the ellipsoid, and values of
 * other software from memory. */
#include "support/test.h"

#include "base/random.h"
#include "place/geodesy.h"
#include <math.h>

#define PI 3.14159265358979323846

static void assert_line(struct geodesy_point from, struct geodesy_point to, double wanted_m,
                        double wanted_deg, double tolerance_m, double tolerance_deg)
{
    double distance_m, bearing_deg;
    assert_int_equal(geodesy_line(from, to, &distance_m, &bearing_deg), STATUS_OK);
    assert_near(distance_m, wanted_m, tolerance_m);
    assert_near(remainder(bearing_deg - wanted_deg, 360), 0, tolerance_deg);
}

static double degrees(int sign, double d, double minutes, double seconds)
{
    return sign * (d + minutes / 60 + seconds / 3600);
}

/* Flinders Peak to Buninyong: 54972.271 m, 306 deg 52' 05.37" and back 127 deg 10' 25.07" (Geocentric Datum
 * of Australia technical manual, the worked example of Vincenty's formulae, on GRS80: its flattening differs
 * from WGS84's by 1.6e-11, less than a micrometre on this line). */
static void the_published_line(void **state)
{
    (void)state;
    struct geodesy_point flinders = {degrees(-1, 37, 57, 3.72030), degrees(1, 144, 25, 29.52440)};
    struct geodesy_point buninyong = {degrees(-1, 37, 39, 10.15610), degrees(1, 143, 55, 35.38390)};
    assert_line(flinders, buninyong, 54972.271, degrees(1, 306, 52, 5.37), 0.0006, 0.006 / 3600);
    /* The manual's reverse azimuth is the bearing at the second station back to the first. */
    assert_line(buninyong, flinders, 54972.271, degrees(1, 127, 10, 25.07), 0.0006, 0.006 / 3600);
}

/* Kennedy to Changi: 15347628 m, 3 deg 18' 29.9" (manual page of GeodSolve of GeographicLib, Karney; from
 * memory). Kennedy's bearing at Changi is 180 deg off the end azimuth 177 deg 29' 09.2". */
static void a_long_line(void **state)
{
    (void)state;
    struct geodesy_point kennedy = {degrees(1, 40, 38, 23), degrees(-1, 73, 46, 44)};
    struct geodesy_point changi = {degrees(1, 1, 21, 33), degrees(1, 103, 59, 22)};
    assert_line(kennedy, changi, 15347628, degrees(1, 3, 18, 29.9), 0.6, 0.06 / 3600);
    assert_line(changi, kennedy, 15347628, 180 + degrees(1, 177, 29, 9.2), 0.6, 0.06 / 3600);
}

/* On the equator: a times the difference of longitude; along a meridian: the integral of its radius of
 * curvature a (1 - e2) / (1 - e2 sin2)^1.5, here by Simpson's rule of 2000 parts. */
static void closed_forms(void **state)
{
    (void)state;
    const double a = 6378137, f = 1 / 298.257223563, e2 = f * (2 - f);
    for (double east = 1e-5; east < 170; east *= 3) {
        assert_line((struct geodesy_point){0, 0}, (struct geodesy_point){0, east}, a * east * PI / 180, 90,
                    1e-6, 1e-9);
        assert_line((struct geodesy_point){0, 179.99},
                    (struct geodesy_point){0, remainder(179.99 - east, 360)}, a * east * PI / 180, 270, 1e-6,
                    1e-9);
    }
    for (double south = -89; south < 80; south += 7)
        for (double length = 0.001; south + length < 90; length *= 10) {
            double sum = 0;
            const int n = 2000;
            for (int i = 0; i <= n; i++) {
                double s = sin((south + length * i / n) * PI / 180);
                sum += (i == 0 || i == n ? 1 : i % 2 ? 4 : 2) * a * (1 - e2) / pow(1 - e2 * s * s, 1.5);
            }
            double wanted_m = sum * length * PI / 180 / (3 * n);
            assert_line((struct geodesy_point){south, -5}, (struct geodesy_point){south + length, -5},
                        wanted_m, 0, 1e-4, 1e-9);
            assert_line((struct geodesy_point){south + length, -5}, (struct geodesy_point){south, -5},
                        wanted_m, 180, 1e-4, 1e-9);
        }
    /* Equator to pole: 10001965.729 m (the quarter meridian of WGS84; from memory). */
    assert_line((struct geodesy_point){0, 7}, (struct geodesy_point){90, 7}, 10001965.729, 0, 0.0006, 1e-9);
}

/* East and north near a place are the radii of curvature times the angles, N cos(latitude) d(longitude) and
 * M d(latitude) (any textbook of geodesy), as long as the distance is small. */
static void local_metres(void **state)
{
    (void)state;
    const double a = 6378137, f = 1 / 298.257223563, e2 = f * (2 - f);
    struct random random;
    random_reset(&random, 7);
    for (int i = 0; i < 1000; i++) {
        struct geodesy_point from = {random_between(&random, -70, 70), random_between(&random, -180, 180)};
        double up = random_between(&random, -1e-3, 1e-3), across = random_between(&random, -1e-3, 1e-3);
        struct geodesy_point to = {from.latitude_deg + up, remainder(from.longitude_deg + across, 360)};
        double middle = (from.latitude_deg + 0.5 * up) * PI / 180, s = sin(middle);
        double wanted_east = a / sqrt(1 - e2 * s * s) * cos(middle) * across * PI / 180;
        double wanted_north = a * (1 - e2) / pow(1 - e2 * s * s, 1.5) * up * PI / 180;
        double east, north;
        assert_int_equal(geodesy_local(from, to, &east, &north), STATUS_OK);
        assert_near(hypot(east, north), hypot(wanted_east, wanted_north), 1e-4);
        assert_near(east, wanted_east, 0.01);
        assert_near(north, wanted_north, 0.01);
    }
    double east = 1, north = 1;
    assert_int_equal(
        geodesy_local((struct geodesy_point){54, 6}, (struct geodesy_point){54, 6}, &east, &north),
        STATUS_OK);
    assert_true(east == 0 && north == 0);
}

static void what_is_no_position(void **state)
{
    (void)state;
    const struct geodesy_point here = {54, 6};
    const struct geodesy_point bad[] = {{90.1, 0}, {-91, 0}, {0, 180.1},   {0, -181},
                                        {NAN, 0},  {0, NAN}, {INFINITY, 0}};
    double distance_m = 5, bearing_deg = 6;
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
        assert_int_equal(geodesy_line(here, bad[i], &distance_m, &bearing_deg), STATUS_OUT_OF_RANGE);
        assert_int_equal(geodesy_line(bad[i], here, &distance_m, &bearing_deg), STATUS_OUT_OF_RANGE);
    }
    /* Nearly antipodal: the formula does not converge, and says so. */
    assert_int_equal(geodesy_line((struct geodesy_point){0, 0}, (struct geodesy_point){0.5, 179.7},
                                  &distance_m, &bearing_deg),
                     STATUS_OUT_OF_RANGE);
    assert_true(distance_m == 5 && bearing_deg == 6);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_published_line),  cmocka_unit_test(a_long_line),
        cmocka_unit_test(closed_forms),        cmocka_unit_test(local_metres),
        cmocka_unit_test(what_is_no_position),
    };
    return cmocka_run_group_tests_name("geodesy", tests, NULL, NULL);
}
