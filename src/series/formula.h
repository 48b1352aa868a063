/* How a constant is made of a formula and its inputs: shared by the formulas of bodies and tanks.
 */
#ifndef WANE_SERIES_FORMULA_H
#define WANE_SERIES_FORMULA_H

#include "wane/constants.h"

struct formula_input {
    const char *name;
    struct measured value;
};

struct formula {
    propagate_model *model;
    const struct formula_input *inputs;
    size_t count;
    const double *correlation; /* [count x count] or NULL */
    const void *user;
    const char *source;
};

/* Value, u and budget; the remark stays empty. ERROR_DATA as propagate. */
bool formula_apply(const struct formula *formula, struct constant *out_constant, struct error *err);

#endif
