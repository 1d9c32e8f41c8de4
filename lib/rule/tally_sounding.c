/* When the source sounded, as the crew said; see tally_sounding.h. */
#include "rule/tally_sounding.h"
#include <string.h>

static bool is_on(uint32_t n)
{
    return n % 2 == 1;
}

void tally_sounding_take(struct tally_sounding *sounding, const struct note *note, int64_t known_ns)
{
    bool on = strcmp(note->source_state, "off") != 0 && strcmp(note->source_state, "stopped") != 0;
    if (on == is_on(sounding->n))
        return;
    sounding->changed_ns[sounding->n++ % TALLY_SOUNDING_KEPT] = known_ns;
}

bool tally_sounding_in(const struct tally_sounding *sounding, int64_t start_ns, int64_t end_ns)
{
    uint32_t first = sounding->n > TALLY_SOUNDING_KEPT ? sounding->n - TALLY_SOUNDING_KEPT : 0;
    for (uint32_t k = sounding->n; k > first; k--) {
        int64_t changed_ns = sounding->changed_ns[(k - 1) % TALLY_SOUNDING_KEPT];
        if (is_on(k) && changed_ns < end_ns)
            return true;
        if (changed_ns <= start_ns)
            return false;
    }
    return is_on(first);
}
