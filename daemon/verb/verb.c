/* The table of verbs. */
#include "verb/verb.h"
#include <stddef.h>

const struct verb verbs[] = {
    {"scan", "listen to recordings and write a ledger", verb_scan},
    {"verify", "check that a ledger is as it was written", verb_verify},
    {"rerun", "derive a ledger's conclusions again and compare them", verb_rerun},
    {"explain", "say which entries, clauses and values are behind an entry", verb_explain},
    {"review", "serve the review page of a ledger", verb_review},
    {"render", "render a scene to a WAV file and its truth to JSON", verb_render},
    {"report", "write one printable page about a watch, from its ledger alone", verb_report},
    {"user", "list, add and remove who may use the pages from other machines", verb_user},
    {"fieldcheck", "check a hydrophone against a tone of known level", verb_fieldcheck},
    {NULL, NULL, NULL},
};
