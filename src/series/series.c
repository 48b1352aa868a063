#include "series/store.h"

#include <stdlib.h>
#include <string.h>

#define STRIKES_AT_FIRST 64

struct series *series_create(const struct part *part, double clock_u_ppm, struct error *err)
{
    struct series *series = calloc(1, sizeof *series);
    if (series == NULL) {
        error_set(err, ERROR_MEMORY, "memory ran out for a series");
        return NULL;
    }
    series->has_part = part != NULL;
    if (part != NULL)
        series->part = *part;
    series->clock_u_ppm = clock_u_ppm;
    tracks_init(&series->tracks, part);
    return series;
}

void series_destroy(struct series *series)
{
    if (series == NULL)
        return;
    free(series->rows);
    free(series);
}

static bool make_room(struct series *series, struct error *err)
{
    if (series->row_count < series->row_capacity)
        return true;
    if (series->row_capacity == SERIES_STRIKES_MAX) {
        /* A quarter at a time, so that a full series does not move its rows at every strike. */
        size_t leaving = SERIES_STRIKES_MAX / 4;
        memmove(series->rows, series->rows + leaving,
                (series->row_count - leaving) * sizeof *series->rows);
        series->row_count -= leaving;
        series->forgotten += (unsigned)leaving;
        return true;
    }
    size_t capacity = series->row_capacity == 0 ? STRIKES_AT_FIRST : 2 * series->row_capacity;
    if (capacity > SERIES_STRIKES_MAX)
        capacity = SERIES_STRIKES_MAX;
    struct row *rows = realloc(series->rows, capacity * sizeof *rows);
    if (rows == NULL)
        return error_set(err, ERROR_MEMORY, "memory ran out for a series of %zu strikes", capacity);
    series->rows = rows;
    series->row_capacity = capacity;
    return true;
}

static void fill_row(struct series *series, struct row *row, const struct reading *reading,
                     bool learns)
{
    int modes[SERIES_TRACKS_MAX];
    tracks_follow(&series->tracks, reading, learns, modes);
    row->verdict = reading->verdict;
    memset(row->cells, 0, sizeof row->cells);
    for (unsigned t = 0; t < series->tracks.count; t++) {
        if (modes[t] < 0)
            continue;
        const struct mode *mode = &reading->modes[modes[t]];
        row->cells[t] =
            (struct cell){mode->f_hz,          mode->decay_per_s,          mode->f_decay_cov,
                          (float)mode->f_u_hz, (float)mode->decay_u_per_s, (float)mode->level_dbfs};
    }
}

bool series_add(struct series *series, int64_t id, double time_s, const struct reading *reading,
                bool is_set_aside, struct error *err)
{
    if (!make_room(series, err))
        return false;
    struct row *row = &series->rows[series->row_count++];
    *row = (struct row){.id = id, .time_s = time_s, .is_set_aside = is_set_aside};
    fill_row(series, row, reading, reading->verdict == VERDICT_GOOD && !is_set_aside);
    return true;
}

/* Ids grow from row to row. */
static struct row *find_row(const struct series *series, int64_t id)
{
    size_t low = 0, high = series->row_count;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (series->rows[middle].id < id)
            low = middle + 1;
        else
            high = middle;
    }
    return low < series->row_count && series->rows[low].id == id ? &series->rows[low] : NULL;
}

bool series_change(struct series *series, int64_t id, const struct reading *reading,
                   bool is_set_aside)
{
    struct row *row = find_row(series, id);
    if (row == NULL)
        return false;
    row->is_set_aside = is_set_aside;
    if (reading != NULL)
        fill_row(series, row, reading, false);
    return true;
}

bool series_is_odd(const struct series *series, int64_t id)
{
    const struct row *row = find_row(series, id);
    return row != NULL && row->is_odd;
}
