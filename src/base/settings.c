#include "wane/settings.h"
#include "wane/nearest.h"

#include <ini.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct reader {
    const char *file_name, *text;
    size_t size, at;
    int line;
    settings_take *take;
    void *user;
    struct text *complaints;
    struct error *err;
    bool has_failed;
    struct text seen; /* "section\nkey\0" of every entry so far */
    size_t seen_count;
};

static void complain(struct reader *reader, const char *sentence)
{
    if (!reader->has_failed)
        error_set(reader->err, ERROR_USAGE, "%s:%d: %s", reader->file_name, reader->line, sentence);
    reader->has_failed = true;
    if (reader->complaints != NULL)
        text_appendf(reader->complaints, "%s:%d: %s\n", reader->file_name, reader->line, sentence);
}

/* Well-formed UTF-8 without NUL (RFC 3629; overlong forms and surrogates are no letters). */
static bool is_utf8(const char *bytes, size_t count)
{
    size_t i = 0;
    while (i < count) {
        unsigned char lead = (unsigned char)bytes[i];
        size_t more = lead < 0x80 ? 0 : lead < 0xC2 ? 9 : lead < 0xE0 ? 1 : lead < 0xF0 ? 2 : 3;
        if (lead == 0 || lead > 0xF4 || more > 3 || i + more >= count)
            return false;
        for (size_t k = 1; k <= more; k++)
            if (((unsigned char)bytes[i + k] & 0xC0u) != 0x80u)
                return false;
        unsigned char second = more > 0 ? (unsigned char)bytes[i + 1] : 0;
        if ((lead == 0xE0 && second < 0xA0) || (lead == 0xED && second > 0x9F) ||
            (lead == 0xF0 && second < 0x90) || (lead == 0xF4 && second > 0x8F))
            return false;
        i += more + 1;
    }
    return true;
}

/* NULL when libinih will take the line as it stands, else what is wrong with it. */
static const char *line_fault(const char *line)
{
    size_t blanks = strspn(line, " \t");
    const char *first = line + blanks;
    if (*first == '\0' || *first == ';' || *first == '#')
        return NULL;
    if (blanks > 0)
        return "a line must not begin with a blank: it would be joined to the one before";
    if (*first == '[') {
        const char *end = strchr(first, ']');
        if (end == NULL)
            return "this section has no closing ]";
        return end - first > SETTINGS_NAME_MAX ? "this section's name is too long: at most 49 bytes"
                                               : NULL;
    }
    size_t name = strcspn(first, "=:");
    if (first[name] == '\0')
        return "this is neither [section] nor key = value";
    return name > SETTINGS_NAME_MAX ? "this key is too long: at most 49 bytes"
           : name == 0              ? "there is no key before the ="
                                    : NULL;
}

/* Gives libinih one line at a time, so that its handler runs while `line` is that line's number.
 * What it would misread becomes an empty line. */
static char *next_line(char *out, int out_size, void *stream)
{
    struct reader *reader = stream;
    if (reader->at >= reader->size)
        return NULL;
    const char *begin = reader->text + reader->at;
    const char *end = memchr(begin, '\n', reader->size - reader->at);
    size_t length = end == NULL ? reader->size - reader->at : (size_t)(end - begin);
    reader->at += length + (end != NULL);
    reader->line++;
    if (length > 0 && begin[length - 1] == '\r')
        length--;
    if (reader->line == 1 && length >= 3 && memcmp(begin, "\xEF\xBB\xBF", 3) == 0) {
        begin += 3;
        length -= 3;
    }
    char line[SETTINGS_LINE_MAX + 2] = "";
    size_t kept = length < sizeof line - 1 ? length : sizeof line - 1;
    memcpy(line, begin, kept);
    const char *fault = !is_utf8(begin, length)      ? "this line is no text in UTF-8"
                        : length > SETTINGS_LINE_MAX ? "this line is too long: at most 198 bytes"
                                                     : line_fault(line);
    if (fault != NULL) {
        complain(reader, fault);
        line[0] = '\0';
    }
    snprintf(out, (size_t)out_size, "%s\n", line);
    return out;
}

/* Whether this key was given before in this section; notes it. A section that is opened twice
 * counts as one. */
static bool is_repeated(struct reader *reader, const char *section, const char *key)
{
    struct text entry = {0};
    text_appendf(&entry, "%s\n%s", section, key);
    bool is_found = entry.failed;
    for (size_t at = 0; !is_found && at < reader->seen.length;) {
        const char *seen = reader->seen.data + at;
        is_found = strcmp(seen, entry.data) == 0;
        at += strlen(seen) + 1;
    }
    if (!is_found)
        text_append_bytes(&reader->seen, entry.data, entry.length + 1);
    text_done(&entry);
    reader->seen_count++;
    return is_found;
}

static int take_entry(void *user, const char *section, const char *name, const char *value)
{
    struct reader *reader = user;
    if (reader->seen_count >= SETTINGS_KEYS_MAX) {
        if (reader->seen_count++ == SETTINGS_KEYS_MAX)
            complain(reader, "too many keys: at most 1000");
        return 1;
    }
    if (is_repeated(reader, section, name)) {
        complain(reader, "this key was given before in this section: keep one");
        return 1;
    }
    struct settings_entry entry = {section, name, value, reader->line};
    struct error refusal = {0};
    if (!reader->take(reader->user, &entry, &refusal))
        complain(reader, refusal.text);
    return 1;
}

bool settings_read(const char *file_name, const char *text, size_t size, settings_take *take,
                   void *user, struct text *out_complaints, struct error *err)
{
    struct reader reader = {.file_name = file_name,
                            .text = text,
                            .size = size,
                            .take = take,
                            .user = user,
                            .complaints = out_complaints,
                            .err = err};
    int status = ini_parse_stream(next_line, &reader, take_entry, &reader);
    bool is_out_of_memory = reader.seen.failed || status == -2;
    text_done(&reader.seen);
    if (is_out_of_memory)
        return error_set(err, ERROR_MEMORY, "memory ran out while reading %s", file_name);
    if (status > 0 && !reader.has_failed) {
        reader.line = status;
        complain(&reader, "this line cannot be read");
    }
    return !reader.has_failed;
}

bool settings_refuse_word(const char *what, const char *wrong, const char *const words[],
                          size_t count, struct error *err)
{
    const char *nearest = nearest_word(wrong, words, count);
    if (nearest != NULL)
        return error_set(err, ERROR_USAGE, "there is no %s \"%s\": did you mean \"%s\"?", what,
                         wrong, nearest);
    struct text all = {0};
    for (size_t i = 0; i < count; i++)
        text_appendf(&all, "%s%s", i > 0 ? ", " : "", words[i]);
    error_set(err, ERROR_USAGE, "there is no %s \"%s\": there are %s", what, wrong,
              all.data == NULL ? "none" : all.data);
    text_done(&all);
    return false;
}

bool settings_number(const char *value, double low, double high, double *out_number,
                     struct error *err)
{
    double number;
    if (!text_parse_double(value, &number)) {
        const char *hint = strchr(value, ',') != NULL ? " (with a point, as in 0.5)" : "";
        return error_set(err, ERROR_USAGE, "\"%s\" is no number%s", value, hint);
    }
    if (!(number >= low && number <= high))
        return error_set(err, ERROR_USAGE, "%s is out of range: %g ... %g is allowed", value, low,
                         high);
    *out_number = number;
    return true;
}
