/* When it becomes light and dark, days and months ahead: against a look at every minute. */
#include "support/test.h"

#include "base/time.h"
#include "place/sun.h"
#include "rule/surroundings.h"

#define MINUTE (60 * TIME_NS_PER_S)
#define DAY (1440 * MINUTE)
#define DECEMBER_S INT64_C(1796947200) /* 2026-12-11 00:00 UTC */
#define MAY_S INT64_C(1778803200)      /* 2026-05-15 00:00 UTC */

static struct permit permit;

static struct surroundings look(int64_t zero_s, double latitude_deg, double longitude_deg, int64_t now_ns)
{
    struct surroundings around;
    surroundings_reset(&around, &permit);
    surroundings_set_clock(&around, zero_s * TIME_NS_PER_S);
    surroundings_set_place(&around, latitude_deg, longitude_deg);
    surroundings_update(&around, now_ns);
    return around;
}

static bool up(int64_t zero_s, double latitude_deg, double longitude_deg, int64_t now_ns)
{
    return sun_elevation_deg(zero_s * TIME_NS_PER_S + now_ns, latitude_deg, longitude_deg) >= SUN_RISE_DEG;
}

static void the_light_changes_at_the_first_minute_that_has_another(void **state)
{
    (void)state;
    static const struct {
        int64_t zero_s;
        double latitude_deg, longitude_deg;
    } places[] = {
        {DECEMBER_S, 78.22, 15.65}, {MAY_S, 78.22, 15.65},        {DECEMBER_S, 67.6, -50.0},
        {MAY_S, 66.2, 13.0},        {DECEMBER_S + 13, -68.6, 78}, {DECEMBER_S + 3 * 86400 + 17, 66.9, 170.0},
        {MAY_S, -69.0, -179.5},     {DECEMBER_S, 54.5, 7.5},      {MAY_S + 40 * 86400, 65.8, 24.0},
    };
    for (size_t i = 0; i < sizeof places / sizeof places[0]; i++) {
        int64_t zero_s = places[i].zero_s;
        double latitude_deg = places[i].latitude_deg, longitude_deg = places[i].longitude_deg;
        for (int64_t now_ns = 0; now_ns < 3 * DAY; now_ns += 7 * DAY / 5) {
            struct surroundings around = look(zero_s, latitude_deg, longitude_deg, now_ns);
            bool is_up = up(zero_s, latitude_deg, longitude_deg, now_ns);
            int64_t at_ns = now_ns / MINUTE * MINUTE;
            while (up(zero_s, latitude_deg, longitude_deg, at_ns) == is_up)
                at_ns += MINUTE;
            assert_int_equal(surroundings_light(&around), is_up ? LIGHT_DAY : LIGHT_DARK);
            assert_int_equal(surroundings_light_change_ns(&around), at_ns);
        }
    }
}

/* The polar night of Longyearbyen ends in the middle of February, its midnight sun begins about 20 April and
 * ends about 22 August (published for visitors; from memory). */
static void a_polar_night_ends_months_ahead(void **state)
{
    (void)state;
    struct surroundings night = look(DECEMBER_S, 78.22, 15.65, 0), day = look(MAY_S, 78.22, 15.65, 0);
    assert_int_equal(surroundings_light(&night), LIGHT_DARK);
    assert_in_range(surroundings_light_change_ns(&night) / DAY, 65, 69); /* 14 to 18 February */
    assert_int_equal(surroundings_light(&day), LIGHT_DAY);
    assert_in_range(surroundings_light_change_ns(&day) / DAY, 97, 102); /* 20 to 25 August */
}

/* At the pole the night, and with a day that begins two hours after sunrise everything else, lasts long. */
static void the_poles_are_no_exception(void **state)
{
    (void)state;
    permit.start.after_sunrise_minutes = 120;
    struct surroundings south = look(DECEMBER_S, -89.9, 0, 0);
    permit.start.after_sunrise_minutes = 0;
    assert_int_equal(surroundings_light(&south), LIGHT_DAY);
    assert_in_range(surroundings_light_change_ns(&south) / DAY, 98, 106); /* about the equinox */
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_light_changes_at_the_first_minute_that_has_another),
        cmocka_unit_test(a_polar_night_ends_months_ahead),
        cmocka_unit_test(the_poles_are_no_exception),
    };
    return cmocka_run_group_tests_name("surroundings", tests, NULL, NULL);
}
