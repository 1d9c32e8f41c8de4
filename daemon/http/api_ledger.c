/* What the ledger is, and whether it is as it was written. */
#include "base/time.h"
#include "http/board_json.h"
#include "http/request.h"
#include "http/routes.h"
#include "ledger/checker.h"

static void faults_json(struct text *text, const struct checker_view *view)
{
    json_name(text, "faults");
    text_append(text, "[");
    for (uint32_t i = 0; i < view->n_faults; i++) {
        json_next(text);
        text_append(text, "{");
        json_number(text, "seq", (double)view->faults[i].seq, 0);
        json_text(text, "text", view->faults[i].sentence);
        text_append(text, "}");
    }
    text_append(text, "]");
}

/* The state in a sentence or two for people. */
static void words_json(struct text *text, const struct checker_view *view)
{
    struct text words = {0};
    char utc[TIME_UTC_SIZE];
    long long n = (long long)view->facts.n_entries;
    time_format_utc(view->checked_unix_ns, utc);
    if (view->state == CHECKER_CHECKING)
        text_format(&words, "CHECKING THE LEDGER: %lld entries so far.", n);
    else if (view->state == CHECKER_UNREADABLE)
        text_format(&words, "THE LEDGER CANNOT BE READ. %s", view->problem);
    else if (view->state == CHECKER_GOOD)
        text_format(
            &words,
            "LEDGER GOOD: entries 1 to %lld are as they were written. Checked %.10s %.8s UTC. Last hash, "
            "to compare with one noted elsewhere: %s",
            n, utc, utc + 11, view->facts.last_hash);
    else
        text_format(&words, "THE LEDGER IS NOT AS IT WAS WRITTEN: %llu faults.",
                    (unsigned long long)view->facts.n_faults);
    for (uint32_t i = 0; i < view->n_faults && i < 3; i++) {
        if (view->faults[i].seq > 0)
            text_format(&words, " Entry %lld:", (long long)view->faults[i].seq);
        text_format(&words, " %s.", view->faults[i].sentence);
    }
    json_text(text, "words", words.failed ? "THE LEDGER'S STATE IS NOT KNOWN" : words.data);
    text_destroy(&words);
}

enum MHD_Result api_ledger(struct request *request)
{
    static const char *const words[] = {"checking", "good", "faults", "unreadable"};
    struct checker_view view;
    struct text text = {0};
    if (!request->http->checker)
        return http_refuse(request->connection, MHD_HTTP_NOT_FOUND, "there is no ledger here", NULL, NULL);
    checker_get(request->http->checker, &view);
    text_append(&text, "{");
    json_text(&text, "file", request->http->ledger_name);
    json_flag(&text, "live", request->http->board != NULL);
    json_text(&text, "version", HUSHWATCH_VERSION);
    json_text(&text, "state", words[view.state]);
    json_text(&text, "problem", view.problem);
    json_number(&text, "n_checked", (double)view.facts.n_entries, 0);
    json_number(&text, "last_seq", (double)view.last_seq, 0);
    json_number(&text, "n_faults", (double)view.facts.n_faults, 0);
    json_text(&text, "first_utc", view.facts.first_utc);
    json_text(&text, "last_utc", view.facts.last_utc);
    json_text(&text, "last_hash", view.facts.last_hash);
    json_number(&text, "checked_unix_s", (double)view.checked_unix_ns / 1e9, 0);
    faults_json(&text, &view);
    words_json(&text, &view);
    text_append(&text, "}\n");
    enum MHD_Result result = text.failed ? MHD_NO
                                         : http_answer(request->connection, MHD_HTTP_OK, "application/json",
                                                       text.data, text.length);
    text_destroy(&text);
    return result;
}
