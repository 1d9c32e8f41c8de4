/* The endpoints: one line each, below for what the watch answers, or further down for what its ledger does,
 * also ashore. What follows a path that ends in a slash is the request's `rest`. A page or another embedded
 * file needs none (see routes.c). */
#ifndef HTTP_ROUTES_H
#define HTTP_ROUTES_H

#include "http/request.h"

#define HTTP_ROUTES(ROUTE)                                                                                   \
    ROUTE("GET", "/api/state", api_state)                                                                    \
    ROUTE("GET", "/api/permit", api_permit)                                                                  \
    ROUTE("GET", "/api/events", api_events)                                                                  \
    ROUTE("GET", "/api/sound", api_sound)                                                                    \
    ROUTE("GET", "/api/hear", api_hear)                                                                      \
    ROUTE("POST", "/api/note", api_note)                                                                     \
    ROUTE("GET", "/api/who", api_who)                                                                        \
    ROUTE("POST", "/api/sign-in", api_sign_in)                                                               \
    ROUTE("POST", "/api/sign-out", api_sign_out)

#define HTTP_LEDGER_ROUTES(ROUTE)                                                                            \
    ROUTE("GET", "/api/ledger", api_ledger)                                                                  \
    ROUTE("GET", "/api/entries", api_entries)                                                                \
    ROUTE("GET", "/api/survey", api_survey)                                                                  \
    ROUTE("GET", "/api/timeline", api_timeline)                                                              \
    ROUTE("GET", "/api/explain", api_explain)                                                                \
    ROUTE("GET", "/api/contacts", api_contacts)                                                              \
    ROUTE("GET", "/api/sample", api_sample)                                                                  \
    ROUTE("GET", "/clip/", api_hear_clip)                                                                    \
    ROUTE("GET", "/api/clip", api_clip)

#define HTTP_DECLARE(method, path, answer) enum MHD_Result answer(struct request *request);
HTTP_ROUTES(HTTP_DECLARE)
HTTP_LEDGER_ROUTES(HTTP_DECLARE)

#endif
