/* A series' labels on the modes of a strike, and what a sheet says of a strike that carries them.
 */
#include "series/store.h"

#include <stdio.h>
#include <string.h>

const struct tracks *series_tracks(const struct series *series)
{
    return &series->tracks;
}

void tracks_label(struct tracks *tracks, struct reading *reading, bool learns)
{
    int modes[SERIES_TRACKS_MAX];
    tracks_follow(tracks, reading, learns, modes);
    if (tracks->count == 0)
        return;
    for (unsigned i = 0; i < reading->mode_count; i++)
        snprintf(reading->modes[i].label, sizeof reading->modes[i].label, "other");
    for (unsigned t = 0; t < tracks->count; t++) {
        if (modes[t] >= 0)
            memcpy(reading->modes[modes[t]].label, tracks->tracks[t].label, READING_LABEL_MAX);
    }
}

unsigned part_decide(const struct part *part, const struct reading *reading, double clock_u_ppm,
                     struct limit_result out_results[LIMITS_MAX], enum decision *out_all)
{
    int modes[SERIES_TRACKS_MAX];
    *out_all = DECISION_NONE;
    if (reading->verdict == VERDICT_REJECTED)
        return 0;
    for (unsigned t = 0; t < SERIES_TRACKS_MAX; t++) {
        modes[t] = -1;
        for (unsigned i = 0; t < part->mode_count && i < reading->mode_count; i++) {
            if (strcmp(part->modes[t].label, reading->modes[i].label) == 0)
                modes[t] = (int)i;
        }
    }
    return decide_strike(part, modes, reading, clock_u_ppm, out_results, out_all);
}

unsigned series_odd_ids(const struct series *series, int64_t *out_ids, unsigned ids_max)
{
    unsigned count = 0;
    for (size_t i = 0; i < series->row_count && count < ids_max; i++) {
        if (series->rows[i].is_odd)
            out_ids[count++] = series->rows[i].id;
    }
    return count;
}

bool series_lead(const struct series *series, int64_t id, struct mode *out_mode)
{
    for (size_t i = series->row_count; i-- > 0 && series->rows[i].id >= id;) {
        const struct row *row = &series->rows[i];
        const struct cell *cell = &row->cells[0];
        if (row->id != id || row->verdict != VERDICT_GOOD || row->is_set_aside || !(cell->f_hz > 0))
            continue;
        *out_mode = (struct mode){.f_hz = cell->f_hz,
                                  .f_u_hz = (double)cell->f_u_hz,
                                  .decay_per_s = cell->decay_per_s,
                                  .decay_u_per_s = (double)cell->decay_u_per_s,
                                  .f_decay_cov = cell->cov,
                                  .level_dbfs = (double)cell->level_dbfs};
        memcpy(out_mode->label, series->tracks.tracks[0].label, READING_LABEL_MAX);
        return true;
    }
    return false;
}
