/* From a path to whoever answers it: an endpoint of routes.h, or an embedded file of web/. */
#include "http/routes.h"
#include "http/web.h"
#include <string.h>

#define LINE(method, path, answer) {method, path, answer},
static const struct route endpoints[] = {HTTP_LEDGER_ROUTES(LINE) HTTP_ROUTES(LINE)};
#define ONE(method, path, answer) +1
#define N_LEDGER (0 HTTP_LEDGER_ROUTES(ONE)) /* the first ones */

static const char *type_of(const char *name)
{
    static const char *const types[][2] = {{".html", "text/html; charset=utf-8"},
                                           {".js", "text/javascript; charset=utf-8"},
                                           {".css", "text/css; charset=utf-8"},
                                           {".svg", "image/svg+xml"}};
    const char *dot = strrchr(name, '.');
    for (size_t i = 0; dot && i < sizeof types / sizeof types[0]; i++)
        if (strcmp(dot, types[i][0]) == 0)
            return types[i][1];
    return "application/octet-stream";
}

/* "/" is index.html, "/crew" is crew.html, "/crew.js" is itself; NULL for anything else. Ashore there is one
 * page. */
static const struct web_file *find_file(bool ashore, const char *path)
{
    if (path[0] != '/')
        return NULL;
    const char *name = path[1] ? path + 1 : ashore ? "review" : "index";
    size_t length = strlen(name);
    for (const struct web_file *file = web_files; file->name; file++)
        if (strncmp(file->name, name, length) == 0 &&
            (file->name[length] == '\0' || strcmp(file->name + length, ".html") == 0))
            return ashore && strstr(file->name, ".html") && strcmp(file->name, "review.html") != 0 ? NULL
                                                                                                   : file;
    return NULL;
}

static enum MHD_Result answer_file(struct request *request)
{
    const struct web_file *file = request->file;
    return http_answer(request->connection, MHD_HTTP_OK, type_of(file->name), file->data, file->size);
}

bool http_is_open(const struct route *route, const struct web_file *file)
{
    if (file)
        return strcmp(type_of(file->name), "text/html; charset=utf-8") != 0 ||
               strcmp(file->name, "sign-in.html") == 0;
    return route->answer == api_sign_in || route->answer == api_sign_out;
}

/* A path that ends in a slash stands for all that begin with it and have no further slash. */
static bool fits(const char *endpoint, const char *path, const char **out_rest)
{
    size_t length = strlen(endpoint);
    *out_rest = path + length;
    if (endpoint[length - 1] != '/')
        return strcmp(endpoint, path) == 0;
    return strncmp(endpoint, path, length) == 0 && path[length] != '\0' && !strchr(path + length, '/');
}

const struct route *http_find_route(bool ashore, const char *method, const char *path, bool *out_exists,
                                    const struct web_file **out_file, const char **out_rest)
{
    static const struct route files = {"GET", "", answer_file};
    *out_file = find_file(ashore, path);
    *out_rest = "";
    *out_exists = *out_file != NULL;
    if (*out_file)
        return strcmp(method, "GET") == 0 ? &files : NULL;
    for (size_t i = 0; i < (ashore ? (size_t)N_LEDGER : sizeof endpoints / sizeof endpoints[0]); i++)
        if (fits(endpoints[i].path, path, out_rest)) {
            *out_exists = true;
            if (strcmp(endpoints[i].method, method) == 0)
                return &endpoints[i];
        }
    return NULL;
}
