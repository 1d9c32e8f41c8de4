/* The schema's text. `group` and `check` are quoted because they are words of SQL; `run` is the number before
 * an id's first point, which is what CAST takes of it. */
#include "record/views.h"
#include <string.h>

#define COLUMN(name) ", json_extract(body, '$." name "') AS " name
#define COLUMN_GROUP ", json_extract(body, '$.group') AS \"group\""
#define COLUMN_CHECK ", json_extract(body, '$.check') AS \"check\""
#define VIEW(kind, columns)                                                                                  \
    {                                                                                                        \
        "view", kind,                                                                                        \
            "CREATE VIEW " kind " AS SELECT seq, CAST(json_extract(body, '$.id') AS INTEGER) AS run, utc, "  \
            "json_extract(body, '$.id') AS id" columns " FROM entry WHERE kind = '" kind "'"                 \
    }
/* The i-th second of a minute's entry. */
#define SECOND(name) ", json_extract(body, '$." name "[' || second.key || ']') AS " name

/* A member of an object in the body, as OBJECT_MEMBER. */
#define INNER(object, name) ", json_extract(body, '$." object "." name "') AS " object "_" name

/* clang-format off */
const struct schema_object views_schema[] = {
    {"table", "entry",
     "CREATE TABLE entry(seq INTEGER PRIMARY KEY, utc TEXT, kind TEXT, body TEXT, hash TEXT)"},
    {"index", "entry_kind", "CREATE INDEX entry_kind ON entry(kind)"},
    {"index", "entry_id", "CREATE INDEX entry_id ON entry(" VIEWS_ID_SQL ")"},
    VIEW("run",
        COLUMN("site") COLUMN("command") COLUMN("watch_zero_utc") COLUMN("watch_start_s")
        COLUMN("outage_start_s") COLUMN("outage_end_s") COLUMN("start_from") COLUMN("input") COLUMN("permit")
        COLUMN("settings") COLUMN("version") COLUMN("build") COLUMN("cpu")),
    VIEW("permit",
        COLUMN("permit") COLUMN("title") COLUMN("document") COLUMN("revision") COLUMN("document_sha256")
        COLUMN("ended") COLUMN("year") COLUMN("demonstration")
        COLUMN("sha256") COLUMN("text") ", json_extract(body, '$.values') AS \"values\""),
    VIEW("job", COLUMN("job") COLUMN("state") COLUMN("causes")),
    VIEW("source",
        COLUMN("stream") COLUMN("channel") COLUMN("job") COLUMN("n_impulses") COLUMN("range_m") COLUMN("sel_db")
        COLUMN("peak_db") COLUMN("at_750_m_db") COLUMN("at_750_m_low_db") COLUMN("at_750_m_high_db")
        COLUMN("back_db") COLUMN("back_low_db") COLUMN("back_high_db") COLUMN("model") COLUMN("n_db")
        COLUMN("reason") COLUMN("quieting_on") COLUMN("insertion_db") COLUMN("insertion_low_db")
        COLUMN("insertion_high_db") COLUMN("insertion_bands_db") COLUMN("insertion_bands_low_db")
        COLUMN("insertion_bands_high_db") COLUMN("reductions") COLUMN("n_quieting_off") COLUMN("n_quieting_on")
        COLUMN("quieting_falls_db") COLUMN("warning") COLUMN("n_clipped") COLUMN("n_overlapped")
        COLUMN("n_weak") COLUMN("n_other") COLUMN("n_unknown") COLUMN("n_relative") COLUMN("n_refused")
        COLUMN("n_low_db") COLUMN("n_high_db") COLUMN("fitted") COLUMN("range_low_m") COLUMN("range_high_m")
        COLUMN("n_seconds") COLUMN("spl_db")),
    VIEW("call",
        COLUMN("stream") COLUMN("channel") COLUMN("class") COLUMN_GROUP COLUMN("form") COLUMN("start_s")
        COLUMN("end_s") COLUMN("low_hz") COLUMN("high_hz") COLUMN("n_pulses") COLUMN("interval_s")
        COLUMN("snr_db") COLUMN("level_db") COLUMN("relative") COLUMN("bearing_deg") COLUMN("mirror_deg")
        COLUMN("bearing_from") COLUMN("certainty") COLUMN("evidence") COLUMN("n_sounds") COLUMN("against")),
    VIEW("impulse",
        COLUMN("stream") COLUMN("channel") COLUMN("job") COLUMN("time_s") COLUMN("sel_db") COLUMN("peak_db")
        COLUMN("peak_to_peak_db") COLUMN("rms90_db") COLUMN("t90_s") COLUMN("background_db") COLUMN("whose")
        COLUMN("relative") COLUMN("clipped") COLUMN("overlapped") COLUMN("weak") COLUMN("effective_s")
        COLUMN("kurtosis") COLUMN("window_s") COLUMN("positive_impulse_pa_s") COLUMN("bands")
        COLUMN("refused") COLUMN("beside") COLUMN("range_m") COLUMN("range_from")),
    VIEW("correction",
        COLUMN("stream") COLUMN("channel") COLUMN("job") COLUMN("whose") COLUMN("impulses") COLUMN("causes")),
    /* No kind: what the impulses of a job come to. */
    {"view", "impulse_count",
     "CREATE VIEW impulse_count AS SELECT stream, job, whose, COUNT(*) AS impulses, MIN(time_s) AS first_s, "
     "MAX(time_s) AS last_s, CASE WHEN MAX(time_s) > MIN(time_s) THEN ROUND(60.0 * (COUNT(*) - 1) / "
     "(MAX(time_s) - MIN(time_s)), 2) END AS per_minute, SUM(clipped) AS clipped, "
     "SUM(overlapped) AS overlapped, SUM(weak) AS weak FROM impulse WHERE beside IS NOT 1 "
     "GROUP BY stream, job, whose"},
    {"view", "level",
     "CREATE VIEW level AS SELECT seq, CAST(json_extract(body, '$.id') AS INTEGER) AS run, utc, "
     "json_extract(body, '$.id') AS id" COLUMN("stream") COLUMN("channel") ", second.value AS start_s"
     SECOND("seconds") SECOND("spl_db") SECOND("peak_db") COLUMN("relative") SECOND("bands")
     SECOND("sel_db") SECOND("fast_max_db") SECOND("slow_max_db")
     INNER("minute", "l05_db") INNER("minute", "l50_db") INNER("minute", "l95_db") INNER("minute", "mean_db")
     INNER("minute", "sel_db") INNER("hour", "l05_db") INNER("hour", "l50_db") INNER("hour", "l95_db")
     INNER("hour", "mean_db") INNER("hour", "seconds") INNER("research", "kurtosis")
     INNER("research", "window_s") INNER("research", "low_hz") INNER("research", "high_hz")
     INNER("research", "adjusted_sel_db")
     " FROM entry, json_each(body, '$.start_s') AS second WHERE kind = 'level'"},
    VIEW("exposure",
        COLUMN("stream") COLUMN("channel") COLUMN("job") COLUMN("criteria") COLUMN("criterion") COLUMN("metric")
        COLUMN("weighting") COLUMN("window") COLUMN("reference") COLUMN("value_db") COLUMN("level_db")
        COLUMN("at_750_m_db") COLUMN("distance_m") COLUMN("distance_low_m") COLUMN("distance_high_m")
        COLUMN("n") COLUMN("reached") COLUMN("impulses_left") COLUMN("start_s") COLUMN("unverified")
        COLUMN("effect") COLUMN("limit_range_m") COLUMN("value_pa_s") COLUMN("level_pa_s") COLUMN("distance")
        COLUMN("n_clipped") COLUMN("n_quiet") COLUMN("n_unweighted") COLUMN("n_without_range")
        COLUMN("together_m") COLUMN("together_low_m") COLUMN("together_high_m") COLUMN("together_middle_m")
        COLUMN("together_bearing_deg") COLUMN("together") COLUMN("islands")),
    VIEW("contact",
        COLUMN("contact") COLUMN_GROUP COLUMN("grade") COLUMN("state") COLUMN("n_calls")
        COLUMN("distance_p05_m") COLUMN("distance_p50_m") COLUMN("distance_p95_m") COLUMN("bearing_deg")
        COLUMN("mirror_deg") COLUMN("bearing_from") COLUMN("p_inside") COLUMN("n_taken_back")
        COLUMN("against")),
    VIEW("phase", COLUMN("phase") COLUMN("reason") COLUMN("clause") COLUMN("job") COLUMN("causes")),
    VIEW("advice",
        COLUMN("advice") COLUMN("reason") COLUMN("clause") COLUMN("station") COLUMN("until")
        COLUMN("requires") COLUMN("confirmed") COLUMN("job") COLUMN("causes")),
    VIEW("finding",
        COLUMN("code") COLUMN("clause") COLUMN("job") COLUMN("basis") COLUMN("grade") COLUMN("detail") COLUMN("causes")),
    VIEW("note",
        COLUMN("note") COLUMN("person") COLUMN("watch") COLUMN("station") COLUMN("occurred_s")
        COLUMN("known_s") COLUMN("contact") COLUMN_GROUP COLUMN("species") COLUMN("number") COLUMN("calf")
        COLUMN("distance_m") COLUMN("bearing_deg") COLUMN("leaving") COLUMN("verdict") COLUMN("advice")
        COLUMN("answer") COLUMN("impulse") COLUMN("job") COLUMN("source_state") COLUMN("sea_state") COLUMN("visibility_m")
        COLUMN("text") COLUMN("latitude_deg") COLUMN("longitude_deg") COLUMN("depth_m")
        COLUMN("minutes") COLUMN("energy_kj") COLUMN("elements") COLUMN("reason")
        COLUMN("job_kind") COLUMN("leg") COLUMN("hammer") COLUMN("sequence") COLUMN("blows")
        COLUMN("first_point") COLUMN("last_point") COLUMN("charge_kg") COLUMN("donor_kg") COLUMN("refusal") COLUMN("planned_s") COLUMN("finding")
        COLUMN("restrike") COLUMN("account") COLUMN("rank") COLUMN_CHECK COLUMN("cable_m")
        COLUMN("hydrophone_depth_m") COLUMN("offset_m")
        COLUMN("number_low") COLUMN("number_high") COLUMN("calves") COLUMN("certainty")
        COLUMN("behaviour") COLUMN("in_zone_s") COLUMN("out_zone_s") COLUMN("closest_m") COLUMN("sighting")
        COLUMN("mark") COLUMN("corrects")),
    VIEW("unheard",
        COLUMN("stream") COLUMN("channel") COLUMN("low_hz") COLUMN("high_hz") COLUMN("start_s")
        COLUMN("end_s") COLUMN("cause")),
    VIEW("health", COLUMN("stream") COLUMN("ok") COLUMN("health")),
    VIEW("calibration",
        COLUMN("stream") COLUMN("channel") COLUMN("name") COLUMN("serial") COLUMN("role") COLUMN("known")
        COLUMN("sensitivity_db") COLUMN("gain_db") COLUMN("full_scale_v") COLUMN("self_noise_db")
        COLUMN("clip_db") COLUMN("rate_hz") COLUMN("x_m") COLUMN("y_m") COLUMN("z_m") COLUMN("what")
        COLUMN("sensitivity_points") COLUMN("expected_peak_db") COLUMN("certificate_date") COLUMN("due_date")
        COLUMN("tone_hz") COLUMN("tone_db") COLUMN("measured_db") COLUMN("difference_db") COLUMN("change_db")
        COLUMN("seconds") COLUMN("input")),
    VIEW("clock",
        COLUMN("stream") COLUMN("anchor_frame") COLUMN("anchor_s") COLUMN("rate_hz") COLUMN("watch_zero_utc")
        COLUMN("offset_s") COLUMN("source") COLUMN("reason")),
    VIEW("position",
        COLUMN("latitude_deg") COLUMN("longitude_deg") COLUMN("heading_deg") COLUMN("course_deg")
        COLUMN("speed_m_s") COLUMN("source") COLUMN("whose") COLUMN("accuracy_m") COLUMN("occurred_s")),
    VIEW("sound",
        COLUMN("stream") COLUMN("channel") COLUMN("reason") COLUMN("start_s") COLUMN("end_s") COLUMN("low_hz")
        COLUMN("high_hz") COLUMN("rate_hz") COLUMN("missing_s") COLUMN("file") COLUMN("bytes") COLUMN("sha256")
        COLUMN("causes")),
    VIEW("stamp", COLUMN("first") COLUMN("last") COLUMN("text") COLUMN("signature") COLUMN("key")),
};
/* clang-format on */

const size_t views_count = sizeof views_schema / sizeof views_schema[0];

int views_has_kind(const char *kind)
{
    for (size_t i = 0; i < views_count; i++)
        if (strcmp(views_schema[i].type, "view") == 0 && strcmp(views_schema[i].name, kind) == 0 &&
            strstr(views_schema[i].sql, " FROM entry")) /* others are made of views */
            return 1;
    return 0;
}
