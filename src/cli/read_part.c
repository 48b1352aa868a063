#include "cli/read_part.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

bool part_load(const char *path, struct part *out_part, struct text *out_complaints,
               struct error *err)
{
    FILE *file = fopen(path, "rb");
    if (file == NULL)
        return error_set(err, ERROR_NOT_FOUND, "%s: no such part sheet", path);
    /* One byte more than a sheet may have, so that a longer one is noticed. */
    char *text = malloc(PART_SHEET_MAX + 1);
    size_t size = text != NULL ? fread(text, 1, PART_SHEET_MAX + 1, file) : 0;
    bool ok = text != NULL || error_set(err, ERROR_MEMORY, "no memory for the part sheet");
    if (ok && ferror(file))
        ok = error_set(err, ERROR_NOT_FOUND, "%s: cannot be read", path);
    if (ok && size > PART_SHEET_MAX)
        ok = error_set(err, ERROR_LIMIT, "%s: a part sheet has at most %d bytes", path,
                       PART_SHEET_MAX);
    ok = ok && part_read(path, text, size, out_part, out_complaints, err);
    free(text);
    fclose(file);
    return ok;
}

void part_judge(const struct part *part, struct tracks *tracks, struct reading *reading,
                struct judgement *out_judgement)
{
    int modes[SERIES_TRACKS_MAX];
    tracks_follow(tracks, reading, reading->verdict == VERDICT_GOOD, modes);
    for (unsigned i = 0; i < reading->mode_count; i++)
        snprintf(reading->modes[i].label, sizeof reading->modes[i].label, "other");
    for (unsigned i = 0; i < tracks->count; i++) {
        if (modes[i] >= 0)
            memcpy(reading->modes[modes[i]].label, tracks->tracks[i].label,
                   sizeof reading->modes[0].label);
    }
    out_judgement->part = part->name;
    out_judgement->limit_count = 0;
    out_judgement->all = DECISION_NONE;
    if (reading->verdict != VERDICT_REJECTED)
        out_judgement->limit_count =
            decide_strike(part, modes, reading, 0, out_judgement->limits, &out_judgement->all);
}
