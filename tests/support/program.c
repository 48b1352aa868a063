#include "program.h"

#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

static void give_up(const char *what)
{
    perror(what);
    exit(99);
}

static void find_program(const char *name, char *out, size_t out_size)
{
    const char *folder = getenv("WANE_PROGRAMS");
    char own[400] = "";
    if (folder == NULL) {
        ssize_t length = readlink("/proc/self/exe", own, sizeof own - 1);
        if (length < 0)
            give_up("/proc/self/exe");
        own[length] = '\0';
        for (int i = 0; i < 2; i++) {
            char *slash = strrchr(own, '/');
            if (slash != NULL)
                *slash = '\0';
        }
        folder = own;
    }
    snprintf(out, out_size, "%s/%s", folder, name);
}

static char *read_back(FILE *file, size_t *out_length)
{
    size_t length = 0;
    size_t capacity = 4096;
    char *text = malloc(capacity + 1);
    rewind(file);
    while (text != NULL) {
        length += fread(text + length, 1, capacity - length, file);
        if (length < capacity)
            break;
        capacity *= 2;
        char *larger = realloc(text, capacity + 1);
        if (larger == NULL)
            give_up("realloc");
        text = larger;
    }
    if (text == NULL)
        give_up("malloc");
    text[length] = '\0';
    *out_length = length;
    fclose(file);
    return text;
}

void program_run(const char *name, const char *const words[], const char *in_path,
                 struct program_result *out_result)
{
    char path[512];
    char *argv[PROGRAM_WORDS_MAX + 2];
    size_t count = 0;
    find_program(name, path, sizeof path);
    argv[count++] = path;
    for (size_t i = 0; words[i] != NULL && i < PROGRAM_WORDS_MAX; i++) {
        argv[count] = strdup(words[i]);
        if (argv[count++] == NULL)
            give_up("strdup");
    }
    argv[count] = NULL;
    FILE *out = tmpfile();
    FILE *err = tmpfile();
    if (out == NULL || err == NULL)
        give_up("tmpfile");
    pid_t child = fork();
    if (child < 0)
        give_up("fork");
    if (child == 0) {
        int in = open(in_path != NULL ? in_path : "/dev/null", O_RDONLY);
        if (in < 0 || dup2(in, 0) < 0 || dup2(fileno(out), 1) < 0 || dup2(fileno(err), 2) < 0)
            _exit(98);
        execv(path, argv);
        _exit(97);
    }
    int status = 0;
    if (waitpid(child, &status, 0) != child)
        give_up("waitpid");
    for (size_t i = 1; i < count; i++)
        free(argv[i]);
    out_result->status = WIFEXITED(status) ? WEXITSTATUS(status) : 128 + WTERMSIG(status);
    out_result->out = read_back(out, &out_result->out_length);
    out_result->err = read_back(err, &out_result->err_length);
    if (out_result->status == 97) {
        fprintf(stderr, "%s: cannot be started\n", path);
        exit(99);
    }
}

void program_done(struct program_result *result)
{
    free(result->out);
    free(result->err);
}

size_t program_count_lines(const char *text)
{
    size_t count = 0;
    for (; *text != '\0'; text++)
        count += *text == '\n';
    return count;
}
