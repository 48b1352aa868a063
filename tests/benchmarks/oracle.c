/* Levenberg-Marquardt on all parameters at once. Normal equations come from the sums of poles.h:
 * the samples are touched once an element and iteration. */
#include "oracle.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

struct state {
    struct element elements[ELEMENTS_MAX];
    struct column columns[COLUMNS_MAX];
    size_t column_count;
    double *gram;
    double rhs[COLUMNS_MAX]; /* J^T (samples - model) */
    double cost;
};

static void evaluate(struct state *state, const double *samples, size_t frame_count,
                     double sample_energy, size_t element_count)
{
    double model[COLUMNS_MAX];
    state->column_count = poles_columns(state->elements, element_count, state->columns, NULL);
    double model_energy = poles_gram(state->elements, element_count, state->columns,
                                     state->column_count, frame_count, state->gram, model);
    state->cost = sample_energy + model_energy;
    size_t i = 0;
    for (size_t e = 0; e < element_count; e++) {
        double complex y[2];
        poles_project(samples, frame_count, state->elements[e].q, y);
        state->cost -= 2.0 * creal(state->elements[e].c * y[0]);
        for (; i < state->column_count && state->columns[i].element == e; i++)
            state->rhs[i] = creal(state->columns[i].x * y[state->columns[i].power]) - model[i];
    }
}

static void apply_step(struct element *elements, size_t element_count, const double *step)
{
    size_t i = 0;
    for (size_t e = 0; e < element_count; e++) {
        struct element *element = &elements[e];
        switch (element->kind) {
        case ELEMENT_MODE:
            element->c += CMPLX(step[i], step[i + 1]);
            element->q += CMPLX(step[i + 2], step[i + 3]);
            i += 4;
            break;
        case ELEMENT_TONE:
            element->c += CMPLX(step[i], step[i + 1]);
            element->q += CMPLX(0.0, step[i + 2]);
            i += 3;
            break;
        case ELEMENT_REAL:
            element->c += step[i];
            element->q += step[i + 1];
            i += 2;
            break;
        case ELEMENT_REAL_KNOWN:
            element->c += step[i];
            i += 1;
            break;
        }
    }
}

/* The amplitudes that fit best at the given poles. */
static bool solve_amplitudes(struct state *state, size_t element_count)
{
    size_t n = 0;
    size_t kept[COLUMNS_MAX];
    for (size_t i = 0; i < state->column_count; i++)
        if (state->columns[i].power == 0)
            kept[n++] = i;
    double *gram = malloc(n * n * sizeof *gram);
    double rhs[COLUMNS_MAX] = {0}, small[COLUMNS_MAX], step[COLUMNS_MAX] = {0};
    if (!gram)
        return false;
    for (size_t i = 0; i < n; i++) {
        rhs[i] = state->rhs[kept[i]];
        for (size_t k = 0; k < n; k++)
            gram[i * n + k] = state->gram[kept[i] * state->column_count + kept[k]];
    }
    bool solved = poles_solve(gram, rhs, n, 0.0, small);
    free(gram);
    for (size_t i = 0; i < n; i++)
        step[kept[i]] = small[i];
    if (solved)
        apply_step(state->elements, element_count, step);
    return solved;
}

static unsigned iterate(struct state *now, struct state *trial, const double *samples,
                        size_t frame_count, double sample_energy, size_t element_count)
{
    double damping = 0.0;
    unsigned used = 1;
    for (unsigned tries = 0; tries < 200; tries++) {
        double step[COLUMNS_MAX];
        size_t n = now->column_count;
        if (!poles_solve(now->gram, now->rhs, n, damping, step)) {
            damping = damping > 0.0 ? damping * 10.0 : 1e-12;
            continue;
        }
        double gain = 0.0; /* drop of the cost that the step promises */
        for (size_t i = 0; i < n; i++)
            gain += step[i] * now->rhs[i];
        memcpy(trial->elements, now->elements, sizeof trial->elements);
        apply_step(trial->elements, element_count, step);
        evaluate(trial, samples, frame_count, sample_energy, element_count);
        /* Amplitudes follow the poles at once (variable projection): valleys are bent less so. */
        if (solve_amplitudes(trial, element_count))
            evaluate(trial, samples, frame_count, sample_energy, element_count);
        double rounding = 1e-13 * sample_energy;
        if (trial->cost <= now->cost + rounding) {
            double *gram = now->gram;
            *now = *trial;
            trial->gram = gram;
            damping *= 0.1;
            if (damping < 1e-13)
                damping = 0.0;
            used++;
            /* a step worth a millionth of one noise variance moves nothing by 0.001 sd */
            if (damping <= 0.0 && gain < 1e-6 * now->cost / (double)frame_count)
                break;
        } else {
            damping = damping > 0.0 ? damping * 10.0 : 1e-12;
            if (damping > 1e6)
                break;
        }
    }
    return used;
}

unsigned oracle_solve(const double *samples, size_t frame_count, struct element *elements,
                      size_t element_count)
{
    double sample_energy = 0.0;
    for (size_t i = 0; i < frame_count; i++)
        sample_energy += samples[i] * samples[i];
    struct state *states = calloc(2, sizeof *states);
    size_t gram_size = (size_t)COLUMNS_MAX * COLUMNS_MAX * sizeof(double);
    unsigned used = 0;
    if (states && (states[0].gram = malloc(gram_size)) && (states[1].gram = malloc(gram_size))) {
        memcpy(states[0].elements, elements, element_count * sizeof *elements);
        evaluate(&states[0], samples, frame_count, sample_energy, element_count);
        if (solve_amplitudes(&states[0], element_count)) {
            evaluate(&states[0], samples, frame_count, sample_energy, element_count);
            used =
                iterate(&states[0], &states[1], samples, frame_count, sample_energy, element_count);
            memcpy(elements, states[0].elements, element_count * sizeof *elements);
        }
    }
    if (states) {
        free(states[0].gram);
        free(states[1].gram);
    }
    free(states);
    return used;
}
