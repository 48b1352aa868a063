/* Checks of numbers that say what was expected of what when they fail. */
#ifndef WANE_TESTS_NEAR_H
#define WANE_TESTS_NEAR_H

/* |value - expected| <= limit, else the running cmocka case fails with expression, value, limit. */
#define CHECK_NEAR(value, expected, limit)                                                         \
    near_check(#value, (value), (expected), (limit), __FILE__, __LINE__)
/* |value / expected - 1| <= share. */
#define CHECK_SHARE(value, expected, share)                                                        \
    near_check(#value, (value), (expected), (share)*near_size(expected), __FILE__, __LINE__)

void near_check(const char *expression, double value, double expected, double limit,
                const char *file, int line);
double near_size(double value);

#endif
