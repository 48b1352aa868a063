#include "serve/exchange.h"

/* libjansson has functions of these names (text.h). */
#undef json_string
#undef json_integer
#undef json_null
#include <jansson.h>

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* "before, limit, series" for messages. */
static void list_words(const char *const *words, char *out, size_t out_size)
{
    struct text list = {0};
    for (size_t i = 0; words[i] != NULL; i++)
        text_appendf(&list, "%s%s", i > 0 ? ", " : "", words[i]);
    snprintf(out, out_size, "%s", list.data != NULL ? list.data : "");
    text_done(&list);
}

static bool is_one_of(const char *word, const char *const *words)
{
    for (size_t i = 0; words[i] != NULL; i++) {
        if (strcmp(word, words[i]) == 0)
            return true;
    }
    return false;
}

struct word_check {
    struct exchange *exchange;
    const char *const *words;
    uint64_t seen; /* bit i: words[i] */
    bool is_good;
};

static enum MHD_Result check_word(void *user, enum MHD_ValueKind kind, const char *key,
                                  const char *value)
{
    (void)kind;
    struct word_check *check = user;
    if (!is_one_of(key, check->words)) {
        char known[256];
        list_words(check->words, known, sizeof known);
        answer_problem(check->exchange, 400, "%.60s: no such word here; %s%s", key,
                       known[0] != '\0' ? "known are " : "this call takes none", known);
        check->is_good = false;
        return MHD_NO;
    }
    for (size_t i = 0; check->words[i] != NULL; i++) {
        if (strcmp(key, check->words[i]) != 0)
            continue;
        if (check->seen & (UINT64_C(1) << i)) {
            answer_problem(check->exchange, 400, "%s: given twice", key);
            check->is_good = false;
            return MHD_NO;
        }
        check->seen |= UINT64_C(1) << i;
    }
    if (value == NULL || value[0] == '\0') {
        answer_problem(check->exchange, 400, "%s: has no value", key);
        check->is_good = false;
        return MHD_NO;
    }
    return MHD_YES;
}

bool query_check(struct exchange *exchange, const char *const *words)
{
    struct word_check check = {.exchange = exchange, .words = words, .is_good = true};
    MHD_get_connection_values(exchange->connection, MHD_GET_ARGUMENT_KIND, check_word, &check);
    return check.is_good;
}

const char *query_text(struct exchange *exchange, const char *word)
{
    return MHD_lookup_connection_value(exchange->connection, MHD_GET_ARGUMENT_KIND, word);
}

/* 0 ... 2^53, digits alone. */
static bool parse_count(const char *text, int64_t *out_value)
{
    size_t length = strlen(text);
    if (length == 0 || length > 15 || strspn(text, "0123456789") != length)
        return false;
    *out_value = strtoll(text, NULL, 10);
    return true;
}

bool query_integer(struct exchange *exchange, const char *word, int64_t least, int64_t most,
                   int64_t *inout_value)
{
    const char *text = query_text(exchange, word);
    int64_t value = 0;
    if (text == NULL)
        return true;
    if (!parse_count(text, &value) || value < least || value > most) {
        answer_problem(exchange, 400, "%s=%.40s: must be a whole number from %lld to %lld", word,
                       text, (long long)least, (long long)most);
        return false;
    }
    *inout_value = value;
    return true;
}

bool query_number(struct exchange *exchange, const char *word, double *inout_value)
{
    const char *text = query_text(exchange, word);
    if (text == NULL)
        return true;
    if (!text_parse_double(text, inout_value)) {
        answer_problem(exchange, 400, "%s=%.40s: must be a number with a decimal point", word,
                       text);
        return false;
    }
    return true;
}

bool body_parse(struct exchange *exchange)
{
    json_error_t problem;
    const char *data = exchange->body.data != NULL ? exchange->body.data : "";
    exchange->json = json_loadb(data, exchange->body.length, JSON_REJECT_DUPLICATES, &problem);
    if (exchange->json == NULL) {
        answer_problem(exchange, 400, "the body is not JSON: line %d, column %d: %s", problem.line,
                       problem.column, problem.text);
        return false;
    }
    if (!json_is_object(exchange->json)) {
        answer_problem(exchange, 400, "the body must be a JSON object");
        return false;
    }
    return true;
}

void body_done(struct exchange *exchange)
{
    json_decref(exchange->json);
    exchange->json = NULL;
}

bool body_has(struct exchange *exchange, const char *key)
{
    return json_object_get(exchange->json, key) != NULL;
}

bool body_check(struct exchange *exchange, const char *const *keys)
{
    const char *key;
    json_t *value;
    json_object_foreach(exchange->json, key, value)
    {
        (void)value;
        if (!is_one_of(key, keys)) {
            char known[256];
            list_words(keys, known, sizeof known);
            answer_problem(exchange, 400, "%.60s: no such key here; known are %s", key, known);
            return false;
        }
    }
    return true;
}

/* Names are one line; notes and sheets may have several. */
static bool has_control_character(const char *text, bool is_name)
{
    for (; *text != '\0'; text++) {
        bool is_layout = !is_name && (*text == '\n' || *text == '\t');
        if (((unsigned char)*text < 0x20 && !is_layout) || *text == 0x7F)
            return true;
    }
    return false;
}

bool body_text(struct exchange *exchange, const char *key, size_t bytes_max, bool *out_is_there,
               const char **out)
{
    const json_t *value = json_object_get(exchange->json, key);
    *out_is_there = value != NULL;
    *out = NULL;
    if (value == NULL || json_is_null(value))
        return true;
    const char *text = json_string_value(value);
    if (text == NULL) {
        answer_problem(exchange, 400, "%s: must be a text or null", key);
        return false;
    }
    if (strlen(text) > bytes_max || has_control_character(text, bytes_max <= SERVE_NAME_MAX)) {
        answer_problem(exchange, 400,
                       "%s: must be at most %zu bytes long and hold no control characters", key,
                       bytes_max);
        return false;
    }
    *out = text;
    return true;
}

bool body_number(struct exchange *exchange, const char *key, double least, double most,
                 double *inout_value)
{
    const json_t *value = json_object_get(exchange->json, key);
    if (value == NULL || json_is_null(value))
        return true;
    double number = json_number_value(value);
    if (!json_is_number(value) || !isfinite(number) || number < least || number > most) {
        answer_problem(exchange, 400, "%s: must be a number from %g to %g, or null", key, least,
                       most);
        return false;
    }
    *inout_value = number;
    return true;
}

bool body_bool(struct exchange *exchange, const char *key, bool *inout_value)
{
    const json_t *value = json_object_get(exchange->json, key);
    if (value == NULL)
        return true;
    if (!json_is_boolean(value)) {
        answer_problem(exchange, 400, "%s: must be true or false", key);
        return false;
    }
    *inout_value = json_is_true(value);
    return true;
}

bool body_channels(struct exchange *exchange, const char *key, unsigned *inout_bits)
{
    const json_t *list = json_object_get(exchange->json, key);
    unsigned bits = 0;
    if (list == NULL || json_is_null(list))
        return true;
    for (size_t i = 0; i < json_array_size(list); i++) {
        json_int_t channel = json_integer_value(json_array_get(list, i));
        if (channel < 1 || channel > 32) {
            bits = 0;
            break;
        }
        bits |= 1u << (channel - 1);
    }
    if (bits == 0) {
        answer_problem(exchange, 400, "%s: must be a list of channels from 1 to 32", key);
        return false;
    }
    *inout_bits = bits;
    return true;
}
