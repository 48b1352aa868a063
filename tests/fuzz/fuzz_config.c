/* waned's settings file. */
#include "fuzz.h"

#include "daemon/options.h"

#include <stdio.h>

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    FILE *file = fopen("fuzz.ini", "wb");
    if (file == NULL)
        return 0;
    (void)fwrite(bytes, 1, size, file);
    (void)fclose(file);
    char program[] = "waned", word[] = "--config", path[] = "./fuzz.ini";
    char *argv[] = {program, word, path, NULL};
    struct options options;
    struct text problems = {0};
    bool is_read = options_read(3, argv, &options, &problems);
    PROMISE(is_read == (problems.length == 0));
    text_done(&problems);
    return 0;
}
