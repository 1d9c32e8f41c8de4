/* Fault injector, loaded before the C library: while the file that HUSHWATCH_BLOCK names exists, the thread called "watch"
 * stands still, as if it were stuck. Every other thread goes on. */
#define _GNU_SOURCE
#include <dlfcn.h>
#include <pthread.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

int pthread_cond_timedwait(pthread_cond_t *condition, pthread_mutex_t *mutex, const struct timespec *until)
{
    static int (*real)(pthread_cond_t *, pthread_mutex_t *, const struct timespec *);
    if (!real)
        real = (int (*)(pthread_cond_t *, pthread_mutex_t *, const struct timespec *))dlvsym(
            RTLD_NEXT, "pthread_cond_timedwait", "GLIBC_2.3.2");
    char name[16] = "";
    const char *path = getenv("HUSHWATCH_BLOCK");
    pthread_getname_np(pthread_self(), name, sizeof name);
    if (path && strcmp(name, "watch") == 0)
        while (access(path, F_OK) == 0) {
            /* The lock is given up: the others must not be stuck with it. */
            pthread_mutex_unlock(mutex);
            nanosleep(&(struct timespec){.tv_nsec = 20000000}, NULL);
            pthread_mutex_lock(mutex);
        }
    return real(condition, mutex, until);
}
