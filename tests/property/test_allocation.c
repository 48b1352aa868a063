/* Once its workspace exists, the fit allocates nothing: not it, not FFTW, not LAPACK. This
 * program's own malloc counts all calls, those of shared libraries too (glibc lets a program
 * replace them). Sanitizers replace them as well: then the test says so and skips. */
#include "families.h"
#include "quick.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>

#if defined(__SANITIZE_ADDRESS__) || defined(__SANITIZE_THREAD__)
#define CAN_COUNT 0
static unsigned long calls;
#else
#define CAN_COUNT 1
static unsigned long calls;

/* glibc's own names behind malloc and its kin (glibc manual, "Replacing malloc"). */
void *__libc_malloc(size_t size);
void *__libc_calloc(size_t count, size_t size);
void *__libc_realloc(void *memory, size_t size);
void *__libc_memalign(size_t alignment, size_t size);

void *malloc(size_t size)
{
    calls++;
    return __libc_malloc(size);
}

void *calloc(size_t count, size_t size)
{
    calls++;
    return __libc_calloc(count, size);
}

void *realloc(void *memory, size_t size)
{
    calls++;
    return __libc_realloc(memory, size);
}

void *aligned_alloc(size_t alignment, size_t size)
{
    calls++;
    return __libc_memalign(alignment, size);
}

int posix_memalign(void **out, size_t alignment, size_t size)
{
    calls++;
    *out = __libc_memalign(alignment, size);
    return *out ? 0 : 12; /* ENOMEM */
}
#endif

static void a_fit_allocates_nothing_once_its_workspace_exists(void **state)
{
    (void)state;
    if (!CAN_COUNT) {
        printf("SKIPPED: a sanitizer owns malloc here\n");
        skip();
    }
    static const char *const names[] = {"single", "chord",    "doublet",  "attack", "tank",
                                        "hum",    "coloured", "restrike", "long"};
    struct error err = {0};
    struct fit_workspace *workspace = fit_workspace_create(4100000, &err);
    assert_non_null(workspace);
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++)
        for (unsigned index = 0; index < 3; index++) {
            struct scene scene;
            struct fit_settings settings = {0};
            struct reading reading;
            assert_true(family_make(family_find(names[i]), 9, index, &scene));
            struct strike *strike = bench_strike(&scene, &scene.takes[0]);
            assert_non_null(strike);
            unsigned long before = calls;
            bool fitted = fit_strike(workspace, strike, &settings, &reading, &err);
            unsigned long made = calls - before;
            if (made > 0)
                printf("%s %u (seed 9): %lu allocations\n", names[i], index, made);
            assert_true(fitted);
            assert_int_equal(made, 0);
            strike_destroy(strike);
            bench_done(&scene);
        }
    fit_workspace_destroy(workspace);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_fit_allocates_nothing_once_its_workspace_exists),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
