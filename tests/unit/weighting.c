/* lib/level/weighting against the published formulas, computed elsewhere from the equation of NMFS 2018
 * (equation 1) and Southall et al. 2019 (equation 2) in double precision, and against identities of the
 * guidances. */
#include "support/test.h"

#include "base/units.h"
#include "level/level.h"
#include "level/weighting.h"
#include <math.h>

#define N_FREQUENCIES 25
#define N_BANDS 34 /* 10 Hz to 20 kHz */

struct curve {
    const char *name;
    double w_db[N_FREQUENCIES];
};

/* C that makes max W = 0, C as printed, the frequency of the maximum, K + C. */
struct constants {
    const char *name;
    double true_c_db, c_db, peak_khz, threshold_db;
};

enum spectrum_shape { FLAT, PILE };

struct spectrum_sum {
    enum spectrum_shape shape;
    const char *name;
    double sel_db;
};

/* Across the band less at its centre, for a flat spectrum (numerical integration in double precision). */
struct across {
    int n;
    double difference_db[7];
};

static const double frequencies_hz[N_FREQUENCIES] = {
    10,   20,   50,    63,    100,   125,   200,   250,   500,   1000,   2000,   2500,  4000,
    5000, 8000, 10000, 16000, 20000, 32000, 40000, 63000, 80000, 100000, 125000, 160000};

static const struct curve curves[] = {
    {"NMFS 2018 LF", {-25.9014, -19.9132, -12.1745, -10.3148, -6.8599,  -5.3849,  -2.8813, -2.0199, -0.5206,
                      -0.0644,  -0.0089,  -0.0468,  -0.2575,  -0.4585,  -1.2903,  -1.9956, -4.5262, -6.3480,
                      -11.5490, -14.5695, -21.4497, -25.3201, -29.0279, -32.7947, -37.0063}},
    {"NMFS 2018 MF",
     {-93.0235, -83.3905, -70.6566, -67.4449, -61.0243, -57.9237, -51.3941, -48.2950, -38.6790,
      -29.1133, -19.7433, -16.8332, -11.0741, -8.6184,  -4.3561,  -2.8563,  -0.8183,  -0.3122,
      -0.0122,  -0.2071,  -1.3983,  -2.5713,  -4.0857,  -6.0361,  -8.6921}},
    {"NMFS 2018 HF",
     {-109.4905, -98.6535, -84.3277, -80.7145, -73.4911, -70.0026, -62.6556, -59.1681, -48.3413,
      -37.5451,  -26.8694, -23.4996, -16.6471, -13.5901, -7.8822,  -5.6572,  -2.2415,  -1.2192,
      -0.1109,   0.0047,   -0.5203,  -1.2683,  -2.3325,  -3.8036,  -5.9415}},
    {"NMFS 2018 PW",
     {-44.8252, -38.8050, -30.8487, -28.8431, -24.8372, -22.9058, -18.8527, -16.9414, -11.1389,
      -5.8967,  -2.0818,  -1.2901,  -0.2866,  -0.0738,  -0.0850,  -0.3192,  -1.4851,  -2.4830,
      -5.8645,  -8.1337,  -13.9179, -17.4341, -20.9152, -24.5290, -28.6307}},
    {"NMFS 2018 OW",
     {-78.2861, -66.2479, -50.3509, -46.3505, -38.3830, -34.5612, -26.6290, -22.9620, -12.4939,
      -4.8737,  -1.1490,  -0.5950,  -0.0465,  -0.0024,  -0.3259,  -0.7256,  -2.3718,  -3.6760,
      -7.7943,  -10.3938, -16.6882, -20.3765, -23.9697, -27.6600, -31.8170}},
    {"Southall 2019 LF",
     {-25.9014, -19.9132, -12.1745, -10.3148, -6.8599,  -5.3849,  -2.8813, -2.0199, -0.5206,
      -0.0644,  -0.0089,  -0.0468,  -0.2575,  -0.4585,  -1.2903,  -1.9956, -4.5262, -6.3480,
      -11.5490, -14.5695, -21.4497, -25.3201, -29.0279, -32.7947, -37.0063}},
    {"Southall 2019 HF",
     {-93.0235, -83.3905, -70.6566, -67.4449, -61.0243, -57.9237, -51.3941, -48.2950, -38.6790,
      -29.1133, -19.7433, -16.8332, -11.0741, -8.6184,  -4.3561,  -2.8563,  -0.8183,  -0.3122,
      -0.0122,  -0.2071,  -1.3983,  -2.5713,  -4.0857,  -6.0361,  -8.6921}},
    {"Southall 2019 VHF",
     {-109.4905, -98.6535, -84.3277, -80.7145, -73.4911, -70.0026, -62.6556, -59.1681, -48.3413,
      -37.5451,  -26.8694, -23.4996, -16.6471, -13.5901, -7.8822,  -5.6572,  -2.2415,  -1.2192,
      -0.1109,   0.0047,   -0.5203,  -1.2683,  -2.3325,  -3.8036,  -5.9415}},
    {"Southall 2019 SI",
     {-92.1849, -81.3480, -67.0230, -63.4103, -56.1892, -52.7029, -45.3652, -41.8863, -31.1304,
      -20.6105, -10.9341, -8.2218,  -3.6039,  -2.0488,  -0.2108,  0.0046,   -0.9071,  -2.0301,
      -5.9467,  -8.4988,  -14.7426, -18.4179, -22.0034, -25.6887, -29.8424}},
    {"Southall 2019 PCW",
     {-44.8252, -38.8050, -30.8487, -28.8431, -24.8372, -22.9058, -18.8527, -16.9414, -11.1389,
      -5.8967,  -2.0818,  -1.2901,  -0.2866,  -0.0738,  -0.0850,  -0.3192,  -1.4851,  -2.4830,
      -5.8645,  -8.1337,  -13.9179, -17.4341, -20.9152, -24.5290, -28.6307}},
    {"Southall 2019 OCW",
     {-78.2861, -66.2479, -50.3509, -46.3505, -38.3830, -34.5612, -26.6290, -22.9620, -12.4939,
      -4.8737,  -1.1490,  -0.5950,  -0.0465,  -0.0024,  -0.3259,  -0.7256,  -2.3718,  -3.6760,
      -7.7943,  -10.3938, -16.6882, -20.3765, -23.9697, -27.6600, -31.8170}},
    {"Southall 2019 PCA",
     {-73.5040, -61.4675, -45.5825, -41.5904, -33.6568, -29.8660, -22.0630, -18.5079, -8.7691,
      -2.5016,  -0.1331,  -0.0028,  -0.6141,  -1.3825,  -4.2827,  -6.3377,  -11.9907, -15.1705,
      -22.5132, -26.1885, -33.8612, -37.9542, -41.7970, -45.6518, -49.9252}},
    {"Southall 2019 OCA",
     {-63.0390, -54.6106, -43.4715, -40.6634, -35.0542, -32.3494, -26.6714, -23.9921, -15.8417,
      -8.4173,  -2.9108,  -1.7525,  -0.3074,  -0.0390,  -0.2678,  -0.7867,  -3.0011,  -4.6911,
      -9.6627,  -12.6046, -19.3826, -23.2228, -26.9119, -30.6663, -34.8692}},
    {"NMFS 2024 LF", {-24.1563, -18.2412, -10.6665, -8.8800,  -5.6454,  -4.3171,  -2.1768, -1.4842, -0.3476,
                      -0.0303,  -0.0326,  -0.0903,  -0.3731,  -0.6388,  -1.7622,  -2.7518, -6.5862, -9.6105,
                      -19.3138, -25.5496, -40.8882, -49.9779, -58.8764, -68.0446, -78.3959}},
    {"NMFS 2024 HF",
     {-69.0597, -59.7284, -47.3970, -44.2888, -38.0819, -35.0903, -28.8169, -25.8625, -16.9317,
      -9.0013,  -3.4455,  -2.3220,  -0.8552,  -0.4738,  -0.0710,  -0.0086,  -0.0898,  -0.2460,
      -0.9964,  -1.6860,  -4.3300,  -6.7492,  -9.9006,  -14.0596, -19.9085}},
    {"NMFS 2024 VHF",
     {-122.7683, -109.3424, -91.5949, -87.1187, -78.1710, -73.8504, -64.7533, -60.4374, -47.0629,
      -33.8404,  -21.1882,  -17.4084, -10.3582, -7.6110,  -3.3711,  -2.0709,  -0.4966,  -0.1557,
      -0.0504,   -0.2823,   -1.5338,  -2.8288,  -4.6375,  -7.2047,  -11.1304}},
    {"NMFS 2024 PW", {-61.9277, -52.1174, -39.1671, -35.9108, -29.4337, -26.3340, -19.9322, -16.9982, -8.8267,
                      -3.2858,  -0.8038,  -0.4457,  -0.0688,  -0.0094,  -0.0781,  -0.2169,  -0.8882,  -1.5080,
                      -4.0238,  -6.1165,  -13.0794, -18.4660, -24.5823, -31.6322, -40.3151}},
    {"NMFS 2024 OW",
     {-74.5687, -65.0565, -52.4839, -49.3137, -42.9794, -39.9232, -33.4993, -30.4611, -21.1469,
      -12.3760, -5.2324,  -3.5392,  -1.1195,  -0.4754,  0.0033,   -0.1591,  -1.5194,  -2.8513,
      -7.9607,  -11.8275, -22.9900, -30.4915, -38.2980, -46.6911, -56.4655}},
    {"NMFS 2024 PA",
     {-75.8101, -63.4728, -47.1914, -43.1000, -34.9700, -31.0862, -23.0954, -19.4575, -9.5079,
      -3.0944,  -0.4577,  -0.1445,  -0.0455,  -0.2561,  -1.4630,  -2.5901,  -6.9557,  -10.3422,
      -20.9029, -27.5094, -43.4012, -52.6723, -61.6873, -70.9344, -81.3424}},
    {"NMFS 2024 OA",
     {-59.3822, -51.2550, -40.5147, -37.8075, -32.4013, -29.7956, -24.3311, -21.7574, -13.9751,
      -7.0593,  -2.2352,  -1.2861,  -0.1733,  -0.0055,  -0.3715,  -0.9611,  -3.6022,  -5.8382,
      -13.5549, -18.8563, -32.6941, -41.2605, -49.8139, -58.7442, -68.9223}},
    {"Navy 2017 TU",
     {-22.5779, -14.4578, -5.1511,  -3.3824,  -0.9181,  -0.2801,  -0.1217,  -0.6311,  -4.9942,
      -13.4850, -24.3726, -28.1002, -36.1010, -39.9391, -48.0623, -51.9291, -60.0834, -63.9574,
      -72.1196, -75.9954, -83.8859, -88.0358, -91.9121, -95.7884, -100.0768}},
};

static const struct constants constants[] = {
    {"NMFS 2018 LF", 0.1286, 0.13, 1.636, 179.13},      {"NMFS 2018 MF", 1.1955, 1.20, 29.293, 178.20},
    {"NMFS 2018 HF", 1.3552, 1.36, 39.832, 153.36},     {"NMFS 2018 PW", 0.7529, 0.75, 6.278, 180.75},
    {"NMFS 2018 OW", 0.6412, 0.64, 4.848, 198.64},      {"Southall 2019 LF", 0.1286, 0.13, 1.636, 179.13},
    {"Southall 2019 HF", 1.1955, 1.20, 29.293, 178.20}, {"Southall 2019 VHF", 1.3552, 1.36, 39.832, 153.36},
    {"Southall 2019 SI", 2.6153, 2.62, 10.053, 185.62}, {"Southall 2019 PCW", 0.7529, 0.75, 6.278, 180.75},
    {"Southall 2019 OCW", 0.6412, 0.64, 4.848, 198.64}, {"Southall 2019 PCA", 1.5028, 1.50, 2.495, 133.50},
    {"Southall 2019 OCA", 1.3842, 1.39, 5.733, 157.39}, {"NMFS 2024 LF", 0.1215, 0.12, 1.406, 177.12},
    {"NMFS 2024 HF", 0.3217, 0.32, 11.101, 181.32},     {"NMFS 2024 VHF", 0.9091, 0.91, 26.962, 160.91},
    {"NMFS 2024 PW", 0.2921, 0.29, 5.601, 175.29},      {"NMFS 2024 OW", 1.3643, 1.37, 7.755, 179.37},
    {"NMFS 2024 PA", 0.8296, 0.83, 3.377, 133.83},      {"NMFS 2024 OA", 1.1766, 1.18, 5.334, 157.18},
    {"Navy 2017 TU", 2.3407, 2.35, 0.166, NAN},
};

static const struct spectrum_sum sums[] = {
    {FLAT, "", 165.3148},
    {FLAT, "NMFS 2018 LF", 162.5207},
    {FLAT, "NMFS 2018 MF", 155.8470},
    {FLAT, "NMFS 2018 HF", 153.7402},
    {FLAT, "NMFS 2018 PW", 160.3267},
    {FLAT, "NMFS 2018 OW", 160.3838},
    {FLAT, "NMFS 2024 LF", 162.5375},
    {FLAT, "NMFS 2024 HF", 160.0565},
    {FLAT, "NMFS 2024 VHF", 156.3712},
    {FLAT, "NMFS 2024 PW", 161.0281},
    {FLAT, "NMFS 2024 OW", 159.2804},
    {FLAT, "Southall 2019 LF", 162.5207},
    {FLAT, "Southall 2019 HF", 155.8470},
    {FLAT, "Southall 2019 VHF", 153.7402},
    {FLAT, "Southall 2019 SI", 158.3244},
    {FLAT, "Southall 2019 PCW", 160.3267},
    {FLAT, "Southall 2019 OCW", 160.3838},
    {PILE, "", 178.2746},
    {PILE, "NMFS 2018 LF", 174.5007},
    {PILE, "NMFS 2018 MF", 143.4631},
    {PILE, "NMFS 2018 HF", 139.2057},
    {PILE, "NMFS 2018 PW", 161.8376},
    {PILE, "NMFS 2018 OW", 160.4042},
    {PILE, "NMFS 2024 LF", 175.1688},
    {PILE, "NMFS 2024 HF", 157.2462},
    {PILE, "NMFS 2024 VHF", 143.5293},
    {PILE, "NMFS 2024 PW", 163.0206},
    {PILE, "NMFS 2024 OW", 154.7394},
    {PILE, "Southall 2019 LF", 174.5007},
    {PILE, "Southall 2019 HF", 143.4631},
    {PILE, "Southall 2019 VHF", 139.2057},
    {PILE, "Southall 2019 SI", 149.7458},
    {PILE, "Southall 2019 PCW", 161.8376},
    {PILE, "Southall 2019 OCW", 160.4042},
};

static const struct across across_rows[] = {
    {-20, {0.0760, 0.1916, 0.0747, 0.1505, 0.2727, 0.1631, 0.1552}},
    {-10, {0.0488, 0.1915, 0.0409, 0.1495, 0.2726, 0.1583, 0.1547}},
    {-5, {0.0062, 0.1913, 0.0036, 0.1409, 0.2712, 0.1227, 0.1504}},
    {0, {-0.0003, 0.1889, -0.0005, 0.0844, 0.2578, 0.0255, 0.1155}},
    {5, {-0.0040, 0.1672, -0.0052, 0.0077, 0.1649, -0.0003, 0.0205}},
    {10, {-0.0225, 0.0651, -0.0298, -0.0022, 0.0169, -0.0077, -0.0175}},
    {13, {-0.0172, 0.0092, 0.0108, -0.0085, -0.0032, -0.0232, -0.0335}},
    {15, {0.0113, -0.0056, 0.1660, -0.0182, -0.0104, -0.0318, 0.0022}},
    {18, {0.0525, -0.0208, 0.4885, -0.0311, -0.0281, 0.0659, 0.2576}},
    {20, {0.0660, -0.0268, 0.6246, 0.0177, -0.0287, 0.2663, 0.4731}},
};

static const struct weighting *named(const char *name)
{
    const struct weighting *weighting = NULL;
    assert_int_equal(weighting_from_name(name, &weighting), STATUS_OK);
    char back[WEIGHTING_NAME_SIZE];
    weighting_name(weighting, back);
    assert_string_equal(back, name);
    assert_ptr_equal(weighting_find(weighting->guidance, weighting->group), weighting);
    return weighting;
}

/* W of every group from 10 Hz to 160 kHz, C as printed. */
static void curves_are_the_published_ones(void **state)
{
    (void)state;
    double worst = 0;
    unsigned n_rows = 0;
    for (; weighting_at(n_rows); n_rows++)
        ;
    assert_int_equal(n_rows, sizeof curves / sizeof curves[0]);
    for (unsigned i = 0; i < n_rows; i++)
        for (unsigned f = 0; f < N_FREQUENCIES; f++) {
            double w_db = weighting_db(named(curves[i].name), frequencies_hz[f]);
            assert_near(w_db, curves[i].w_db[f], 6e-5);
            worst = fmax(worst, fabs(w_db - curves[i].w_db[f]));
        }
    printf("# figure weighting, %u groups at 25 frequencies: largest difference %.5f dB\n", n_rows, worst);
}

/* NMFS 2018, appendix D, prints W(1 kHz) of the five groups (from memory). */
static void printed_examples_agree(void **state)
{
    (void)state;
    assert_near(weighting_db(named("NMFS 2018 LF"), 1000), -0.06, 0.006);
    assert_near(weighting_db(named("NMFS 2018 MF"), 1000), -29.11, 0.006);
    assert_near(weighting_db(named("NMFS 2018 HF"), 1000), -37.55, 0.006);
    assert_near(weighting_db(named("NMFS 2018 PW"), 1000), -5.90, 0.006);
    assert_near(weighting_db(named("NMFS 2018 OW"), 1000), -4.87, 0.006);
}

static void constants_agree(void **state)
{
    (void)state;
    for (unsigned i = 0; i < sizeof constants / sizeof constants[0]; i++) {
        const struct constants *want = &constants[i];
        const struct weighting *w = named(want->name);
        assert_near(w->c_db, want->c_db, 1e-9);
        double best_db = -INFINITY, best_khz = 0;
        for (double khz = 0.01; khz < 200; khz *= 1.0002) {
            double w_db = weighting_db(w, khz * 1000);
            if (w_db > best_db) {
                best_db = w_db;
                best_khz = khz;
            }
        }
        /* C is printed with two decimals (2024 OW with 1.37 for 1.3643): W passes 0 by at most 0.01 dB. */
        assert_near(w->c_db - best_db, want->true_c_db, 6e-5);
        assert_true(best_db < 0.0101);
        assert_near(best_khz, want->peak_khz, 0.001 * want->peak_khz + 5e-4);
        if (isnan(want->threshold_db))
            assert_true(isnan(weighting_threshold_db(w)));
        else {
            assert_near(weighting_threshold_db(w), want->threshold_db, 0.0051);
            for (double hz = 20; hz < 150000; hz *= 3) /* E = K + C - W */
                assert_near(weighting_exposure_function_db(w, hz),
                            weighting_threshold_db(w) - weighting_db(w, hz), 1e-9);
        }
    }
    /* NMFS 2024, table 5, footnote: OW with C = 1.37 is above 0 at 8 kHz. */
    assert_near(weighting_db(named("NMFS 2024 OW"), 8000), 0.0033, 6e-5);
}

/* The same letters stand for other animals in another edition; the same animals have other letters. */
static void letters_belong_to_their_guidance(void **state)
{
    (void)state;
    const char *same[][2] = {{"NMFS 2018 LF", "Southall 2019 LF"},
                             {"NMFS 2018 MF", "Southall 2019 HF"},
                             {"NMFS 2018 HF", "Southall 2019 VHF"},
                             {"NMFS 2018 PW", "Southall 2019 PCW"},
                             {"NMFS 2018 OW", "Southall 2019 OCW"}};
    for (unsigned i = 0; i < 5; i++)
        for (double hz = 10; hz < 200000; hz *= 1.5)
            assert_near(weighting_db(named(same[i][0]), hz), weighting_db(named(same[i][1]), hz), 1e-12);
    assert_true(weighting_db(named("Southall 2019 HF"), 1000) - weighting_db(named("NMFS 2018 HF"), 1000) >
                8);
    assert_true(weighting_db(named("NMFS 2024 HF"), 1000) - weighting_db(named("NMFS 2018 HF"), 1000) > 28);
    const struct weighting *none = NULL;
    const char *unknown[] = {"NMFS 2024 MF", "NMFS 2018 VHF", "Southall 2019 PW", "NMFS 2024 SI", "HF", "",
                             "NMFS 2024",    "NMFS 2024 hf",  "NMFS 2016 LF"};
    for (unsigned i = 0; i < sizeof unknown / sizeof unknown[0]; i++)
        assert_int_equal(weighting_from_name(unknown[i], &none), STATUS_NOT_FOUND);
    assert_null(none);
    assert_null(weighting_find(GUIDANCE_NMFS_2018, "VHF"));
    for (unsigned i = 0; weighting_at(i); i++) { /* levels in air are re 20 uPa: only four groups */
        const char *group = weighting_at(i)->group;
        assert_int_equal(weighting_at(i)->in_air, group[strlen(group) - 1] == 'A');
    }
}

/* LE of each decidecade: flat 150; like a pile's: 30 dB a decade up to 100 Hz, 170, from 200 Hz 20 dB a
 * decade down. Published curves summed over bands in double precision. */
static double band_level_db(enum spectrum_shape shape, int n)
{
    double hz = 1000 * pow(10, n / 10.0);
    if (shape == FLAT)
        return 150;
    return hz < 99.9 ? 170 - 30 * log10(100 / hz) : hz > 200 ? 170 - 20 * log10(hz / 200) : 170;
}

static void weighted_sums_of_two_spectra(void **state)
{
    (void)state;
    double worst = 0;
    for (unsigned i = 0; i < sizeof sums / sizeof sums[0]; i++) {
        double band_db[N_BANDS], factor[N_BANDS], energy = 0;
        const struct weighting *w = *sums[i].name ? named(sums[i].name) : NULL;
        weighting_factors(w, BAND_WEIGHTING_CENTRE, N_BANDS, factor);
        for (int b = 0; b < N_BANDS; b++) {
            band_db[b] = band_level_db(sums[i].shape, LEVEL_FIRST_BAND + b);
            energy += factor[b] * pow(10, band_db[b] / 10);
        }
        double sel_db = weighting_sum_db(w, BAND_WEIGHTING_CENTRE, band_db, N_BANDS);
        assert_near(sel_db, sums[i].sel_db, 6e-5);
        assert_near(10 * log10(energy), sel_db, 1e-9);
        worst = fmax(worst, fabs(sel_db - sums[i].sel_db));
    }
    printf("# figure weighted SEL of two spectra: largest difference %.5f dB\n", worst);
}

static void across_the_band(void **state)
{
    (void)state;
    static const char *const groups[7] = {"NMFS 2018 LF",  "NMFS 2018 HF", "NMFS 2024 LF", "NMFS 2024 HF",
                                          "NMFS 2024 VHF", "NMFS 2024 PW", "NMFS 2024 OW"};
    for (unsigned i = 0; i < sizeof across_rows / sizeof across_rows[0]; i++)
        for (unsigned g = 0; g < 7; g++) {
            const struct weighting *w = named(groups[g]);
            int n = across_rows[i].n;
            assert_near(weighting_band_db(w, n, BAND_WEIGHTING_ACROSS) -
                            weighting_band_db(w, n, BAND_WEIGHTING_CENTRE),
                        across_rows[i].difference_db[g], 6e-5);
        }
}

/* The weighted SEL of a tone is its SEL plus W there: a band with nothing else, at its centre. */
static void a_tone_is_weighted_by_w(void **state)
{
    (void)state;
    for (unsigned i = 0; weighting_at(i); i++)
        for (int b = 0; b < LEVEL_MAX_BANDS; b++) {
            double band_db[LEVEL_MAX_BANDS];
            for (int k = 0; k < LEVEL_MAX_BANDS; k++)
                band_db[k] = k % 2 ? NAN : -INFINITY; /* not measured, silent */
            band_db[b] = 163.2;
            double hz = 1000 * pow(10, (LEVEL_FIRST_BAND + b) / 10.0);
            assert_near(weighting_sum_db(weighting_at(i), BAND_WEIGHTING_CENTRE, band_db, LEVEL_MAX_BANDS),
                        163.2 + weighting_db(weighting_at(i), hz), 1e-9);
        }
    double nothing[2] = {NAN, -INFINITY};
    assert_true(weighting_sum_db(weighting_at(0), BAND_WEIGHTING_CENTRE, nothing, 2) == -INFINITY);
}

/* Martin, Lucke and Barclay 2020: the weighted SPL that reaches TTS (non-impulsive, table values of the
 * guidances) in 24 h. */
static void effective_quiet(void **state)
{
    (void)state;
    static const double tts_db[] = {179, 178, 153, 181, 199, 186, 177, 181, 161, 175, 179};
    static const double quiet_db[] = {129.6349, 128.6349, 103.6349, 131.6349, 149.6349, 136.6349,
                                      127.6349, 131.6349, 111.6349, 125.6349, 129.6349};
    for (unsigned i = 0; i < 11; i++)
        assert_near(weighting_effective_quiet_db(tts_db[i]), quiet_db[i], 6e-5);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(curves_are_the_published_ones),
        cmocka_unit_test(printed_examples_agree),
        cmocka_unit_test(constants_agree),
        cmocka_unit_test(letters_belong_to_their_guidance),
        cmocka_unit_test(weighted_sums_of_two_spectra),
        cmocka_unit_test(across_the_band),
        cmocka_unit_test(a_tone_is_weighted_by_w),
        cmocka_unit_test(effective_quiet),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
