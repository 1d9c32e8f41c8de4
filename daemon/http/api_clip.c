/* A sound that was kept, as its file has it: only where the file is there and is the one of the ledger. */
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
    if (fstat(fd, &facts) != 0 || !S_ISREG(facts.st_mode) || !has_digest(fd, clip.sha256)) {
        close(fd);
        return STATUS_MISMATCH;
    }
    review->file = fd;
    review->file_size = (uint64_t)facts.st_size;
    return STATUS_OK;
}

static enum MHD_Result give_file(struct request *request)
{
    struct review *review = &request->review;
    struct MHD_Response *response = MHD_create_response_from_fd64(review->file_size, review->file);
    if (!response)
        return MHD_NO;
    review->file = -1; /* the response's now */
    http_add_headers(response);
    MHD_add_response_header(response, "Content-Type", "audio/flac");
    enum MHD_Result result = MHD_queue_response(request->connection, MHD_HTTP_OK, response);
    MHD_destroy_response(response);
    return result;
}

enum MHD_Result api_clip(struct request *request)
{
    if (!request->submitted || request->review.question.status == STATUS_NOT_FOUND)
        return review_put(request, ask);
    switch (request->review.question.status) {
    case STATUS_OK:
        return give_file(request);
    case STATUS_END:
        return http_refuse(request->connection, MHD_HTTP_NOT_FOUND, "the file is not there", NULL, NULL);
    case STATUS_MISMATCH:
        return http_refuse(request->connection, MHD_HTTP_CONFLICT,
                           "THE FILE IS NOT THE ONE OF THE LEDGER: its digest differs", NULL, NULL);
    default:
        return review_put(request, ask);
    }
}
