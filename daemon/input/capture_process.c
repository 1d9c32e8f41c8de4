#include "input/capture_process.h"
#include "capture/shared.h"
#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <signal.h>
#include <spawn.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#define RING_S 2.0
#define PROGRAM "hushwatch-capture"
#define MEMORY_FD 3
#define LOWEST_FD 10       /* so that no file of ours stands where the child's files go */
#define READ_AT_ONCE 65536 /* bytes of error output a look: a flood fills the pipe and stops the flooder */

extern char **environ;

/* The program beside the one that runs. */
static bool program_path(char *out, size_t size)
{
    char self[PATH_MAX];
    ssize_t n = readlink("/proc/self/exe", self, sizeof self - 1);
    if (n <= 0)
        return false;
    self[n] = '\0';
    char *slash = strrchr(self, '/');
    if (!slash)
        return false;
    *slash = '\0';
    return (size_t)snprintf(out, size, "%s/" PROGRAM, self) < size;
}

/* A file with the ring, of a size that nobody can change any more: a shorter one would end us by SIGBUS. */
static int make_ring(struct capture_process *process, const struct capture_plan *plan)
{
    uint32_t capacity = ring_capacity(plan->rate_hz, RING_S);
    size_t size = ring_size(plan->n_channels, capacity);
    int low = memfd_create("hushwatch ring", MFD_CLOEXEC | MFD_ALLOW_SEALING), fd = -1;
    if (low >= 0) {
        fd = fcntl(low, F_DUPFD_CLOEXEC, LOWEST_FD);
        close(low);
    }
    if (fd < 0)
        return -1;
    void *memory = MAP_FAILED;
    if (size > 0 && ftruncate(fd, (off_t)size) == 0 &&
        fcntl(fd, F_ADD_SEALS, F_SEAL_SHRINK | F_SEAL_GROW | F_SEAL_SEAL) == 0)
        memory = mmap(NULL, size, PROT_READ | PROT_WRITE, MAP_SHARED, fd, 0);
    if (memory == MAP_FAILED) {
        close(fd);
        return -1;
    }
    process->memory = memory;
    process->size = size;
    if (ring_create(&process->ring, memory, size, plan->n_channels, capacity) == STATUS_OK)
        return fd;
    capture_process_release(process);
    close(fd);
    errno = EINVAL;
    return -1;
}

static int spawn(struct capture_process *process, const struct capture_plan *plan, int ring_fd, int error_fd)
{
    char program[PATH_MAX], rate[32], latency[32], channels[16], memory[16], parent[16];
    if (!program_path(program, sizeof program))
        return ENOENT;
    snprintf(rate, sizeof rate, "%.10g", plan->rate_hz);
    snprintf(latency, sizeof latency, "%.10g", plan->latency_s);
    snprintf(channels, sizeof channels, "%u", plan->n_channels);
    snprintf(memory, sizeof memory, "%d", MEMORY_FD);
    snprintf(parent, sizeof parent, "%ld", (long)getpid());
    const char *argv[] = {PROGRAM,      "--memory", memory,      "--device", plan->device, "--rate", rate,
                          "--channels", channels,   "--latency", latency,    "--parent",   parent,   NULL};
    posix_spawn_file_actions_t files;
    posix_spawnattr_t attributes;
    sigset_t none, all;
    sigemptyset(&none);
    sigfillset(&all);
    posix_spawn_file_actions_init(&files);
    posix_spawnattr_init(&attributes);
    posix_spawn_file_actions_adddup2(&files, error_fd, STDERR_FILENO);
    posix_spawn_file_actions_adddup2(&files, ring_fd, MEMORY_FD);
    posix_spawn_file_actions_addopen(&files, STDIN_FILENO, "/dev/null", O_RDONLY, 0);
    posix_spawn_file_actions_addopen(&files, STDOUT_FILENO, "/dev/null", O_WRONLY, 0);
    posix_spawn_file_actions_addclosefrom_np(&files, MEMORY_FD + 1);
    posix_spawnattr_setflags(&attributes, POSIX_SPAWN_SETSIGMASK | POSIX_SPAWN_SETSIGDEF);
    posix_spawnattr_setsigmask(&attributes, &none);
    posix_spawnattr_setsigdefault(&attributes, &all);
    /* execve takes the words as char *const and does not write to them (POSIX.1-2017, exec, rationale). */
    union {
        const char *const *constant;
        char *const *plain;
    } words = {argv};
    int error = posix_spawn(&process->pid, program, &files, &attributes, words.plain, environ);
    posix_spawn_file_actions_destroy(&files);
    posix_spawnattr_destroy(&attributes);
    return error;
}

/* A pipe for the child's error output, at file numbers that are not in the way. */
static bool make_pipe(int ends[2])
{
    int low[2];
    if (pipe2(low, O_CLOEXEC | O_NONBLOCK) != 0)
        return false;
    for (int i = 0; i < 2; i++) {
        ends[i] = fcntl(low[i], F_DUPFD_CLOEXEC, LOWEST_FD);
        close(low[i]);
    }
    /* The child's end blocks: that is what stops a flood. */
    if (ends[0] >= 0 && ends[1] >= 0 && fcntl(ends[1], F_SETFL, 0) == 0)
        return true;
    for (int i = 0; i < 2; i++)
        if (ends[i] >= 0)
            close(ends[i]);
    return false;
}

enum status capture_process_start(struct capture_process *process, const struct capture_plan *plan)
{
    memset(process, 0, sizeof *process);
    process->error_fd = -1;
    int ends[2] = {-1, -1}, ring_fd = make_ring(process, plan);
    if (ring_fd < 0)
        return STATUS_SYSTEM;
    int error = make_pipe(ends) ? 0 : errno;
    if (error == 0) {
        error = spawn(process, plan, ring_fd, ends[1]);
        close(ends[1]);
        process->error_fd = ends[0];
    }
    close(ring_fd);
    if (error == 0)
        return STATUS_OK;
    process->pid = 0;
    capture_process_release(process);
    errno = error;
    return STATUS_SYSTEM;
}

/* Keeps the last bytes. */
static void keep_words(struct capture_process *process, const char *text, size_t n)
{
    const size_t room = sizeof process->words;
    if (n > room) {
        text += n - room;
        n = room;
    }
    size_t old = process->n_words < room - n ? process->n_words : room - n;
    memmove(process->words, process->words + process->n_words - old, old);
    memcpy(process->words + old, text, n);
    process->n_words = old + n;
}

static void drain(struct capture_process *process)
{
    char text[4096];
    ssize_t n = 0;
    for (size_t total = 0; process->error_fd >= 0 && total < READ_AT_ONCE; total += (size_t)n) {
        n = read(process->error_fd, text, sizeof text);
        if (n <= 0)
            return;
        keep_words(process, text, (size_t)n);
    }
}

void capture_process_look(struct capture_process *process)
{
    if (process->pid == 0)
        return;
    int how;
    pid_t ended = waitpid(process->pid, &how, WNOHANG);
    drain(process); /* after the look: what it wrote before its end is in the pipe by now */
    if (ended == 0 || (ended < 0 && errno == EINTR))
        return;
    process->exit_code = ended == process->pid && WIFEXITED(how) ? WEXITSTATUS(how) : -1;
    process->pid = 0;
}

bool capture_process_is_there(const struct capture_process *process)
{
    return process->pid != 0;
}

void capture_process_kill(struct capture_process *process)
{
    if (process->pid > 0)
        kill(process->pid, SIGKILL);
}

void capture_process_end(struct capture_process *process, double wait_s)
{
    const struct timespec pause = {0, 2000000};
    int64_t until_ns = capture_now_ns() + (int64_t)(wait_s * 1e9);
    capture_process_kill(process);
    capture_process_look(process);
    while (capture_process_is_there(process) && capture_now_ns() < until_ns) {
        nanosleep(&pause, NULL);
        capture_process_look(process);
    }
    capture_process_release(process);
}

void capture_process_release(struct capture_process *process)
{
    if (process->memory)
        munmap(process->memory, process->size);
    if (process->error_fd >= 0)
        close(process->error_fd);
    process->memory = NULL;
    process->error_fd = -1;
}

void capture_process_get_words(const struct capture_process *process, char *out, size_t size)
{
    static const char ours[] = PROGRAM ": ";
    char text[CAPTURE_WORDS_SIZE + 1];
    memcpy(text, process->words, process->n_words);
    text[process->n_words] = '\0';
    for (size_t i = 0; i < process->n_words; i++)
        if (text[i] == '\0')
            text[i] = '?';
    const char *last = "";
    for (char *at = text; (at = strstr(at, ours)) != NULL; at += strlen(ours))
        last = at + strlen(ours);
    snprintf(out, size, "%.*s", (int)strcspn(last, "\n"), last);
}
