#include "detect/level.h"

#include <math.h>
#include <string.h>

#define LANES 8 /* partial results side by side, so that compilers use vectors */

struct level_hop level_measure(const float *samples, size_t count)
{
    float peak[LANES] = {0}, sum[LANES] = {0};
    size_t whole = count / LANES * LANES;
    for (size_t i = 0; i < whole; i += LANES)
        for (size_t j = 0; j < LANES; j++) {
            float x = samples[i + j], size = fabsf(x);
            sum[j] += x;
            peak[j] = peak[j] > size ? peak[j] : size;
        }
    struct level_hop hop = {0};
    for (size_t j = 0; j < LANES; j++) {
        hop.sum += sum[j];
        hop.peak = hop.peak > peak[j] ? hop.peak : peak[j];
    }
    for (size_t i = whole; i < count; i++) {
        hop.sum += samples[i];
        hop.peak = fmaxf(hop.peak, fabsf(samples[i]));
    }
    return hop;
}

void level_init(struct level *level, double rate_hz, size_t hop)
{
    memset(level, 0, sizeof *level);
    double hops = ceil(0.05 * rate_hz / (double)hop);
    level->kept = hops > LEVEL_HOPS_MAX ? LEVEL_HOPS_MAX : (size_t)hops;
}

void level_push(struct level *level, float peak)
{
    level->at = (level->at + 1) % LEVEL_HOPS_MAX;
    level->peaks[level->at] = peak;
}

float level_peak_between(const struct level *level, size_t from, size_t until)
{
    float peak = 0;
    for (size_t back = from; back < until && back < LEVEL_HOPS_MAX; back++) {
        float value = level->peaks[(level->at + LEVEL_HOPS_MAX - back) % LEVEL_HOPS_MAX];
        peak = peak > value ? peak : value;
    }
    return peak;
}

float level_peak(const struct level *level)
{
    return level_peak_between(level, 0, level->kept);
}

double level_dbfs(double amplitude)
{
    return amplitude > 1e-10 ? 20 * log10(amplitude) : -200;
}

bool level_is_clipped(float peak)
{
    return peak >= 32766.5F / 32768.0F;
}
