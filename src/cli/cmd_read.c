/* `wane read`: every strike in recordings.
 *
 * Recordings are read side by side, one thread each while there are cores; a recording that has two
 * cores to itself uses a second thread for its fits. What they find is printed in the order in
 * which they were named, each as soon as it is its turn. */
#include "cli/commands.h"

#include "cli/options.h"
#include "cli/read_part.h"
#include "cli/read_recording.h"
#include "cli/read_rows.h"

#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define WORKERS_MAX 16

/* One recording's share. Fields below the mutex of struct crew are read and written with it held.
 */
struct job {
    const char *path;
    struct crew *crew;
    struct text text; /* not yet printed */
    uint64_t counts[3];
    bool is_done, has_failed;
    struct error err;
    struct input_info info;
    struct tracks *tracks; /* [INPUT_CHANNELS_MAX] while it runs, with a part sheet; else NULL */
};

struct crew {
    struct read_settings settings;
    enum rows_form form;
    const struct part *part; /* NULL: no sheet */
    pthread_mutex_t planning;
    pthread_mutex_t mutex;
    pthread_cond_t changed;
    struct job *jobs;
    size_t job_count, next_job;
};

/* --- Workers --- */

static void begin_job(void *to, const struct input_info *info)
{
    struct job *job = to;
    if (job->crew->form != ROWS_TABLE)
        return;
    pthread_mutex_lock(&job->crew->mutex);
    rows_append_title(&job->text, job->path, info, job->crew->settings.channel);
    pthread_mutex_unlock(&job->crew->mutex);
}

static void put_row(void *to, const struct read_row *row)
{
    struct job *job = to;
    const struct part *part = job->crew->part;
    struct reading labelled;
    struct judgement judgement;
    struct read_row shown = *row;
    if (part != NULL) {
        labelled = *row->reading;
        part_judge(part, &job->tracks[row->strike->channel - 1], &labelled, &judgement);
        shown.reading = &labelled;
    }
    pthread_mutex_lock(&job->crew->mutex);
    rows_append(&job->text, job->crew->form, job->path, job->crew->settings.channel == 0, &shown,
                part != NULL ? &judgement : NULL);
    job->counts[row->reading->verdict]++;
    pthread_cond_signal(&job->crew->changed);
    pthread_mutex_unlock(&job->crew->mutex);
}

static bool start_tracks(struct job *job, struct error *err)
{
    if (job->crew->part == NULL)
        return true;
    job->tracks = calloc(INPUT_CHANNELS_MAX, sizeof *job->tracks);
    if (job->tracks == NULL)
        return error_set(err, ERROR_MEMORY, "no memory for the part's modes");
    for (size_t i = 0; i < INPUT_CHANNELS_MAX; i++)
        tracks_init(&job->tracks[i], job->crew->part);
    return true;
}

static void run_job(struct job *job)
{
    const struct read_sink sink = {.to = job, .begin = begin_job, .put = put_row};
    struct error err = {0};
    struct input_info info = {0};
    bool ok = start_tracks(job, &err) &&
              read_recording(job->path, &job->crew->settings, &sink, &info, &err);
    free(job->tracks);
    job->tracks = NULL;
    pthread_mutex_lock(&job->crew->mutex);
    job->info = info;
    job->has_failed = !ok;
    job->err = err;
    job->is_done = true;
    if (ok && job->crew->form == ROWS_TABLE)
        rows_append_total(&job->text, job->counts);
    pthread_cond_signal(&job->crew->changed);
    pthread_mutex_unlock(&job->crew->mutex);
}

static void *work(void *argument)
{
    struct crew *crew = argument;
    for (;;) {
        pthread_mutex_lock(&crew->mutex);
        struct job *job = crew->next_job < crew->job_count ? &crew->jobs[crew->next_job++] : NULL;
        pthread_mutex_unlock(&crew->mutex);
        if (job == NULL)
            return NULL;
        run_job(job);
    }
}

/* --- Printing, in the main thread --- */

static void say_end(const struct job *job)
{
    for (unsigned i = 0; i < job->info.warning_count; i++)
        fprintf(stderr, "wane read: %s: %s\n", job->path, job->info.warnings[i]);
    if (job->has_failed && strstr(job->err.text, job->path) == job->err.text)
        fprintf(stderr, "wane read: %s\n", job->err.text);
    else if (job->has_failed)
        fprintf(stderr, "wane read: %s: %s\n", job->path, job->err.text);
}

/* Prints one job to its end; false when its text did not fit into memory. */
static bool print_job(struct crew *crew, struct job *job)
{
    struct text out = {0};
    bool is_done = false;
    bool ok = true;
    while (!is_done) {
        pthread_mutex_lock(&crew->mutex);
        while (!job->is_done && job->text.length == 0)
            pthread_cond_wait(&crew->changed, &crew->mutex);
        struct text full = job->text;
        job->text = out;
        out = full;
        is_done = job->is_done;
        pthread_mutex_unlock(&crew->mutex);
        ok = ok && !out.failed;
        if (out.length > 0)
            fwrite(out.data, 1, out.length, stdout);
        /* Whoever watches, or reads the pipe, sees a strike when it has been read. */
        fflush(stdout);
        text_clear(&out);
    }
    text_done(&out);
    say_end(job);
    return ok;
}

static int print_all(struct crew *crew)
{
    int status = 0;
    for (size_t i = 0; i < crew->job_count; i++) {
        struct job *job = &crew->jobs[i];
        bool fits = print_job(crew, job);
        if (!fits)
            fprintf(stderr, "wane read: %s: no memory for what was read\n", job->path);
        if (job->has_failed || !fits) {
            int own = fits ? error_exit_status(job->err.kind) : 1;
            /* One bad recording of several is work not done, not wrong usage. */
            status = crew->job_count == 1 ? own : 1;
        }
    }
    if (ferror(stdout) || fflush(stdout) != 0) {
        fputs("wane read: the results cannot be written: is the disk full?\n", stderr);
        status = 1;
    }
    return status;
}

static int read_all(struct crew *crew)
{
    pthread_t threads[WORKERS_MAX];
    long cores = sysconf(_SC_NPROCESSORS_ONLN);
    size_t workers = cores < 1 ? 1 : cores > WORKERS_MAX ? WORKERS_MAX : (size_t)cores;
    struct text head = {0};
    size_t started = 0;
    crew->settings.uses_second_thread = crew->job_count < workers;
    workers = crew->job_count < workers ? crew->job_count : workers;
    rows_append_head(&head, crew->form);
    if (head.length > 0)
        fwrite(head.data, 1, head.length, stdout);
    text_done(&head);
    while (started < workers && pthread_create(&threads[started], NULL, work, crew) == 0)
        started++;
    if (started == 0)
        work(crew);
    int status = print_all(crew);
    for (size_t i = 0; i < started; i++)
        pthread_join(threads[i], NULL);
    return status;
}

/* --- Words --- */

struct read_words {
    bool json, csv;
    const char *channel, *raw, *part;
    uint64_t channels, modes;
    double rate_hz;
};

static bool choose_raw(const struct read_words *words, struct read_settings *settings,
                       struct error *err)
{
    settings->rate_hz = words->rate_hz;
    settings->channels = (int)words->channels;
    if (words->raw == NULL) {
        if (words->rate_hz > 0 || words->channels > 0)
            return error_set(err, ERROR_USAGE,
                             "--rate and --channels are for raw samples; a recording says them "
                             "itself");
        return true;
    }
    if (!input_raw_from_name(words->raw, &settings->raw))
        return error_set(err, ERROR_USAGE, "--raw is s16, s24, s32 or f32, not \"%s\"", words->raw);
    if (words->rate_hz <= 0 || words->channels == 0)
        return error_set(err, ERROR_USAGE,
                         "raw samples do not say their rate and channels: --raw %s --rate HZ "
                         "--channels N",
                         words->raw);
    return true;
}

static bool choose_channel(const char *word, int *out_channel, struct error *err)
{
    char *end = NULL;
    if (strcmp(word, "all") == 0) {
        *out_channel = 0;
        return true;
    }
    long channel = strtol(word, &end, 10);
    if (*end != '\0' || end == word || channel < 1 || channel > INPUT_CHANNELS_MAX)
        return error_set(err, ERROR_USAGE, "--channel is a number from 1 to %d, or all, not \"%s\"",
                         INPUT_CHANNELS_MAX, word);
    *out_channel = (int)channel;
    return true;
}

/* Settings that would fail in every recording are refused before the first. */
static bool check_settings(struct read_settings *settings, struct error *err)
{
    double low = settings->detect.f_low_hz;
    double high = settings->detect.f_high_hz;
    if (low > 0 && high > 0 && low >= high)
        return error_set(err, ERROR_USAGE, "--low %g must be lower than --high %g", low, high);
    settings->fit.f_low_hz = low;
    settings->fit.f_high_hz = high;
    return true;
}

static bool make_crew(struct crew *crew, const struct read_words *words, int word_count,
                      char **paths, struct error *err)
{
    if (word_count == 0)
        return error_set(err, ERROR_USAGE, "which recordings? wane read FILE... (- for stdin)");
    if (words->json && words->csv)
        return error_set(err, ERROR_USAGE, "--json and --csv exclude each other");
    crew->form = words->json ? ROWS_JSON : words->csv ? ROWS_CSV : ROWS_TABLE;
    crew->settings.planning = &crew->planning;
    crew->settings.fit.modes_max = (unsigned)words->modes;
    if (!choose_raw(words, &crew->settings, err) ||
        !choose_channel(words->channel, &crew->settings.channel, err) ||
        !check_settings(&crew->settings, err))
        return false;
    crew->job_count = (size_t)word_count;
    crew->jobs = calloc(crew->job_count, sizeof *crew->jobs);
    if (crew->jobs == NULL)
        return error_set(err, ERROR_MEMORY, "no memory for %d recordings", word_count);
    for (size_t i = 0; i < crew->job_count; i++) {
        crew->jobs[i].path = paths[i];
        crew->jobs[i].crew = crew;
    }
    return true;
}

/* Gives the exit status; every complaint has been said then. */
static int load_part(const struct options *options, const char *path, struct part *out_part)
{
    struct text complaints = {0};
    struct error err = {0};
    int status = 0;
    if (!part_load(path, out_part, &complaints, &err)) {
        status = error_exit_status(err.kind);
        if (complaints.length == 0)
            options_fail(options, &err);
    }
    for (const char *line = complaints.length > 0 ? complaints.data : ""; *line != '\0';) {
        size_t length = strcspn(line, "\n");
        fprintf(stderr, "wane read: %.*s\n", (int)length, line);
        line += length + (line[length] != '\0');
    }
    text_done(&complaints);
    return status;
}

int cmd_read(int argc, char **argv)
{
    struct crew crew = {.planning = PTHREAD_MUTEX_INITIALIZER,
                        .mutex = PTHREAD_MUTEX_INITIALIZER,
                        .changed = PTHREAD_COND_INITIALIZER};
    struct detect_settings *detect = &crew.settings.detect;
    struct read_words words = {.channel = "1"};
    const struct option_spec specs[] = {
        {"json", OPTION_FLAG, NULL, "one JSON object a line, one line a strike",
         .flag = &words.json},
        {"csv", OPTION_FLAG, NULL, "one row a mode", .flag = &words.csv},
        {"channel", OPTION_TEXT, "K", "1, 2 ... or all (1)", .text = &words.channel},
        {"raw", OPTION_TEXT, "FORM",
         "samples without a header: s16, s24, s32 or f32, little endian", .text = &words.raw},
        {"rate", OPTION_NUMBER, "HZ", "rate of raw samples", .number = &words.rate_hz,
         INPUT_RATE_MIN_HZ, INPUT_RATE_MAX_HZ},
        {"channels", OPTION_INTEGER, "N", "channels of raw samples", .integer = &words.channels, 1,
         INPUT_CHANNELS_MAX},
        {"low", OPTION_NUMBER, "HZ", "lowest frequency heeded (20)", .number = &detect->f_low_hz,
         0.1, 384000},
        {"high", OPTION_NUMBER, "HZ", "highest frequency heeded (0.46 of the rate)",
         .number = &detect->f_high_hz, 1, 384000},
        {"trigger", OPTION_NUMBER, "DB", "a strike rises this far over the noise (17)",
         .number = &detect->trigger_db, 6, 60},
        {"hold-off", OPTION_NUMBER, "S", "shortest time between two strikes (from the ring)",
         .number = &detect->hold_off_s, 0.001, 60},
        {"window", OPTION_NUMBER, "S", "longest window (60)", .number = &detect->window_max_s, 0.05,
         600},
        {"part", OPTION_TEXT, "SHEET", "part sheet: labels for its modes, decisions on its limits",
         .text = &words.part},
        {"coupling", OPTION_NUMBER, "HZ", "corner of the input's AC coupling (not known)",
         .number = &crew.settings.fit.coupling_hz, 0.01, 1000},
        {"modes", OPTION_INTEGER, "N", "at most this many modes a strike (10)",
         .integer = &words.modes, 1, READING_MODES_MAX},
    };
    struct options options = {
        .program = "wane read",
        .words = "[OPTIONS] FILE...",
        .about = "Reads every strike in recordings (WAV, FLAC, AIFF, CAF, W64, RF64; - for stdin).",
        .specs = specs,
        .count = sizeof specs / sizeof specs[0],
    };
    struct error err = {0};
    int word_count = 0;
    if (!options_parse(&options, argc, argv, &word_count, &err))
        return options_fail(&options, &err);
    if (options.wants_help) {
        options_print_help(&options, stdout);
        return 0;
    }
    struct part part;
    int status = words.part != NULL ? load_part(&options, words.part, &part) : 0;
    if (status != 0)
        return status;
    crew.part = words.part != NULL ? &part : NULL;
    if (!make_crew(&crew, &words, word_count, argv, &err))
        return options_fail(&options, &err);
    status = read_all(&crew);
    for (size_t i = 0; i < crew.job_count; i++)
        text_done(&crew.jobs[i].text);
    free(crew.jobs);
    return status;
}
