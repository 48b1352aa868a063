#include "fit/refine.h"

#include "fit/matrix.h"

#include <math.h>
#include <string.h>

/* Of moments.h: beyond it the moments are gathered anew. */
#define STRAIN_MAX    0.02
#define STRAIN_COARSE 0.3

bool segment_may_work(const struct segment *segment, double share)
{
    return segment->work_max == 0 || (double)segment->work < share * (double)segment->work_max;
}

void segment_begin(struct segment *segment, const float *y, size_t frame_count)
{
    segment->y = y;
    segment->frame_count = frame_count;
    segment->pole_count = 0;
    segment->explained = 0;
}

bool segment_add_pole(struct segment *segment, enum pole_kind kind, double complex p)
{
    if (segment->pole_count >= POLES_MAX)
        return false;
    unsigned k = segment->pole_count++;
    segment->poles[k] = (struct pole){.kind = kind, .p = p};
    segment->has_moments[k] = false;
    return true;
}

void segment_remove_pole(struct segment *segment, unsigned index)
{
    for (unsigned k = index; k + 1 < segment->pole_count; k++) {
        segment->poles[k] = segment->poles[k + 1];
        segment->has_moments[k] = false; /* their memory belongs to the index */
    }
    segment->pole_count--;
}

void segment_restore(struct segment *segment, const struct pole *poles, unsigned count)
{
    memcpy(segment->poles, poles, count * sizeof *poles);
    segment->pole_count = count;
    memset(segment->has_moments, 0, sizeof segment->has_moments);
}

static void gather(struct segment *segment, unsigned k)
{
    const struct pole *pole = &segment->poles[k];
    size_t length = pole_length(pole, segment->frame_count);
    size_t block = moments_block_for(length);
    struct moments *moments = &segment->moments[k];
    moments->m = (double complex(*)[MOMENT_ORDERS])(segment->moment_pool +
                                                    k * segment->pool_blocks * MOMENT_ORDERS);
    moments_gather(segment->y, length, pole->p, block, segment->table, moments);
    segment->has_moments[k] = true;
    segment->work += length / 600;
}

static void gather_where_needed(struct segment *segment, double strain_max)
{
    for (unsigned k = 0; k < segment->pole_count; k++) {
        if (!segment->has_moments[k] ||
            moments_strain(&segment->moments[k], segment->poles[k].p) > strain_max)
            gather(segment, k);
    }
}

static void fill_pair_sums(struct segment *segment)
{
    for (unsigned k = 0; k < segment->pole_count; k++) {
        double complex pk = segment->poles[k].p;
        for (unsigned l = 0; l <= k; l++) {
            double complex pl = segment->poles[l].p;
            size_t a = segment->moments[k].length, b = segment->moments[l].length;
            size_t count = a < b ? a : b;
            double complex(*kl)[3] = segment->pair_sums[k * POLES_MAX + l];
            double complex(*lk)[3] = segment->pair_sums[l * POLES_MAX + k];
            geometric_sums(pk + conj(pl), count, kl[0]);
            geometric_sums(pk + pl, count, kl[1]);
            for (int m = 0; m < 3; m++) {
                lk[0][m] = conj(kl[0][m]);
                lk[1][m] = kl[1][m];
            }
        }
    }
}

static double inner(const struct segment *segment, const struct parameter *a,
                    const struct parameter *b)
{
    const double complex(*sums)[3] =
        (const double complex(*)[3])segment->pair_sums[a->pole * POLES_MAX + b->pole];
    unsigned m = a->order + b->order;
    return 0.5 * creal(a->d * (conj(b->d) * sums[0][m] + b->d * sums[1][m]));
}

static unsigned list_parameters(const struct segment *segment, bool with_poles,
                                struct parameter *out)
{
    unsigned n = 0;
    for (unsigned k = 0; k < segment->pole_count; k++) {
        const struct pole *pole = &segment->poles[k];
        out[n++] = (struct parameter){k, 0, PARAMETER_RE, 1};
        if (pole->kind != POLE_REAL)
            out[n++] = (struct parameter){k, 0, PARAMETER_IM, J};
        if (!with_poles || pole->is_fixed)
            continue;
        if (pole->kind != POLE_TONE)
            out[n++] = (struct parameter){k, 1, PARAMETER_A, -pole->c};
        if (pole->kind != POLE_REAL)
            out[n++] = (struct parameter){k, 1, PARAMETER_W, J * pole->c};
    }
    return n;
}

static void fill_matrix(const struct segment *segment, const struct parameter *parameters,
                        unsigned n)
{
    for (unsigned i = 0; i < n; i++)
        for (unsigned j = 0; j <= i; j++) {
            double value = inner(segment, &parameters[i], &parameters[j]);
            segment->matrix[i * n + j] = value;
            segment->matrix[j * n + i] = value;
        }
}

/* Needs pair sums. data_sums[k] = sum y exp(p n), sum n y exp(p n). */
static bool solve_amplitudes(struct segment *segment, const double complex (*data_sums)[2])
{
    struct parameter parameters[PARAMETERS_MAX];
    double scale[PARAMETERS_MAX], x[PARAMETERS_MAX], b[PARAMETERS_MAX];
    unsigned n = list_parameters(segment, false, parameters);
    fill_matrix(segment, parameters, n);
    for (unsigned i = 0; i < n; i++)
        x[i] = b[i] = creal(parameters[i].d * data_sums[parameters[i].pole][0]);
    if (!matrix_factor(segment->matrix, n, scale, NULL))
        return false;
    matrix_solve(segment->matrix, n, scale, x);
    segment->explained = 0;
    for (unsigned k = 0; k < segment->pole_count; k++)
        segment->poles[k].c = 0;
    for (unsigned i = 0; i < n; i++) {
        segment->poles[parameters[i].pole].c += x[i] * parameters[i].d;
        segment->explained += x[i] * b[i];
    }
    return true;
}

static void evaluate_data(const struct segment *segment, double complex (*out_sums)[2])
{
    for (unsigned k = 0; k < segment->pole_count; k++)
        moments_evaluate(&segment->moments[k], segment->poles[k].p, out_sums[k]);
}

/* One damped step: fills move [pole_count] with the change of each pole. Needs pair sums and
 * amplitudes at the present poles. */
static bool find_step(struct segment *segment, const double complex (*data_sums)[2], double damping,
                      double complex *move)
{
    struct parameter parameters[PARAMETERS_MAX];
    double scale[PARAMETERS_MAX], x[PARAMETERS_MAX], extra[PARAMETERS_MAX];
    unsigned n = list_parameters(segment, true, parameters);
    fill_matrix(segment, parameters, n);
    for (unsigned i = 0; i < n; i++) {
        const struct parameter *parameter = &parameters[i];
        x[i] = creal(parameter->d * data_sums[parameter->pole][parameter->order]);
        for (unsigned l = 0; l < segment->pole_count; l++) {
            struct parameter term = {l, 0, PARAMETER_RE, segment->poles[l].c};
            x[i] -= inner(segment, parameter, &term);
        }
        extra[i] = parameter->order > 0 ? damping : 0;
    }
    if (!matrix_factor(segment->matrix, n, scale, extra))
        return false;
    matrix_solve(segment->matrix, n, scale, x);
    memset(move, 0, segment->pole_count * sizeof *move);
    for (unsigned i = 0; i < n; i++) {
        if (parameters[i].what == PARAMETER_A)
            move[parameters[i].pole] += -x[i];
        else if (parameters[i].what == PARAMETER_W)
            move[parameters[i].pole] += J * x[i];
    }
    return true;
}

/* A step longer than the pole's own width has left the region where the linear model holds. */
static double complex bounded_move(const struct pole *pole, double complex move, size_t frame_count)
{
    double a = -creal(pole->p);
    double width = fmax(a, 3.0 / (double)frame_count);
    double da = -creal(move), dw = cimag(move);
    da = fmax(-0.6 * a, fmin(da, fmax(a, width)));
    dw = fmax(-2 * width, fmin(dw, 2 * width));
    double w = cimag(pole->p) + dw;
    if (pole->kind != POLE_REAL && (w <= 0 || w >= 3.14159))
        dw = 0;
    return -da + J * dw;
}

/* Everything that depends on the poles as they stand. */
static bool evaluate(struct segment *segment, double strain_max, double complex (*out_sums)[2])
{
    gather_where_needed(segment, strain_max);
    fill_pair_sums(segment);
    segment->work += (size_t)segment->pole_count * segment->pole_count;
    evaluate_data(segment, out_sums);
    return solve_amplitudes(segment, (const double complex(*)[2])out_sums);
}

static double apply_move(struct segment *segment, double complex *move)
{
    double size = 0;
    for (unsigned k = 0; k < segment->pole_count; k++) {
        struct pole *pole = &segment->poles[k];
        move[k] = bounded_move(pole, move[k], segment->frame_count);
        double width = fmax(-creal(pole->p), 1.0 / (double)segment->frame_count);
        size = fmax(size, cabs(move[k]) / width);
        pole->p += move[k];
    }
    return size;
}

bool refine_poles(struct segment *segment, unsigned steps_max)
{
    double complex data_sums[POLES_MAX][2], move[POLES_MAX];
    struct pole before[POLES_MAX];
    double damping = 1e-4;
    bool was_still = false;
    /* While poles are still on their way, coarse moments do; the last steps are made on fine ones.
     */
    double strain_max = STRAIN_COARSE;
    if (!evaluate(segment, strain_max, data_sums))
        return false;
    for (unsigned step = 0; step < steps_max && segment_may_work(segment, 1); step++) {
        memcpy(before, segment->poles, sizeof before);
        double explained_before = segment->explained;
        bool is_better = false;
        double size = 0;
        if (find_step(segment, (const double complex(*)[2])data_sums, damping, move)) {
            size = apply_move(segment, move);
            is_better = evaluate(segment, strain_max, data_sums) &&
                        segment->explained >= explained_before * (1 - 1e-10);
        }
        if (!is_better) {
            memcpy(segment->poles, before, sizeof before);
            if (damping > 1e5 || !evaluate(segment, strain_max, data_sums))
                break;
            damping = fmax(damping * 10, 1e-5);
        } else {
            damping *= 0.1;
            bool is_still = segment->explained - explained_before < segment->negligible;
            if (size < 1e-6 ||
                (is_still && damping < 1e-8 && strain_max == STRAIN_MAX && size < 1e-4)) {
                if (size < 1e-6 || was_still)
                    break;
            }
            was_still = is_still;
        }
        if (size < 1e-3 && strain_max > STRAIN_MAX) {
            strain_max = STRAIN_MAX;
            if (!evaluate(segment, strain_max, data_sums))
                break;
        }
    }
    return evaluate(segment, STRAIN_MAX, data_sums);
}

bool refine_amplitudes(struct segment *segment)
{
    double complex data_sums[POLES_MAX][2];
    return evaluate(segment, STRAIN_MAX, data_sums);
}

unsigned refine_information(struct segment *segment, struct parameter *out_parameters,
                            double *out_scale)
{
    fill_pair_sums(segment);
    unsigned n = list_parameters(segment, true, out_parameters);
    fill_matrix(segment, out_parameters, n);
    return matrix_factor(segment->matrix, n, out_scale, NULL) ? n : 0;
}
