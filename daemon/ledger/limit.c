/* What keeps a reader from taking long: a deadline, and finding a time without reading what lies before. */
#include "clock.h"
#include "ledger/handle.h"
#include "ledger/ledger.h"
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define STEPS_A_LOOK 2000 /* of SQLite's virtual machine between two looks at the clock: well under 1 ms */

static int look(void *context)
{
    const struct ledger *ledger = context;
    return (ledger->stop && atomic_load(ledger->stop)) ||
           (ledger->deadline_ns > 0 && clock_monotonic_ns() > ledger->deadline_ns);
}

void ledger_set_deadline(struct ledger *ledger, int64_t deadline_ns, const atomic_bool *stop)
{
    ledger->deadline_ns = deadline_ns;
    ledger->stop = stop;
    sqlite3_progress_handler(ledger->db, deadline_ns > 0 || stop ? STEPS_A_LOOK : 0, look, ledger);
}

enum status ledger_get_version(struct ledger *ledger, int64_t *out)
{
    return handle_status(handle_integer(ledger->db, "PRAGMA data_version", out));
}

struct found {
    int64_t seq;
    bool is_before;
};

static enum status take_found(void *context, int n, const char *const *columns)
{
    struct found *found = context;
    (void)n;
    found->seq = columns[0] ? strtoll(columns[0], NULL, 10) : 0;
    found->is_before = columns[1] && *columns[1] == '1';
    return STATUS_OK;
}

enum status ledger_find_time(struct ledger *ledger, const char *utc, int64_t *out_seq)
{
    struct ledger_tail tail;
    char middle[24];
    const char *parameters[] = {middle, utc};
    enum status status = ledger_get_tail(ledger, &tail);
    int64_t low = 1, high = tail.seq + 1; /* the answer is from low to high */
    while (status == STATUS_OK && low < high) {
        struct found found = {high, false};
        snprintf(middle, sizeof middle, "%" PRId64, low + (high - low) / 2);
        status =
            ledger_select(ledger, "SELECT seq, utc < ?2 FROM entry WHERE seq >= ?1 + 0 ORDER BY seq LIMIT 1",
                          2, parameters, take_found, &found);
        if (found.is_before)
            low = found.seq + 1;
        else
            high = low + (high - low) / 2;
    }
    if (status == STATUS_OK)
        *out_seq = low;
    return status;
}
