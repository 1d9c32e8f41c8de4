/* The lock file beside the ledger: flock(2) on it says who writes; its text says the process number. */
#include "ledger/handle.h"
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <unistd.h>

static bool lock_path(const char *path, char out[4096])
{
    return (size_t)snprintf(out, 4096, "%s.lock", path) < 4096;
}

static void say_who(const char *path, int lock, char problem[LEDGER_PROBLEM_SIZE])
{
    char number[24] = "";
    ssize_t n = pread(lock, number, sizeof number - 1, 0);
    number[n > 0 ? n : 0] = '\0';
    number[strcspn(number, "\n")] = '\0';
    snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: is being written by another program (process %s)", path,
             *number ? number : "unknown");
}

/* Whether the descriptor is still the file of that name: the one before us may have removed it. */
static bool still_there(const char *name, int lock)
{
    struct stat opened, named;
    return fstat(lock, &opened) == 0 && stat(name, &named) == 0 && opened.st_ino == named.st_ino &&
           opened.st_dev == named.st_dev;
}

static void write_process_number(int lock)
{
    char number[24];
    int n = snprintf(number, sizeof number, "%ld\n", (long)getpid());
    /* Only for people: on a full disk the lock holds without it. */
    if (ftruncate(lock, 0) != 0 || pwrite(lock, number, (size_t)n, 0) != n)
        errno = 0;
}

enum status lock_take(const char *path, int *out, char problem[LEDGER_PROBLEM_SIZE])
{
    char name[4096];
    if (!lock_path(path, name)) {
        snprintf(problem, LEDGER_PROBLEM_SIZE, "the ledger's path is too long");
        return STATUS_SYSTEM;
    }
    for (;;) {
        int lock = open(name, O_RDWR | O_CREAT | O_CLOEXEC, 0644);
        if (lock < 0) {
            snprintf(problem, LEDGER_PROBLEM_SIZE, "%.400s: the lock file cannot be made (%s)", name,
                     strerror(errno));
            return errno == ENOENT ? STATUS_NOT_FOUND : errno == ENOSPC ? STATUS_FULL : STATUS_SYSTEM;
        }
        if (flock(lock, LOCK_EX | LOCK_NB) != 0) {
            enum status status = errno == EWOULDBLOCK ? STATUS_BUSY : STATUS_SYSTEM;
            say_who(path, lock, problem);
            close(lock);
            return status;
        }
        if (still_there(name, lock)) {
            write_process_number(lock);
            *out = lock;
            return STATUS_OK;
        }
        close(lock);
    }
}

void lock_release(const char *path, int lock)
{
    char name[4096];
    if (lock < 0)
        return;
    if (lock_path(path, name))
        unlink(name); /* while the lock is held: nobody else can have it */
    close(lock);
}
