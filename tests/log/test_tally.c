/* A series brought up to date from the log: the same as one made anew; steps told once; fast. */
#include "support/log_scene.h"
#include "support/scratch.h"
#include "wane/tally.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include <cmocka.h>

struct bench {
    struct scratch scratch;
    struct log_writer *writer;
    struct log_reader *reader;
    struct tally followed, anew;
    uint64_t seed;
    int64_t strikes;
};

static struct error err;

#define OK(call)                                                                                   \
    do {                                                                                           \
        if (!(call))                                                                               \
            fail_msg("%s: %s", #call, err.text);                                                   \
    } while (0)

static int begin(void **state)
{
    struct bench *bench = calloc(1, sizeof *bench);
    char path[512];
    assert_non_null(bench);
    scratch_make(&bench->scratch);
    scratch_path(&bench->scratch, "log.sqlite", path);
    bench->writer = log_writer_open(path, NULL, LOG_SCENE_MS, NULL, &err);
    bench->reader = log_reader_open(path, &err);
    assert_non_null(bench->reader);
    bench->seed = 7;
    *state = bench;
    return 0;
}

static int end(void **state)
{
    struct bench *bench = *state;
    tally_done(&bench->followed);
    tally_done(&bench->anew);
    log_reader_close(bench->reader);
    log_writer_close(bench->writer);
    scratch_remove(&bench->scratch);
    free(bench);
    return 0;
}

static int64_t open_series(struct bench *bench, const char *part)
{
    struct log_series series = {.name = "s", .input = "bench"};
    int64_t id = 0;
    snprintf(series.part, sizeof series.part, "%s", part);
    OK(log_series_create(bench->writer, &series, LOG_SCENE_MS, &id, &err));
    return id;
}

/* Good strikes of `modes` modes from 500 Hz on, each 0.01 Hz about its place. */
static void append(struct bench *bench, int64_t series, size_t count, unsigned modes,
                   double shift_hz)
{
    struct log_entry entries[50];
    struct reading readings[50];
    struct strike *strike = log_scene_strike(&bench->seed, SAMPLES_NONE, 100);
    int64_t ids[50];
    assert_true(count <= 50);
    for (size_t i = 0; i < count; i++) {
        reading_init(&readings[i]);
        readings[i].verdict = VERDICT_GOOD;
        readings[i].mode_count = modes;
        for (unsigned m = 0; m < modes; m++) {
            double f_hz =
                500.0 * (m + 1) + shift_hz + 0.02 * (log_scene_uniform(&bench->seed) - 0.5);
            double q = 1000 * (1 + 0.01 * (log_scene_uniform(&bench->seed) - 0.5));
            struct mode *mode = &readings[i].modes[m];
            *mode = (struct mode){.f_hz = f_hz,
                                  .f_u_hz = 1e-4,
                                  .decay_per_s = 3.14159265 * f_hz / q,
                                  .decay_u_per_s = 1e-4,
                                  .q = q,
                                  .q_u = 0.1,
                                  .natural_f_hz = f_hz,
                                  .zeta = 0.5 / q,
                                  .zeta_u = 1e-8,
                                  .t60_s = 1,
                                  .t60_u_s = 1e-3};
            snprintf(mode->label, sizeof mode->label, "%u", m + 1);
        }
        entries[i] = (struct log_entry){.strike = strike, .reading = &readings[i]};
        log_scene_context(bench->strikes++, &entries[i].context);
        entries[i].context.series = series;
        entries[i].context.keep_samples = false;
    }
    OK(log_append(bench->writer, entries, count, ids, &err));
    strike_destroy(strike);
}

static void what_is_followed_is_what_is_read_anew(void **state)
{
    struct bench *bench = *state;
    int64_t id = open_series(bench, "");
    append(bench, id, 3, 2, 0);
    OK(tally_update(&bench->followed, bench->reader, NULL, id, &err));
    append(bench, id, 4, 2, 0);
    const struct log_change aside = {.set_aside = LOG_SET, .reason = "held"};
    OK(log_change_strike(bench->writer, 2, &aside, NULL, &err));
    OK(tally_update(&bench->followed, bench->reader, NULL, id, &err));
    OK(tally_update(&bench->anew, bench->reader, NULL, id, &err));
    struct text followed = {0}, anew = {0};
    OK(tally_read_json(&bench->followed, bench->reader, &followed, &err));
    OK(tally_read_json(&bench->anew, bench->reader, &anew, &err));
    assert_string_equal(followed.data, anew.data);
    assert_non_null(strstr(anew.data, "\"set_aside\":1"));
    assert_int_equal(bench->anew.summary.count.counted, 6);
    text_done(&followed);
    text_done(&anew);
    assert_false(tally_update(&bench->anew, bench->reader, NULL, 99, &err));
    assert_int_equal(err.kind, ERROR_NOT_FOUND);
}

static void a_new_sheet_is_used_from_the_next_look_on(void **state)
{
    struct bench *bench = *state;
    int64_t id = open_series(bench, "cup");
    char etag[LOG_ETAG_MAX];
    append(bench, id, 3, 2, 0);
    OK(tally_update(&bench->followed, bench->reader, NULL, id, &err));
    assert_false(bench->followed.has_part);
    assert_non_null(strstr(bench->followed.part_problem, "cup"));
    OK(log_part_put(bench->writer, "cup", "[part]\nname = cup\n[mode low]\nband_hz = 490 ... 510\n",
                    NULL, LOG_SCENE_MS, etag, &err));
    OK(tally_update(&bench->followed, bench->reader, NULL, id, &err));
    assert_true(bench->followed.has_part);
    assert_string_equal(bench->followed.summary.modes[0].label, "low");
    assert_int_equal(bench->followed.summary.modes[0].n, 3);
}

static void a_step_is_told_once_with_the_strike_where_it_began(void **state)
{
    struct bench *bench = *state;
    int64_t id = open_series(bench, "");
    unsigned steps = 0;
    int64_t from = 0;
    append(bench, id, 40, 1, 0);
    OK(tally_update(&bench->followed, bench->reader, NULL, id, &err));
    for (int i = 0; i < 30; i++) {
        append(bench, id, 1, 1, 0.03);
        OK(tally_update(&bench->followed, bench->reader, NULL, id, &err));
        for (unsigned n = 0; n < bench->followed.notice_count; n++) {
            const struct tally_notice *told = &bench->followed.notices[n];
            if (told->quantity == QUANTITY_F_HZ && told->notice.event == WATCH_STEP) {
                steps++;
                from = told->notice.from_id;
            }
        }
    }
    assert_int_equal(steps, 1);
    assert_true(llabs(from - 41) <= 1);
}

/* The figure of issue 5 is 5 ms an update; printed, not asserted: the clock asserts nothing. */
static void a_series_of_a_thousand_strikes_takes_one_more(void **state)
{
    struct bench *bench = *state;
    int64_t id = open_series(bench, "");
    struct timespec before, after;
    for (int i = 0; i < 20; i++)
        append(bench, id, 50, 8, 0);
    OK(tally_update(&bench->followed, bench->reader, NULL, id, &err));
    append(bench, id, 1, 8, 0);
    clock_gettime(CLOCK_MONOTONIC, &before);
    OK(tally_update(&bench->followed, bench->reader, NULL, id, &err));
    clock_gettime(CLOCK_MONOTONIC, &after);
    print_message("1000 strikes of 8 modes and one more: %.2f ms\n",
                  (double)(after.tv_sec - before.tv_sec) * 1e3 +
                      (double)(after.tv_nsec - before.tv_nsec) / 1e6);
    assert_int_equal(bench->followed.summary.count.counted, 1001);
    assert_int_equal(bench->followed.summary.mode_count, 8);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(what_is_followed_is_what_is_read_anew, begin, end),
        cmocka_unit_test_setup_teardown(a_new_sheet_is_used_from_the_next_look_on, begin, end),
        cmocka_unit_test_setup_teardown(a_step_is_told_once_with_the_strike_where_it_began, begin,
                                        end),
        cmocka_unit_test_setup_teardown(a_series_of_a_thousand_strikes_takes_one_more, begin, end),
    };
    return cmocka_run_group_tests_name("log.tally", tests, NULL, NULL);
}
