/* Small things that the daemon reads whole; see files.h. */
#include "files.h"
#include <sodium.h>
#include <stdio.h>
#include <string.h>

enum status files_read(const char *path, struct text *out)
{
    char piece[4096];
    size_t n;
    FILE *file = fopen(path, "r");
    if (!file)
        return STATUS_NOT_FOUND;
    enum status status = STATUS_OK;
    while (status == STATUS_OK && (n = fread(piece, 1, sizeof piece - 1, file)) > 0) {
        piece[n] = '\0';
        if (strlen(piece) != n)
            status = STATUS_BAD_FORMAT;
        text_append(out, piece);
    }
    if (ferror(file))
        status = STATUS_SYSTEM;
    fclose(file);
    return status == STATUS_OK && out->failed ? STATUS_NO_MEMORY : status;
}

void files_build_id(char out[65])
{
    unsigned char digest[crypto_hash_sha256_BYTES], piece[65536];
    crypto_hash_sha256_state state;
    size_t n;
    snprintf(out, 65, "unknown");
    FILE *file = fopen("/proc/self/exe", "rb");
    if (!file)
        return;
    crypto_hash_sha256_init(&state);
    while ((n = fread(piece, 1, sizeof piece, file)) > 0)
        crypto_hash_sha256_update(&state, piece, n);
    crypto_hash_sha256_final(&state, digest);
    fclose(file);
    sodium_bin2hex(out, 65, digest, sizeof digest);
}

void files_cpu_name(char *out, size_t size)
{
    char line[256];
    snprintf(out, size, "unknown");
    FILE *file = fopen("/proc/cpuinfo", "r");
    while (file && fgets(line, sizeof line, file)) {
        char *value = strstr(line, "model name") == line ? strchr(line, ':') : NULL;
        if (!value)
            continue;
        line[strcspn(line, "\n")] = '\0';
        snprintf(out, size, "%s", value + 2);
        break;
    }
    if (file)
        fclose(file);
}
