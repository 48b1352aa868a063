/* bench_log FOLDER STRIKES: makes a log of so many strikes (without samples, two modes each), times
 * what people wait for, and deletes it. Prints one line a figure. */
#include "support/log_scene.h"
#include "wane/clock.h"

#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

enum { BATCH = 1000 };

static struct error err;

static void give_up(const char *what)
{
    fprintf(stderr, "bench_log: %s: %s\n", what, err.text);
    exit(EXIT_FAILURE);
}

static double ms_since(int64_t begin_ns)
{
    return (double)(clock_monotonic_ns() - begin_ns) / 1e6;
}

static void fill(struct log_writer *writer, int64_t count)
{
    struct log_entry *entries = calloc(BATCH, sizeof *entries);
    struct reading *readings = calloc(BATCH, sizeof *readings);
    int64_t *ids = calloc(BATCH, sizeof *ids);
    uint64_t seed = 1;
    struct strike *strike = log_scene_strike(&seed, SAMPLES_24_BIT, 1000);
    if (entries == NULL || readings == NULL || ids == NULL)
        give_up("memory");
    strike->carried_count = 0;
    strike->lost_count = 0;
    for (int64_t done = 0; done < count; done += BATCH) {
        for (int64_t i = 0; i < BATCH; i++) {
            int64_t n = done + i;
            struct log_context *context = &entries[i].context;
            log_scene_reading(&seed, (enum verdict)(n % 10 == 0 ? 2 : n % 10 < 3), &readings[i]);
            readings[i].mode_count = 2;
            readings[i].tone_count = 0;
            entries[i].strike = strike;
            entries[i].reading = &readings[i];
            log_scene_context(n, context);
            context->keep_samples = false;
            snprintf(context->part, LOG_NAME_MAX, "part-%d", (int)(n / 1000 % 50));
            snprintf(context->specimen, LOG_NAME_MAX, "%d", (int)(n / 20));
        }
        if (!log_append(writer, entries, BATCH, ids, &err))
            give_up("append");
    }
    free(entries);
    free(readings);
    free(ids);
    strike_destroy(strike);
}

static void time_page(struct log_reader *reader, const char *name,
                      const struct log_selection *selection)
{
    double best = 1e9;
    double first = 0;
    struct log_page page = {0};
    for (int i = 0; i < 5; i++) {
        struct text text = {0};
        int64_t begin = clock_monotonic_ns();
        if (!log_read_page(reader, selection, &text, &page, &err))
            give_up(name);
        double ms = ms_since(begin);
        best = ms < best ? ms : best;
        first = i == 0 ? ms : first;
        text_done(&text);
    }
    printf("page, %-28s %9.3f ms at first, %9.3f ms at best (%zu strikes)\n", name, first, best,
           page.count);
}

static struct log_selection words(const char *word, const char *value)
{
    struct log_selection selection = {0};
    if (!log_selection_set(&selection, word, value, &err))
        give_up(word);
    return selection;
}

static void time_pages(const char *path, int64_t count)
{
    int64_t begin = clock_monotonic_ns();
    struct log_reader *reader = log_reader_open(path, &err);
    if (reader == NULL)
        give_up(path);
    printf("opening %.3f ms\n", ms_since(begin));
    struct log_selection selection = {0};
    char value[64];
    time_page(reader, "newest 50", &selection);
    selection.limit = 1000;
    time_page(reader, "newest 1000", &selection);
    selection.limit = 0;
    selection.before = count / 2;
    time_page(reader, "50 from the middle", &selection);
    selection = words("verdict", "rejected");
    time_page(reader, "rejected", &selection);
    selection = words("verdict", "doubtful,rejected");
    time_page(reader, "doubtful,rejected", &selection);
    selection = words("part", "part-7");
    time_page(reader, "of a part", &selection);
    selection = words("specimen", "77");
    time_page(reader, "of a specimen", &selection);
    selection = words("from", "2026-12-02");
    time_page(reader, "from the second day", &selection);
    selection = words("to", "2026-12-01T09:00:00Z");
    time_page(reader, "to the first hour", &selection);
    selection = words("to", "2026-12-05");
    time_page(reader, "to the fourth day", &selection);
    snprintf(value, sizeof value, "%" PRId64, count - 10);
    selection = words("changed_since", value);
    time_page(reader, "last ten changes", &selection);
    selection = words("changed_since", "5");
    time_page(reader, "nearly all changes", &selection);
    struct log_counts counts;
    begin = clock_monotonic_ns();
    if (!log_counts(reader, &counts, &err))
        give_up("counts");
    printf("counts %.3f ms (%" PRId64 " strikes, %.0f bytes each)\n", ms_since(begin),
           counts.strikes, (double)counts.bytes / (double)counts.strikes);
    log_reader_close(reader);
}

static void time_export(const char *path, enum log_export_format format, const char *name)
{
    struct log_reader *reader = log_reader_open(path, &err);
    struct log_selection all = {.limit = 200000};
    int64_t begin = clock_monotonic_ns();
    struct log_export *export = log_export_begin(reader, &all, format, &err);
    if (export == NULL)
        give_up(name);
    struct text piece = {0};
    bool is_done = false;
    double bytes = 0;
    while (!is_done) {
        text_clear(&piece);
        if (!log_export_next(export, &piece, &is_done, &err))
            give_up(name);
        bytes += (double)piece.length;
    }
    double s = ms_since(begin) / 1e3;
    struct log_counts counts;
    (void)log_counts(reader, &counts, &err);
    double strikes = counts.strikes < 200000 ? (double)counts.strikes : 200000;
    printf("export, %s: %.0f strikes/s, %.1f MB/s\n", name, strikes / s, bytes / 1e6 / s);
    text_done(&piece);
    log_export_end(export);
    log_reader_close(reader);
}

static void time_commits(struct log_writer *writer)
{
    uint64_t seed = 8;
    double sum = 0;
    double worst = 0;
    struct strike *strike = log_scene_strike(&seed, SAMPLES_24_BIT, 144000);
    for (int i = 0; i < 50; i++) {
        struct reading reading;
        struct log_entry entry = {.strike = strike, .reading = &reading};
        int64_t id = 0;
        log_scene_reading(&seed, VERDICT_GOOD, &reading);
        log_scene_context(i, &entry.context);
        int64_t begin = clock_monotonic_ns();
        if (!log_append(writer, &entry, 1, &id, &err))
            give_up("append");
        double ms = ms_since(begin);
        sum += ms;
        worst = ms > worst ? ms : worst;
    }
    printf("commit of a strike of 144000 samples: mean %.1f ms, worst %.1f ms\n", sum / 50, worst);
    strike_destroy(strike);
}

int main(int argc, char **argv)
{
    char path[512];
    if (argc != 3) {
        fputs("usage: bench_log FOLDER STRIKES\n", stderr);
        return 2;
    }
    int64_t count = (strtoll(argv[2], NULL, 10) + BATCH - 1) / BATCH * BATCH;
    snprintf(path, sizeof path, "%s/bench-log-%d.sqlite", argv[1], (int)getpid());
    struct log_writer *writer = log_writer_open(path, NULL, LOG_SCENE_MS, NULL, &err);
    if (writer == NULL)
        give_up(path);
    int64_t begin = clock_monotonic_ns();
    fill(writer, count);
    printf("filled with %.0f strikes/s\n", (double)count / ms_since(begin) * 1e3);
    time_pages(path, count);
    time_export(path, LOG_EXPORT_CSV, "CSV");
    time_export(path, LOG_EXPORT_JSON, "JSON");
    time_commits(writer);
    log_writer_close(writer);
    static const char *const tails[] = {"", "-wal", "-shm", ".lock"};
    for (size_t i = 0; i < sizeof tails / sizeof tails[0]; i++) {
        char name[600];
        snprintf(name, sizeof name, "%s%s", path, tails[i]);
        (void)unlink(name);
    }
    return 0;
}
