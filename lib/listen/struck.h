/* Tones that begin with an impulse: what the spectrum's window makes of a blow or shot and of what rings
 * after it, or a call that begins then by chance. Nobody can tell, so such a call raises no contact by
 * itself; it keeps one that is open alive. Of an animal's calls beside blows each 2 s that is one in ten. The
 * numbers are the project's own. */
#ifndef LISTEN_STRUCK_H
#define LISTEN_STRUCK_H

#include "call/catalogue.h"
#include "call/found.h"
#include <stdbool.h>

#define STRUCK_REMEMBERED 32
#define STRUCK_EVIDENCE 0.02 /* log-odds that such a call says */

/* Plain data; reset before use. */
struct struck {
    double rate_hz;
    uint32_t n; /* so far; a ring */
    double onset_frame[STRUCK_REMEMBERED];
};

void struck_reset(struct struck *struck, double rate_hz);
/* An impulse that was found. */
void struck_take(struct struck *struck, double onset_frame);
/* Whether this call of a tone class below 5 kHz, of at most 1.5 s, begins within its window, or 50 ms, of an
 * impulse's onset. */
bool struck_begins(const struct struck *struck, const struct call_class *call_class,
                   const struct found_call *found);

#endif
