/* lib/place/ranges: who moves, what turns with the heading, what grows old, and what is worth an entry. The
 * wanted ranges are plane geometry; degrees are made of metres with the WGS84 radii of curvature (closed
 * form). */
#include "support/test.h"

#include "base/time.h"
#include "place/ranges.h"
#include <math.h>

#define PI 3.14159265358979323846
#define LATITUDE 54.0
#define LONGITUDE 6.5

/* Where one is, so many metres east and north of the reference. */
static struct position at(double east_m, double north_m, double t_s)
{
    const double a = 6378137, f = 1 / 298.257223563, e2 = f * (2 - f), s = sin(LATITUDE * PI / 180);
    double across_m = a / sqrt(1 - e2 * s * s) * cos(LATITUDE * PI / 180);
    double along_m = a * (1 - e2) / pow(1 - e2 * s * s, 1.5);
    return (struct position){.of = POSITION_OF_VESSEL,
                             .latitude_deg = LATITUDE + north_m / along_m * 180 / PI,
                             .longitude_deg = LONGITUDE + east_m / across_m * 180 / PI,
                             .heading_deg = NAN,
                             .course_deg = NAN,
                             .speed_m_s = NAN,
                             .accuracy_m = NAN,
                             .occurred_ns = time_from_s(t_s)};
}

static struct ranges_setup setup_of(enum ranges_moves moves, double x_m, double y_m, double z_m)
{
    struct ranges_setup setup = {.moves = moves, .oldest_s = 60, .n_streams = 1};
    setup.streams[0].place_m[0][0] = x_m;
    setup.streams[0].place_m[0][1] = y_m;
    setup.streams[0].place_m[0][2] = z_m;
    for (int c = 1; c < RANGES_MAX_CHANNELS; c++)
        setup.streams[0].place_m[c][0] = NAN;
    return setup;
}

static void assert_range(const struct ranges *ranges, double t_s, double wanted_m)
{
    enum range_from from;
    double range_m = ranges_get(ranges, 1, 1, time_from_s(t_s), &from);
    assert_string_equal(range_from_text(from), "positions");
    assert_near(range_m, wanted_m, 0.02 + 1e-4 * wanted_m);
}

static void assert_unknown(const struct ranges *ranges, uint32_t channel, double t_s, enum range_from wanted)
{
    enum range_from from;
    assert_true(isnan(ranges_get(ranges, 1, channel, time_from_s(t_s), &from)));
    assert_string_equal(range_from_text(from), range_from_text(wanted));
}

static void nothing_moves(void **state)
{
    (void)state;
    struct ranges ranges;
    enum range_from from;
    struct ranges_setup setup = setup_of(RANGES_NOTHING, 3, 4, 12);
    ranges_reset(&ranges, &setup);
    assert_near(ranges_get(&ranges, 1, 1, 0, &from), 13, 1e-12);
    assert_int_equal(from, RANGE_GEOMETRY);
    struct position vessel = at(500, 0, 1); /* changes nothing */
    ranges_take(&ranges, &vessel);
    assert_near(ranges_get(&ranges, 1, 1, TIME_NS_PER_S, NULL), 13, 1e-12);
    assert_unknown(&ranges, 2, 0, RANGE_NO_PLACE);
    setup = (struct ranges_setup){0};
    ranges_reset(&ranges, &setup);
    assert_unknown(&ranges, 1, 0, RANGE_NO_PLACE);
    assert_unknown(&ranges, 0, 0, RANGE_NO_PLACE);
    assert_unknown(&ranges, 17, 0, RANGE_NO_PLACE);
}

/* A fixed pile; a hydrophone 100 m astern, 20 m to starboard and 10 m down of the antenna. */
static void a_vessel_carries_the_array(void **state)
{
    (void)state;
    struct ranges ranges;
    struct ranges_setup setup = setup_of(RANGES_ARRAY, -100, 20, 10);
    ranges_reset(&ranges, &setup);
    assert_unknown(&ranges, 1, 0, RANGE_NO_SOURCE);
    setup.has_source = true;
    setup.latitude_deg = LATITUDE;
    setup.longitude_deg = LONGITUDE;
    ranges_reset(&ranges, &setup);
    assert_unknown(&ranges, 1, 0, RANGE_NO_VESSEL);
    static const double headings[][3] = {
        {0, 20, -100}, {90, -100, -20}, {180, -20, 100}, {270, 100, 20}, {360, 20, -100}};
    for (int i = 0; i < 5; i++)
        for (double north_m = 200; north_m < 6000; north_m *= 2) {
            struct position vessel = at(30, north_m, 10);
            vessel.heading_deg = headings[i][0];
            vessel.course_deg = 123; /* the heading is better */
            vessel.speed_m_s = 2;
            ranges_take(&ranges, &vessel);
            assert_range(&ranges, 10,
                         sqrt(pow(30 + headings[i][1], 2) + pow(north_m + headings[i][2], 2) + 100));
        }
    struct position vessel = at(30, 800, 20);
    ranges_take(&ranges, &vessel);
    assert_unknown(&ranges, 1, 20, RANGE_NO_HEADING);
    vessel = at(30, 800, 30);
    vessel.course_deg = 90;
    vessel.speed_m_s = 0.4; /* a drifting vessel's course says nothing of its heading */
    ranges_take(&ranges, &vessel);
    assert_unknown(&ranges, 1, 30, RANGE_NO_HEADING);
    vessel.speed_m_s = 0.6;
    ranges_take(&ranges, &vessel);
    assert_range(&ranges, 30, sqrt(70 * 70 + 780 * 780 + 100));
    assert_range(&ranges, 90, sqrt(70 * 70 + 780 * 780 + 100));
    assert_unknown(&ranges, 1, 90.001, RANGE_TOO_OLD);
    vessel = at(0, 0, 91); /* straight over it: a hydrophone under the antenna needs no heading */
    setup = setup_of(RANGES_ARRAY, 0, 0, 35);
    setup.has_source = true;
    setup.latitude_deg = LATITUDE;
    setup.longitude_deg = LONGITUDE;
    ranges_reset(&ranges, &setup);
    ranges_take(&ranges, &vessel);
    assert_range(&ranges, 91, 35);
}

/* An array of hydrophones that stays, guns 150 m astern of the antenna; then a source told by hand. */
static void the_source_moves(void **state)
{
    (void)state;
    struct ranges ranges;
    struct ranges_setup setup = setup_of(RANGES_SOURCE, 5, -7, 40);
    setup.streams[0].has_position = true;
    setup.streams[0].latitude_deg = LATITUDE;
    setup.streams[0].longitude_deg = LONGITUDE;
    setup.source_offset_m[0] = -150;
    ranges_reset(&ranges, &setup);
    assert_unknown(&ranges, 1, 0, RANGE_NO_VESSEL);
    struct position vessel = at(1000, 0, 5);
    vessel.heading_deg = 90;
    ranges_take(&ranges, &vessel);
    assert_range(&ranges, 6, sqrt(pow(1000 - 150 + 7, 2) + 25 + 1600));
    assert_unknown(&ranges, 1, 66, RANGE_TOO_OLD);
    struct position said = at(300, 0, 70);
    said.of = POSITION_OF_SOURCE;
    ranges_take(&ranges, &said);
    assert_range(&ranges, 71, sqrt(307 * 307 + 25 + 1600));
    assert_unknown(&ranges, 1, 131, RANGE_TOO_OLD); /* it moves: what was said grows old too */
    vessel.occurred_ns = time_from_s(132);
    ranges_take(&ranges, &vessel);
    assert_range(&ranges, 132, sqrt(857.0 * 857 + 25 + 1600));
    setup.streams[0].has_position = false; /* towed with the source: nothing moves between them */
    ranges_reset(&ranges, &setup);
    assert_near(ranges_get(&ranges, 1, 1, 0, NULL), sqrt(25 + 49 + 1600), 1e-9);
}

/* Hydrophones that stay, a pile whose place people say: it does not grow old, and holds until the job ends.
 */
static void people_say_where_the_source_is(void **state)
{
    (void)state;
    struct ranges ranges;
    struct ranges_setup setup = setup_of(RANGES_NOTHING, 0, 0, 10);
    setup.streams[0].has_position = true;
    setup.streams[0].latitude_deg = LATITUDE;
    setup.streams[0].longitude_deg = LONGITUDE;
    ranges_reset(&ranges, &setup);
    assert_unknown(&ranges, 1, 0, RANGE_NO_SOURCE);
    struct position said = at(0, 750, 10), before = at(0, 100, 9), nowhere = at(0, 0, 11);
    said.of = before.of = nowhere.of = POSITION_OF_SOURCE;
    nowhere.latitude_deg = 91;
    ranges_take(&ranges, &said);
    ranges_take(&ranges, &before);  /* older */
    ranges_take(&ranges, &nowhere); /* no place */
    assert_range(&ranges, 36000, sqrt(750.0 * 750 + 100));
    ranges_end_job(&ranges);
    assert_unknown(&ranges, 1, 36000, RANGE_NO_SOURCE);
    setup.has_source = true;
    setup.latitude_deg = said.latitude_deg;
    setup.longitude_deg = said.longitude_deg;
    ranges_reset(&ranges, &setup);
    assert_range(&ranges, 0, sqrt(750.0 * 750 + 100));
}

/* A ten-hour day at one position a second, a vessel that steams to and fro past the pile: few entries, and
 * the range in use is never more than 1 % and one second from the true one. */
static void few_positions_are_worth_an_entry(void **state)
{
    (void)state;
    struct ranges ranges;
    struct ranges_setup setup = setup_of(RANGES_ARRAY, -100, 0, 10);
    setup.has_source = true;
    setup.latitude_deg = LATITUDE;
    setup.longitude_deg = LONGITUDE;
    ranges_reset(&ranges, &setup);
    int n = 0;
    double worst = 0;
    for (int t = 0; t < 36000; t++) {
        bool north = t / 1800 % 2 == 0;
        double along_m = (north ? t % 1800 : 1800 - t % 1800) * 2.5 - 1500;
        struct position vessel = at(600, along_m, t);
        vessel.heading_deg = north ? 0 : 180;
        bool wanted = ranges_wants(&ranges, &vessel);
        if (wanted)
            ranges_take(&ranges, &vessel);
        n += wanted;
        double true_m = sqrt(600.0 * 600 + pow(along_m + (north ? -100 : 100), 2) + 100);
        worst = fmax(worst, fabs(ranges_get(&ranges, 1, 1, time_from_s(t), NULL) / true_m - 1));
    }
    printf("# figure ten hours of positions: %d of 36000 entered, range at most %.2f %% off\n", n,
           100 * worst);
    assert_true(n < 6000);
    assert_true(worst < 0.0102);
    struct position bad = at(0, 0, 36001);
    bad.speed_m_s = -1;
    assert_false(ranges_wants(&ranges, &bad));
    /* Losing the heading makes the range unknown: that is worth an entry at once. */
    struct position last = ranges.vessel;
    last.heading_deg = NAN;
    last.occurred_ns += 1;
    assert_true(ranges_wants(&ranges, &last));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(nothing_moves),
        cmocka_unit_test(a_vessel_carries_the_array),
        cmocka_unit_test(the_source_moves),
        cmocka_unit_test(people_say_where_the_source_is),
        cmocka_unit_test(few_positions_are_worth_an_entry),
    };
    return cmocka_run_group_tests_name("ranges", tests, NULL, NULL);
}
