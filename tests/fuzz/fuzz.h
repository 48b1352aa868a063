/* What every fuzz target is: libFuzzer calls it with bytes; it must neither crash nor break a
 * promise of the header that it tests. */
#ifndef WANE_TESTS_FUZZ_H
#define WANE_TESTS_FUZZ_H

#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size);

/* A promise of a header. */
#define PROMISE(is_kept)                                                                           \
    do {                                                                                           \
        if (!(is_kept))                                                                            \
            abort();                                                                               \
    } while (0)

#endif
