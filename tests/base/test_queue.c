/* The bounded queue. Also run under ThreadSanitizer (.ci/run). */
#include "wane/clock.h"
#include "wane/queue.h"

#include <pthread.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdlib.h>

#include <cmocka.h>

static int numbers[100000];

static void messages_come_out_in_order(void **state)
{
    (void)state;
    struct queue *queue = queue_create(3, NULL);
    assert_true(queue_put(queue, &numbers[0]));
    assert_true(queue_try_put(queue, &numbers[1]));
    assert_true(queue_put(queue, &numbers[2]));
    assert_ptr_equal(queue_take(queue, 0), &numbers[0]);
    assert_true(queue_put(queue, &numbers[3]));
    for (int i = 1; i <= 3; i++)
        assert_ptr_equal(queue_take(queue, 0), &numbers[i]);
    assert_null(queue_take(queue, 0));
    queue_destroy(queue);
}

static void full_queue_refuses_who_will_not_wait(void **state)
{
    (void)state;
    struct queue *queue = queue_create(1, NULL);
    assert_true(queue_try_put(queue, &numbers[0]));
    assert_false(queue_try_put(queue, &numbers[1]));
    assert_int_equal(queue_count(queue), 1);
    assert_ptr_equal(queue_take(queue, INT64_MAX), &numbers[0]);
    queue_destroy(queue);
}

static void taking_gives_up_at_the_deadline(void **state)
{
    (void)state;
    struct queue *queue = queue_create(1, NULL);
    int64_t deadline_ns = clock_monotonic_ns() + CLOCK_NS_PER_S / 100;
    assert_null(queue_take(queue, deadline_ns));
    assert_true(clock_monotonic_ns() >= deadline_ns);
    queue_destroy(queue);
}

static void closed_queue_gives_what_is_left_and_takes_no_more(void **state)
{
    (void)state;
    struct queue *queue = queue_create(2, NULL);
    assert_true(queue_put(queue, &numbers[0]));
    queue_close(queue);
    assert_false(queue_put(queue, &numbers[1]));
    assert_false(queue_is_finished(queue));
    assert_ptr_equal(queue_take(queue, INT64_MAX), &numbers[0]);
    assert_true(queue_is_finished(queue));
    assert_null(queue_take(queue, INT64_MAX));
    queue_destroy(queue);
}

static void what_is_left_is_destroyed_with_the_queue(void **state)
{
    (void)state;
    struct queue *queue = queue_create(4, free);
    for (int i = 0; i < 3; i++)
        assert_true(queue_put(queue, malloc(16)));
    free(queue_take(queue, 0));
    queue_destroy(queue); /* AddressSanitizer sees a leak */
    queue_destroy(NULL);
}

#define WRITERS     3
#define PER_WRITER  20000
#define QUEUE_SMALL 5

static void *write_many(void *user)
{
    struct queue *queue = user;
    for (int i = 0; i < PER_WRITER; i++) {
        if (!queue_put(queue, &numbers[i]))
            return NULL;
    }
    return user;
}

static void *read_all(void *user)
{
    static _Thread_local uint64_t sum;
    struct queue *queue = user;
    const int *message;
    sum = 0;
    while ((message = queue_take(queue, INT64_MAX)) != NULL)
        sum += (uint64_t)(message - numbers);
    uint64_t *result = malloc(sizeof *result);
    *result = sum;
    return result;
}

static void full_queue_makes_the_writers_wait_and_loses_nothing(void **state)
{
    (void)state;
    struct queue *queue = queue_create(QUEUE_SMALL, NULL);
    pthread_t writers[WRITERS], readers[2];
    uint64_t sum = 0;
    for (int i = 0; i < 2; i++)
        assert_int_equal(pthread_create(&readers[i], NULL, read_all, queue), 0);
    for (int i = 0; i < WRITERS; i++)
        assert_int_equal(pthread_create(&writers[i], NULL, write_many, queue), 0);
    for (int i = 0; i < WRITERS; i++) {
        void *result = NULL;
        pthread_join(writers[i], &result);
        assert_ptr_equal(result, queue);
    }
    queue_close(queue);
    for (int i = 0; i < 2; i++) {
        void *result = NULL;
        pthread_join(readers[i], &result);
        sum += *(uint64_t *)result;
        free(result);
    }
    assert_int_equal(sum, (uint64_t)WRITERS * PER_WRITER * (PER_WRITER - 1) / 2);
    queue_destroy(queue);
}

static void closing_frees_a_writer_that_waits(void **state)
{
    (void)state;
    struct queue *queue = queue_create(1, NULL);
    pthread_t writer;
    void *result = queue;
    assert_int_equal(pthread_create(&writer, NULL, write_many, queue), 0);
    while (queue_count(queue) == 0)
        clock_sleep_until(clock_monotonic_ns() + 1000000);
    queue_close(queue);
    pthread_join(writer, &result);
    assert_null(result);
    assert_ptr_equal(queue_take(queue, 0), &numbers[0]);
    queue_destroy(queue);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(messages_come_out_in_order),
        cmocka_unit_test(full_queue_refuses_who_will_not_wait),
        cmocka_unit_test(taking_gives_up_at_the_deadline),
        cmocka_unit_test(closed_queue_gives_what_is_left_and_takes_no_more),
        cmocka_unit_test(what_is_left_is_destroyed_with_the_queue),
        cmocka_unit_test(full_queue_makes_the_writers_wait_and_loses_nothing),
        cmocka_unit_test(closing_frees_a_writer_that_waits),
    };
    return cmocka_run_group_tests_name("base.queue", tests, NULL, NULL);
}
