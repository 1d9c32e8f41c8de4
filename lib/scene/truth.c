/* What a scene truly holds; see truth.h. */
#include "scene/truth.h"
#include "base/text.h"
#include "base/units.h"
#include "scene/kind.h"
#include "scene/path.h"
#include "scene/schedule.h"
#include "scene/truth_ratio.h"
#include <inttypes.h>
#include <math.h>
#include <stdlib.h>

#define CHUNK 4096

struct writer {
    const struct scene *scene;
    struct path_sea sea;
    struct truth_sink sink;
    struct text text;
    struct emission *emission;
    float *chunk; /* [CHUNK] */
    enum status status;
};

static void number(struct writer *writer, const char *key, double value, int decimals)
{
    text_format(&writer->text, "\"%s\":", key);
    text_json_number(&writer->text, value, decimals);
    text_append(&writer->text, ",");
}

/* Ends a list of "key":value, pairs. */
static void close_object(struct writer *writer)
{
    struct text *text = &writer->text;
    if (text->length > 0 && text->data[text->length - 1] == ',')
        text->data[--text->length] = '\0';
    text_append(text, "}");
}

static void hand_on(struct writer *writer)
{
    if (writer->status == STATUS_OK && writer->text.failed)
        writer->status = STATUS_NO_MEMORY;
    if (writer->status == STATUS_OK)
        writer->status = writer->sink.take(writer->sink.context, writer->text.data ? writer->text.data : "");
    text_reset(&writer->text);
}

static void write_place(struct writer *writer, struct scene_place place)
{
    number(writer, "x_m", place.x_m, 3);
    number(writer, "y_m", place.y_m, 3);
    number(writer, "z_m", place.z_m, 3);
}

static const struct scene_kind *kind_of(const struct scene *scene, const struct emission *emission)
{
    if (emission->kind == EMISSION_CALL)
        return scene->animals[emission->source - 1].kind;
    return emission->kind == EMISSION_SOUND ? scene->emitters[emission->source - 1].kind : NULL;
}

/* Exposure and peak of what one hydrophone hears between two times, from the samples. */
static void measure(struct writer *writer, const struct emission *emission, uint32_t hydrophone,
                    double start_s, double end_s, double *out_exposure, double *out_peak)
{
    double exposure = 0, peak = 0, rate_hz = writer->scene->rate_hz;
    uint64_t first = (uint64_t)floor(start_s * rate_hz), end = (uint64_t)ceil(end_s * rate_hz) + 1;
    for (uint64_t at = first; at < end; at += CHUNK) {
        uint32_t n = end - at < CHUNK ? (uint32_t)(end - at) : CHUNK;
        for (uint32_t i = 0; i < n; i++)
            writer->chunk[i] = 0;
        path_add(&writer->sea, emission, hydrophone, at, n, writer->chunk);
        for (uint32_t i = 0; i < n; i++) {
            double value = (double)writer->chunk[i];
            exposure += value * value / rate_hz;
            peak = fmax(peak, fabs(value));
        }
    }
    *out_exposure = exposure;
    *out_peak = peak;
}

static void write_heard(struct writer *writer, const struct emission *emission, uint32_t hydrophone)
{
    double start_s, end_s, exposure, peak;
    path_heard(&writer->sea, emission, hydrophone, &start_s, &end_s);
    measure(writer, emission, hydrophone, start_s, end_s, &exposure, &peak);
    double ratio_db =
        truth_ratio_db(writer->scene, kind_of(writer->scene, emission), emission, exposure, peak);
    text_append(&writer->text, "{");
    number(writer, "channel", hydrophone + 1, 0);
    number(writer, "start_s", start_s, 7);
    number(writer, "end_s", end_s, 7);
    number(writer, "sel_db", units_sel_db(exposure), 3);
    number(writer, "peak_db", units_peak_db(peak), 3);
    if (isfinite(ratio_db))
        number(writer, "snr_db", ratio_db, 2);
    close_object(writer);
}

static void write_all_heard(struct writer *writer, const struct emission *emission)
{
    text_append(&writer->text, "\"heard\":[");
    for (uint32_t i = 0; i < writer->scene->n_hydrophones; i++) {
        if (i > 0)
            text_append(&writer->text, ",");
        write_heard(writer, emission, i);
    }
    text_append(&writer->text, "],");
}

static void write_pulses(struct writer *writer, const struct emission *emission)
{
    if (emission->n_pulses == 0)
        return;
    text_append(&writer->text, "\"pulses_s\":[");
    for (uint32_t i = 0; i < emission->n_pulses; i++) {
        text_append(&writer->text, i > 0 ? "," : "");
        text_json_number(&writer->text, emission->start_s + emission->pulse_s[i], 7);
    }
    text_append(&writer->text, "],");
}

/* How snr_db is to be read, and how long its cell is. */
static void write_ratio_kind(struct writer *writer, const struct scene_kind *kind)
{
    static const char *const words[] = {
        [SNR_PULSE] = "pulse peak", [SNR_CELL] = "tone cell", [SNR_BAND] = "band energy"};
    if (!kind || kind->snr == SNR_NONE)
        return;
    text_format(&writer->text, "\"snr\":\"%s\",", words[kind->snr]);
    if (kind->snr == SNR_CELL)
        number(writer, "cell_s", kind->cell_s, 4);
}

/* A sound that lasts: from its emitter's start to its end, by the middle of its first piece. */
static void write_lasting(struct writer *writer, const struct emission *emission, double end_s)
{
    const struct scene_kind *kind = kind_of(writer->scene, emission);
    double low_hz, high_hz, edge_s = emission->sound.taper * emission->sound.length_s / 2;
    sound_band(&emission->sound, &low_hz, &high_hz);
    text_append(&writer->text, "{");
    number(writer, "source", emission->source, 0);
    number(writer, "member", emission->member, 0);
    text_format(&writer->text,
                "\"number\":1,\"kind\":\"%s\",\"group\":\"%s\",\"class\":\"%s\",\"lasts\":true,", kind->name,
                group_text(kind->group), kind->class);
    number(writer, "start_s", emission->start_s, 7);
    number(writer, "end_s", fmin(end_s, writer->scene->duration_s), 7);
    number(writer, "low_hz", low_hz, 1);
    number(writer, "high_hz", high_hz, 1);
    number(writer, "source_level_db", emission->level_db, 3);
    write_place(writer, scene_track_at(&emission->track, emission->start_s));
    text_append(&writer->text, "\"heard\":[");
    for (uint32_t i = 0; i < writer->scene->n_hydrophones; i++) {
        double start_s, last_s, exposure, peak;
        path_heard(&writer->sea, emission, i, &start_s, &last_s);
        measure(writer, emission, i, start_s + edge_s, last_s - edge_s, &exposure, &peak);
        text_append(&writer->text, i > 0 ? ",{" : "{");
        number(writer, "channel", i + 1, 0);
        number(writer, "start_s", start_s, 7);
        number(writer, "end_s", fmin(end_s, writer->scene->duration_s) + start_s - emission->start_s, 7);
        number(writer, "spl_db", units_spl_db(exposure / (last_s - start_s - 2 * edge_s)), 3);
        close_object(writer);
    }
    text_append(&writer->text, "]}");
    hand_on(writer);
}

static void write_emission(struct writer *writer, const struct emission *emission)
{
    double low_hz, high_hz;
    sound_band(&emission->sound, &low_hz, &high_hz);
    text_append(&writer->text, "{");
    number(writer, "source", emission->source, 0);
    number(writer, "member", emission->member, 0);
    text_format(&writer->text, "\"number\":%" PRIu64 ",", emission->number);
    const struct scene_kind *kind = kind_of(writer->scene, emission);
    if (kind)
        text_format(&writer->text, "\"%s\":\"%s\",\"group\":\"%s\",\"class\":\"%s\",",
                    emission->kind == EMISSION_CALL ? "voice" : "kind", kind->name, group_text(kind->group),
                    kind->class);
    else
        text_format(&writer->text, "\"class\":\"%s\",",
                    emission->kind == EMISSION_BLOW   ? "hammer blow"
                    : emission->kind == EMISSION_SHOT ? "airgun shot"
                                                      : "echosounder ping");
    number(writer, "start_s", emission->start_s, 7);
    number(writer, "end_s", emission->start_s + emission_length_s(emission), 7);
    number(writer, "low_hz", low_hz, 1);
    number(writer, "high_hz", high_hz, 1);
    bool energy = kind ? kind->level == LEVEL_ENERGY
                       : emission->kind == EMISSION_BLOW || emission->kind == EMISSION_SHOT;
    number(writer, energy ? "source_energy_level_db" : "source_level_db", emission->level_db, 3);
    write_place(writer, scene_track_at(&emission->track, emission->start_s));
    write_ratio_kind(writer, kind);
    write_pulses(writer, emission);
    write_all_heard(writer, emission);
    close_object(writer);
    hand_on(writer);
}

/* Its pieces begin before the emitter's end, and the last goes on for its whole length. */
static double lasting_end_s(const struct scene *scene, const struct emission *emission)
{
    const struct scene_emitter *emitter = emission->kind == EMISSION_CALL
                                              ? &scene->animals[emission->source - 1]
                                              : &scene->emitters[emission->source - 1];
    double spacing_s = emitter->kind->min_spacing_s, asked_s = emitter->end_s - emission->start_s;
    return emission->start_s + spacing_s * fmax(1, ceil(asked_s / spacing_s)) - spacing_s +
           emission->sound.length_s;
}

/* All emissions of one kind, source by source. */
static void write_kind(struct writer *writer, const char *key, enum emission_kind kind,
                       struct schedule *schedules, uint32_t n)
{
    bool first = true;
    text_format(&writer->text, ",\n\"%s\":[", key);
    for (uint32_t i = 0; i < n; i++) {
        if (schedules[i].kind != kind)
            continue;
        while (writer->status == STATUS_OK && schedule_next(&schedules[i], writer->emission)) {
            text_append(&writer->text, first ? "\n" : ",\n");
            first = false;
            const struct scene_kind *what = kind_of(writer->scene, writer->emission);
            if (what && what->lasts) {
                write_lasting(writer, writer->emission, lasting_end_s(writer->scene, writer->emission));
                break;
            }
            write_emission(writer, writer->emission);
        }
    }
    text_append(&writer->text, "]");
    hand_on(writer);
}

static void write_snaps(struct writer *writer, struct schedule *schedules, uint32_t n)
{
    uint64_t snaps = 0;
    for (uint32_t i = 0; i < n; i++)
        while (schedules[i].kind == EMISSION_SNAP && schedule_next(&schedules[i], writer->emission))
            snaps++;
    text_format(&writer->text, ",\n\"snaps\":%" PRIu64 "}\n", snaps);
    hand_on(writer);
}

static void write_head(struct writer *writer)
{
    const struct scene *scene = writer->scene;
    text_format(&writer->text, "{\"seed\":%" PRIu64 ",", scene->seed);
    number(writer, "rate_hz", scene->rate_hz, 3);
    number(writer, "duration_s", scene->duration_s, 6);
    number(writer, "sound_speed_m_s", writer->sea.speed_m_s, 4);
    text_append(&writer->text, "\n\"hydrophones\":[");
    for (uint32_t i = 0; i < scene->n_hydrophones; i++) {
        text_append(&writer->text, i > 0 ? ",{" : "{");
        number(writer, "channel", i + 1, 0);
        number(writer, "pascals_at_full_scale", calibration_pa_per_unit(&scene->hydrophones[i].calibration),
               6);
        write_place(writer, scene->hydrophones[i].place);
        close_object(writer);
    }
    text_append(&writer->text, "]");
    hand_on(writer);
}

enum status truth_write(const struct scene *scene, const struct truth_sink *sink)
{
    char problem[SCENE_TEXT_SIZE];
    if (scene_check(scene, 0, problem) != STATUS_OK)
        return STATUS_BAD_ARGUMENT;
    uint32_t n = schedule_count(scene);
    struct schedule *schedules = calloc(n ? n : 1, sizeof *schedules);
    struct writer writer = {.scene = scene,
                            .sea = path_sea_of(scene),
                            .sink = *sink,
                            .emission = calloc(1, sizeof *writer.emission),
                            .chunk = calloc(CHUNK, sizeof *writer.chunk)};
    if (!schedules || !writer.emission || !writer.chunk)
        writer.status = STATUS_NO_MEMORY;
    if (writer.status == STATUS_OK) {
        schedule_list(scene, schedules);
        write_head(&writer);
        write_kind(&writer, "calls", EMISSION_CALL, schedules, n);
        write_kind(&writer, "sounds", EMISSION_SOUND, schedules, n);
        write_kind(&writer, "blows", EMISSION_BLOW, schedules, n);
        write_kind(&writer, "shots", EMISSION_SHOT, schedules, n);
        write_kind(&writer, "pings", EMISSION_PING, schedules, n);
        write_snaps(&writer, schedules, n);
    }
    free(schedules);
    free(writer.emission);
    free(writer.chunk);
    text_destroy(&writer.text);
    return writer.status;
}
