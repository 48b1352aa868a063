/* Random numbers of the simulated bench: pure functions of a key and a counter, so that any sample
 * can be made without making those before it, and block sizes cannot matter. */
#ifndef SIM_RANDOM_H
#define SIM_RANDOM_H

#include <stddef.h>
#include <stdint.h>

/* 64 well mixed bits of (key, counter): the output function of SplitMix (Steele, Lea, Flood 2014,
 * "Fast splittable pseudorandom number generators", figure 17), applied twice. */
uint64_t sim_hash(uint64_t key, uint64_t counter);

/* A key for the index-th thing of one kind under a seed. */
uint64_t sim_key(uint64_t seed, uint64_t kind, uint64_t index);

/* = {.key = ...} starts it. */
struct sim_random {
    uint64_t key, counter;
};

double sim_uniform(struct sim_random *random, double low, double high); /* low <= x < high */
double sim_normal(struct sim_random *random);                           /* mean 0, sd 1 */

/* Independent standard normal numbers number first ... first + count - 1 of the key's sequence;
 * first and count even. Box and Muller 1958. */
void sim_normal_fill(uint64_t key, uint64_t first, double *out, size_t count);

#endif
