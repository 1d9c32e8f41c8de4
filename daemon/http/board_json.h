/* The board's texts: JSON objects of the views (docs/http.md says every field). */
#ifndef HTTP_BOARD_JSON_H
#define HTTP_BOARD_JSON_H

#include "base/text.h"
#include "http/board.h"

/* One field of an object: the comma before it, where one is needed, and its name. */
void json_name(struct text *text, const char *name);
void json_text(struct text *text, const char *name, const char *value);
void json_number(struct text *text, const char *name, double value, int decimals);
void json_time(struct text *text, const char *name, int64_t watch_ns); /* seconds; null when negative */
void json_flag(struct text *text, const char *name, bool value);
/* Before an element of an array. */
void json_next(struct text *text);

/* The site, the permit with its zones and the marks of its values, stations, words that a page may send. */
void board_json_fixed(struct text *text, const struct board_setup *setup);
/* "phase":..., "advice":[...]: what a crew must see without delay. */
void board_json_urgent(struct text *text, const struct watch_view *watch, const struct hearing_view *hearing);
/* "timers", "people", "contacts". */
void board_json_watch(struct text *text, const struct watch_view *watch);
/* "streams", "levels", "calls", "impulses", "unheard", "recording", "faults". */
void board_json_hearing(struct text *text, const struct hearing_view *hearing);
/* "sounds": what else was heard, counted up to a watch time. */
void board_json_sounds(struct text *text, const struct hearing_view *hearing, int64_t watch_ns);

/* "marks", "clips". */
void board_json_marks(struct text *text, const struct hearing_view *hearing);

/* "curve", "exposures", "sources": what the source's sound adds up to. */
void board_json_sums(struct text *text, const struct hearing_view *hearing);

#endif
