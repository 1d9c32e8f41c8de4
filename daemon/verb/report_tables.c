/* The sections of a report, each a query over the ledger's views. Durations are h:mm:ss; times are UTC. */
#include "verb/sheet.h"

/* SQL reads in its own lines. */
/* clang-format off */

/* A UTC text as people read it; the clock alone; seconds between two; seconds as h:mm:ss. */
#define WHEN(utc) "replace(substr(" utc ", 1, 19), 'T', ' ')"
#define CLOCK(utc) "substr(" utc ", 12, 8)"
#define BETWEEN(a, b) "((julianday(" b ") - julianday(" a ")) * 86400)"
#define WHOLE(s) "CAST(round(" s ") AS INTEGER)"
#define DURATION(s) "printf('%d:%02d:%02d', " WHOLE(s) " / 3600, " WHOLE(s) " / 60 % 60, " WHOLE(s) " % 60)"
/* printf makes 0 of NULL, so what is not known must be left out before it. */
#define KNOWN(format, x) "CASE WHEN " x " IS NOT NULL THEN printf('" format "', " x ") END"
/* A piece of a list of details; nothing where x is NULL. */
#define PIECE(x) "coalesce(" x " || ' ', '') || "
#define LAST_UTC "(SELECT utc FROM entry ORDER BY seq DESC LIMIT 1)"

/* Each run with its last time. */
#define RUNS \
    "runs AS (SELECT run.*, (SELECT e.utc FROM entry AS e WHERE e.seq < coalesce(" \
    "(SELECT min(n.seq) FROM run AS n WHERE n.seq > run.seq), 9e18) ORDER BY e.seq DESC LIMIT 1) AS end_utc" \
    " FROM run)"

/* Unheard pieces by the columns given; each counts from where all before it have ended, so that overlaps
 * count once. */
#define PIECES(columns) \
    "piece AS (SELECT " columns ", start_s, end_s, low_hz, high_hz, max(end_s) OVER (PARTITION BY " columns \
    " ORDER BY start_s, end_s ROWS BETWEEN UNBOUNDED PRECEDING AND 1 PRECEDING) AS covered_s FROM unheard)"
#define PIECES_S "sum(max(0, end_s - max(start_s, coalesce(covered_s, start_s))))"

static const char runs_sql[] =
    "WITH " RUNS
    " SELECT run, command, " WHEN("utc") ", " WHEN("end_utc") ", " DURATION(BETWEEN("utc", "end_utc")) ","
    " CASE WHEN outage_end_s > outage_start_s THEN " DURATION("outage_end_s - outage_start_s") " END,"
    " start_from, input FROM runs ORDER BY seq";

static const char people_sql[] =
    "SELECT person, watch, station, " WHEN("utc") ", coalesce(" WHEN("off_utc") ", 'still on at the end'), "
    DURATION(BETWEEN("utc", "coalesce(off_utc, " LAST_UTC ")"))
    " FROM (SELECT seq, person, watch, station, utc,"
    " (SELECT min(b.utc) FROM note AS b WHERE b.note = 'sign-off' AND b.person = a.person"
    " AND (b.watch IS NULL OR b.watch = a.watch) AND b.seq > a.seq) AS off_utc"
    " FROM note AS a WHERE a.note = 'sign-on') ORDER BY seq";

static const char heard_sql[] =
    "WITH " RUNS ", " PIECES("stream") ","
    " total AS (SELECT sum(" BETWEEN("utc", "end_utc") ") AS s FROM runs),"
    " lost AS (SELECT stream, " PIECES_S " AS s FROM piece GROUP BY stream),"
    " received AS (SELECT stream, max(s) AS s FROM (SELECT json_extract(body, '$.stream') AS stream,"
    " json_extract(body, '$.channel') AS channel, sum((SELECT sum(value) FROM json_each(body, '$.seconds'))) AS s"
    " FROM entry WHERE kind = 'level' GROUP BY 1, 2) GROUP BY stream),"
    " streams AS (SELECT stream FROM lost UNION SELECT stream FROM received)"
    " SELECT stream, " DURATION("total.s") ", " DURATION("coalesce(lost.s, 0)") ", "
    DURATION("max(0, total.s - coalesce(lost.s, 0))") ", " DURATION("coalesce(received.s, 0)")
    " FROM streams LEFT JOIN lost USING (stream) LEFT JOIN received USING (stream), total ORDER BY stream";

static const char unheard_sql[] =
    "WITH " PIECES("stream, channel, cause")
    " SELECT cause, stream, channel, printf('%.0f', min(low_hz)),"
    " CASE WHEN count(high_hz) < count(*) THEN 'no limit' ELSE printf('%.0f', max(high_hz)) END,"
    " count(*), " DURATION(PIECES_S)
    " FROM piece GROUP BY cause, stream, channel ORDER BY " PIECES_S " DESC, cause, stream, channel";

static const char advice_sql[] =
    "SELECT " WHEN("a.utc") ", a.station,"
    " a.advice || CASE WHEN a.confirmed OR a.station = 'observer' THEN '' ELSE ' (not yet confirmed)' END,"
    " a.reason, a.clause,"
    " trim(coalesce(" CLOCK("a.until") ", '') || coalesce(char(10) || a.requires, ''), char(10)),"
    " (SELECT group_concat(n.answer || ' by ' || coalesce(n.person, '?') || coalesce(', ' || n.station, '')"
    " || ' at ' || " CLOCK("n.utc") " || ', ' || printf('%.0f', " BETWEEN("a.utc", "n.utc") ") || ' s after'"
    " || coalesce(': ' || n.text, ''), char(10))"
    " FROM note AS n WHERE n.note = 'acknowledgement' AND n.advice = a.id)"
    " FROM advice AS a ORDER BY a.seq";

static const char phases_sql[] = "SELECT " WHEN("utc") ", phase, reason, clause, job FROM phase ORDER BY seq";

static const char contacts_sql[] =
    "SELECT c.contact, c.\"group\", s.grade, " WHEN("s.first_utc") ", " CLOCK("s.last_utc") ", c.state, s.n_calls,"
    " coalesce(" KNOWN("%.0f", "d.distance_p50_m") ", 'unknown'),"
    " " KNOWN("%.0f", "d.distance_p05_m") " || ' to ' || " KNOWN("%.0f", "d.distance_p95_m") ","
    " " KNOWN("%.2f", "d.p_inside")
    " FROM contact AS c JOIN (SELECT max(seq) AS last_seq, min(utc) AS first_utc, max(utc) AS last_utc,"
    " max(n_calls) AS n_calls, CASE max(CASE grade WHEN 'act' THEN 2 WHEN 'look' THEN 1 ELSE 0 END)"
    " WHEN 2 THEN 'act' WHEN 1 THEN 'look' ELSE '' END AS grade,"
    " max(CASE WHEN distance_p50_m IS NOT NULL THEN seq END) AS distance_seq FROM contact GROUP BY contact) AS s"
    " ON c.seq = s.last_seq LEFT JOIN contact AS d ON d.seq = s.distance_seq ORDER BY c.contact";

static const char notes_sql[] =
    "SELECT " WHEN("utc") ", note, person, trim("
    PIECE("watch || ' watch'") PIECE("'at ' || station") PIECE("answer") PIECE("advice") PIECE("source_state")
    PIECE("'job ' || job") PIECE("'contact ' || contact") PIECE("verdict") PIECE("\"group\"") PIECE("species")
    PIECE(KNOWN("%.0f animals", "number")) PIECE("CASE WHEN calf THEN 'with calf' END")
    PIECE(KNOWN("%.0f m from the source", "distance_m")) PIECE(KNOWN("bearing %.0f", "bearing_deg"))
    PIECE("CASE WHEN leaving THEN 'leaving' END") PIECE(KNOWN("sea state %g", "sea_state"))
    PIECE(KNOWN("visibility %.0f m", "visibility_m"))
    PIECE("CASE WHEN known_s - occurred_s >= 1 THEN printf('(%.0f s before)', known_s - occurred_s)"
          " WHEN occurred_s - known_s >= 1 THEN printf('(%.0f s ahead)', occurred_s - known_s) END")
    "coalesce(text, '')) FROM note ORDER BY seq";

static const char impulses_sql[] =
    "WITH ranked AS (SELECT *,"
    " row_number() OVER (PARTITION BY job, whose, stream, channel ORDER BY sel_db) AS i,"
    " count(*) OVER (PARTITION BY job, whose, stream, channel) AS n FROM impulse)"
    " SELECT coalesce(job, 'none open'), whose, stream, channel, count(*), printf('%.1f', max(sel_db)),"
    " printf('%.1f', avg(CASE WHEN i IN ((n + 1) / 2, (n + 2) / 2) THEN sel_db END)),"
    " printf('%.1f', max(peak_db)), " WHEN("min(utc)") ", " CLOCK("max(utc)") ","
    " trim(CASE WHEN max(relative) THEN 'relative ' ELSE '' END"
    " || CASE WHEN sum(clipped) THEN sum(clipped) || ' clipped ' ELSE '' END"
    " || CASE WHEN sum(overlapped) THEN sum(overlapped) || ' overlapped ' ELSE '' END"
    " || CASE WHEN sum(weak) THEN sum(weak) || ' weak' ELSE '' END)"
    " FROM ranked GROUP BY job, whose, stream, channel ORDER BY job, whose, stream, channel";

static const char findings_sql[] =
    "SELECT " WHEN("utc") ", grade, code, detail, clause, job FROM finding ORDER BY seq";

static const char health_sql[] =
    "SELECT " WHEN("utc") ", stream, health FROM health WHERE NOT ok ORDER BY seq";

static const char calibration_sql[] =
    "SELECT DISTINCT stream, name, channel, role, serial, CASE WHEN known THEN 'yes' ELSE 'NO: relative' END,"
    " CASE WHEN known THEN sensitivity_db END, CASE WHEN known THEN gain_db END,"
    " CASE WHEN known THEN full_scale_v END, CASE WHEN known THEN printf('%.1f', clip_db) END,"
    " CASE WHEN self_noise_db IS NOT NULL THEN printf('%.1f', self_noise_db) END, due_date"
    " FROM calibration WHERE what = 'stated' ORDER BY stream, channel";

static const char field_checks_sql[] =
    "SELECT " WHEN("utc") ", stream, channel, serial, tone_hz, tone_db, measured_db, printf('%+.2f', difference_db),"
    " CASE WHEN change_db IS NOT NULL THEN printf('%+.2f', change_db) END, seconds"
    " FROM calibration WHERE what = 'field check' ORDER BY seq";

static const char permit_sql[] =
    "SELECT min(run), permit, title, document, year,"
    " CASE WHEN demonstration THEN 'NO: a demonstration' ELSE 'yes' END,"
    " substr(sha256, 1, 32) || ' ' || substr(sha256, 33)"
    " FROM permit GROUP BY sha256, \"values\" ORDER BY min(seq)";

static const char values_sql[] =
    "SELECT p.run, json_extract(v.value, '$.key'), json_extract(v.value, '$.value'),"
    " json_extract(v.value, '$.mark'), json_extract(v.value, '$.source')"
    " FROM (SELECT \"values\", min(seq) AS first, min(run) AS run FROM permit GROUP BY sha256, \"values\") AS p,"
    " json_each(p.\"values\") AS v"
    " WHERE json_extract(v.value, '$.mark') <> 'read' ORDER BY p.first, v.key";

/* clang-format on */

const struct sheet_table report_tables[] = {
    {.title = "Runs",
     .remark = "One life of the program each. Between two runs nothing was heard: the outage.",
     .empty = "The ledger holds no run.",
     .heads = {"#run", "what", "@from", "@to", "#lasted", "#outage before", "start known from", "heard"},
     .sql = runs_sql},
    {.title = "Effort: who watched when",
     .remark = "From the sign-on to the sign-off as they were entered.",
     .empty = "Nobody signed on.",
     .heads = {"person", "watch", "station", "@from", "@to", "#time"},
     .sql = people_sql},
    {.title = "Effort: what was heard",
     .remark =
         "Heard without limit: the time of the runs less all time in which the stream could not hear on some "
         "channel or in some band. Sound received: what the level seconds of its best channel hold.",
     .empty = "No stream delivered sound.",
     .heads = {"#stream", "#time of the runs", "#unheard, in part or wholly", "#heard without limit",
               "#sound received"},
     .sql = heard_sql},
    {.title = "Unheard time by cause",
     .remark = "Pieces that overlap count once within a line. Channel 0 is all of the stream.",
     .empty = "None was recorded.",
     .heads = {"cause", "#stream", "#channel", "#from Hz", "#to Hz", "#pieces", "#time"},
     .sql = unheard_sql},
    {.title = "Advice and answers",
     .remark = "Who was advised what and when, and how they answered.",
     .empty = "No advice was given.",
     .heads = {"@UTC", "station", "advice", "why", "clause", "until", "answers"},
     .sql = advice_sql},
    {.title = "Phases",
     .empty = "No phase was recorded.",
     .heads = {"@UTC", "phase", "why", "clause", "job"},
     .sql = phases_sql},
    {.title = "Contacts",
     .remark =
         "As each stood at its last change; calls that changed nothing are not counted here. The grade is "
         "the strongest it had. Distances from the source: the median, and the range that holds nine of ten.",
     .empty = "There was no contact.",
     .heads = {"#contact", "group", "grade", "@from", "@last change", "then", "#calls", "#distance m",
               "#between m", "#P(inside)"},
     .sql = contacts_sql},
    {.title = "What people entered",
     .remark = "In the order in which the watch took it.",
     .empty = "Nothing was entered.",
     .heads = {"@UTC", "what", "person", "details"},
     .sql = notes_sql},
    {.title = "Impulses of the source and of others",
     .remark = "SEL in dB re 1 uPa2 s, peak in dB re 1 uPa; of a channel without calibration relative, in dB "
               "re full "
               "scale.",
     .empty = "No impulse was measured.",
     .heads = {"job", "whose", "#stream", "#channel", "#count", "#max SEL", "#median SEL", "#max peak",
               "@from", "@to", "marks"},
     .sql = impulses_sql},
    {.title = "Findings",
     .remark = "Departures from the permit that the sound or the entries show.",
     .empty = "None.",
     .heads = {"@UTC", "grade", "code", "what", "clause", "job"},
     .sql = findings_sql},
    {.title = "Health",
     .remark = "What was not well.",
     .empty = "Nothing was reported.",
     .heads = {"@UTC", "#stream", "what"},
     .sql = health_sql},
    {.title = "Calibration",
     .empty = "No calibration was recorded: every level is relative.",
     .heads = {"#stream", "name", "#channel", "role", "serial", "known", "#sensitivity dB re 1 V/uPa",
               "#gain dB", "#full scale V", "#clips at dB re 1 uPa", "#self-noise dB re 1 uPa", "due"},
     .sql = calibration_sql},
    {.title = "Field checks",
     .remark = "A tone of known level, as each hydrophone heard it with its stated sensitivity; dB re 1 uPa.",
     .empty = "None.",
     .heads = {"@UTC", "#stream", "#channel", "serial", "#tone Hz", "#given dB", "#measured dB",
               "#difference dB", "#change since the last", "#seconds"},
     .sql = field_checks_sql},
    {.title = "Permit",
     .remark = "One that changed in mid-survey stands here too, and holds from the run on that is named.",
     .empty = "The ledger holds no permit.",
     .heads = {"#from run", "permit", "title", "document", "#year", "for work", "SHA-256 of its text"},
     .sql = permit_sql},
    {.title = "Values of the permit that nobody has checked against the document",
     .remark = "They are to be checked before the permit is relied on.",
     .empty = "None: every value is marked as read in the document.",
     .heads = {"#from run", "value", "is", "known from", "source"},
     .sql = values_sql},
    {0},
};
