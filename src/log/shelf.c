/* Part sheets in the log and in folders. */
#include "log/log_inner.h"
#include "wane/json.h"
#include "wane/tally.h"

#include <dirent.h>
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define ENDING ".ini"

static bool is_plain(const char *name)
{
    return name[0] != '.' && name[0] != '\0' && strchr(name, '/') == NULL;
}

/* FNV-1a, 64 bits (Fowler, Noll, Vo). */
static uint64_t hash_bytes(const char *bytes, size_t size)
{
    uint64_t hash = UINT64_C(14695981039346656037);
    for (size_t i = 0; i < size; i++)
        hash = (hash ^ (unsigned char)bytes[i]) * UINT64_C(1099511628211);
    return hash;
}

static bool read_file(const char *folder, const char *name, struct text *out_sheet,
                      char out_etag[LOG_ETAG_MAX])
{
    char path[LOG_PATH_MAX + LOG_NAME_MAX + 8];
    if (folder[0] == '\0' || !is_plain(name))
        return false;
    snprintf(path, sizeof path, "%s/%.*s" ENDING, folder, LOG_NAME_MAX, name);
    FILE *file = fopen(path, "rb");
    if (file == NULL)
        return false;
    char *bytes = malloc(PART_SHEET_MAX);
    size_t size = bytes != NULL ? fread(bytes, 1, PART_SHEET_MAX, file) : 0;
    bool is_read = bytes != NULL && !ferror(file) && size < PART_SHEET_MAX;
    (void)fclose(file);
    if (is_read) {
        text_append_bytes(out_sheet, bytes, size);
        snprintf(out_etag, LOG_ETAG_MAX, "\"file-%016" PRIx64 "\"", hash_bytes(bytes, size));
    }
    free(bytes);
    return is_read;
}

bool shelf_read(struct log_reader *reader, const struct shelf *shelf, const char *name,
                struct text *out_sheet, char out_etag[LOG_ETAG_MAX], bool *out_is_file,
                struct error *err)
{
    if (out_is_file != NULL)
        *out_is_file = false;
    if (log_read_part(reader, name, 0, out_sheet, out_etag, err))
        return true;
    if (err->kind != ERROR_NOT_FOUND || shelf == NULL)
        return false;
    for (unsigned i = 0; i < SHELF_FOLDERS_MAX; i++) {
        if (!read_file(shelf->folders[i], name, out_sheet, out_etag))
            continue;
        if (out_is_file != NULL)
            *out_is_file = true;
        return true;
    }
    return false;
}

/* --- listing --- */

struct names {
    char (*names)[LOG_NAME_MAX];
    size_t count, capacity;
};

static bool add_name(struct names *names, const char *name)
{
    for (size_t i = 0; i < names->count; i++) {
        if (strcmp(names->names[i], name) == 0)
            return true;
    }
    if (names->count == names->capacity) {
        size_t capacity = names->capacity == 0 ? 16 : 2 * names->capacity;
        char(*grown)[LOG_NAME_MAX] = realloc(names->names, capacity * sizeof *grown);
        if (grown == NULL)
            return false;
        names->names = grown;
        names->capacity = capacity;
    }
    snprintf(names->names[names->count++], LOG_NAME_MAX, "%s", name);
    return true;
}

static bool list_folder(const char *folder, struct names *names)
{
    DIR *directory = folder[0] != '\0' ? opendir(folder) : NULL;
    bool is_good = true;
    if (directory == NULL)
        return true;
    for (struct dirent *entry; is_good && (entry = readdir(directory)) != NULL;) {
        size_t length = strlen(entry->d_name);
        char name[LOG_NAME_MAX];
        if (length <= strlen(ENDING) || length >= sizeof name || !is_plain(entry->d_name) ||
            strcmp(entry->d_name + length - strlen(ENDING), ENDING) != 0)
            continue;
        snprintf(name, sizeof name, "%.*s", (int)(length - strlen(ENDING)), entry->d_name);
        is_good = add_name(names, name);
    }
    closedir(directory);
    return is_good;
}

static int compare_names(const void *left, const void *right)
{
    return strcmp(left, right);
}

bool shelf_list_json(struct log_reader *reader, const struct shelf *shelf, struct text *out_objects,
                     struct error *err)
{
    struct names names = {0};
    bool is_good = log_list_parts_json(reader, out_objects, err);
    for (unsigned i = 0; is_good && shelf != NULL && i < SHELF_FOLDERS_MAX; i++)
        is_good = list_folder(shelf->folders[i], &names) ||
                  error_set(err, ERROR_MEMORY, "no memory for the list of part sheets");
    if (names.count > 0)
        qsort(names.names, names.count, sizeof *names.names, compare_names);
    for (size_t i = 0; is_good && i < names.count; i++) {
        struct text sheet = {0};
        char etag[LOG_ETAG_MAX];
        bool is_file = false;
        if (shelf_read(reader, shelf, names.names[i], &sheet, etag, &is_file, err) && is_file) {
            struct json_writer json = {.text = out_objects};
            if (out_objects->length > 0)
                text_append(out_objects, ",");
            json_open_object(&json, NULL);
            json_string(&json, "name", names.names[i]);
            json_bool(&json, "file", true);
            json_string(&json, "etag", etag);
            json_close_object(&json);
        }
        text_done(&sheet);
    }
    free(names.names);
    return is_good;
}
