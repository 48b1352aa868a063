#include "wane/clock.h"

#include <errno.h>
#include <stdio.h>
#include <sys/timex.h>
#include <time.h>

#define MS_PER_S      INT64_C(1000)
#define NS_PER_MS     INT64_C(1000000)
#define S_PER_DAY     INT64_C(86400)
#define UTC_LAST_MS   INT64_C(253402300799999) /* 9999-12-31T23:59:59.999Z */
#define YEAR_FIRST    1970
#define DAYS_TO_1970  719468 /* from 0000-03-01 of the proleptic Gregorian calendar */
#define DAYS_PER_ERA  146097 /* 400 years */
#define YEARS_PER_ERA 400

static int64_t read_ns(clockid_t which)
{
    struct timespec now = {0};
    (void)clock_gettime(which, &now); /* cannot fail for the two clocks that POSIX demands */
    return (int64_t)now.tv_sec * CLOCK_NS_PER_S + now.tv_nsec;
}

int64_t clock_monotonic_ns(void)
{
    return read_ns(CLOCK_MONOTONIC);
}

int64_t clock_utc_ms(void)
{
    return read_ns(CLOCK_REALTIME) / NS_PER_MS;
}

int64_t clock_utc_ms_of(int64_t monotonic_ns)
{
    return (read_ns(CLOCK_REALTIME) - read_ns(CLOCK_MONOTONIC) + monotonic_ns) / NS_PER_MS;
}

void clock_format_utc(int64_t utc_ms, char *out, size_t out_size)
{
    if (utc_ms < 0)
        utc_ms = 0;
    if (utc_ms > UTC_LAST_MS)
        utc_ms = UTC_LAST_MS;
    time_t seconds = (time_t)(utc_ms / MS_PER_S);
    struct tm t = {0};
    (void)gmtime_r(&seconds, &t);
    (void)snprintf(out, out_size, "%04d-%02d-%02dT%02d:%02d:%02d.%03dZ", t.tm_year + 1900,
                   t.tm_mon + 1, t.tm_mday, t.tm_hour, t.tm_min, t.tm_sec,
                   (int)(utc_ms % MS_PER_S));
}

/* Days since 1970-01-01 of a date in the Gregorian calendar: years are counted from March, so that
 * the leap day is a year's last (derived from the calendar's rule: 97 leap days in 400 years). */
static int64_t days_of_date(int year, int month, int day)
{
    int64_t y = month > 2 ? year : year - 1;
    int64_t era = y / YEARS_PER_ERA, year_of_era = y % YEARS_PER_ERA;
    int64_t day_of_year = (153 * (month > 2 ? month - 3 : month + 9) + 2) / 5 + day - 1;
    return era * DAYS_PER_ERA + year_of_era * 365 + year_of_era / 4 - year_of_era / 100 +
           day_of_year - DAYS_TO_1970;
}

static int days_in_month(int year, int month)
{
    static const int days[] = {31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31};
    bool is_leap = (year % 4 == 0 && year % 100 != 0) || year % 400 == 0;
    return days[month - 1] + (month == 2 && is_leap ? 1 : 0);
}

/* Exactly `count` digits; moves *text on. */
static bool take_digits(const char **text, int count, int *out_value)
{
    int value = 0;
    for (int i = 0; i < count; i++) {
        char c = (*text)[i];
        if (c < '0' || c > '9')
            return false;
        value = value * 10 + (c - '0');
    }
    *text += count;
    *out_value = value;
    return true;
}

static bool take_char(const char **text, const char *any_of)
{
    for (; *any_of != '\0'; any_of++) {
        if (**text == *any_of) {
            (*text)++;
            return true;
        }
    }
    return false;
}

/* ".123..." in ms, further digits are cut; none is 0. */
static bool take_fraction_ms(const char **text, int *out_ms)
{
    *out_ms = 0;
    if (!take_char(text, "."))
        return true;
    int digit = 0, scale = 100;
    if (**text < '0' || **text > '9')
        return false;
    while (take_digits(text, 1, &digit)) {
        *out_ms += digit * scale;
        scale /= 10;
    }
    return true;
}

/* "Z" or "+01:00", in minutes east of UTC. */
static bool take_offset_min(const char **text, int *out_min)
{
    *out_min = 0;
    if (take_char(text, "Zz"))
        return true;
    int sign = **text == '-' ? -1 : 1, hours = 0, minutes = 0;
    if (!take_char(text, "+-") || !take_digits(text, 2, &hours) || !take_char(text, ":") ||
        !take_digits(text, 2, &minutes) || hours > 23 || minutes > 59)
        return false;
    *out_min = sign * (hours * 60 + minutes);
    return true;
}

static bool take_date(const char **text, int64_t *out_days)
{
    int year = 0, month = 0, day = 0;
    if (!take_digits(text, 4, &year) || !take_char(text, "-") || !take_digits(text, 2, &month) ||
        !take_char(text, "-") || !take_digits(text, 2, &day))
        return false;
    if (year < YEAR_FIRST || month < 1 || month > 12 || day < 1 || day > days_in_month(year, month))
        return false;
    *out_days = days_of_date(year, month, day);
    return true;
}

bool clock_parse_utc(const char *text, int64_t *out_utc_ms)
{
    int64_t days = 0;
    int hour = 0, minute = 0, second = 0, ms = 0, offset_min = 0;
    if (!take_date(&text, &days))
        return false;
    if (*text != '\0') {
        if (!take_char(&text, "Tt ") || !take_digits(&text, 2, &hour) || !take_char(&text, ":") ||
            !take_digits(&text, 2, &minute) || !take_char(&text, ":") ||
            !take_digits(&text, 2, &second) || !take_fraction_ms(&text, &ms) ||
            !take_offset_min(&text, &offset_min) || *text != '\0')
            return false;
        /* Second 60 is a leap second; POSIX time counts it as the next minute's first. */
        if (hour > 23 || minute > 59 || second > 60)
            return false;
    }
    int64_t minutes = (int64_t)hour * 60 + minute - offset_min;
    int64_t seconds = days * S_PER_DAY + minutes * 60 + second;
    *out_utc_ms = seconds * MS_PER_S + ms;
    return true;
}

bool clock_is_synced(void)
{
    struct timex state = {0}; /* modes 0: only asks */
    return adjtimex(&state) != TIME_ERROR && (state.status & STA_UNSYNC) == 0;
}

void clock_sleep_until(int64_t deadline_ns)
{
    if (deadline_ns <= 0)
        return;
    struct timespec until = {.tv_sec = (time_t)(deadline_ns / CLOCK_NS_PER_S),
                             .tv_nsec = (long)(deadline_ns % CLOCK_NS_PER_S)};
    while (clock_nanosleep(CLOCK_MONOTONIC, TIMER_ABSTIME, &until, NULL) == EINTR) {
    }
}
