/* Fuzzes the reading of bodies: whatever stands in a ledger, entry_event refuses it or gives an event whose
 * own body reads back as the same event. */
#include "record/entry.h"
#include "base/text.h"
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static const char *const kinds[] = {"run", "unheard", "impulse", "call", "note", "level", "phase"};
    if (size < 1)
        return 0;
    char *body = malloc(size);
    memcpy(body, data + 1, size - 1);
    body[size - 1] = '\0';
    struct event event;
    const char *kind = kinds[data[0] % (sizeof kinds / sizeof kinds[0])];
    if (entry_event(kind, body, 123456000, &event) == STATUS_OK) {
        struct text text = {0}, again = {0};
        struct outcome outcome = {.kind = OUTCOME_EVENT,
                                  .run = event.run,
                                  .stream = event.stream,
                                  .counter = event.counter,
                                  .watch_ns = event.known_ns};
        outcome.as.event = event;
        if (entry_body(&outcome, 0, &text) == STATUS_OK && event.kind != EVENT_RUN) {
            if (entry_event(kind, text.data, 123456000, &outcome.as.event) != STATUS_OK)
                abort();
            if (entry_body(&outcome, 0, &again) != STATUS_OK || strcmp(text.data, again.data) != 0)
                abort();
        }
        text_destroy(&text);
        text_destroy(&again);
    }
    free(body);
    return 0;
}
