/* Starting, hearing and ending a capture process: the parent's side. */
#include "capture.h"
#include "wane/clock.h"

#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <signal.h>
#include <spawn.h>
#include <stdio.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/wait.h>
#include <unistd.h>

#define WORDS_MAX       6
#define END_PATIENCE_NS (3 * CLOCK_NS_PER_S / 10)
#define END_POLL_NS     (CLOCK_NS_PER_S / 500)
#define RING_NAME_TRIES 100

extern char **environ;

void capture_child_init(struct capture_child *child)
{
    *child = (struct capture_child){.life_fd = -1, .message_fd = -1, .ring_fd = -1};
}

static void close_fd(int *fd)
{
    if (*fd >= 0)
        (void)close(*fd);
    *fd = -1;
}

/* Shared memory that has no name any more when this returns. */
static int open_ring_memory(void)
{
    for (int i = 0; i < RING_NAME_TRIES; i++) {
        char name[64];
        (void)snprintf(name, sizeof name, "/wane-%ld-%lld-%d", (long)getpid(),
                       (long long)clock_monotonic_ns(), i);
        int fd = shm_open(name, O_RDWR | O_CREAT | O_EXCL, 0600);
        if (fd >= 0) {
            (void)shm_unlink(name);
            return fd;
        }
        if (errno != EEXIST)
            break;
    }
    return -1;
}

/* A pipe whose ends do not leak into other programs that another thread may start. */
static bool open_pipe(int ends[2])
{
    if (pipe(ends) != 0)
        return false;
    return fcntl(ends[0], F_SETFD, FD_CLOEXEC) == 0 && fcntl(ends[1], F_SETFD, FD_CLOEXEC) == 0;
}

/* Moved to 10 and above, so that placing one at 0, 3 or 4 in the child cannot overwrite another. */
static bool lift(int *fd)
{
    int high = fcntl(*fd, F_DUPFD_CLOEXEC, 10);
    close_fd(fd);
    *fd = high;
    return high >= 0;
}

static bool spawn(struct capture_child *child, char **argv, int life_end, int message_end)
{
    posix_spawn_file_actions_t files;
    posix_spawnattr_t attributes;
    sigset_t none, all;
    (void)sigemptyset(&none);
    (void)sigfillset(&all);
    if (posix_spawn_file_actions_init(&files) != 0)
        return false;
    if (posix_spawnattr_init(&attributes) != 0) {
        (void)posix_spawn_file_actions_destroy(&files);
        return false;
    }
    /* Sound libraries chatter on stdout and stderr: what matters comes as messages. An own process
     * group keeps Ctrl-C at the terminal for the parent, which then ends its child in order. */
    bool is_set =
        posix_spawn_file_actions_adddup2(&files, life_end, STDIN_FILENO) == 0 &&
        posix_spawn_file_actions_addopen(&files, STDOUT_FILENO, "/dev/null", O_WRONLY, 0) == 0 &&
        posix_spawn_file_actions_addopen(&files, STDERR_FILENO, "/dev/null", O_WRONLY, 0) == 0 &&
        posix_spawn_file_actions_adddup2(&files, message_end, CAPTURE_FD_MESSAGES) == 0 &&
        posix_spawn_file_actions_adddup2(&files, child->ring_fd, CAPTURE_FD_RING) == 0 &&
        posix_spawnattr_setsigmask(&attributes, &none) == 0 &&
        posix_spawnattr_setsigdefault(&attributes, &all) == 0 &&
        posix_spawnattr_setpgroup(&attributes, 0) == 0 &&
        posix_spawnattr_setflags(&attributes, POSIX_SPAWN_SETSIGMASK | POSIX_SPAWN_SETSIGDEF |
                                                  POSIX_SPAWN_SETPGROUP) == 0;
    pid_t pid = 0;
    if (is_set && posix_spawn(&pid, "/proc/self/exe", &files, &attributes, argv, environ) == 0)
        child->pid = pid;
    (void)posix_spawnattr_destroy(&attributes);
    (void)posix_spawn_file_actions_destroy(&files);
    return child->pid != 0;
}

bool capture_child_start(struct capture_child *child, const char *const *words, size_t count,
                         struct error *err)
{
    char storage[WORDS_MAX + 2][INPUT_NAME_MAX];
    char *argv[WORDS_MAX + 3] = {storage[0], storage[1]};
    (void)snprintf(storage[0], sizeof storage[0], "wane-capture");
    (void)snprintf(storage[1], sizeof storage[1], "%s", CAPTURE_WORD);
    for (size_t i = 0; i < count && i < WORDS_MAX; i++) {
        (void)snprintf(storage[i + 2], sizeof storage[i + 2], "%s", words[i]);
        argv[i + 2] = storage[i + 2];
    }
    int life[2] = {-1, -1}, messages[2] = {-1, -1};
    capture_child_init(child);
    child->ring_fd = open_ring_memory();
    bool is_started = child->ring_fd >= 0 && open_pipe(life) && open_pipe(messages) &&
                      lift(&child->ring_fd) && lift(&life[0]) && lift(&messages[1]) &&
                      fcntl(messages[0], F_SETFL, O_NONBLOCK) == 0 &&
                      spawn(child, argv, life[0], messages[1]);
    int why = errno;
    child->life_fd = life[1];
    child->message_fd = messages[0];
    close_fd(&life[0]);
    close_fd(&messages[1]);
    if (is_started)
        return true;
    (void)capture_child_end(child);
    return error_set(err, ERROR_DEVICE, "the capture process cannot be started (%s)",
                     strerror(why));
}

void capture_child_wait(const struct capture_child *child, int timeout_ms)
{
    /* Once the pipe has ended poll() would return at once: an fd of -1 only waits. */
    struct pollfd pipe_end = {.fd = child->is_silent ? -1 : child->message_fd, .events = POLLIN};
    (void)poll(&pipe_end, 1, timeout_ms);
}

static char *whole_line(struct capture_child *child)
{
    return memchr(child->line, '\n', child->line_length);
}

const char *capture_child_line(struct capture_child *child, char *out, size_t out_size)
{
    char *end = whole_line(child);
    if (end == NULL && !child->is_silent && child->message_fd >= 0) {
        if (child->line_length == sizeof child->line)
            child->line_length = 0; /* no line of ours is that long */
        ssize_t count = read(child->message_fd, child->line + child->line_length,
                             sizeof child->line - child->line_length);
        if (count > 0)
            child->line_length += (size_t)count;
        else if (count == 0 || (errno != EAGAIN && errno != EINTR))
            child->is_silent = true;
        end = whole_line(child);
    }
    if (end == NULL)
        return NULL;
    size_t length = (size_t)(end - child->line);
    (void)snprintf(out, out_size, "%.*s", (int)length, child->line);
    child->line_length -= length + 1;
    memmove(child->line, end + 1, child->line_length);
    return out;
}

pid_t capture_child_end(struct capture_child *child)
{
    pid_t left_behind = 0;
    if (child->pid != 0) {
        (void)kill(child->pid, SIGKILL);
        int64_t until = clock_monotonic_ns() + END_PATIENCE_NS;
        left_behind = child->pid;
        for (;;) {
            pid_t ended = waitpid(child->pid, NULL, WNOHANG);
            if (ended == child->pid || (ended < 0 && errno != EINTR)) {
                left_behind = 0;
                break;
            }
            if (clock_monotonic_ns() > until)
                break;
            clock_sleep_until(clock_monotonic_ns() + END_POLL_NS);
        }
    }
    close_fd(&child->life_fd);
    close_fd(&child->message_fd);
    close_fd(&child->ring_fd);
    capture_child_init(child);
    return left_behind;
}

size_t capture_split(char *line, char **fields, size_t fields_max)
{
    size_t count = 0;
    while (count < fields_max) {
        fields[count++] = line;
        char *tab = strchr(line, '\t');
        if (tab == NULL)
            break;
        *tab = '\0';
        line = tab + 1;
    }
    return count;
}
