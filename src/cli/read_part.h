/* A part sheet at work in `wane read`: modes get the sheet's labels, values its decisions. */
#ifndef WANE_CLI_READ_PART_H
#define WANE_CLI_READ_PART_H

#include "wane/series.h"

/* What a sheet says of one strike. */
struct judgement {
    const char *part; /* its name; borrowed from the sheet */
    struct limit_result limits[LIMITS_MAX];
    unsigned limit_count;
    enum decision all;
};

/* Reads the sheet at path. out_complaints: every complaint, one a line. ERROR_NOT_FOUND when there
 * is no such file, ERROR_USAGE for what is wrong in it. */
bool part_load(const char *path, struct part *out_part, struct text *out_complaints,
               struct error *err);

/* Follows the reading's modes along the tracks, gives them the tracks' labels ("other" for those
 * that the sheet does not name) and holds them against the limits. A rejected strike has no values
 * to decide on. */
void part_judge(const struct part *part, struct tracks *tracks, struct reading *reading,
                struct judgement *out_judgement);

#endif
