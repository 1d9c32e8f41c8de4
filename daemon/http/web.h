/* The files of web/, embedded in the binary at build time. */
#ifndef HTTP_WEB_H
#define HTTP_WEB_H

#include <stddef.h>

struct web_file {
    const char *name; /* NULL closes the table */
    const unsigned char *data;
    size_t size;
};

extern const struct web_file web_files[];

#endif
