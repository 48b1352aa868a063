#include "fit/moments.h"

#include <string.h>

/* Eight lanes whatever the machine has: the order of additions, and so the bits, are the same
 * everywhere. */
typedef float lanes __attribute__((vector_size(32)));
#define LANES 8

size_t moments_block_for(size_t length)
{
    size_t block = MOMENT_BLOCK_MIN;
    while (block < MOMENT_BLOCK_MAX && length / block > 96)
        block *= 2;
    return block;
}

static void fill_table(float *table, double complex p0, size_t block)
{
    double centre = ((double)block - 1) / 2;
    double complex step = cexp(p0);
    double complex value = cexp(-p0 * centre);
    for (size_t i = 0; i < block; i++) {
        double x = ((double)i - centre) / (double)block;
        double complex power = value;
        for (size_t k = 0; k < MOMENT_ORDERS; k++) {
            table[(2 * k) * block + i] = (float)creal(power);
            table[(2 * k + 1) * block + i] = (float)cimag(power);
            power *= x;
        }
        value *= step;
        if (i % 256 == 255)
            value = cexp(p0 * ((double)i + 1 - centre));
    }
}

static double sum_of(const lanes *v)
{
    float f[LANES];
    memcpy(f, v, sizeof f);
    return (((double)f[0] + (double)f[1]) + ((double)f[2] + (double)f[3])) +
           (((double)f[4] + (double)f[5]) + ((double)f[6] + (double)f[7]));
}

/* Two orders at a time: four sums and a sample fill the registers of a plain x86-64. */
static void gather_pair(const float *y, const float *table, size_t block, double complex out[2])
{
    lanes re0 = {0}, im0 = {0}, re1 = {0}, im1 = {0};
    for (size_t i = 0; i < block; i += LANES) {
        lanes sample, weight;
        memcpy(&sample, y + i, sizeof sample);
        memcpy(&weight, table + i, sizeof weight);
        re0 += sample * weight;
        memcpy(&weight, table + block + i, sizeof weight);
        im0 += sample * weight;
        memcpy(&weight, table + 2 * block + i, sizeof weight);
        re1 += sample * weight;
        memcpy(&weight, table + 3 * block + i, sizeof weight);
        im1 += sample * weight;
    }
    out[0] = sum_of(&re0) + sum_of(&im0) * J;
    out[1] = sum_of(&re1) + sum_of(&im1) * J;
}

static void gather_block(const float *y, const float *table, size_t block,
                         double complex out[MOMENT_ORDERS])
{
    gather_pair(y, table, block, out);
    gather_pair(y, table + 4 * block, block, out + 2);
}

void moments_gather(const float *y, size_t length, double complex p0, size_t block, float *table,
                    struct moments *out)
{
    fill_table(table, p0, block);
    out->p0 = p0;
    out->block = block;
    out->length = length;
    out->block_count = (length + block - 1) / block;
    size_t whole = length / block;
    for (size_t j = 0; j < whole; j++)
        gather_block(y + j * block, table, block, out->m[j]);
    if (whole < out->block_count) {
        float last[MOMENT_BLOCK_MAX] = {0};
        memcpy(last, y + whole * block, (length - whole * block) * sizeof *last);
        gather_block(last, table, block, out->m[whole]);
    }
}

void moments_evaluate(const struct moments *moments, double complex p, double complex out_s[2])
{
    double block = (double)moments->block;
    double centre = (block - 1) / 2;
    double complex x = (p - moments->p0) * block;
    double complex x2 = x * x / 2, x3 = x * x2 / 3;
    double complex step = cexp(p * block), turn = cexp(p * centre);
    double complex sum = 0, sum_n = 0;
    for (size_t j = 0; j < moments->block_count; j++) {
        const double complex *m = moments->m[j];
        double complex value = m[0] + x * m[1] + x2 * m[2] + x3 * m[3];
        double complex slope = block * (m[1] + x * m[2] + x2 * m[3]);
        sum += turn * value;
        sum_n += turn * (((double)j * block + centre) * value + slope);
        turn *= step;
    }
    out_s[0] = sum;
    out_s[1] = sum_n;
}

double moments_strain(const struct moments *moments, double complex p)
{
    return cabs(p - moments->p0) * (double)moments->block / 2;
}

void moments_subtract(float *y, size_t length, double complex p, double complex c, float *table)
{
    size_t block = moments_block_for(length);
    block = block > 256 ? 256 : block;
    double complex value = 1, step = cexp(p);
    for (size_t i = 0; i < block; i++) {
        table[i] = (float)creal(value);
        table[block + i] = (float)cimag(value);
        value *= step;
    }
    double complex jump = cexp(p * (double)block);
    for (size_t at = 0; at < length; at += block) {
        float re = (float)creal(c), im = (float)cimag(c);
        size_t count = length - at < block ? length - at : block;
        float *restrict out = y + at;
        const float *restrict cosine = table, *restrict sine = table + block;
        for (size_t i = 0; i < count; i++)
            out[i] -= re * cosine[i] - im * sine[i];
        c *= jump;
    }
}
