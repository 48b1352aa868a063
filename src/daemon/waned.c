/* waned, the daemon: words and settings, start, signals, the service manager, stop. */
#include "options.h"
#include "pipeline.h"
#include "wane/clock.h"
#include "wane/input.h"

#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <systemd/sd-daemon.h>
#include <time.h>
#include <unistd.h>

static bool is_there(const char *folder, const char *file)
{
    char path[LOG_PATH_MAX];
    int length = snprintf(path, sizeof path, "%s/%s", folder, file);
    return length > 0 && length < (int)sizeof path && access(path, R_OK) == 0;
}

/* A program that runs in its build folder takes the page from the source tree, an installed one
 * from where it was installed. */
static bool is_in_build_folder(void)
{
    char path[LOG_PATH_MAX];
    ssize_t length = readlink("/proc/self/exe", path, sizeof path - 1);
    if (length <= 0)
        return false;
    path[length] = '\0';
    char *slash = strrchr(path, '/');
    if (slash == NULL)
        return false;
    *slash = '\0';
    return is_there(path, "CMakeCache.txt");
}

static struct pipeline_places find_places(void)
{
    static const char *const vendors[] = {WANE_VENDOR_DIR, WANE_WEB_DIR "/vendor",
                                          WANE_WEB_DIR "/node_modules/uplot/dist"};
    struct pipeline_places places = {.web_dir = WANE_INSTALLED_WEB_DIR,
                                     .parts_dir = WANE_INSTALLED_PARTS_DIR};
    if (!is_in_build_folder() && is_there(WANE_INSTALLED_WEB_DIR, "index.html"))
        return places;
    places.web_dir = WANE_WEB_DIR;
    places.parts_dir = WANE_PARTS_DIR;
    for (size_t i = 0; i < sizeof vendors / sizeof vendors[0]; i++) {
        if (is_there(vendors[i], "uPlot.esm.js")) {
            places.vendor_dir = vendors[i];
            break;
        }
    }
    return places;
}

/* Threads that libraries start inherit the mask: only main hears signals. */
static void block_signals(sigset_t *out_wanted)
{
    sigemptyset(out_wanted);
    sigaddset(out_wanted, SIGTERM);
    sigaddset(out_wanted, SIGINT);
    sigaddset(out_wanted, SIGHUP);
    (void)pthread_sigmask(SIG_BLOCK, out_wanted, NULL);
    (void)signal(SIGPIPE, SIG_IGN);
    (void)signal(SIGXFSZ, SIG_IGN); /* a file-size limit is a full disk to the log, not our end */
}

/* Until SIGTERM or SIGINT; heartbeats meanwhile. A lost input is no hang: the listener goes round
 * all the same. */
static void wait_for_end(struct pipeline *pipeline, const sigset_t *wanted)
{
    uint64_t seen = 0, watchdog_us = 0;
    char status[300], told[300] = "";
    bool has_watchdog = sd_watchdog_enabled(0, &watchdog_us) > 0;
    for (;;) {
        struct timespec second = {.tv_sec = 1};
        int number = sigtimedwait(wanted, NULL, &second);
        if (number == SIGTERM || number == SIGINT)
            return;
        pipeline_tick(pipeline);
        uint64_t progress = pipeline_progress(pipeline);
        if (has_watchdog && progress != seen)
            (void)sd_notify(0, "WATCHDOG=1");
        seen = progress;
        pipeline_status(pipeline, status, sizeof status);
        if (strcmp(status, told) != 0)
            (void)sd_notifyf(0, "STATUS=%s", status);
        memcpy(told, status, sizeof told);
    }
}

static int run(const struct options *options)
{
    struct error err;
    sigset_t wanted;
    block_signals(&wanted);
    struct pipeline_places places = find_places();
    struct pipeline *pipeline = pipeline_start(options, &places, &err);
    if (pipeline == NULL) {
        (void)fprintf(stderr, "waned: %s\n", err.text);
        return error_exit_status(err.kind);
    }
    if (pipeline_notice(pipeline) != NULL)
        (void)fprintf(stderr, "waned: %s\n", pipeline_notice(pipeline));
    if (pipeline_fingerprint(pipeline) != NULL)
        (void)fprintf(stderr, "waned: SHA-256 fingerprint of the certificate: %s\n",
                      pipeline_fingerprint(pipeline));
    (void)printf("listening on %s\n", pipeline_url(pipeline));
    (void)fflush(stdout);
    (void)sd_notify(0, "READY=1");
    wait_for_end(pipeline, &wanted);
    (void)sd_notify(0, "STOPPING=1");
    pipeline_stop(pipeline);
    return 0;
}

int main(int argc, char **argv)
{
    struct options options;
    struct text problems = {0};
    if (input_is_capture_process(argc, argv))
        return input_capture_main(argc, argv);
    if (!options_read(argc, argv, &options, &problems)) {
        (void)fprintf(stderr, "%s", problems.data);
        text_done(&problems);
        return 2;
    }
    text_done(&problems);
    if (options.wants_help || options.wants_version) {
        (void)printf("%s", options.wants_help ? options_help() : "waned " WANE_VERSION "\n");
        return 0;
    }
    return run(&options);
}
