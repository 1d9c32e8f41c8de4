/* What an entry says, in words; see explanation_words.h. */
#include "explanation_words.h"
#include <stddef.h>
#include <string.h>

/* {key}: what the body says there, "?" where it says nothing; {key%.1f}: as a number of that form. A part in
 * square brackets is left out where any value in it is missing. */
static const struct {
    const char *kind, *sentence;
} words[] = {
    {"run", "a run begins ({command}), nothing was heard from {outage_start_s%.1f} to {outage_end_s%.1f} s"},
    {"permit",
     "permit {permit}: {title}[, {document}][, {revision}][, {year}][, ended {ended}][, SHA-256 {sha256}]"},
    {"note", "note: {note}[ by {person}][, {watch} watch][ at {station}][: {source_state}][: {answer}]"
             "[: {verdict}][, contact {contact}][, {group}][, job {job}][, at {distance_m%.0f} m]"
             "[, about {advice}][, about {impulse}][, \"{text}\"]"},
    {"call",
     "heard: {class} ({group}), {form}, on stream {stream}, channel {channel}, evidence {evidence%.1f}"
     "[, {level_db%.1f} dB]"},
    {"impulse", "impulse, whose: {whose}[, job {job}][, SEL {sel_db%.1f} dB][, peak {peak_db%.1f} dB]"
                "[, at {range_m%.0f} m]"},
    {"contact",
     "contact {contact}, {group}[, to {grade}], {state}, calls: {n_calls}"
     "[, at {distance_p05_m%.0f} to {distance_p95_m%.0f} m][, inside with probability {p_inside%.2f}]"},
    {"phase", "phase {phase}[: {reason}][, job {job}]"},
    {"advice", "{station} is told: {advice}[, because {reason}][; until {until} at the earliest]"
               "[; needs {requires}][, job {job}]"},
    {"finding", "finding: {code}[, {detail}] ({grade})[, job {job}]"},
    {"correction", "impulses are {whose}, not what their entries say"},
    {"unheard",
     "not heard: {cause}, from {start_s%.1f} to {end_s%.1f} s, stream {stream}, channel {channel}"},
    {"exposure", "{criterion}: received[ {level_db%.1f} dB][, value {value_db%.1f} dB][, job {job}]"},
    {"source", "the source as heard: {model}[, job {job}][, SEL {sel_db%.1f} dB][, SPL {spl_db%.1f} dB]"},
    {"position", "position of the {whose}: {latitude_deg%.6f}, {longitude_deg%.6f}"},
    {"health", "{health}"},
    {"sound", "sound kept: {reason}, stream {stream}, channel {channel}, {start_s%.1f} to {end_s%.1f} s"},
};

static void append_key(const char **at, bool required, struct text *sql)
{
    const char *key = *at + 1, *end = strchr(key, '}');
    size_t length = strcspn(key, "%}");
    struct text name = {0};
    text_format(&name, "json_extract(body, '$.%.*s')", (int)length, key);
    if (key[length] == '%')
        text_format(sql, "iif(%s IS NULL, %s, printf('%.*s', %s))", name.data ? name.data : "NULL",
                    required ? "'?'" : "NULL", (int)((size_t)(end - key) - length), key + length,
                    name.data ? name.data : "NULL");
    else
        text_format(sql, required ? "coalesce(%s, '?')" : "nullif(%s, '')", name.data ? name.data : "NULL");
    text_destroy(&name);
    *at = end + 1;
}

void explanation_words(const char *kind, struct text *sql)
{
    bool optional = false;
    const char *at = "";
    for (size_t i = 0; i < sizeof words / sizeof words[0]; i++)
        if (strcmp(words[i].kind, kind) == 0)
            at = words[i].sentence;
    text_append(sql, "''");
    while (*at) {
        size_t length = strcspn(at, "{[]");
        if (length > 0)
            text_format(sql, " || '%.*s'", (int)length, at);
        at += length;
        if (*at == '{') {
            text_append(sql, " || ");
            append_key(&at, !optional, sql);
        } else if (*at) {
            optional = *at == '[';
            text_append(sql, optional ? " || coalesce(''" : ", '')");
            at++;
        }
    }
}
