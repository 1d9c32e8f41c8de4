/* The site's source; see source.h. */
#include "settings/source.h"
#include "settings/criteria.h"
#include "settings/others.h"
#include <stdio.h>
#include <string.h>

static const char *const form_words[] = {"point", "pile", "array"}; /* in the order of enum source_form */
static const char *const sound_words[] = {"impulsive", "continuous"};

void source_settings_read(struct group_reader *root, const char *folder, struct source_settings *out)
{
    struct group_reader group;
    unsigned form = SOURCE_LINE, sound = SOUND_IMPULSIVE;
    char path[256];
    *out = (struct source_settings){.loss_n_db = 15,
                                    .loss_n_spread_db = SOURCE_ASSUMED_N_SPREAD_DB,
                                    .level_spread_db = 1,
                                    .temperature_c = 10,
                                    .salinity = 35,
                                    .depth_m = 20,
                                    .scatter_db = 1.5};
    group_child(root, "source", READER_OPTIONAL, &group);
    group_word(&group, "form", READER_OPTIONAL, form_words, 3, &form);
    group_word(&group, "sound", READER_OPTIONAL, sound_words, 2, &sound);
    group_number(&group, "loss_n_db", READER_OPTIONAL, 5, 40, &out->loss_n_db);
    group_number(&group, "loss_n_spread_db", READER_OPTIONAL, 0, 10, &out->loss_n_spread_db);
    group_number(&group, "scatter_db", READER_OPTIONAL, 0, 10, &out->scatter_db);
    group_number(&group, "level_spread_db", READER_OPTIONAL, 0, 10, &out->level_spread_db);
    group_number(&group, "temperature_c", READER_OPTIONAL, -2, 35, &out->temperature_c);
    group_number(&group, "salinity", READER_OPTIONAL, 0, 42, &out->salinity);
    out->depth_known = group_number(&group, "depth_m", READER_OPTIONAL, 1, 11000, &out->depth_m);
    group_number(&group, "aperture_m", READER_OPTIONAL, 0, 200, &out->shape.aperture_m);
    group_number(&group, "main_hz", READER_OPTIONAL, 0, 1e6, &out->shape.main_hz);
    group_number(&group, "lobe_deg", READER_OPTIONAL, 0, 90, &out->shape.lobe_deg);
    place_settings_read(&group, &out->place);
    out->shape.form = (enum source_form)form;
    out->sound = (enum criterion_sound)sound;
    out->n_others = others_read(&group, out->others);
    while (group_text_at(&group, "criteria", out->n_sets, path, sizeof path)) {
        if (out->n_sets == SOURCE_MAX_SETS) {
            group_problem(&group, "criteria", "lists too many; allowed: at most %d", SOURCE_MAX_SETS);
            break;
        }
        if (*path == '/')
            snprintf(out->sets[out->n_sets++], sizeof out->sets[0], "%s", path);
        else
            snprintf(out->sets[out->n_sets++], sizeof out->sets[0], "%.*s/%s", 250, folder, path);
    }
    group_done(&group);
}

enum status source_settings_criteria(const struct source_settings *settings, struct problems *problems,
                                     struct text *effective, struct criteria *out)
{
    memset(out, 0, sizeof *out);
    enum status status = STATUS_OK;
    for (unsigned i = 0; i < settings->n_sets; i++) {
        enum status one = criteria_load(settings->sets[i], problems, effective, out);
        status = status == STATUS_OK ? one : status;
    }
    return status;
}
