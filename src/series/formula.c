#include "series/formula.h"

#include <string.h>

bool formula_apply(const struct formula *formula, struct constant *out_constant, struct error *err)
{
    struct measured inputs[PROPAGATE_INPUTS_MAX];
    double shares[PROPAGATE_INPUTS_MAX];
    if (formula->count > BUDGET_LINES_MAX)
        return error_set(err, ERROR_INTERNAL, "a formula with %zu inputs", formula->count);
    for (size_t i = 0; i < formula->count; i++)
        inputs[i] = formula->inputs[i].value;
    struct measured result;
    if (!propagate(formula->model, formula->user, inputs, formula->count, formula->correlation,
                   &result, shares, err))
        return false;
    memset(out_constant, 0, sizeof *out_constant);
    out_constant->result = result;
    out_constant->source = formula->source;
    for (size_t i = 0; i < formula->count; i++) {
        out_constant->budget.lines[i].name = formula->inputs[i].name;
        out_constant->budget.lines[i].share = shares[i];
    }
    out_constant->budget.count = formula->count;
    return true;
}
