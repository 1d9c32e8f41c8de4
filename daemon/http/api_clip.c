/* Whether the file of a sound that was kept is there, and is the one of the ledger. Heard is it by /clip/ID.
 */
#include "http/board_json.h"
#include "http/request.h"
#include "http/routes.h"
#include "record/views.h"
#include <fcntl.h>
#include <sodium.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define PATH_SIZE 4096

struct kept_file {
    bool found;
    char file[256], sha256[65];
};

static enum status take_clip(void *context, int n, const char *const *columns)
{
    struct kept_file *clip = context;
    (void)n;
    clip->found = true;
    snprintf(clip->file, sizeof clip->file, "%s", columns[0] ? columns[0] : "");
    snprintf(clip->sha256, sizeof clip->sha256, "%s", columns[1] ? columns[1] : "");
    return STATUS_OK;
}

/* SHA-256 (FIPS 180-4) of an open file, as the ledger writes it. */
static bool has_digest(int fd, const char *wanted)
{
    crypto_hash_sha256_state state;
    unsigned char piece[65536], digest[crypto_hash_sha256_BYTES];
    char hex[2 * sizeof digest + 1];
    ssize_t n;
    crypto_hash_sha256_init(&state);
    while ((n = read(fd, piece, sizeof piece)) > 0)
        crypto_hash_sha256_update(&state, piece, (unsigned long long)n);
    crypto_hash_sha256_final(&state, digest);
    sodium_bin2hex(hex, sizeof hex, digest, sizeof digest);
    return n == 0 && strcmp(hex, wanted) == 0;
}

static enum status ask(struct ledger *ledger, struct question *question)
{
    struct review *review = (struct review *)question;
    struct kept_file clip = {0};
    char path[PATH_SIZE];
    const char *id = review->id;
    struct stat facts;
    enum status status =
        ledger_select(ledger,
                      "SELECT json_extract(body, '$.file'), json_extract(body, '$.sha256') FROM "
                      "entry WHERE " VIEWS_ID_SQL " = ?1 AND kind = 'sound'",
                      1, &id, take_clip, &clip);
    if (status != STATUS_OK || !clip.found)
        return status != STATUS_OK ? status : STATUS_NOT_FOUND;
    /* A name, and no way out of the folder. */
    if (!*clip.file || *clip.file == '.' || strchr(clip.file, '/') ||
        (size_t)snprintf(path, sizeof path, "%s/%s", review->clips, clip.file) >= sizeof path)
        return STATUS_MISMATCH;
    int fd = open(path, O_RDONLY | O_CLOEXEC | O_NOFOLLOW | O_NONBLOCK);
    if (fd < 0)
        return STATUS_END;
    bool same = fstat(fd, &facts) == 0 && S_ISREG(facts.st_mode) && has_digest(fd, clip.sha256);
    close(fd);
    text_append(&question->text, "{");
    json_text(&question->text, "sha256", clip.sha256);
    text_append(&question->text, "}\n");
    return same ? STATUS_OK : STATUS_MISMATCH;
}

enum MHD_Result api_clip(struct request *request)
{
    switch (request->submitted ? request->review.question.status : STATUS_OK) {
    case STATUS_END:
        return http_refuse(request->connection, MHD_HTTP_NOT_FOUND, "the file is not there", NULL, NULL);
    case STATUS_MISMATCH:
        return http_refuse(request->connection, MHD_HTTP_CONFLICT,
                           "THE FILE IS NOT THE ONE OF THE LEDGER: its digest differs", NULL, NULL);
    default:
        return review_put(request, ask);
    }
}
