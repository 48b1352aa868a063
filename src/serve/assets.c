/* The page's files: a table of names made once at start, so that no address ever becomes a path.
 * The files themselves are opened when asked for: an edited page shows after a reload. */
#include "serve/exchange.h"
#include "serve/gzip.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define ASSETS_MAX      256
#define ASSET_DEPTH_MAX 3

struct asset {
    char *address; /* "/plot/decay.js" */
    char *file;
    const char *content_type;
};

struct assets {
    struct asset list[ASSETS_MAX];
    size_t count;
};

/* What is served, and as what (WHATWG HTML wants modules as text/javascript). */
static const char *type_of(const char *name)
{
    static const struct {
        const char *end, *type;
    } types[] = {
        {".html", "text/html; charset=utf-8"},
        {".js", "text/javascript; charset=utf-8"},
        {".mjs", "text/javascript; charset=utf-8"},
        {".css", "text/css; charset=utf-8"},
        {".svg", "image/svg+xml"},
        {".png", "image/png"},
        {".ico", "image/x-icon"},
        {".json", "application/json"},
        {".webmanifest", "application/manifest+json"},
        {".woff2", "font/woff2"},
    };
    const char *end = strrchr(name, '.');
    for (size_t i = 0; end != NULL && i < sizeof types / sizeof types[0]; i++) {
        if (strcmp(end, types[i].end) == 0)
            return types[i].type;
    }
    return NULL;
}

static char *join_text(const char *a, const char *b, const char *c)
{
    size_t size = strlen(a) + strlen(b) + strlen(c) + 1;
    char *joined = malloc(size);
    if (joined != NULL)
        snprintf(joined, size, "%s%s%s", a, b, c);
    return joined;
}

static void add_asset(struct assets *assets, const char *address, const char *file,
                      const char *content_type)
{
    if (assets->count == ASSETS_MAX)
        return;
    struct asset *asset = &assets->list[assets->count];
    *asset = (struct asset){join_text(address, "", ""), join_text(file, "", ""), content_type};
    if (asset->address != NULL && asset->file != NULL) {
        assets->count++;
        return;
    }
    free(asset->address);
    free(asset->file);
}

/* Build material that lies in the same folder, and is nobody's business. */
static bool is_hidden(const char *name)
{
    return name[0] == '.' || strcmp(name, "node_modules") == 0 ||
           strcmp(name, "package.json") == 0 || strcmp(name, "package-lock.json") == 0 ||
           strcmp(name, "jsconfig.json") == 0 || strcmp(name, "tsconfig.json") == 0;
}

/* Depth is bounded. NOLINTNEXTLINE(misc-no-recursion) */
static void add_folder(struct assets *assets, const char *folder, const char *address, int depth)
{
    DIR *directory = opendir(folder);
    if (directory == NULL)
        return;
    /* readdir is safe here: no other thread has this DIR (POSIX.1-2008, readdir). */
    /* NOLINTNEXTLINE(concurrency-mt-unsafe) */
    for (struct dirent *entry = readdir(directory); entry != NULL; entry = readdir(directory)) {
        if (is_hidden(entry->d_name))
            continue;
        char *file = join_text(folder, "/", entry->d_name);
        char *below = join_text(address, "/", entry->d_name);
        struct stat status;
        if (file != NULL && below != NULL && stat(file, &status) == 0) {
            const char *content_type = type_of(entry->d_name);
            if (S_ISDIR(status.st_mode) && depth < ASSET_DEPTH_MAX)
                add_folder(assets, file, below, depth + 1);
            else if (S_ISREG(status.st_mode) && content_type != NULL)
                add_asset(assets, below, file, content_type);
        }
        free(file);
        free(below);
    }
    closedir(directory);
}

static const struct asset *find_asset(const struct assets *assets, const char *address)
{
    if (strcmp(address, "/") == 0)
        address = "/index.html";
    for (size_t i = 0; i < assets->count; i++) {
        if (strcmp(assets->list[i].address, address) == 0)
            return &assets->list[i];
    }
    return NULL;
}

struct assets *assets_create(const char *web_dir, const char *vendor_dir)
{
    struct assets *assets = calloc(1, sizeof *assets);
    if (assets == NULL)
        return NULL;
    if (vendor_dir != NULL && vendor_dir[0] != '\0')
        add_folder(assets, vendor_dir, "/vendor", ASSET_DEPTH_MAX);
    if (web_dir != NULL && web_dir[0] != '\0')
        add_folder(assets, web_dir, "", 0);
    return assets;
}

void assets_destroy(struct assets *assets)
{
    if (assets == NULL)
        return;
    for (size_t i = 0; i < assets->count; i++) {
        free(assets->list[i].address);
        free(assets->list[i].file);
    }
    free(assets);
}

/* The root is always there: without a page it says why. */
bool assets_has(const struct assets *assets, const char *path)
{
    return strcmp(path, "/") == 0 || find_asset(assets, path) != NULL;
}

static void answer_without_page(struct exchange *exchange)
{
    text_append(&exchange->answer.body,
                "Wane is listening, but the files of its page are not here.\n"
                "Start waned from its build folder, or install it (cmake --install build).\n"
                "The readings are at /api/v1/strikes all the same.\n");
    exchange->answer.status = 200;
    exchange->answer.content_type = "text/plain; charset=utf-8";
    exchange->state = EXCHANGE_READY;
}

/* Text goes out compressed to whoever takes it so: the page is a third then. Closes fd when true.
 */
static bool answer_compressed(struct exchange *exchange, int fd, size_t size)
{
    const char *accepted =
        MHD_lookup_connection_value(exchange->connection, MHD_HEADER_KIND, "Accept-Encoding");
    bool is_text = strncmp(exchange->answer.content_type, "text/", 5) == 0;
    unsigned char *bytes = NULL;
    size_t count = 0;
    if (!is_text || !gzip_is_accepted(accepted))
        return false;
    if (gzip_read_file(fd, size, &bytes, &count))
        exchange->answer.response =
            MHD_create_response_from_buffer(count, bytes, MHD_RESPMEM_MUST_FREE);
    if (exchange->answer.response == NULL) {
        free(bytes);
        (void)lseek(fd, 0, SEEK_SET); /* as it is, then */
        return false;
    }
    answer_header(exchange, "Content-Encoding", "gzip");
    close(fd);
    return true;
}

void api_get_asset(struct exchange *exchange)
{
    const struct asset *asset = find_asset(exchange->server->assets, exchange->path);
    if (asset == NULL) {
        answer_without_page(exchange);
        return;
    }
    int fd = open(asset->file, O_RDONLY | O_CLOEXEC);
    struct stat status;
    if (fd < 0 || fstat(fd, &status) != 0) {
        answer_problem(exchange, 404, "%.200s is gone: reload the page", exchange->path);
        if (fd >= 0)
            close(fd);
        return;
    }
    char etag[64];
    snprintf(etag, sizeof etag, "\"%llx-%llx-%lx\"", (unsigned long long)status.st_size,
             (unsigned long long)status.st_mtim.tv_sec, (unsigned long)status.st_mtim.tv_nsec);
    const char *known =
        MHD_lookup_connection_value(exchange->connection, MHD_HEADER_KIND, "If-None-Match");
    answer_header(exchange, "ETag", "%s", etag);
    answer_header(exchange, "Cache-Control", "no-cache");
    exchange->answer.content_type = asset->content_type;
    exchange->answer.status = 200;
    exchange->state = EXCHANGE_READY;
    if (known != NULL && strstr(known, etag) != NULL) {
        close(fd);
        exchange->answer.status = 304;
        return;
    }
    answer_header(exchange, "Vary", "Accept-Encoding");
    if (answer_compressed(exchange, fd, (size_t)status.st_size))
        return;
    exchange->answer.response = MHD_create_response_from_fd64((uint64_t)status.st_size, fd);
    if (exchange->answer.response == NULL)
        close(fd);
}
