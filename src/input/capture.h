/* The capture process: what it and its parent agree on. Only this process talks to PortAudio, so a
 * driver that hangs or crashes is killed without hurting the daemon.
 *
 *     parent                                 capture process
 *       │ starts /proc/self/exe --capture-process listen NAME RATE CHANNELS
 *       │ fd 0: a pipe that ends when the parent does ────▶ ends the process at once
 *       │ ◀── fd 3: lines of words, tab between them ──────
 *       │ ◀── fd 4: shared memory with the ring of samples (made by the child, see ring.h)
 *
 * Lines: "ready RATE CHANNELS RING_BYTES NAME", "warn TEXT", "error KIND TEXT" (then it ends),
 * "stopped" (the stream ended by itself; then it ends). With `list` instead of `listen`: a "card"
 * line for each input, each followed by its own "warn" lines, and "done" at the end. */
#ifndef INPUT_CAPTURE_H
#define INPUT_CAPTURE_H

#include "wane/error.h"
#include "wane/input.h"
#include <sys/types.h>

#define CAPTURE_WORD        "--capture-process"
#define CAPTURE_LISTEN      "listen"
#define CAPTURE_LIST        "list"
#define CAPTURE_FD_MESSAGES 3
#define CAPTURE_FD_RING     4
#define CAPTURE_RING_S      4.0 /* how long the listener may be busy before samples are lost */
#define CAPTURE_LINE_MAX    1024

/* The parent's side of one capture process. = {0} with fds of -1 is none: see capture_child_init.
 */
struct capture_child {
    pid_t pid; /* 0: none */
    int life_fd, message_fd, ring_fd;
    char line[CAPTURE_LINE_MAX]; /* what has come of the next line */
    size_t line_length;
    bool is_silent; /* its message pipe has ended */
};

void capture_child_init(struct capture_child *child);

/* Starts a capture process with these words after CAPTURE_WORD; words [count <= 6]. ERROR_DEVICE or
 * ERROR_MEMORY when the system cannot. */
bool capture_child_start(struct capture_child *child, const char *const *words, size_t count,
                         struct error *err);

/* Waits until a line may be there, timeout_ms at most. */
void capture_child_wait(const struct capture_child *child, int timeout_ms);

/* Next whole line without its newline, or NULL when none has come. Never waits. Borrowed until the
 * next call. After the process ended: NULL and child->is_silent. */
const char *capture_child_line(struct capture_child *child, char *out, size_t out_size);

/* Kills the process and closes all. A process stuck in its driver, which even SIGKILL does not end
 * at once, is left behind after 0.3 s; its pid is returned then, 0 otherwise. */
pid_t capture_child_end(struct capture_child *child);

/* Splits a line at its tabs, in place. Returns the number of fields, at most fields_max. */
size_t capture_split(char *line, char **fields, size_t fields_max);

#endif
