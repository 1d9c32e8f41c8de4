/* The measuring bench of the detectors. Runs the pieces that have no result of this catalogue and seed yet
 * (one that is named runs anew) and keeps each as JSON, so that it can be stopped and taken up again;
 * tests/bench/calls_table.py prints the table of all.
 *
 * usage: calls_bench OUT_FOLDER [PIECE] [SEED] [SCALE] [BUDGET_S]
 *   PIECE     pulses, trains, tones, voices, seas, confounders, costs, mixed; "all" those without a result; "sweep"
 *             those of them that the plot shows; "pool" goes on with confounders, 20 min of each in turn,
 *             until BUDGET_S have passed or 10 days are pooled
 *             the name of a confounder runs that for SCALE hours and prints what came of it
 *   SEED      0: the number of the day
 *   SCALE     of the lengths and numbers of trials: 1; more checks the single pulses' noise law too
 */
#include "bench/calls/calls.h"
#include "float_mode.h"
#include "support/catalogue.h"
#include <glob.h>
#include <sodium.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#define DIGEST_SIZE (2 * crypto_hash_sha256_BYTES + 1)
#define POOL_HOURS 240.0

struct bench {
    const char *folder;
    char digest[DIGEST_SIZE];
    uint64_t day;
    double budget_s;
    struct calls_setup setup;
};

static double now_s(void)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

/* As `LC_ALL=C; cat config/calls/?*.cfg | sha256sum` gives it. */
static bool find_digest(char out[DIGEST_SIZE])
{
    glob_t files;
    crypto_hash_sha256_state state;
    unsigned char digest[crypto_hash_sha256_BYTES], buffer[65536];
    if (sodium_init() < 0 || glob("config/calls/*.cfg", 0, NULL, &files) != 0)
        return false;
    crypto_hash_sha256_init(&state);
    for (size_t i = 0; i < files.gl_pathc; i++) {
        FILE *file = fopen(files.gl_pathv[i], "rb");
        size_t n;
        while (file && (n = fread(buffer, 1, sizeof buffer, file)) > 0)
            crypto_hash_sha256_update(&state, buffer, n);
        if (file)
            fclose(file);
    }
    crypto_hash_sha256_final(&state, digest);
    sodium_bin2hex(out, DIGEST_SIZE, digest, sizeof digest);
    globfree(&files);
    return true;
}

static json_t *load(const struct bench *bench, const char *piece)
{
    char path[512];
    snprintf(path, sizeof path, "%s/%s.json", bench->folder, piece);
    json_t *kept = json_load_file(path, 0, NULL);
    const char *digest = json_string_value(json_object_get(kept, "digest"));
    if (digest && strcmp(digest, bench->digest) == 0)
        return kept;
    json_decref(kept);
    return NULL;
}

/* Written beside and renamed: a piece that is stopped leaves no half. */
static bool save(const struct bench *bench, const char *piece, const json_t *result)
{
    char path[512], beside[520];
    snprintf(path, sizeof path, "%s/%s.json", bench->folder, piece);
    snprintf(beside, sizeof beside, "%s.new", path);
    return json_dump_file(result, beside, JSON_INDENT(1)) == 0 && rename(beside, path) == 0;
}

static bool finish(const struct bench *bench, const char *piece, double start_s, json_t *result)
{
    if (!result) {
        fprintf(stderr, "%s: failed\n", piece);
        return false;
    }
    json_object_set_new(result, "piece", json_string(piece));
    json_object_set_new(result, "digest", json_string(bench->digest));
    json_object_set_new(result, "seed", json_integer((json_int_t)bench->setup.seed));
    json_object_set_new(result, "scale", json_real(bench->setup.scale));
    json_object_set_new(result, "seconds", json_real(now_s() - start_s));
    bool good = save(bench, piece, result);
    fprintf(stderr, "%s: seed %llu, %.0f s\n", piece, (unsigned long long)bench->setup.seed,
            now_s() - start_s);
    json_decref(result);
    return good;
}

static json_t *all_seas(const struct calls_setup *setup)
{
    json_t *rows = json_array();
    for (uint32_t i = 0; i < calls_seas_count(); i++)
        if (json_array_append_new(rows, calls_sea(setup, i)) != 0)
            return NULL;
    return json_pack("{s:o}", "rows", rows);
}

/* An hour of each confounder. */
static json_t *all_confounders(const struct calls_setup *setup)
{
    json_t *rows = json_array();
    for (uint32_t i = 0; i < calls_confounders_count(); i++)
        if (json_array_append_new(rows, calls_confounder(setup, i, setup->scale)) != 0)
            return NULL;
    return json_pack("{s:o}", "rows", rows);
}

/* Seas of a few minutes each, all different. */
static json_t *all_mixed(const struct calls_setup *setup)
{
    json_t *rows = json_array();
    for (uint32_t i = 0; i < calls_trials(setup, 200, 1); i++)
        if (json_array_append_new(rows, calls_mixed(setup, i)) != 0)
            return NULL;
    return json_pack("{s:o}", "rows", rows);
}

static const struct piece {
    const char *name;
    json_t *(*run)(const struct calls_setup *setup);
    bool is_swept; /* over signal-to-noise ratio: part of the plot */
} pieces[] = {{"pulses", calls_pulses, true}, {"trains", calls_trains, true},
              {"tones", calls_tones, true},   {"voices", calls_voices, true},
              {"seas", all_seas, false},      {"confounders", all_confounders, false},
              {"costs", calls_costs, false},   {"mixed", all_mixed, false}};

static double hours_of(const json_t *rows, const char *sound)
{
    double hours = 0;
    size_t i;
    json_t *row;
    json_array_foreach(rows, i, row)
    {
        if (strcmp(json_string_value(json_object_get(row, "sound")), sound) == 0)
            hours += json_real_value(json_object_get(row, "hours"));
    }
    return hours;
}

static uint32_t with_least(const json_t *rows)
{
    uint32_t least = 0;
    for (uint32_t i = 1; i < calls_confounders_count(); i++)
        if (hours_of(rows, calls_confounder_name(i)) < hours_of(rows, calls_confounder_name(least)))
            least = i;
    return least;
}

/* Adds a stretch of the confounder that has least, kept after each; every stretch has a seed of its own,
 * which follows from the first and how many there are. A run on another day goes on with its own seeds. */
static bool pool(const struct bench *bench)
{
    double start_s = now_s(), share_hours = POOL_HOURS / calls_confounders_count();
    json_t *all = load(bench, "pool");
    if (!all)
        all = json_pack("{s:s, s:s, s:[]}", "piece", "pool", "digest", bench->digest, "rows");
    json_t *rows = json_object_get(all, "rows");
    bool good = true;
    double hours = 0;
    while (good && now_s() - start_s < bench->budget_s) {
        uint32_t least = with_least(rows);
        if (hours_of(rows, calls_confounder_name(least)) >= share_hours)
            break;
        struct calls_setup setup = bench->setup;
        setup.seed += 7919 * json_array_size(rows);
        json_t *row = calls_confounder(&setup, least, CALLS_STRETCH_S / 3600);
        good = row && json_object_set_new(row, "seed", json_integer((json_int_t)setup.seed)) == 0 &&
               json_array_append_new(rows, row) == 0 && save(bench, "pool", all);
    }
    for (uint32_t i = 0; i < calls_confounders_count(); i++)
        hours += hours_of(rows, calls_confounder_name(i));
    fprintf(stderr, "pool: %.1f h of %.0f; first seed of this run %llu\n", hours, POOL_HOURS,
            (unsigned long long)bench->setup.seed);
    json_decref(all);
    return good;
}

static bool has_result(const struct bench *bench, const char *piece)
{
    json_t *kept = load(bench, piece);
    bool has = kept && json_integer_value(json_object_get(kept, "seed")) == (json_int_t)bench->setup.seed &&
               json_real_value(json_object_get(kept, "scale")) >= bench->setup.scale;
    json_decref(kept);
    return has;
}

/* A confounder by itself: printed, and not kept. */
static bool show(json_t *row)
{
    bool good = row && json_dumpf(row, stdout, JSON_INDENT(1)) == 0 && puts("") >= 0;
    json_decref(row);
    return good;
}

static bool run(const struct bench *bench, const char *name)
{
    bool all = strcmp(name, "all") == 0, sweep = strcmp(name, "sweep") == 0, good = true;
    bool known = all || sweep;
    if (strcmp(name, "pool") == 0)
        return pool(bench);
    for (size_t i = 0; i < sizeof pieces / sizeof pieces[0]; i++) {
        bool named = strcmp(name, pieces[i].name) == 0;
        known = known || named;
        double start_s = now_s();
        bool wanted = all || (sweep && pieces[i].is_swept);
        if (named || (wanted && !has_result(bench, pieces[i].name)))
            good = finish(bench, pieces[i].name, start_s, pieces[i].run(&bench->setup)) && good;
    }
    for (uint32_t i = 0; !known && i < calls_confounders_count(); i++)
        if (strcmp(name, calls_confounder_name(i)) == 0)
            return show(calls_confounder(&bench->setup, i, bench->setup.scale));
    if (!known)
        fprintf(stderr, "no piece %s\n", name);
    return good && known;
}

int main(int argc, char **argv)
{
    static struct catalogue catalogue;
    struct bench bench = {.folder = argc > 1 ? argv[1] : "build/bench-calls",
                          .budget_s = argc > 5 ? atof(argv[5]) : 1200,
                          .setup = {.catalogue = &catalogue,
                                    .seed = argc > 3 ? strtoull(argv[3], NULL, 10) : 0,
                                    .scale = argc > 4 ? atof(argv[4]) : 1}};
    if (bench.setup.seed == 0)
        bench.setup.seed = (uint64_t)time(NULL) / 86400;
    float_mode_flush_to_zero();
    if (!test_load_catalogue(&catalogue) || !find_digest(bench.digest))
        return 3;
    return run(&bench, argc > 2 ? argv[2] : "all") ? 0 : 1;
}
