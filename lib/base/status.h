/* The one status enum of the project: what every fallible function returns. */
#ifndef BASE_STATUS_H
#define BASE_STATUS_H

enum status {
    STATUS_OK = 0,
    STATUS_BAD_ARGUMENT, /* the caller broke the function's contract: a size, a range, a missing pointer */
    STATUS_NO_MEMORY,    /* an allocation failed; nothing was changed */
    STATUS_BAD_FORMAT,   /* outside data (file, body, setting) is not in the expected form */
    STATUS_OUT_OF_RANGE, /* outside data has the right form and a value that is not allowed */
    STATUS_NOT_FOUND,    /* the named thing does not exist */
    STATUS_EXISTS,       /* the named thing exists already and would be overwritten */
    STATUS_BUSY,         /* another process or thread holds it */
    STATUS_FULL,         /* no room: disk, queue or table */
    STATUS_END,          /* a normal end: no more frames, entries or steps */
    STATUS_TIMEOUT,      /* nothing arrived within the time allowed */
    STATUS_MISMATCH,     /* a check compared two things and they differ */
    STATUS_SYSTEM,       /* the operating system refused; errno was reported by the daemon */
    STATUS_BUG           /* a state that our own code should make impossible */
};

/* A short lower-case English phrase for a message; never NULL. */
const char *status_text(enum status status);

#endif
