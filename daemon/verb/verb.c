/* The table of verbs. */
#include "verb/verb.h"
#include <stddef.h>

const struct verb verbs[] = {
    {"scan", "listen to recordings and write a ledger", verb_scan},
    {"verify", "check that a ledger is as it was written", verb_verify},
    {"render", "render a scene to a WAV file and its truth to JSON", verb_render},
    {"report", "write one printable page about a watch, from its ledger alone", verb_report},
    {"fieldcheck", "check a hydrophone against a tone of known level", verb_fieldcheck},
    {NULL, NULL, NULL},
};
