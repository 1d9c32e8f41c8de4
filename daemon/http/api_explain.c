/* The chain of entries behind an entry, and the permit's values under their clauses. */
#include "base/text.h"
#include "explanation.h"
#include "http/board_json.h"
#include "http/request.h"
#include "http/routes.h"

struct explaining {
    struct text *text;
    bool has_permit;
};

static void add_entry(void *context, const struct explained *explained)
{
    struct text *text = ((struct explaining *)context)->text;
    json_next(text);
    text_append(text, "{");
    json_text(text, "id", explained->id);
    json_number(text, "level", explained->level, 0);
    json_flag(text, "found", explained->found);
    json_flag(text, "above", explained->above);
    if (explained->utc) {
        json_text(text, "utc", explained->utc);
        json_text(text, "kind", explained->kind);
        json_text(text, "words", explained->words);
        json_text(text, "clause", explained->clause);
        json_number(text, "n_behind", explained->n_behind, 0);
    }
    text_append(text, "}");
}

static void add_permit(void *context, const struct permit *permit)
{
    struct explaining *explaining = context;
    explaining->has_permit = true;
    text_append(explaining->text, "]");
    json_text(explaining->text, "permit", permit ? permit->title : "the ledger does not hold it");
    json_name(explaining->text, "values");
    text_append(explaining->text, "[");
}

static void add_value(void *context, const struct permit_value *value)
{
    struct text *text = ((struct explaining *)context)->text;
    json_next(text);
    text_append(text, "{");
    json_text(text, "key", value->key);
    json_text(text, "value", value->text);
    json_text(text, "mark", permit_mark_text(value->mark));
    json_text(text, "who", value->who);
    json_text(text, "source", value->source);
    text_append(text, "}");
}

static enum status ask(struct ledger *ledger, struct question *question)
{
    const struct review *review = (struct review *)question;
    struct explaining explaining = {.text = &question->text};
    const struct explanation_setup setup = {.ledger = ledger,
                                            .depth = (uint32_t)review->depth,
                                            .entry = add_entry,
                                            .permit = add_permit,
                                            .value = add_value,
                                            .context = &explaining};
    text_append(&question->text, "{\"entries\":[");
    enum status status = explanation_run(&setup, review->id);
    text_append(&question->text, "]}\n");
    return status;
}

enum MHD_Result api_explain(struct request *request)
{
    return review_put(request, ask);
}
