/* SPDX-License-Identifier: GPL-3.0-or-later */
#define _XOPEN_SOURCE 700 /* realpath */
#include "io/folder.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

enum { MOST_FILES = 1000000 };

typedef struct listing {
    uf_folder *folder;
    const char *root;
    int capacity;
    uf_error *error;
} listing;

static uf_status cannot_list(const listing *l, const char *below, int number)
{
    return uf_fail(l->error, UF_INPUT,
                   "%.300s%s%.300s: cannot be read as a folder (%s); check the path and who may read it", l->root,
                   *below ? "/" : "", below, strerror(number));
}

static uf_status add_file(listing *l, const char *name)
{
    uf_folder *folder = l->folder;
    if (folder->count == MOST_FILES)
        return uf_fail(l->error, UF_INPUT, "%.400s: more than %d files; name the folder of the images itself",
                       l->root, MOST_FILES);
    if (folder->count == l->capacity) {
        int capacity = l->capacity ? 2 * l->capacity : 256;
        char **names = realloc(folder->names, (size_t)capacity * sizeof *names);
        if (!names)
            return uf_fail_memory(l->error, "a folder's names");
        folder->names = names;
        l->capacity = capacity;
    }
    size_t size = strlen(name) + 1;
    char *copy = uf_arena_take(&folder->arena, size);
    if (!copy)
        return uf_fail_memory(l->error, "a folder's names");
    memcpy(copy, name, size);
    folder->names[folder->count++] = copy;
    return UF_OK;
}

static uf_status list_below(listing *l, int descriptor, uf_text *path, int depth);

/* `path` holds the entry's name at its end. */
static uf_status list_entry(listing *l, int parent, uf_text *path, size_t name_at, int depth)
{
    struct stat facts;
    const char *name = path->bytes + name_at;
    if (strcmp(name, ".") == 0 || strcmp(name, "..") == 0 || fstatat(parent, name, &facts, 0) != 0)
        return UF_OK; /* a link that leads nowhere, or gone meanwhile */
    if (S_ISREG(facts.st_mode))
        return add_file(l, path->bytes);
    if (!S_ISDIR(facts.st_mode) || depth == 0 || name[0] == '.')
        return UF_OK;
    int below = openat(parent, name, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (below < 0)
        return cannot_list(l, path->bytes, errno);
    uf_text_add(path, "/");
    return list_below(l, below, path, depth - 1);
}

/* Takes over the descriptor. */
static uf_status list_below(listing *l, int descriptor, uf_text *path, int depth)
{
    size_t length = path->length;
    uf_status status = UF_OK;
    DIR *entries = fdopendir(descriptor);
    if (!entries) {
        int number = errno;
        (void)close(descriptor);
        return cannot_list(l, path->bytes ? path->bytes : "", number);
    }
    for (const struct dirent *entry; status == UF_OK && (errno = 0, entry = readdir(entries));) {
        path->length = length;
        uf_text_add(path, entry->d_name);
        status = uf_text_check(path, "a folder's names", l->error);
        if (status == UF_OK)
            status = list_entry(l, dirfd(entries), path, length, depth);
    }
    if (status == UF_OK && errno)
        status = cannot_list(l, path->bytes, errno);
    (void)closedir(entries);
    return status;
}

static int by_name(const void *a, const void *b)
{
    return strcmp(*(char *const *)a, *(char *const *)b);
}

uf_status uf_folder_list(uf_folder *folder, const char *path, int depth, uf_error *error)
{
    listing l = {.folder = folder, .root = path, .error = error};
    uf_text name = {0};
    *folder = (uf_folder){0};
    int descriptor = open(path, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (descriptor < 0)
        return cannot_list(&l, "", errno);
    uf_text_add(&name, "");
    uf_status status = list_below(&l, descriptor, &name, depth);
    uf_text_free(&name);
    if (status != UF_OK)
        uf_folder_free(folder);
    else if (folder->count)
        qsort(folder->names, (size_t)folder->count, sizeof *folder->names, by_name);
    return status;
}

void uf_folder_free(uf_folder *folder)
{
    free(folder->names);
    uf_arena_free(&folder->arena);
    *folder = (uf_folder){0};
}

/* ---- paths ----------------------------------------------------------------------------------- */

bool uf_path_exists(const char *path)
{
    struct stat facts;
    return stat(path, &facts) == 0;
}

char *uf_path_plain(const char *path)
{
    char *whole = realpath(path, NULL);
    if (whole || errno != ENOENT)
        return whole;
    const char *name = uf_base_name(path);
    char *folder = name == path ? uf_copy_string(".") : uf_copy_string(path), *plain = NULL;
    if (folder && name != path)
        folder[name == path + 1 ? 1 : name - path - 1] = '\0';
    plain = folder && *name ? realpath(folder, NULL) : NULL;
    free(folder);
    if (!plain)
        return NULL;
    uf_text joined = {0};
    uf_text_printf(&joined, "%s%s%s", plain, strcmp(plain, "/") == 0 ? "" : "/", name);
    free(plain);
    return joined.failed ? NULL : joined.bytes;
}

char *uf_path_from(const char *from, const char *target)
{
    size_t common = 0; /* letters up to and with the last '/' both have */
    uf_text path = {0};
    for (size_t k = 0;; k++) {
        bool from_ends = !from[k] || from[k] == '/', target_ends = !target[k] || target[k] == '/';
        if (from_ends && target_ends && k > 0)
            common = k;
        if (!from[k] || !target[k] || from[k] != target[k])
            break;
    }
    if (common == 0)
        return uf_copy_string(target);
    for (const char *p = from + common; *p; p++)
        if (*p == '/' && p[1])
            uf_text_add(&path, "../");
    uf_text_add(&path, target[common] == '/' ? target + common + 1 : target + common);
    if (path.failed)
        uf_text_free(&path);
    return path.bytes;
}
