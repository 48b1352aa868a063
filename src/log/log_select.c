#include "log/log_select.h"
#include "wane/clock.h"

#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* Up to so many index entries are gathered and sorted by id (some ms); above it the newest ids are
 * walked. */
#define NARROW_MAX 20000

/* ---- words ---- */

static bool set_id(const char *word, const char *value, int64_t least, int64_t *out_id,
                   struct error *err)
{
    size_t digits = strspn(value, "0123456789");
    if (digits == 0 || digits > 18 || value[digits] != '\0' || strtoll(value, NULL, 10) < least)
        return error_set(err, ERROR_USAGE, "%s=%.40s: must be a whole number from %" PRId64, word,
                         value, least);
    *out_id = strtoll(value, NULL, 10);
    return true;
}

static bool set_limit(const char *value, unsigned *out_limit, struct error *err)
{
    int64_t limit = 0;
    struct error ignored;
    if (!set_id("limit", value, 1, &limit, &ignored) || limit > LOG_PAGE_MAX)
        return error_set(err, ERROR_USAGE, "limit=%.40s: must be 1 ... %d", value, LOG_PAGE_MAX);
    *out_limit = (unsigned)limit;
    return true;
}

static bool set_verdicts(const char *value, unsigned *out_verdicts, struct error *err)
{
    unsigned verdicts = 0;
    const char *at = value;
    for (;;) {
        char name[16] = "";
        size_t length = strcspn(at, ",");
        snprintf(name, sizeof name, "%.*s", length < sizeof name ? (int)length : 0, at);
        enum verdict verdict = VERDICT_GOOD;
        if (!verdict_from_name(name, &verdict))
            return error_set(err, ERROR_USAGE,
                             "verdict=%.40s: must be good, doubtful or rejected, or several with "
                             "commas",
                             value);
        verdicts |= 1u << (unsigned)verdict;
        if (at[length] == '\0')
            break;
        at += length + 1;
    }
    *out_verdicts = verdicts;
    return true;
}

static bool set_name(const char *word, const char *value, char out_name[LOG_NAME_MAX],
                     struct error *err)
{
    if (value[0] == '\0')
        return error_set(err, ERROR_USAGE, "%s= is empty: name one or leave the word out", word);
    if (!log_text_fits(value, LOG_NAME_MAX, word, err)) {
        if (err != NULL)
            err->kind = ERROR_USAGE;
        return false;
    }
    snprintf(out_name, LOG_NAME_MAX, "%s", value);
    return true;
}

static bool set_time(const char *word, const char *value, bool *out_has, int64_t *out_ms,
                     struct error *err)
{
    if (!clock_parse_utc(value, out_ms))
        return error_set(err, ERROR_USAGE,
                         "%s=%.60s: must be a time such as 2026-12-01 or 2026-12-01T14:07:37Z",
                         word, value);
    *out_has = true;
    return true;
}

bool log_selection_set(struct log_selection *selection, const char *word, const char *value,
                       struct error *err)
{
    if (strcmp(word, "before") == 0)
        return set_id(word, value, 1, &selection->before, err);
    if (strcmp(word, "limit") == 0)
        return set_limit(value, &selection->limit, err);
    if (strcmp(word, "series") == 0)
        return set_id(word, value, 1, &selection->series, err);
    if (strcmp(word, "part") == 0)
        return set_name(word, value, selection->part, err);
    if (strcmp(word, "specimen") == 0)
        return set_name(word, value, selection->specimen, err);
    if (strcmp(word, "verdict") == 0)
        return set_verdicts(value, &selection->verdicts, err);
    if (strcmp(word, "from") == 0)
        return set_time(word, value, &selection->has_from, &selection->from_ms, err);
    if (strcmp(word, "to") == 0)
        return set_time(word, value, &selection->has_to, &selection->to_ms, err);
    if (strcmp(word, "changed_since") == 0) {
        bool is_set = set_id(word, value, 0, &selection->changed_since, err);
        selection->has_changed_since = selection->has_changed_since || is_set;
        return is_set;
    }
    return error_set(err, ERROR_USAGE,
                     "\"%.40s\" is no word to select strikes by: use before, limit, series, part, "
                     "specimen, verdict, from, to or changed_since",
                     word);
}

/* ---- SQL ---- */

/* Parameters: ?1 before, ?2 count, ?3 series, ?4 part, ?5 specimen, ?6 from, ?7 to, ?8
 * changed_since, ?9 the one verdict, ?10 after. */
enum route {
    ROUTE_IDS,
    ROUTE_SERIES,
    ROUTE_PART,
    ROUTE_SPECIMEN,
    ROUTE_VERDICT,
    ROUTE_REVISION, /* narrow: gathered and sorted */
    ROUTE_TIME      /* narrow: gathered and sorted */
};

static int64_t from_of(const struct log_selection *selection)
{
    return selection->has_from ? selection->from_ms : INT64_MIN;
}

static int64_t to_of(const struct log_selection *selection)
{
    return selection->has_to ? selection->to_ms : INT64_MAX;
}

static bool is_one_verdict(unsigned verdicts)
{
    return verdicts != 0 && (verdicts & (verdicts - 1)) == 0;
}

/* Runs `sql`, which may use ?6 ... ?8, for one integer. */
static bool ask_limits(sqlite3 *db, const struct log_selection *selection, const char *sql,
                       int64_t *out_value, struct error *err)
{
    struct log_ids ids = {.selection = selection};
    sqlite3_stmt *statement = sql_prepare(db, sql, err);
    if (statement == NULL)
        return false;
    log_ids_bind(statement, &ids, 0);
    bool is_good = sql_next(statement, err) == SQL_ROW;
    if (is_good)
        *out_value = sqlite3_column_int64(statement, 0);
    sqlite3_finalize(statement);
    return is_good;
}

#define COUNT_UP_TO(index, condition)                                                              \
    "SELECT count(*) FROM (SELECT 1 FROM strike INDEXED BY " index " WHERE " condition             \
    " LIMIT 20001)"
_Static_assert(NARROW_MAX == 20000, "the text above says one more");

#define TIME_CONDITION     "time_ms >= ?6 AND time_ms < ?7"
#define REVISION_CONDITION "revision > ?8"

static bool pick_route(sqlite3 *db, const struct log_selection *selection, enum route *out_route,
                       struct error *err)
{
    int64_t count = 0;
    *out_route = ROUTE_IDS;
    if (selection->series > 0) {
        *out_route = ROUTE_SERIES;
        return true;
    }
    if (selection->has_changed_since) {
        if (!ask_limits(db, selection, COUNT_UP_TO("strike_revision", REVISION_CONDITION), &count,
                        err))
            return false;
        if (count <= NARROW_MAX) {
            *out_route = ROUTE_REVISION;
            return true;
        }
    }
    if (selection->has_from || selection->has_to) {
        if (!ask_limits(db, selection, COUNT_UP_TO("strike_time", TIME_CONDITION), &count, err))
            return false;
        if (count <= NARROW_MAX) {
            *out_route = ROUTE_TIME;
            return true;
        }
    }
    if (selection->specimen[0] != '\0')
        *out_route = ROUTE_SPECIMEN;
    else if (selection->part[0] != '\0')
        *out_route = ROUTE_PART;
    else if (is_one_verdict(selection->verdicts))
        *out_route = ROUTE_VERDICT;
    return true;
}

/* The newest strike with a time before `to`, or 0. Where the clock was never set back that is the
 * last entry of the index of times, one step away. Where it was, a later id may have an earlier
 * time, and the index is read whole (it holds nothing else: 10 million entries take a second).
 * Exact: an id above the last entry's with an earlier time would be disordered. */
static bool newest_before(sqlite3 *db, const struct log_selection *selection, int64_t *out_id,
                          struct error *err)
{
    int64_t disordered = 0;
    if (!sql_integer(db, "SELECT disordered FROM state", 0, 0, &disordered, err) ||
        !sql_integer(db,
                     "SELECT id FROM strike INDEXED BY strike_time WHERE time_ms < ?1"
                     " ORDER BY time_ms DESC, id DESC LIMIT 1",
                     selection->to_ms, 0, out_id, err))
        return false;
    return *out_id >= disordered ||
           sql_integer(db, "SELECT max(id) FROM strike INDEXED BY strike_time WHERE time_ms < ?1",
                       selection->to_ms, 0, out_id, err);
}

/* Many strikes before `to`, perhaps after a million newer ones: the walk by ids starts at the
 * newest that qualifies. */
static bool skip_newer(sqlite3 *db, const struct log_selection *selection, int64_t *inout_before,
                       struct error *err)
{
    int64_t newest_id = 0;
    if (!newest_before(db, selection, &newest_id, err))
        return false;
    if (*inout_before > newest_id + 1)
        *inout_before = newest_id + 1;
    return true;
}

/* A leading '+' keeps SQLite from walking that column's index. */
static const char *unless(bool is_walked)
{
    return is_walked ? "" : "+";
}

static void write_sql(const struct log_selection *selection, enum route route, enum log_order order,
                      char *out, size_t out_size)
{
    static const char *const indexes[] = {
        [ROUTE_IDS] = " NOT INDEXED",
        [ROUTE_SERIES] = " INDEXED BY strike_series",
        [ROUTE_PART] = " INDEXED BY strike_part",
        [ROUTE_SPECIMEN] = " INDEXED BY strike_specimen",
        [ROUTE_VERDICT] = " INDEXED BY strike_verdict",
        [ROUTE_REVISION] = " INDEXED BY strike_revision",
        [ROUTE_TIME] = " INDEXED BY strike_time",
    };
    char verdicts[64] = "";
    if (route == ROUTE_VERDICT)
        snprintf(verdicts, sizeof verdicts, " AND verdict = ?9");
    else if (selection->verdicts != 0)
        snprintf(verdicts, sizeof verdicts, " AND ((1 << verdict) & %u) <> 0", selection->verdicts);
    char series[32] = "";
    char part[32] = "";
    char specimen[32] = "";
    char time[64] = "";
    char revision[32] = "";
    if (selection->series > 0)
        snprintf(series, sizeof series, " AND %sseries = ?3", unless(route == ROUTE_SERIES));
    if (selection->part[0] != '\0')
        snprintf(part, sizeof part, " AND %spart = ?4", unless(route == ROUTE_PART));
    if (selection->specimen[0] != '\0')
        snprintf(specimen, sizeof specimen, " AND %sspecimen = ?5",
                 unless(route == ROUTE_SPECIMEN));
    if (route == ROUTE_TIME)
        snprintf(time, sizeof time, " AND " TIME_CONDITION);
    else if (selection->has_from || selection->has_to)
        snprintf(time, sizeof time, " AND +time_ms >= ?6 AND +time_ms < ?7");
    if (selection->has_changed_since)
        snprintf(revision, sizeof revision, " AND %srevision > ?8",
                 unless(route == ROUTE_REVISION));
    snprintf(out, out_size,
             "SELECT id FROM strike%s WHERE id < ?1 AND id > ?10%s%s%s%s%s%s ORDER BY id %s"
             " LIMIT ?2",
             indexes[route], series, part, specimen, time, revision, verdicts,
             order == LOG_NEWEST_FIRST ? "DESC" : "ASC");
}

/* The ids that a span of time reaches over. */
static bool span_of_ids(sqlite3 *db, const struct log_selection *selection, struct log_ids *ids,
                        struct error *err)
{
    int64_t first = 0;
    int64_t last = 0;
    if (!ask_limits(db, selection,
                    "SELECT coalesce(min(id), 1) FROM strike INDEXED BY strike_time"
                    " WHERE " TIME_CONDITION,
                    &first, err) ||
        !ask_limits(db, selection,
                    "SELECT coalesce(max(id), 0) FROM strike INDEXED BY strike_time"
                    " WHERE " TIME_CONDITION,
                    &last, err))
        return false;
    ids->after = first - 1;
    if (ids->before > last + 1)
        ids->before = last + 1;
    return true;
}

bool log_ids_build(sqlite3 *db, const struct log_selection *selection, enum log_order order,
                   struct log_ids *out_ids, struct error *err)
{
    enum route route = ROUTE_IDS;
    struct log_ids ids = {.selection = selection};
    ids.before = selection->before > 0 ? selection->before : INT64_MAX;
    if (!pick_route(db, selection, &route, err))
        return false;
    if (order == LOG_OLDEST_FIRST && (selection->has_from || selection->has_to)) {
        /* Gathering and sorting again for each piece would cost more than walking past a few. */
        route = route == ROUTE_TIME ? ROUTE_IDS : route;
        if (!span_of_ids(db, selection, &ids, err))
            return false;
    } else if (selection->has_to && route != ROUTE_SERIES && route != ROUTE_REVISION &&
               route != ROUTE_TIME && !skip_newer(db, selection, &ids.before, err)) {
        return false;
    }
    write_sql(selection, route, order, ids.sql, sizeof ids.sql);
    *out_ids = ids;
    return true;
}

void log_ids_bind(sqlite3_stmt *statement, const struct log_ids *ids, int64_t count)
{
    const struct log_selection *selection = ids->selection;
    int verdict = 0;
    while (verdict < VERDICT_REJECTED && (selection->verdicts >> verdict & 1u) == 0)
        verdict++;
    /* Binding a parameter that the text does not use fails without harm. */
    sqlite3_bind_int64(statement, 1, ids->before);
    sqlite3_bind_int64(statement, 2, count);
    sqlite3_bind_int64(statement, 3, selection->series);
    sql_bind_text(statement, 4, selection->part);
    sql_bind_text(statement, 5, selection->specimen);
    sqlite3_bind_int64(statement, 6, from_of(selection));
    sqlite3_bind_int64(statement, 7, to_of(selection));
    sqlite3_bind_int64(statement, 8, selection->changed_since);
    sqlite3_bind_int(statement, 9, verdict);
    sqlite3_bind_int64(statement, 10, ids->after);
}
