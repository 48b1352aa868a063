/* A bounded queue of messages between threads, in order, any number of writers and readers.
 * A message owns what it points to; putting it gives ownership away, taking it takes it over. */
#ifndef WANE_QUEUE_H
#define WANE_QUEUE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

struct queue;

/* capacity >= 1 messages. destroy_message is called for what is left at queue_destroy (NULL: then
 * nothing may be left). NULL when memory ran out. */
struct queue *queue_create(size_t capacity, void (*destroy_message)(void *message));
/* Nobody may wait in it any more. NULL is allowed. */
void queue_destroy(struct queue *queue);

/* Waits while the queue is full. false once it is closed: the message stays the caller's. */
bool queue_put(struct queue *queue, void *message);
/* Never waits. false when the queue is full or closed: the message stays the caller's. */
bool queue_try_put(struct queue *queue, void *message);

/* The oldest message; waits for one until the monotonic clock shows deadline_ns (INT64_MAX: for
 * ever; 0: does not wait). NULL when the time is over, or when the queue is closed and empty. */
void *queue_take(struct queue *queue, int64_t deadline_ns);

/* No more puts; those who wait in queue_put give up. What is inside can still be taken. */
void queue_close(struct queue *queue);

/* Closed and empty: nothing will ever come again. */
bool queue_is_finished(struct queue *queue);
size_t queue_count(struct queue *queue);

#endif
