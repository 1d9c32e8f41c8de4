/* The call catalogue's loader; see catalogue.h. docs/settings.md lists the keys with their meaning. */
#include "settings/catalogue.h"
#include "call/certainty.h"
#include <dirent.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define PATH_SIZE 1024
#define FREE_SWEEP_HZ 1e6 /* stands for "no limit" in a file */

static const char *const forms[] = {[CALL_TONE] = "tone", [CALL_TRAIN] = "train", [CALL_NOISE] = "noise"};

static const char *const manners[MANNER_COUNT] = {
    [MANNER_NONE] = "",       [MANNER_BURST] = "burst",     [MANNER_HOPS] = "hops",
    [MANNER_LINE] = "line",   [MANNER_PICK_UP] = "pick-up", [MANNER_FLOW] = "flow",
    [MANNER_BEATS] = "beats", [MANNER_HUMP] = "hump",       [MANNER_GRUNTS] = "grunts",
    [MANNER_SNAPS] = "snaps", [MANNER_RHYTHM] = "rhythm",   [MANNER_IMPULSE] = "impulse",
};

/* low < high, at the higher one's key. */
static void check_order(struct group_reader *group, double low, double high, const char *low_key,
                        const char *high_key)
{
    if (!(low < high))
        group_problem(group, high_key, "is %g; allowed: more than %s, which is %g", high, low_key, low);
}

static void read_tone(struct group_reader *group, struct tone_shape *tone)
{
    tone->min_extent_hz = 0;
    tone->max_extent_hz = FREE_SWEEP_HZ;
    tone->min_sweep_hz = -FREE_SWEEP_HZ;
    tone->max_sweep_hz = FREE_SWEEP_HZ;
    group_number(group, "window_s", READER_REQUIRED, 0.002, 8, &tone->window_s);
    group_number(group, "min_snr_db", READER_REQUIRED, 0, 60, &tone->min_snr_db);
    group_number(group, "min_s", READER_REQUIRED, 0.02, 60, &tone->min_s);
    group_number(group, "max_s", READER_REQUIRED, 0.05, 600, &tone->max_s);
    group_number(group, "min_extent_hz", READER_OPTIONAL, 0, FREE_SWEEP_HZ, &tone->min_extent_hz);
    group_number(group, "max_extent_hz", READER_OPTIONAL, 0, FREE_SWEEP_HZ, &tone->max_extent_hz);
    group_number(group, "min_sweep_hz", READER_OPTIONAL, -FREE_SWEEP_HZ, FREE_SWEEP_HZ, &tone->min_sweep_hz);
    group_number(group, "max_sweep_hz", READER_OPTIONAL, -FREE_SWEEP_HZ, FREE_SWEEP_HZ, &tone->max_sweep_hz);
    group_number(group, "max_rate_hz_s", READER_REQUIRED, 0.01, FREE_SWEEP_HZ, &tone->max_rate_hz_s);
    group_number(group, "min_sideband_hz", READER_OPTIONAL, 0, FREE_SWEEP_HZ, &tone->min_sideband_hz);
    group_number(group, "max_sideband_hz", READER_OPTIONAL, 0, FREE_SWEEP_HZ, &tone->max_sideband_hz);
    if (tone->max_sideband_hz != 0)
        check_order(group, tone->min_sideband_hz, tone->max_sideband_hz, "min_sideband_hz",
                    "max_sideband_hz");
    check_order(group, tone->min_s, tone->max_s, "min_s", "max_s");
    check_order(group, tone->min_extent_hz, tone->max_extent_hz, "min_extent_hz", "max_extent_hz");
    check_order(group, tone->min_sweep_hz, tone->max_sweep_hz, "min_sweep_hz", "max_sweep_hz");
    group_number(group, "min_bend_hz", READER_OPTIONAL, 0, FREE_SWEEP_HZ, &tone->min_bend_hz);
    group_number(group, "max_bend_hz", READER_OPTIONAL, 0, FREE_SWEEP_HZ, &tone->max_bend_hz);
    group_number(group, "min_jump_hz", READER_OPTIONAL, 0, FREE_SWEEP_HZ, &tone->min_jump_hz);
    group_number(group, "max_jump_hz", READER_OPTIONAL, 0, FREE_SWEEP_HZ, &tone->max_jump_hz);
    if (tone->max_bend_hz != 0)
        check_order(group, tone->min_bend_hz, tone->max_bend_hz, "min_bend_hz", "max_bend_hz");
    if (tone->max_jump_hz != 0)
        check_order(group, tone->min_jump_hz, tone->max_jump_hz, "min_jump_hz", "max_jump_hz");
    if (tone->min_sweep_hz <= -FREE_SWEEP_HZ)
        tone->min_sweep_hz = -INFINITY;
    if (tone->max_sweep_hz >= FREE_SWEEP_HZ)
        tone->max_sweep_hz = INFINITY;
    if (tone->max_extent_hz >= FREE_SWEEP_HZ)
        tone->max_extent_hz = INFINITY;
}

/* Limits of what a pulse looks like; what is left out is free. */
static void read_pulse_limits(struct group_reader *group, struct train_shape *train)
{
    const double most_hz_s = 1e12;
    train->max_centroid_hz = train->max_bandwidth_hz = train->max_length_s = train->max_sweep_hz_s = INFINITY;
    train->min_sweep_hz_s = -INFINITY;
    group_number(group, "min_centroid_hz", READER_OPTIONAL, 0, 1e6, &train->min_centroid_hz);
    group_number(group, "max_centroid_hz", READER_OPTIONAL, 0, 1e6, &train->max_centroid_hz);
    group_number(group, "min_bandwidth_hz", READER_OPTIONAL, 0, 1e6, &train->min_bandwidth_hz);
    group_number(group, "max_bandwidth_hz", READER_OPTIONAL, 0, 1e6, &train->max_bandwidth_hz);
    group_number(group, "min_length_s", READER_OPTIONAL, 0, 10, &train->min_length_s);
    group_number(group, "max_length_s", READER_OPTIONAL, 0, 10, &train->max_length_s);
    group_number(group, "min_sweep_hz_s", READER_OPTIONAL, -most_hz_s, most_hz_s, &train->min_sweep_hz_s);
    group_number(group, "max_sweep_hz_s", READER_OPTIONAL, -most_hz_s, most_hz_s, &train->max_sweep_hz_s);
    check_order(group, train->min_centroid_hz, train->max_centroid_hz, "min_centroid_hz", "max_centroid_hz");
    check_order(group, train->min_bandwidth_hz, train->max_bandwidth_hz, "min_bandwidth_hz",
                "max_bandwidth_hz");
    check_order(group, train->min_length_s, train->max_length_s, "min_length_s", "max_length_s");
    check_order(group, train->min_sweep_hz_s, train->max_sweep_hz_s, "min_sweep_hz_s", "max_sweep_hz_s");
}

static void read_train(struct group_reader *group, struct train_shape *train)
{
    double min_pulses = 0;
    group_number(group, "pulse_s", READER_REQUIRED, 1e-6, 5, &train->pulse_s);
    group_number(group, "max_pulse_s", READER_REQUIRED, 1e-6, 10, &train->max_pulse_s);
    group_number(group, "min_snr_db", READER_REQUIRED, 0, 60, &train->min_snr_db);
    group_number(group, "min_interval_s", READER_REQUIRED, 0.0005, 100, &train->min_interval_s);
    group_number(group, "max_interval_s", READER_REQUIRED, 0.001, 100, &train->max_interval_s);
    group_flag(group, "free_rhythm", READER_OPTIONAL, &train->free_rhythm);
    train->max_jitter = 1;
    group_number(group, "max_jitter", train->free_rhythm ? READER_OPTIONAL : READER_REQUIRED, 0, 5,
                 &train->max_jitter);
    group_number(group, "min_jitter", READER_OPTIONAL, 0, 5, &train->min_jitter);
    group_number(group, "min_pulses", READER_REQUIRED, 2, 1000, &min_pulses);
    group_number(group, "guard_low_hz", READER_OPTIONAL, 0, 1e6, &train->guard_low_hz);
    group_number(group, "guard_high_hz", READER_OPTIONAL, 0, 1e6, &train->guard_high_hz);
    group_number(group, "min_guard_db", READER_OPTIONAL, -60, 80, &train->min_guard_db);
    group_number(group, "upper_low_hz", READER_OPTIONAL, 0, 1e6, &train->upper_low_hz);
    group_number(group, "upper_high_hz", READER_OPTIONAL, 0, 1e6, &train->upper_high_hz);
    group_number(group, "min_upper_db", READER_OPTIONAL, -60, 80, &train->min_upper_db);
    read_pulse_limits(group, train);
    group_number(group, "echo_s", READER_OPTIONAL, 1e-5, 5, &train->echo_s);
    group_number(group, "tail_s", READER_OPTIONAL, 0, 5, &train->tail_s);
    train->min_pulses = (uint32_t)min_pulses;
    check_order(group, train->pulse_s, train->max_pulse_s, "pulse_s", "max_pulse_s");
    check_order(group, train->min_interval_s, train->max_interval_s, "min_interval_s", "max_interval_s");
    check_order(group, train->min_jitter, train->max_jitter, "min_jitter", "max_jitter");
    if (train->guard_low_hz != 0 || train->guard_high_hz != 0)
        check_order(group, train->guard_low_hz, train->guard_high_hz, "guard_low_hz", "guard_high_hz");
    if (train->upper_low_hz != 0 || train->upper_high_hz != 0)
        check_order(group, train->upper_low_hz, train->upper_high_hz, "upper_low_hz", "upper_high_hz");
}

static void read_song(struct group_reader *root, const char *form, struct song_shape *song)
{
    struct group_reader group;
    double units = 0, kinds = 1, bout = 2;
    if (!group_child(root, "song", READER_OPTIONAL, &group))
        return;
    if (strcmp(form, "tone") != 0)
        group_problem(root, "song", "is of a %s; allowed of: tone", form);
    group_number(&group, "min_units", READER_REQUIRED, 2, 32, &units);
    group_number(&group, "min_kinds", READER_REQUIRED, 1, 8, &kinds);
    group_number(&group, "within_s", READER_REQUIRED, 1, 600, &song->within_s);
    group_number(&group, "min_unit_s", READER_REQUIRED, 0, 60, &song->min_unit_s);
    group_number(&group, "lone_evidence", READER_REQUIRED, 0, 20, &song->lone_evidence);
    group_number(&group, "lone_s", READER_REQUIRED, 0, 3600, &song->lone_s);
    group_number(&group, "repeat_evidence", READER_REQUIRED, 0, 20, &song->repeat_evidence);
    group_number(&group, "bout_units", READER_REQUIRED, 2, 32, &bout);
    group_number(&group, "bout_s", READER_REQUIRED, 1, 600, &song->bout_s);
    group_number(&group, "bout_evidence", READER_REQUIRED, 0, 20, &song->bout_evidence);
    song->bout_units = (uint32_t)bout;
    song->min_units = (uint32_t)units;
    song->min_kinds = (uint32_t)kinds;
    group_done(&group);
}

static void read_sound(struct group_reader *group, struct other_shape *sound)
{
    unsigned manner = 0;
    double repeats = 0, harmonics = 0;
    if (group_word(group, "manner", READER_REQUIRED, manners + 1, MANNER_COUNT - 1, &manner))
        sound->manner = (enum manner)(manner + 1);
    group_number(group, "min_snr_db", READER_OPTIONAL, 0, 60, &sound->min_snr_db);
    group_number(group, "min_s", READER_OPTIONAL, 0, 600, &sound->min_s);
    group_number(group, "max_s", READER_OPTIONAL, 0, 600, &sound->max_s);
    group_number(group, "max_extent_hz", READER_OPTIONAL, 0, FREE_SWEEP_HZ, &sound->max_extent_hz);
    group_number(group, "min_repeats", READER_OPTIONAL, 1, 64, &repeats);
    group_number(group, "memory_s", READER_OPTIONAL, 0, 600, &sound->memory_s);
    group_number(group, "low_rate_hz", READER_OPTIONAL, 0, 1000, &sound->low_rate_hz);
    group_number(group, "high_rate_hz", READER_OPTIONAL, 0, 1000, &sound->high_rate_hz);
    group_number(group, "min_harmonics", READER_OPTIONAL, 0, 20, &harmonics);
    sound->min_repeats = (uint32_t)repeats;
    sound->min_harmonics = (uint32_t)harmonics;
    if (sound->max_s > 0 || sound->min_s > 0)
        check_order(group, sound->min_s, sound->max_s, "min_s", "max_s");
    if (sound->high_rate_hz > 0 || sound->low_rate_hz > 0)
        check_order(group, sound->low_rate_hz, sound->high_rate_hz, "low_rate_hz", "high_rate_hz");
}

static void read_class(struct group_reader *root, struct call_class *class)
{
    const char *groups[GROUP_COUNT];
    unsigned group = GROUP_UNKNOWN, form = CALL_TONE;
    for (unsigned i = 0; i < GROUP_COUNT; i++)
        groups[i] = group_text((enum group)i);
    class->animal = true;
    if (group_string(root, "name", READER_REQUIRED, class->name, sizeof class->name) && !*class->name)
        group_problem(root, "name", "is empty; allowed: 1 to %d bytes", CALL_CLASS_SIZE - 1);
    group_word(root, "group", READER_REQUIRED, groups, GROUP_COUNT, &group);
    bool has_form = group_word(root, "form", READER_REQUIRED, forms, 3, &form);
    class->group = (enum group)group;
    class->form = (enum call_form)form;
    group_flag(root, "animal", READER_OPTIONAL, &class->animal);
    group_number(root, "low_hz", READER_REQUIRED, 1, 5e5, &class->low_hz);
    group_number(root, "high_hz", READER_REQUIRED, 1, 5e5, &class->high_hz);
    check_order(root, class->low_hz, class->high_hz, "low_hz", "high_hz");
    group_number(root, "natural_delay_s", READER_REQUIRED, 0, 120, &class->natural_delay_s);
    group_number(root, "false_per_hour", READER_REQUIRED, 0, 100, &class->false_per_hour);
    group_number(root, "certainty", READER_REQUIRED, 0, 1, &class->certainty);
    group_number(root, "evidence", READER_REQUIRED, -20, 20, &class->evidence);
    group_string(root, "source", READER_REQUIRED, class->source, sizeof class->source);
    struct group_reader shape;
    if (class->animal && form == CALL_NOISE)
        group_problem(root, "form", "is \"noise\"; allowed of an animal: tone, train");
    else if (has_form && group_child(root, class->animal ? forms[form] : "sound", READER_REQUIRED, &shape)) {
        if (!class->animal)
            read_sound(&shape, &class->sound);
        else if (form == CALL_TONE)
            read_tone(&shape, &class->tone);
        else
            read_train(&shape, &class->train);
        group_done(&shape);
    }
    if (has_form && class->animal)
        read_song(root, forms[form], &class->song);
    if (has_form)
        group_done(root);
}

/* Weight and usual value of each measure; none that is absent counts. */
static void read_form(struct group_reader *root, const char *key, enum call_form form,
                      struct certainty_form *out)
{
    struct group_reader group;
    if (!group_child(root, key, READER_REQUIRED, &group))
        return;
    const char *name;
    for (uint32_t i = 0; (name = certainty_measure_name(form, i)); i++) {
        double pair[2] = {0, 0};
        unsigned n = group_numbers(&group, name, READER_OPTIONAL, -1000, 1000, pair, 2);
        if (n == 1)
            group_problem(&group, name, "has 1 number; allowed: [weight, usual value]");
        out->weight[i] = pair[0];
        out->usual[i] = pair[1];
    }
    group_done(&group);
}

static void read_certainty(struct group_reader *root, struct certainty_table *out)
{
    struct group_reader grades;
    char source[CATALOGUE_TEXT_SIZE];
    group_string(root, "source", READER_REQUIRED, source, sizeof source);
    read_form(root, "tone", CALL_TONE, &out->tone);
    read_form(root, "train", CALL_TRAIN, &out->train);
    if (group_child(root, "grades", READER_REQUIRED, &grades)) {
        group_number(&grades, "look_evidence", READER_REQUIRED, 0, 100, &out->look_evidence);
        group_number(&grades, "look_false_per_hour", READER_REQUIRED, 0, 1000, &out->look_false_per_hour);
        group_number(&grades, "act_evidence", READER_REQUIRED, 0, 100, &out->act_evidence);
        group_number(&grades, "act_false_per_day", READER_REQUIRED, 0, 1000, &out->act_false_per_day);
        group_number(&grades, "evidence_decay_s", READER_REQUIRED, 1, 86400, &out->evidence_decay_s);
        if (out->act_evidence < out->look_evidence)
            group_problem(&grades, "act_evidence", "is %g; allowed: at least look_evidence, %g",
                          out->act_evidence, out->look_evidence);
        group_done(&grades);
    }
    group_done(root);
}

static bool is_certainty_file(const char *path)
{
    const char *name = strrchr(path, '/');
    return strcmp(name ? name + 1 : path, CATALOGUE_CERTAINTY_FILE) == 0;
}

static void load_file(const char *path, struct problems *problems, struct text *effective,
                      struct catalogue *catalogue)
{
    struct reader reader;
    bool is_class = !is_certainty_file(path);
    if (is_class && catalogue->n_classes == CATALOGUE_MAX_CLASSES) {
        problems_add(problems, path, 0, "", "is one class too many; allowed: %d", CATALOGUE_MAX_CLASSES);
        return;
    }
    if (effective)
        text_format(effective, "# %s\n", path);
    enum status status = reader_open(&reader, path, problems, effective);
    if (status == STATUS_OK && !is_class) {
        struct group_reader root = reader_root(&reader);
        read_certainty(&root, &catalogue->certainty);
    } else if (status == STATUS_OK) {
        struct call_class *class = &catalogue->classes[catalogue->n_classes];
        struct group_reader root = reader_root(&reader);
        read_class(&root, class);
        for (uint32_t i = 0; i < catalogue->n_classes; i++)
            if (*class->name && strcmp(class->name, catalogue->classes[i].name) == 0)
                group_problem(&root, "name", "is \"%s\", which another file has; allowed: a name of its own",
                              class->name);
        catalogue->n_classes++;
    }
    reader_close(&reader);
}

static int is_class_file(const struct dirent *entry)
{
    size_t n = strlen(entry->d_name);
    return entry->d_name[0] != '.' && n > 4 && strcmp(entry->d_name + n - 4, ".cfg") == 0;
}

/* By bytes: the order must not depend on the language of the machine. */
static int by_name(const struct dirent **a, const struct dirent **b)
{
    return strcmp((*a)->d_name, (*b)->d_name);
}

enum status catalogue_load(const char *folder, struct problems *problems, struct text *effective,
                           struct catalogue *out)
{
    struct dirent **entries = NULL;
    unsigned before = problems->count;
    int n = scandir(folder, &entries, is_class_file, by_name);
    if (n <= 0) {
        free(entries);
        problems_add(problems, folder, 0, "", n < 0 ? "cannot be read (%m)" : "holds no *.cfg file");
        return STATUS_NOT_FOUND;
    }
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    if (catalogue)
        catalogue->certainty = (struct certainty_table){.look_evidence = 1,
                                                        .act_evidence = 3,
                                                        .look_false_per_hour = NAN,
                                                        .act_false_per_day = NAN,
                                                        .evidence_decay_s = 180};
    for (int i = 0; i < n; i++) {
        char path[PATH_SIZE];
        int length = snprintf(path, sizeof path, "%s/%s", folder, entries[i]->d_name);
        if (catalogue && length >= (int)sizeof path)
            problems_add(problems, folder, 0, "", "has too long a path; allowed: %d bytes", PATH_SIZE - 1);
        else if (catalogue)
            load_file(path, problems, effective, catalogue);
        free(entries[i]);
    }
    free(entries);
    if (!catalogue)
        return STATUS_NO_MEMORY;
    enum status status = problems->count > before ? STATUS_BAD_FORMAT : STATUS_OK;
    if (status == STATUS_OK)
        *out = *catalogue;
    free(catalogue);
    return status;
}
