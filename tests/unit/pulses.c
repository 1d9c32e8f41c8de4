/* lib/call pulses: trains of animals are found with their class and interval, confounders are not, and
 * neither chunking nor rate matters. The classes are those of config/calls. */
#include "support/test.h"

#include "base/random.h"
#include "base/units.h"
#include "call/pulses.h"
#include "call/tones.h"
#include "call/trains.h"
#include "support/catalogue.h"
#include "support/clicks.h"
#include <math.h>
#include <stdlib.h>

#define MAX_FOUND 256

static struct catalogue catalogue;

struct hearing {
    double rate_hz;
    size_t n;
    float *x;
    struct random random;
    struct pulses *pulses; /* while they are pushed */
    uint32_t n_machines;   /* trains that are a machine's */
    uint32_t n_found;
    struct found_call found[MAX_FOUND];
    uint64_t rejections[CATALOGUE_MAX_CLASSES][REJECT_COUNT];
};

static void take(void *context, const struct found_call *found)
{
    struct hearing *hearing = context;
    double arrivals[TRAINS_MAX_MEMBERS];
    if (!catalogue.classes[found->class_index].animal) {
        hearing->n_machines++;
        return;
    }
    assert_true(hearing->n_found < MAX_FOUND);
    hearing->found[hearing->n_found++] = *found;
    /* The arrivals begin and end with the call, whose edges are half a pulse further out. */
    double half = catalogue.classes[found->class_index].train.pulse_s * hearing->rate_hz / 2;
    assert_true(pulses_get_arrivals(hearing->pulses, arrivals));
    assert_near(arrivals[0] - half, found->start_frame, 1e-6);
    assert_near(arrivals[found->n_pulses - 1] + half, found->end_frame, 1e-6);
    for (uint32_t i = 1; i < found->n_pulses; i++)
        assert_true(arrivals[i] > arrivals[i - 1]);
}

/* Noise with a standard deviation of 1 mPa in the whole of the rate. */
static struct hearing *listen_for(double rate_hz, double seconds, uint64_t seed)
{
    struct hearing *hearing = calloc(1, sizeof *hearing);
    assert_non_null(hearing);
    hearing->rate_hz = rate_hz;
    hearing->n = (size_t)(rate_hz * seconds);
    hearing->x = calloc(hearing->n, sizeof(float));
    assert_non_null(hearing->x);
    random_reset(&hearing->random, seed);
    clicks_add_noise(hearing->x, hearing->n, 1e-3, &hearing->random);
    return hearing;
}

static void hear_in_chunks(struct hearing *hearing, uint32_t chunk)
{
    struct pulses *pulses;
    assert_int_equal(pulses_create(catalogue.classes, catalogue.n_classes, hearing->rate_hz, &pulses),
                     STATUS_OK);
    pulses_reset(pulses, 1000);
    hearing->pulses = pulses;
    struct found_sink sink = {take, hearing};
    for (size_t at = 0; at < hearing->n;) {
        size_t n = chunk ? chunk : 1 + (size_t)(random_uniform(&hearing->random) * 5000);
        n = n < hearing->n - at ? n : hearing->n - at;
        pulses_push(pulses, hearing->x + at, (uint32_t)n, &sink);
        at += n;
    }
    pulses_finish(pulses, &sink);
    pulses_get_rejections(pulses, hearing->rejections);
    assert_false(pulses_get_arrivals(pulses, NULL));
    pulses_destroy(pulses);
}

static void done(struct hearing *hearing)
{
    free(hearing->x);
    free(hearing);
}

static const struct call_class *class_named(const char *name, uint32_t *index)
{
    for (uint32_t c = 0; c < catalogue.n_classes; c++)
        if (strcmp(catalogue.classes[c].name, name) == 0) {
            *index = c;
            return &catalogue.classes[c];
        }
    fail_msg("no class %s", name);
    return NULL;
}

/* Pulses of the class given, the median interval weighted by pulses, and whether any other class was given.
 */
static uint32_t pulses_given(const struct hearing *hearing, const char *name, double *interval_s,
                             uint32_t *n_other)
{
    uint32_t index = 0, n = 0;
    class_named(name, &index);
    *interval_s = 0;
    *n_other = 0;
    for (uint32_t i = 0; i < hearing->n_found; i++) {
        const struct found_call *found = &hearing->found[i];
        if (found->class_index != index) {
            ++*n_other;
            continue;
        }
        n += found->n_pulses;
        *interval_s += found->n_pulses * found->interval_frames / hearing->rate_hz;
        assert_true(found->start_frame >= 1000 && found->end_frame > found->start_frame);
        assert_true((double)found->known_frame >= found->end_frame);
        assert_true(found->mean_square_pa2 > 0);
    }
    *interval_s /= n ? n : 1;
    return n;
}

/* Figures of a species for a train of clicks. */
struct clicker {
    const char *class_name;
    double rate_hz, seconds, amplitude_pa, interval_s, jitter;
    double frequency_hz, width_s; /* width 0: porpoise recipe */
    double echo_s;                /* a surface echo, inverted, 0.6 of the direct sound */
};

static void add_click(struct hearing *hearing, const struct clicker *clicker, double frame, double amplitude)
{
    if (clicker->width_s > 0)
        clicks_add_gabor(hearing->x, hearing->n, hearing->rate_hz, frame, amplitude, clicker->frequency_hz,
                         clicker->width_s);
    else
        clicks_add_porpoise(hearing->x, hearing->n, hearing->rate_hz, frame, amplitude, clicker->frequency_hz,
                            18e-6);
}

/* Gives the number of clicks, and in out_interval_s the mean interval that chance made. */
static uint32_t add_clicks(struct hearing *hearing, const struct clicker *clicker, double first_s,
                           double *out_interval_s)
{
    uint32_t n = 0;
    double interval = 0, last = first_s;
    for (double t = first_s; t < clicker->seconds - 0.1; n++) {
        last = t;
        double sweep = 0.6 + 0.4 * cos(2 * M_PI * t / 1.7);
        double amplitude = clicker->amplitude_pa * (clicker->width_s > 0 ? 1 : sweep);
        add_click(hearing, clicker, t * hearing->rate_hz, amplitude);
        if (clicker->echo_s > 0)
            add_click(hearing, clicker, (t + clicker->echo_s) * hearing->rate_hz, -0.6 * amplitude);
        interval = clicker->interval_s * exp(clicker->jitter * random_normal(&hearing->random));
        t += interval;
    }
    *out_interval_s = (last - first_s) / (n - 1);
    return n;
}

/* Recipes: porpoise Villadsgaard 2007; sperm whale Mohl 2003; bottlenose dolphin Wahlberg 2011; pilot and
 * killer whale Eskesen 2011. Interval spreads are from memory (4 % porpoise and sperm whale, 15 % dolphins).
 * Amplitudes are chosen for a peak 20 to 26 dB above the noise's standard deviation. */
static const struct clicker animals[] = {
    {"porpoise click train", 384000, 4, 0.02, 0.060, 0.04, 132e3, 0, 0.0007},
    {"porpoise click train", 500000, 4, 0.02, 0.120, 0.04, 140e3, 0, 0.0015},
    {"sperm whale click train", 48000, 20, 0.01, 0.8, 0.04, 15e3, 38e-6, 0},
    {"sperm whale click train", 96000, 20, 0.01, 0.6, 0.04, 12e3, 38e-6, 0.006},
    {"sperm whale click train", 192000, 20, 0.01, 1.0, 0.03, 10e3, 45e-6, 0.004},
    {"sperm whale click train", 384000, 20, 0.02, 0.7, 0.05, 15e3, 38e-6, 0},
    {"delphinid click train", 96000, 5, 0.02, 0.05, 0.15, 45e3, 9e-6, 0.0009},
    {"delphinid click train", 192000, 5, 0.03, 0.10, 0.15, 55e3, 7e-6, 0.0012},
    {"delphinid click train", 384000, 5, 0.04, 0.08, 0.15, 45e3, 9e-6, 0},
    {"delphinid click train", 192000, 8, 0.03, 0.21, 0.10, 32e3, 12e-6, 0.002},
};

static void animals_are_found_with_class_and_interval(void **state)
{
    (void)state;
    for (size_t a = 0; a < sizeof animals / sizeof animals[0]; a++) {
        const struct clicker *clicker = &animals[a];
        struct hearing *hearing = listen_for(clicker->rate_hz, clicker->seconds, 100 + a);
        double sent_s, interval_s;
        uint32_t sent = add_clicks(hearing, clicker, 0.5, &sent_s), n_other;
        hear_in_chunks(hearing, 4096);
        uint32_t n = pulses_given(hearing, clicker->class_name, &interval_s, &n_other);
        printf("# figure %s at %.0f kHz: %u of %u clicks in %u calls, interval %.4f s (sent %.4f s), %u of "
               "other "
               "classes\n",
               clicker->class_name, clicker->rate_hz / 1000, n, sent, hearing->n_found, interval_s, sent_s,
               n_other);
        assert_true(n <= sent + 3 && n >= 0.8 * sent); /* a noise pulse may slip into a train */
        assert_near(interval_s, sent_s, 0.1 * sent_s); /* a median against a mean */
        assert_int_equal(n_other, 0);
        done(hearing);
    }
}

/* Off the axis a sperm whale's click is several pulses a few ms apart with a tail of some 10 ms (Mohl 2003;
 * spacing and tail from memory): one click each, and no other animal's. */
static void multipulse_clicks_are_one_click_each(void **state)
{
    (void)state;
    static const double spacings_s[] = {0.0025, 0.005, 0.008}, amplitudes[] = {0.35, -1, 0.35, -0.12, 0.05};
    for (int s = 0; s < 3; s++) {
        struct hearing *hearing = listen_for(96000, 20, 80 + (uint64_t)s);
        uint32_t sent = 0, n_other;
        for (double t = 5; t < 19; t += 0.7 * exp(0.04 * random_normal(&hearing->random)), sent++) {
            for (int p = 0; p < 5; p++)
                clicks_add_gabor(hearing->x, hearing->n, 96000, (t + p * spacings_s[s]) * 96000,
                                 0.02 * amplitudes[p], 10e3, 45e-6);
            for (size_t k = 0; k < 4000; k++)
                hearing->x[(size_t)(t * 96000) + k] +=
                    (float)(0.002 * exp(-(double)k / 960) * random_normal(&hearing->random));
        }
        hear_in_chunks(hearing, 4096);
        double interval_s;
        uint32_t n = pulses_given(hearing, "sperm whale click train", &interval_s, &n_other);
        printf("# figure sperm whale off the axis, pulses %.1f ms apart: %u of %u clicks, interval %.3f s, "
               "%u of other "
               "classes\n",
               1000 * spacings_s[s], n, sent, interval_s, n_other);
        assert_true(n >= 0.8 * sent && n <= sent + 2);
        assert_near(interval_s, 0.7, 0.05);
        assert_int_equal(n_other, 0);
        done(hearing);
    }
}

static void a_long_train_is_given_in_pieces(void **state)
{
    (void)state;
    struct clicker whale = {"sperm whale click train", 48000, 70, 0.01, 0.7, 0.04, 15e3, 38e-6, 0};
    struct hearing *hearing = listen_for(whale.rate_hz, whale.seconds, 7);
    double sent_s;
    add_clicks(hearing, &whale, 10,
               &sent_s); /* the sea has been heard for a while: strays are known to be few */
    hear_in_chunks(hearing, 2048);
    for (uint32_t i = 0; i < hearing->n_found; i++)
        printf("# %u: %.2f to %.2f s, %u pulses\n", i, hearing->found[i].start_frame / whale.rate_hz,
               hearing->found[i].end_frame / whale.rate_hz, hearing->found[i].n_pulses);
    assert_true(hearing->n_found >= 5 && hearing->n_found <= 8);
    for (uint32_t i = 1; i < hearing->n_found; i++) {
        assert_true(hearing->found[i].start_frame > hearing->found[i - 1].end_frame);
        double apart = (hearing->found[i].end_frame - hearing->found[i - 1].end_frame) / whale.rate_hz;
        assert_true(apart < 12);
    }
    double first_s = (hearing->found[0].end_frame - hearing->found[0].start_frame) / whale.rate_hz;
    double late_s = ((double)hearing->found[0].known_frame - hearing->found[0].end_frame) / whale.rate_hz;
    printf("# figure sperm whale: first call after %u clicks (%.1f s), %.3f s after its last; %u calls in a "
           "minute\n",
           hearing->found[0].n_pulses, first_s, late_s, hearing->n_found);
    assert_true(hearing->found[0].n_pulses <= 6);
    assert_true(late_s < 0.1);
    done(hearing);
}

/* Groups: each dolphin with its own interval (30 to 150 ms, 15 % spread), level and sweep of its beam (20
 * dB), as in the sequence models that published figures give from memory. Not every click can be tied; the
 * group must be heard. */
static double first_heard_s(uint32_t n_animals, uint64_t seed)
{
    struct hearing *hearing = listen_for(96000, 20, seed);
    for (uint32_t a = 0; a < n_animals; a++) {
        double mean_s = random_between(&hearing->random, 0.03, 0.15);
        double level = pow(10, random_between(&hearing->random, 0, 10) / 20);
        double turn = random_between(&hearing->random, 0, 2 * M_PI);
        for (double t = 5; t < 19.8; t += mean_s * exp(0.15 * random_normal(&hearing->random))) {
            double sweep = pow(10, -(1 + cos(2 * M_PI * t / 1.3 + turn)) / 2);
            clicks_add_gabor(hearing->x, hearing->n, 96000, t * 96000, 0.05 * level * sweep, 45e3, 9e-6);
        }
    }
    hear_in_chunks(hearing, 4096);
    double interval_s, first_s = INFINITY;
    uint32_t n_other;
    pulses_given(hearing, "delphinid click train", &interval_s, &n_other);
    assert_int_equal(n_other, 0);
    if (hearing->n_found)
        first_s = (double)(hearing->found[0].known_frame - 1000) / 96000 - 5;
    done(hearing);
    return first_s;
}

static void groups_of_dolphins_are_heard(void **state)
{
    (void)state;
    uint32_t n_groups = 0, soon = 0, late = 0;
    for (uint32_t n_animals = 1; n_animals <= 6; n_animals++)
        for (uint64_t seed = 0; seed < (test_length() == TEST_SHORT ? 1 : 4); seed++, n_groups++) {
            double first_s = first_heard_s(n_animals, 300 + 10 * n_animals + seed);
            soon += first_s < 2;
            late += first_s < 15;
        }
    printf("# figure groups of 1 to 6 dolphins: of %u, %u heard within 2 s, %u within 15 s\n", n_groups, soon,
           late);
    assert_true(late >= 0.75 * n_groups);
}

/* ---- what is no animal */

/* Returns how many trains were given as machines'. */
static uint32_t expect_nothing(struct hearing *hearing, const char *what)
{
    hear_in_chunks(hearing, 4096);
    uint64_t total[REJECT_COUNT] = {0};
    for (uint32_t c = 0; c < catalogue.n_classes; c++)
        for (int r = 0; r < REJECT_COUNT; r++)
            total[r] += hearing->rejections[c][r];
    for (uint32_t i = 0; i < hearing->n_found; i++)
        printf("# found %s, %.2f to %.2f s, %u pulses, snr %.1f dB\n",
               catalogue.classes[hearing->found[i].class_index].name,
               hearing->found[i].start_frame / hearing->rate_hz,
               hearing->found[i].end_frame / hearing->rate_hz, hearing->found[i].n_pulses,
               hearing->found[i].snr_db);
    printf("# figure %s: %u calls, %u trains of machines; rejected:", what, hearing->n_found,
           hearing->n_machines);
    for (int r = 0; r < REJECT_COUNT; r++)
        if (total[r])
            printf(" %s %llu", rejection_text((enum rejection)r), (unsigned long long)total[r]);
    printf("\n");
    assert_int_equal(hearing->n_found, 0);
    uint32_t n_machines = hearing->n_machines;
    done(hearing);
    return n_machines;
}

/* Snapping shrimp: flat to 200 kHz, Poisson times, heavy-tailed levels (Cato and Bell 1992: 20 a second above
 * 140 dB, 3 to 4 above 150 dB, so about a tenth for each 10 dB). */
static void shrimp_are_no_train(void **state)
{
    (void)state;
    static const double rates_hz[] = {96000, 192000, 384000};
    for (int r = 0; r < 3; r++)
        for (uint64_t seed = 1; seed <= (test_length() == TEST_SHORT ? 1 : 4); seed++) {
            struct hearing *hearing = listen_for(rates_hz[r], 30, seed);
            for (double t = 0.2; t < 29.9; t += random_exponential(&hearing->random) / 25) {
                double amplitude = 0.02 * pow(random_uniform(&hearing->random) + 1e-3, -0.5);
                clicks_add_gabor(hearing->x, hearing->n, rates_hz[r], t * rates_hz[r], amplitude, 60e3, 4e-6);
            }
            char what[80];
            snprintf(what, sizeof what, "shrimp at %.0f kHz, seed %llu", rates_hz[r] / 1000,
                     (unsigned long long)seed);
            expect_nothing(hearing, what);
        }
}

/* A blow: noise with a falling spectrum (one-pole at 500 Hz), rise 2 ms, decay 30 ms (T90 near 70 ms), 120
 * times the noise in amplitude, 45 a minute with 3 % spread: common practice, no source. */
static void add_blow(struct hearing *hearing, double t)
{
    double low = 0, a = 2 * M_PI * 500 / hearing->rate_hz;
    size_t first = (size_t)(t * hearing->rate_hz), n = (size_t)(0.4 * hearing->rate_hz);
    for (size_t k = 0; k < n && first + k < hearing->n; k++) {
        double s = (double)k / hearing->rate_hz;
        low += a * (random_normal(&hearing->random) - low);
        double shape = (1 - exp(-s / 0.002)) * exp(-s / 0.03);
        hearing->x[first + k] += (float)(5 * shape * low / sqrt(a / 2));
    }
}

static void blows_are_no_train(void **state)
{
    (void)state;
    static const double intervals_s[] = {0.9, 1.1, 1.33, 2.0};
    for (int i = 0; i < 4; i++) {
        struct hearing *hearing = listen_for(96000, 30, 20 + (uint64_t)i);
        for (double t = 0.7; t < 29.5; t += intervals_s[i] * (1 + 0.03 * random_normal(&hearing->random)))
            add_blow(hearing, t);
        char what[80];
        snprintf(what, sizeof what, "blows each %.2f s", intervals_s[i]);
        expect_nothing(hearing, what);
    }
}

/* Pings: 1 ms of 38 kHz each 0.5 s; and short ones of 12 kHz and 0.3 ms, which only their rhythm gives away.
 */
static void echosounders_are_no_train(void **state)
{
    (void)state;
    static const double pings[][4] = {{38e3, 1e-3, 0.5, 192000},
                                      {38e3, 1e-3, 0.1, 192000},
                                      {33e3, 2e-4, 0.2, 192000},
                                      {12e3, 3e-4, 0.5, 96000},
                                      {130e3, 1.2e-4, 0.1, 384000}};
    uint32_t n_machines = 0;
    for (int p = 0; p < 5; p++) {
        struct hearing *hearing = listen_for(pings[p][3], 12, 40 + (uint64_t)p);
        for (double t = 0.7; t < 11.9; t += pings[p][2])
            for (size_t k = 0; k < (size_t)(pings[p][1] * pings[p][3]); k++)
                hearing->x[(size_t)(t * pings[p][3]) + k] +=
                    (float)(0.02 * sin(2 * M_PI * pings[p][0] * (double)k / pings[p][3]));
        char what[80];
        snprintf(what, sizeof what, "pings of %.0f kHz, %.1f ms, each %.1f s", pings[p][0] / 1000,
                 pings[p][1] * 1000, pings[p][2]);
        n_machines += expect_nothing(hearing, what);
    }
    assert_true(n_machines > 0); /* what passes for clicks is given as what it is */
}

/* ---- form */

/* To the last bit; what lies between the members of a struct is no part of it. */
static bool same_call(const struct found_call *a, const struct found_call *b)
{
    return a->class_index == b->class_index && a->start_frame == b->start_frame &&
           a->end_frame == b->end_frame && a->known_frame == b->known_frame && a->low_hz == b->low_hz &&
           a->high_hz == b->high_hz && a->n_pulses == b->n_pulses &&
           a->interval_frames == b->interval_frames && a->snr_db == b->snr_db &&
           a->mean_square_pa2 == b->mean_square_pa2;
}

static void chunks_do_not_matter(void **state)
{
    (void)state;
    static const double rates_hz[] = {48000, 96000, 192000, 384000, 500000};
    for (int r = 0; r < 5; r++) {
        struct hearing *runs[3];
        static const uint32_t chunks[] = {4096, 1, 0};
        for (int k = 0; k < 3; k++) {
            runs[k] = listen_for(rates_hz[r], 8, 60);
            struct clicker whale = {"", rates_hz[r], 8, 0.01, 0.5, 0.04, 15e3, 38e-6, 0.003};
            struct clicker dolphin = {"", rates_hz[r], 8, 0.03, 0.07, 0.1, 40e3, 9e-6, 0};
            double sent_s;
            add_clicks(runs[k], &whale, 0.5, &sent_s);
            if (rates_hz[r] > 90000)
                add_clicks(runs[k], &dolphin, 0.5, &sent_s);
            hear_in_chunks(runs[k], chunks[k]);
        }
        assert_true(runs[0]->n_found > 0);
        for (int k = 1; k < 3; k++) {
            assert_int_equal(runs[k]->n_found, runs[0]->n_found);
            assert_memory_equal(runs[k]->rejections, runs[0]->rejections, sizeof runs[0]->rejections);
            for (uint32_t i = 0; i < runs[0]->n_found; i++)
                assert_true(same_call(&runs[k]->found[i], &runs[0]->found[i]));
        }
        for (int k = 0; k < 3; k++)
            done(runs[k]);
    }
}

static void a_rate_says_what_it_cannot_hear(void **state)
{
    (void)state;
    uint32_t porpoise = 0, delphinid = 0, whale = 0;
    class_named("porpoise click train", &porpoise);
    class_named("delphinid click train", &delphinid);
    class_named("sperm whale click train", &whale);
    static const struct {
        double rate_hz;
        bool porpoise, delphinid, whale;
    } wanted[] = {{22050, false, false, false},
                  {44100, false, false, true},
                  {96000, false, true, true},
                  {192000, false, true, true},
                  {384000, true, true, true}};
    for (int r = 0; r < 5; r++) {
        struct pulses *pulses;
        assert_int_equal(pulses_create(catalogue.classes, catalogue.n_classes, wanted[r].rate_hz, &pulses),
                         STATUS_OK);
        assert_int_equal(pulses_is_hearable(pulses, porpoise), wanted[r].porpoise);
        assert_int_equal(pulses_is_hearable(pulses, delphinid), wanted[r].delphinid);
        assert_int_equal(pulses_is_hearable(pulses, whale), wanted[r].whale);
        pulses_destroy(pulses);
    }
    pulses_destroy(NULL);
}

/* NaN and infinity must not deafen the filters; silence and a step of 60 dB must not either. */
static void bad_samples_pass(void **state)
{
    (void)state;
    struct clicker whale = {"sperm whale click train", 48000, 20, 0.01, 0.7, 0.04, 15e3, 38e-6, 0};
    struct hearing *hearing = listen_for(48000, 20, 9);
    double sent_s;
    add_clicks(hearing, &whale, 0.5, &sent_s);
    for (size_t k = 0; k < 48000; k++)
        hearing->x[k] = 0;
    hearing->x[50000] = NAN;
    hearing->x[60000] = INFINITY;
    for (size_t k = 70000; k < 80000; k++)
        hearing->x[k] *= 1000;
    hear_in_chunks(hearing, 1000);
    double interval_s;
    uint32_t n_other, n = pulses_given(hearing, whale.class_name, &interval_s, &n_other);
    printf("# figure bad samples: %u pulses in %u calls\n", n, hearing->n_found);
    assert_true(n >= 15);
    done(hearing);
}

static void hidden_pulses_make_no_train(void **state)
{
    (void)state;
    struct clicker whale = {"sperm whale click train", 48000, 20, 0.01, 0.7, 0.04, 15e3, 38e-6, 0};
    for (int hide = 0; hide < 2; hide++) {
        struct hearing *hearing = listen_for(48000, 20, 11);
        double sent_s;
        add_clicks(hearing, &whale, 0.5, &sent_s);
        struct pulses *pulses;
        assert_int_equal(pulses_create(catalogue.classes, catalogue.n_classes, 48000, &pulses), STATUS_OK);
        hearing->pulses = pulses;
        struct found_sink sink = {take, hearing};
        pulses_reset(pulses, 0);
        for (size_t at = 0; at + 2400 <= hearing->n; at += 2400) {
            pulses_push(pulses, hearing->x + at, 2400, &sink);
            if (hide && at >= 24000)
                pulses_hide(pulses, (double)at - 24000, (double)at - 21600, 50, 8000);
        }
        pulses_finish(pulses, &sink);
        assert_true(hide ? hearing->n_found == 0 : hearing->n_found > 0);
        pulses_get_rejections(pulses, hearing->rejections);
        uint32_t index = 0;
        class_named(whale.class_name, &index);
        assert_true(!hide || hearing->rejections[index][REJECT_OWN_SOURCE] > 20);
        pulses_destroy(pulses);
        done(hearing);
    }
}

static void drop(void *context, const struct found_call *found)
{
    (void)context;
    (void)found;
}

/* In chunks of any size with a loss of sound half way, alone or with what the tones make of the samples. */
static void hear_beside_tones(struct hearing *hearing, bool lowered)
{
    enum { MOST = 4096 };
    struct pulses *pulses;
    struct tones *tones;
    struct found_sink sink = {take, hearing}, none = {drop, NULL};
    uint32_t n_lowered = 0;
    assert_int_equal(pulses_create(catalogue.classes, catalogue.n_classes, hearing->rate_hz, &pulses),
                     STATUS_OK);
    assert_int_equal(tones_create(catalogue.classes, catalogue.n_classes, hearing->rate_hz, &tones),
                     STATUS_OK);
    assert_int_equal(tones_keep_lowered(tones, MOST), STATUS_OK);
    hearing->pulses = pulses;
    for (size_t at = 0, lost = hearing->n / 2; at < hearing->n;) {
        size_t n = 1 + (size_t)(random_uniform(&hearing->random) * (MOST - 1)),
               end = at < lost ? lost : hearing->n;
        n = n < end - at ? n : end - at;
        if (lowered) {
            tones_push(tones, hearing->x + at, (uint32_t)n, &none);
            const struct lowered made = tones_get_lowered(tones);
            n_lowered += made.factor > 1 ? made.n : 0;
            pulses_push_lowered(pulses, hearing->x + at, (uint32_t)n, &made, &sink);
        } else {
            pulses_push(pulses, hearing->x + at, (uint32_t)n, &sink);
        }
        at += n;
        if (at == lost) {
            pulses_finish(pulses, &sink);
            pulses_reset(pulses, at + 77);
            tones_reset(tones, at + 77);
        }
    }
    pulses_finish(pulses, &sink);
    pulses_get_rejections(pulses, hearing->rejections);
    assert_int_equal(n_lowered > 0, lowered);
    pulses_destroy(pulses);
    tones_destroy(tones);
}

/* Slow clicks run on a copy at a quarter of the rate, which the tones make too. */
static void what_the_tones_have_lowered_does(void **state)
{
    (void)state;
    const struct clicker whale = {"sperm whale slow clicks", 192000, 80, 0.02, 5.0, 0.03, 3000, 3e-3, 0};
    struct hearing *runs[2];
    for (int k = 0; k < 2; k++) {
        double sent_s;
        runs[k] = listen_for(whale.rate_hz, whale.seconds, 4711);
        add_clicks(runs[k], &whale, 0.5, &sent_s);
        hear_beside_tones(runs[k], k == 1);
    }
    double interval_s;
    uint32_t n_other, n = pulses_given(runs[0], whale.class_name, &interval_s, &n_other);
    printf("# figure slow clicks alone and beside tones: %u pulses in %u and %u calls\n", n, runs[0]->n_found,
           runs[1]->n_found);
    assert_true(n > 0);
    assert_int_equal(runs[0]->n_found, runs[1]->n_found);
    assert_memory_equal(runs[0]->rejections, runs[1]->rejections, sizeof runs[0]->rejections);
    for (uint32_t i = 0; i < runs[0]->n_found; i++) {
        const struct found_call *a = &runs[0]->found[i], *b = &runs[1]->found[i];
        assert_true(a->class_index == b->class_index && a->start_frame == b->start_frame &&
                    a->end_frame == b->end_frame && a->known_frame == b->known_frame &&
                    a->snr_db == b->snr_db);
    }
    done(runs[0]);
    done(runs[1]);
}

static int load(void **state)
{
    (void)state;
    return test_load_catalogue(&catalogue) ? 0 : -1;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(animals_are_found_with_class_and_interval),
        cmocka_unit_test(multipulse_clicks_are_one_click_each),
        cmocka_unit_test(a_long_train_is_given_in_pieces),
        cmocka_unit_test(groups_of_dolphins_are_heard),
        cmocka_unit_test(shrimp_are_no_train),
        cmocka_unit_test(blows_are_no_train),
        cmocka_unit_test(echosounders_are_no_train),
        cmocka_unit_test(chunks_do_not_matter),
        cmocka_unit_test(a_rate_says_what_it_cannot_hear),
        cmocka_unit_test(bad_samples_pass),
        cmocka_unit_test(hidden_pulses_make_no_train),
        cmocka_unit_test(what_the_tones_have_lowered_does),
    };
    return cmocka_run_group_tests_name("pulses", tests, load, NULL);
}
