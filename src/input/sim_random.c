#include "input/sim_random.h"

#include "wane/strike.h"

#include <math.h>

static uint64_t mix(uint64_t bits)
{
    bits = (bits ^ (bits >> 30)) * UINT64_C(0xBF58476D1CE4E5B9);
    bits = (bits ^ (bits >> 27)) * UINT64_C(0x94D049BB133111EB);
    return bits ^ (bits >> 31);
}

uint64_t sim_hash(uint64_t key, uint64_t counter)
{
    /* 2^64 over the golden ratio, odd: neighbouring counters start far apart. */
    const uint64_t step = UINT64_C(0x9E3779B97F4A7C15);
    return mix(mix(key + step) + (counter + 1) * step);
}

uint64_t sim_key(uint64_t seed, uint64_t kind, uint64_t index)
{
    return sim_hash(sim_hash(seed, kind), index);
}

/* 0 < x < 1, 53 bits. */
static double open_unit(uint64_t bits)
{
    return ((double)(bits >> 11) + 0.5) * 0x1p-53;
}

double sim_uniform(struct sim_random *random, double low, double high)
{
    return low + (high - low) * open_unit(sim_hash(random->key, random->counter++));
}

double sim_normal(struct sim_random *random)
{
    double radius = sqrt(-2 * log(sim_uniform(random, 0, 1)));
    return radius * cos(2 * WANE_PI * sim_uniform(random, 0, 1));
}

void sim_normal_fill(uint64_t key, uint64_t first, double *out, size_t count)
{
    uint64_t mixed_key = mix(key);
    for (size_t i = 0; i + 1 < count; i += 2) {
        uint64_t bits = sim_hash(mixed_key, first + i);
        double radius = sqrt(-2 * log(open_unit(bits)));
        double angle = 2 * WANE_PI * open_unit(mix(bits ^ mixed_key));
        out[i] = radius * cos(angle);
        out[i + 1] = radius * sin(angle);
    }
}
