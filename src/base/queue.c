#include "wane/queue.h"

#include <assert.h>
#include <pthread.h>
#include <stdlib.h>
#include <time.h>

/* Invariant: count <= capacity; the messages are slots[first], slots[first + 1] ... modulo
 * capacity. All fields below the mutex are read and written with it held. */
struct queue {
    size_t capacity;
    void (*destroy_message)(void *message);
    pthread_mutex_t mutex;
    pthread_cond_t not_empty, not_full;
    void **slots;
    size_t first, count;
    bool is_closed;
};

struct queue *queue_create(size_t capacity, void (*destroy_message)(void *message))
{
    assert(capacity >= 1);
    struct queue *queue = calloc(1, sizeof *queue);
    if (queue == NULL)
        return NULL;
    queue->slots = calloc(capacity, sizeof *queue->slots);
    if (queue->slots == NULL) {
        free(queue);
        return NULL;
    }
    queue->capacity = capacity;
    queue->destroy_message = destroy_message;
    pthread_mutex_init(&queue->mutex, NULL);
    pthread_condattr_t attributes;
    pthread_condattr_init(&attributes);
    pthread_condattr_setclock(&attributes, CLOCK_MONOTONIC);
    pthread_cond_init(&queue->not_empty, &attributes);
    pthread_cond_init(&queue->not_full, &attributes);
    pthread_condattr_destroy(&attributes);
    return queue;
}

void queue_destroy(struct queue *queue)
{
    if (queue == NULL)
        return;
    for (size_t i = 0; i < queue->count; i++) {
        assert(queue->destroy_message != NULL);
        queue->destroy_message(queue->slots[(queue->first + i) % queue->capacity]);
    }
    pthread_cond_destroy(&queue->not_full);
    pthread_cond_destroy(&queue->not_empty);
    pthread_mutex_destroy(&queue->mutex);
    free(queue->slots);
    free(queue);
}

static bool put_locked(struct queue *queue, void *message)
{
    if (queue->is_closed || queue->count == queue->capacity)
        return false;
    queue->slots[(queue->first + queue->count) % queue->capacity] = message;
    queue->count++;
    pthread_cond_signal(&queue->not_empty);
    return true;
}

bool queue_put(struct queue *queue, void *message)
{
    pthread_mutex_lock(&queue->mutex);
    while (queue->count == queue->capacity && !queue->is_closed)
        pthread_cond_wait(&queue->not_full, &queue->mutex);
    bool is_put = put_locked(queue, message);
    pthread_mutex_unlock(&queue->mutex);
    return is_put;
}

bool queue_try_put(struct queue *queue, void *message)
{
    pthread_mutex_lock(&queue->mutex);
    bool is_put = put_locked(queue, message);
    pthread_mutex_unlock(&queue->mutex);
    return is_put;
}

/* false when the time is over. */
static bool wait_for_message(struct queue *queue, int64_t deadline_ns)
{
    if (deadline_ns == INT64_MAX)
        return pthread_cond_wait(&queue->not_empty, &queue->mutex) == 0;
    if (deadline_ns <= 0)
        return false;
    struct timespec deadline = {.tv_sec = (time_t)(deadline_ns / 1000000000),
                                .tv_nsec = (long)(deadline_ns % 1000000000)};
    return pthread_cond_timedwait(&queue->not_empty, &queue->mutex, &deadline) == 0;
}

void *queue_take(struct queue *queue, int64_t deadline_ns)
{
    void *message = NULL;
    pthread_mutex_lock(&queue->mutex);
    while (queue->count == 0 && !queue->is_closed) {
        if (!wait_for_message(queue, deadline_ns))
            break;
    }
    if (queue->count > 0) {
        message = queue->slots[queue->first];
        queue->first = (queue->first + 1) % queue->capacity;
        queue->count--;
        pthread_cond_signal(&queue->not_full);
    }
    pthread_mutex_unlock(&queue->mutex);
    return message;
}

void queue_close(struct queue *queue)
{
    pthread_mutex_lock(&queue->mutex);
    queue->is_closed = true;
    pthread_cond_broadcast(&queue->not_empty);
    pthread_cond_broadcast(&queue->not_full);
    pthread_mutex_unlock(&queue->mutex);
}

bool queue_is_finished(struct queue *queue)
{
    pthread_mutex_lock(&queue->mutex);
    bool is_finished = queue->is_closed && queue->count == 0;
    pthread_mutex_unlock(&queue->mutex);
    return is_finished;
}

size_t queue_count(struct queue *queue)
{
    pthread_mutex_lock(&queue->mutex);
    size_t count = queue->count;
    pthread_mutex_unlock(&queue->mutex);
    return count;
}
