#include "near.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

void near_check(const char *expression, double value, double expected, double limit,
                const char *file, int line)
{
    if (fabs(value - expected) <= limit)
        return;
    print_error("%s = %.17g, expected %.17g within %.3g, off by %.3g\n", expression, value,
                expected, limit, value - expected);
    _fail(file, line);
}

double near_size(double value)
{
    return fabs(value);
}
