/* Strips of sound as JSON. */
#include "http/sound.h"
#include "base/time.h"
#include "http/board_json.h"
#include <sodium.h>
#include <stdlib.h>

struct answer {
    int64_t times_ns[SOUND_MAX_COLUMNS];
    uint8_t levels[SOUND_MAX_COLUMNS * COLUMN_ROWS];
    char base64[sodium_base64_ENCODED_LEN(SOUND_MAX_COLUMNS * COLUMN_ROWS, sodium_base64_VARIANT_ORIGINAL)];
};

static void band_json(struct text *text, struct columns *columns, uint32_t stream, uint32_t band,
                      int64_t from_ns, int64_t to_ns, struct answer *answer)
{
    static const char *const names[COLUMN_BANDS] = {"low", "middle", "high"};
    double low_hz, high_hz;
    size_t n = columns_read(columns, stream, band, from_ns, to_ns, SOUND_MAX_COLUMNS, answer->times_ns,
                            answer->levels, &low_hz, &high_hz);
    if (n == 0)
        return;
    sodium_bin2base64(answer->base64, sizeof answer->base64, answer->levels, n * COLUMN_ROWS,
                      sodium_base64_VARIANT_ORIGINAL);
    json_next(text);
    text_append(text, "{");
    json_text(text, "band", names[band]);
    json_number(text, "low_hz", low_hz, 1);
    json_number(text, "high_hz", high_hz, 1);
    json_name(text, "times_s");
    text_append(text, "[");
    for (size_t i = 0; i < n; i++) {
        json_next(text);
        text_json_number(text, time_to_s(answer->times_ns[i]), 3);
    }
    text_append(text, "]");
    json_text(text, "levels", answer->base64);
    text_append(text, "}");
}

enum status sound_json(struct text *text, struct columns *columns, uint32_t stream, int64_t from_ns,
                       int64_t to_ns)
{
    struct answer *answer = malloc(sizeof *answer);
    if (!answer)
        return STATUS_NO_MEMORY;
    text_append(text, "{");
    json_number(text, "stream", stream, 0);
    json_number(text, "rows", COLUMN_ROWS, 0);
    json_number(text, "floor_db", COLUMN_FLOOR_DB, 1);
    json_number(text, "step_db", COLUMN_STEP_DB, 1);
    json_name(text, "bands");
    text_append(text, "[");
    for (uint32_t band = 0; band < COLUMN_BANDS; band++)
        band_json(text, columns, stream, band, from_ns, to_ns, answer);
    text_append(text, "]}");
    free(answer);
    return text->failed ? STATUS_NO_MEMORY : STATUS_OK;
}
