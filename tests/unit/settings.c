/* daemon/settings: every error of meaning at once, each with file, line, key and what is allowed. */
#include "support/test.h"

#include "settings/notes.h"
#include "settings/site.h"
#include <math.h>
#include <stdlib.h>
#include <unistd.h>

static char path[] = "/tmp/hushwatch-settings-XXXXXX";

static void write_file(const char *text)
{
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    fputs(text, file);
    fclose(file);
}

static const char good[] = "name = \"Trial\";\n"
                           "ledger = \"trial.ledger\";\n"
                           "permit = \"permits/demonstration.cfg\";\n"
                           "calls = \"/calls\";\n"
                           "streams = ( { input = \"device\"; device = \"hydro\"; rate_hz = 96000;\n"
                           "  channels = ( { role = \"listen\"; sensitivity_db = -180.0; gain_db = 20.0;\n"
                           "                 full_scale_v = 1.0; } ); } );\n";

static void good_settings_are_read(void **state)
{
    (void)state;
    struct problems problems = {0};
    static struct site site;
    write_file(good);
    assert_int_equal(site_load(path, &problems, &site), STATUS_OK);
    assert_int_equal(problems.count, 0);
    assert_string_equal(site.ledger, "/tmp/trial.ledger");
    assert_string_equal(site.calls, "/calls");
    assert_int_equal(site.streams[0].n_channels, 1);
    assert_true(site.streams[0].channels[0].calibration.known);
    /* V1c of IEC 60565 conventions: -180 dB re 1 V/uPa, 0 dB, 1 V is a full scale of 180 dB; 20 dB of gain,
     * 160. */
    assert_near(calibration_clip_db(&site.streams[0].channels[0].calibration), 160.0, 1e-9);
    assert_non_null(strstr(site.effective.data, "streams[0].rate_hz = 96000\n"));
    assert_non_null(strstr(site.effective.data, "contact.gap_s = 300  # default\n"));
    site_destroy(&site);
    problems_destroy(&problems);
}

/* What a `run` entry keeps is what a rerun reads: the same settings again, numbers to the last bit. */
static void effective_settings_are_read_back(void **state)
{
    (void)state;
    struct problems problems = {0};
    static struct site site, again;
    write_file("name = \"back\"; ledger = \"b.ledger\"; permit = \"p\"; calls = \"c\"; silence_s = "
               "33.3333333333333357;\n"
               "contact = { gap_s = 250; evidence_decay_s = 0x100; look_evidence = 0.1; };\n"
               "permit_values = ( { key = \"a.b\"; value = \"inside\"; who = \"A. \\\"B\\\" C\"; source = "
               "\"x = y  # default\"; },\n"
               "                  { key = \"c\"; value = [\"porpoise\", \"phocid\"]; who = \"d\"; source = "
               "\"e\"; },\n"
               "                  { key = \"f\"; value = 0.1; who = \"d\"; source = \"e\"; } );\n"
               "source = { latitude_deg = 54.012345678901234; longitude_deg = -6.1; aperture_m = 16.2; };\n"
               "streams = ( { input = \"pcm\"; path = \"-\"; rate_hz = 96000; channel_count = 2;\n"
               "              channels = ( { place_m = [0.1, 0.2, 0.30000000000000004]; }, { role = "
               "\"measure\"; } ); },\n"
               "            { input = \"recording\"; files = (\"a.wav\", \"b c.wav\"); latitude_deg = 1.0; "
               "longitude_deg = 2.0; } );\n");
    enum status status = site_load(path, &problems, &site);
    if (status != STATUS_OK)
        fail_msg("%s", problems.lines.data);
    status = site_load_effective("again", site.effective.data, site.effective.length, &problems, &again);
    if (status != STATUS_OK)
        fail_msg("%s", problems.lines.data);
    assert_string_equal(site.effective.data, again.effective.data);
    assert_true(!(site.silence_s < again.silence_s) && !(site.silence_s > again.silence_s));
    assert_memory_equal(site.streams[0].channels, again.streams[0].channels, sizeof site.streams[0].channels);
    assert_memory_equal(&site.source.place, &again.source.place, sizeof site.source.place);
    assert_int_equal(again.permit_fills.n, 3);
    for (uint32_t i = 0; i < 3; i++) {
        assert_string_equal(site.permit_fills.fills[i].text, again.permit_fills.fills[i].text);
        assert_string_equal(site.permit_fills.fills[i].who, again.permit_fills.fills[i].who);
        assert_string_equal(site.permit_fills.fills[i].source, again.permit_fills.fills[i].source);
    }
    assert_int_equal(again.n_streams, 2);
    site_destroy(&again);
    status = site_load_effective("again", "name\n", 5, &problems, &again);
    assert_int_equal(status, STATUS_BAD_FORMAT);
    site_destroy(&again);
    site_destroy(&site);
    problems_destroy(&problems);
}

static void all_errors_of_meaning_come_at_once(void **state)
{
    (void)state;
    struct problems problems = {0};
    static struct site site;
    write_file("name = 7;\n"
               "legder = \"trial.ledger\";\n"
               "permit = \"p\";\n"
               "calls = \"c\";\n"
               "pages = { port = 70000; address = \"10.0.0.1\"; stations = \"bridge\"; };\n"
               "streams = ( { input = \"microphone\"; rate_hz = 96000.5;\n"
               "  channels = ( { role = \"both\"; sensitivity_db = -180.0; } ); } );\n");
    assert_int_equal(site_load(path, &problems, &site), STATUS_BAD_FORMAT);
    const char *lines = problems.lines.data;
    assert_non_null(strstr(lines, ":1: name: is not a text"));
    assert_non_null(strstr(lines, ": ledger: is missing"));
    assert_non_null(strstr(lines, ":2: legder: is not a known key; did you mean \"ledger\"?"));
    assert_non_null(strstr(lines, ":5: pages.port: is 70000; allowed: 0 to 65535"));
    assert_non_null(strstr(lines, ":5: pages.address: is \"10.0.0.1\"; allowed without accounts, certificate and key"));
    assert_non_null(
        strstr(lines, ":6: streams[0].input: is \"microphone\"; allowed: device, recording, pcm, scene"));
    assert_non_null(strstr(lines, ":6: streams[0].rate_hz: is 96000.5; allowed: whole numbers"));
    assert_non_null(strstr(lines, "streams[0].channels[0].full_scale_v: is missing"));
    assert_non_null(strstr(lines, path));
    site_destroy(&site);
    problems_destroy(&problems);
}

#define OTHERS_OF(text)                                                                                      \
    "name = \"x\"; ledger = \"l\"; permit = \"p\"; calls = \"c\";\n"                                         \
    "streams = ( { input = \"pcm\"; path = \"-\"; format = \"s16\"; rate_hz = 48000; channel_count = 1; } "  \
    ");\n"                                                                                                   \
    "source = { others = (\n" text " ); };\n"

static void other_sources_are_read(void **state)
{
    (void)state;
    struct problems problems = {0};
    static struct site site;
    write_file(OTHERS_OF(
        "{ name = \"hammer B\"; place_m = [900.0, -50.0, 0.0]; sound = \"impulsive\"; sounds_per_s = 0.5;\n"
        "  level_db = 170.0; at_m = 750.0; low_hz = 63.0; high_hz = 630.0; },\n"
        "{ name = \"vessel\"; place_m = [0.0, 300.0, 0.0]; sound = \"continuous\"; level_spread_db = 5.0;\n"
        "  decidecade_hz = [50.0, 31500.0]; decidecade_db = [180.0, 180.0]; }"));
    assert_int_equal(site_load(path, &problems, &site), STATUS_OK);
    assert_int_equal(problems.count, 0);
    assert_int_equal(site.source.n_others, 2);
    const struct together_other *hammer = &site.source.others[0], *vessel = &site.source.others[1];
    assert_string_equal(hammer->name, "hammer B");
    assert_near(hammer->ahead_m, 900, 0);
    assert_near(hammer->starboard_m, -50, 0);
    /* 63 to 630 Hz are 11 decidecades, n = -12 to -2 (IEC 61260-1, base ten): each 10 lg 11 dB less */
    for (int n = LEVEL_FIRST_BAND; n < LEVEL_FIRST_BAND + LEVEL_MAX_BANDS; n++)
        if (n >= -12 && n <= -2)
            assert_near(hammer->band_db[n - LEVEL_FIRST_BAND], 170 - 10.4139, 1e-4);
        else
            assert_true(isinf(hammer->band_db[n - LEVEL_FIRST_BAND]));
    assert_near(hammer->rate_per_s, 0.5, 0);
    assert_int_equal(vessel->sound, SOUND_CONTINUOUS);
    assert_near(vessel->at_m, 1, 0);
    assert_near(vessel->spread_db, 5, 0);
    assert_near(vessel->level_db, 183.0103, 1e-4);
    assert_near(vessel->band_db[-13 - LEVEL_FIRST_BAND], 180, 0);
    assert_near(vessel->band_db[15 - LEVEL_FIRST_BAND], 180, 0);
    assert_non_null(strstr(site.effective.data, "source.others[0].at_m = 750\n"));
    assert_non_null(strstr(site.effective.data, "source.others[0].level_spread_db = 3  # default\n"));
    site_destroy(&site);
}

static void what_is_wrong_with_others_is_told(void **state)
{
    (void)state;
    struct problems problems = {0};
    static struct site site;
    write_file(
        OTHERS_OF("{ name = \"a\"; place_m = [900.0, 50.0]; sound = \"impulsive\"; level_db = 170.0; low_hz "
                  "= 63.0; high_hz = 50.0; },\n"
                  "{ place_m = [0.0, 0.0, 0.0]; sound = \"loud\"; level_db = 170.0; low_hz = 63.0; },\n"
                  "{ name = \"c\"; place_m = [0.0, 0.0, 0.0]; sound = \"continuous\"; sounds_per_s = 1.0; "
                  "decidecade_hz = [50.0, 51.0];\n"
                  "  decidecade_db = [150.0, 150.0]; level_db = 3.0; },\n"
                  "{ name = \"d\"; place_m = [0.0, 0.0, 0.0]; sound = \"continuous\"; decidecade_hz = "
                  "[50.0]; levle_db = 170.0; }"));
    assert_int_equal(site_load(path, &problems, &site), STATUS_BAD_FORMAT);
    const char *lines = problems.lines.data;
    assert_non_null(
        strstr(lines, ":4: source.others[0].place_m: has 2 numbers; allowed: [ahead, starboard, down]"));
    assert_non_null(strstr(lines, "source.others[0].sounds_per_s: is missing; an impulsive source needs it"));
    assert_non_null(strstr(lines, ":4: source.others[0].high_hz: is 50; allowed: at least low_hz, 63"));
    assert_non_null(strstr(lines, "source.others[1].name: is missing"));
    assert_non_null(strstr(lines, ":5: source.others[1].sound: is \"loud\"; allowed: impulsive, continuous"));
    assert_non_null(strstr(lines, "source.others[1].high_hz: is missing"));
    assert_non_null(strstr(lines, ":6: source.others[2].sounds_per_s: is set for continuous sound"));
    assert_non_null(strstr(lines, ":6: source.others[2].decidecade_hz: names the decidecade of 51 Hz twice"));
    assert_non_null(strstr(lines, ":7: source.others[2].level_db: stands beside decidecade_db"));
    assert_non_null(strstr(lines, ":8: source.others[3].decidecade_hz: has 1 numbers and its counterpart 0"));
    assert_non_null(
        strstr(lines, ":8: source.others[3].levle_db: is not a known key; did you mean \"level_db\"?"));
    site_destroy(&site);
    problems_destroy(&problems);
}

static void of_syntax_the_first_error_is_told(void **state)
{
    (void)state;
    struct problems problems = {0};
    static struct site site;
    write_file("name = \"x\";\nledger = = ;\n");
    assert_int_equal(site_load(path, &problems, &site), STATUS_BAD_FORMAT);
    assert_int_equal(problems.count, 1);
    assert_non_null(strstr(problems.lines.data, ":2: syntax error"));
    site_destroy(&site);
    problems_destroy(&problems);
    unlink(path);
    problems = (struct problems){0};
    assert_int_equal(site_load(path, &problems, &site), STATUS_BAD_FORMAT);
    assert_non_null(strstr(problems.lines.data, "cannot be read (No such file"));
    site_destroy(&site);
    problems_destroy(&problems);
}

static void timed_notes_go_through_the_notes_door(void **state)
{
    (void)state;
    struct problems problems = {0};
    struct timed_note *notes = NULL;
    unsigned n = 0;
    write_file(
        "notes = ( { at_s = 9; kind = \"sighting\"; person = \"B. Eyes\"; group = \"baleen whale\"; "
        "distance_m = 900; },\n"
        "          { at_s = 1.5; kind = \"sign-on\"; person = \"A. Ears\"; watch = \"acoustic\"; } );\n");
    assert_int_equal(notes_load(path, &problems, &notes, &n), STATUS_OK);
    assert_int_equal(n, 2);
    assert_near(notes[0].at_s, 1.5, 0);
    assert_int_equal(notes[0].note.kind, NOTE_SIGN_ON);
    assert_near(notes[1].note.distance_m, 900, 0);
    free(notes);
    write_file("notes = ( { at_s = 9; kind = \"sighting\"; group = \"unicorn\"; },\n"
               "          { at_s = 1; kind = \"dance\"; },\n"
               "          { at_s = 2; kind = \"sign-on\"; person = \"A\"; wacth = \"visual\"; } );\n");
    assert_int_equal(notes_load(path, &problems, &notes, &n), STATUS_BAD_FORMAT);
    assert_non_null(strstr(problems.lines.data, ":1: notes[0].group: is \"unicorn\"; allowed: "));
    assert_non_null(strstr(problems.lines.data, ":2: notes[1].kind: is \"dance\", which is no kind of note"));
    assert_non_null(strstr(problems.lines.data, ":3: notes[2].wacth: is no field of a note"));
    problems_destroy(&problems);
}

int main(void)
{
    if (mkstemp(path) < 0)
        return 1;
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(effective_settings_are_read_back),
        cmocka_unit_test(good_settings_are_read),
        cmocka_unit_test(all_errors_of_meaning_come_at_once),
        cmocka_unit_test(other_sources_are_read),
        cmocka_unit_test(what_is_wrong_with_others_is_told),
        cmocka_unit_test(of_syntax_the_first_error_is_told),
        cmocka_unit_test(timed_notes_go_through_the_notes_door),
    };
    int failed = cmocka_run_group_tests_name("settings", tests, NULL, NULL);
    unlink(path);
    return failed;
}
