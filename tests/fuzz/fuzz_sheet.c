/* Part sheets, which also come over HTTP. */
#include "fuzz.h"

#include "wane/part.h"

#include <math.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    static struct part part;
    struct text complaints = {0};
    struct error err = {0};
    memset(&part, 0x5A, sizeof part);
    bool is_read = part_read("sheet", (const char *)bytes, size, &part, &complaints, &err);
    PROMISE(is_read == (err.kind == ERROR_NONE));
    if (is_read) {
        PROMISE(part.mode_count <= READING_MODES_MAX && part.split_count <= PART_SPLITS_MAX);
        PROMISE(part.name[0] != '\0' && complaints.length == 0);
        for (unsigned i = 0; i < part.mode_count; i++)
            PROMISE(part.modes[i].band_low_hz < part.modes[i].band_high_hz);
    } else {
        PROMISE(err.text[0] != '\0');
    }
    text_done(&complaints);
    return 0;
}
