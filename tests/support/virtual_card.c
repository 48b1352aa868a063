#include "support/virtual_card.h"

#include <spawn.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

extern char **environ;

/* Beside this file's folder, wherever the sources lie. */
static void find_script(char *out, size_t out_size)
{
    const char *here = __FILE__;
    const char *name = strrchr(here, '/');
    (void)snprintf(out, out_size, "%.*s/../card/virtual-card", (int)(name - here), here);
}

/* output_fd: where its stdout goes; -1: this program's. */
static pid_t run(const char *const words[4], int output_fd)
{
    char script[1024], storage[4][1024];
    char *argv[6] = {script};
    find_script(script, sizeof script);
    for (int i = 0; i < 4 && words[i] != NULL; i++) {
        (void)snprintf(storage[i], sizeof storage[i], "%s", words[i]);
        argv[i + 1] = storage[i];
    }
    posix_spawn_file_actions_t files;
    pid_t pid = 0;
    (void)posix_spawn_file_actions_init(&files);
    if (output_fd >= 0)
        (void)posix_spawn_file_actions_adddup2(&files, output_fd, STDOUT_FILENO);
    if (posix_spawn(&pid, script, &files, NULL, argv, environ) != 0) {
        perror(script);
        exit(EXIT_FAILURE);
    }
    (void)posix_spawn_file_actions_destroy(&files);
    return pid;
}

static int wait_for(pid_t pid)
{
    int status = 0;
    return waitpid(pid, &status, 0) == pid && WIFEXITED(status) ? WEXITSTATUS(status) : -1;
}

static void must(const char *const words[4])
{
    if (wait_for(run(words, -1)) == 0)
        return;
    (void)fprintf(stderr, "virtual-card %s failed\n", words[0]);
    exit(EXIT_FAILURE);
}

static FILE *run_for_output(const char *const words[4], pid_t *out_pid)
{
    int ends[2];
    if (pipe(ends) != 0) {
        perror("pipe");
        exit(EXIT_FAILURE);
    }
    *out_pid = run(words, ends[1]);
    (void)close(ends[1]);
    return fdopen(ends[0], "r");
}

static void take_environment(FILE *lines)
{
    char line[512];
    while (fgets(line, sizeof line, lines) != NULL) {
        char *value = strchr(line, '=');
        line[strcspn(line, "\n")] = '\0';
        if (value == NULL)
            continue;
        *value = '\0';
        (void)setenv(line, value + 1, 1);
    }
}

bool virtual_card_start(struct virtual_card *card, int rate_hz, int channels)
{
    char line[256] = "", rate[16], count[16];
    const char *const check[4] = {"check"};
    pid_t pid = 0;
    FILE *said = run_for_output(check, &pid);
    char *missing = fgets(line, sizeof line, said);
    (void)fclose(said);
    if (wait_for(pid) != 0) {
        (void)printf("skipped: no virtual sound card: %s", missing != NULL ? missing : "?\n");
        (void)fflush(stdout);
        return false;
    }
    /* Not under TMPDIR: the path must be short and free of blanks. */
    (void)snprintf(card->folder, sizeof card->folder, "/tmp/wane-card-%ld", (long)getpid());
    (void)snprintf(rate, sizeof rate, "%d", rate_hz);
    (void)snprintf(count, sizeof count, "%d", channels);
    const char *const start[4] = {"start", card->folder, rate, count};
    said = run_for_output(start, &pid);
    take_environment(said);
    (void)fclose(said);
    if (wait_for(pid) != 0) {
        (void)fprintf(stderr, "the virtual card did not start\n");
        exit(EXIT_FAILURE);
    }
    return true;
}

void virtual_card_stop(const struct virtual_card *card)
{
    const char *const words[4] = {"stop", card->folder};
    must(words);
}

pid_t virtual_card_play(const struct virtual_card *card, const char *path)
{
    const char *const words[4] = {"play", card->folder, path};
    return run(words, -1);
}

void virtual_card_unplug(const struct virtual_card *card, const char *how)
{
    const char *const words[4] = {"unplug", card->folder, how};
    must(words);
}

void virtual_card_replug(const struct virtual_card *card)
{
    const char *const words[4] = {"replug", card->folder};
    must(words);
}
