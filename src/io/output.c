/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "io/output.h"

#include <assert.h>
#include <errno.h>
#include <fcntl.h>
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>
#include <xxhash.h>

enum {
    LONGEST_NAME = 255,    /* bytes of a path component on every common file system */
    LONGEST_KEY = 200,     /* leaves room for an extension and for the temporary name */
    HASH_LETTERS = 2 + 32, /* "=h" and 128 bits */
    TEMPORARY_EXTRA = 6    /* "." before and ".part" after */
};

/* ---- messages -------------------------------------------------------------------------------- */

static const char *mend_for(int number)
{
    switch (number) {
    case ENOSPC:
    case EDQUOT:
        return "free space or choose another place";
    case EACCES:
    case EPERM:
    case EROFS:
        return "choose another place, or ask for the right to write there";
    case EEXIST:
    case EISDIR:
    case ENOTDIR:
    case ELOOP:
    case ENODEV:
        return "move what is in the way (a file, folder, device or symbolic link) or choose another place";
    default:
        return "choose another place";
    }
}

static uf_status cannot_open(uf_error *error, const char *path, int number)
{
    return uf_fail(error, UF_OUTPUT, "%.400s: cannot be used as output folder (%s): %s", path, strerror(number),
                   mend_for(number));
}

/* Where a result goes, for messages. */
typedef struct place {
    const uf_output *output;
    const char *folder; /* NULL: the output folder itself */
    const char *name;
} place;

static uf_status fail_at(uf_error *error, const place *at, const char *what, int number, const char *after)
{
    return uf_fail(error, UF_OUTPUT, "%.400s/%s%s%s: %s (%s); %s%s", at->output->path, at->folder ? at->folder : "",
                   at->folder ? "/" : "", at->name, what, strerror(number), after, mend_for(number));
}

static uf_status cannot_write(uf_error *error, const place *at, int number)
{
    return fail_at(error, at, "cannot be written", number, "nothing was replaced: ");
}

/* ---- folders --------------------------------------------------------------------------------- */

/* Makes every folder of `path` in turn. Returns 0 or the first error number other than "exists". It is no
 * more than a reason: an existing folder may answer with anything (read-only file system, no rights above
 * it), and whether the last one opens is the test that counts. */
static int make_folders(char *path)
{
    int first = 0;
    for (char *p = path + strspn(path, "/"); *p; p += strspn(p, "/")) {
        p += strcspn(p, "/");
        char kept = *p;
        *p = '\0';
        if (mkdir(path, 0777) != 0 && errno != EEXIST && !first)
            first = errno;
        *p = kept;
    }
    return first;
}

uf_status uf_output_open(uf_output *output, const char *path, uf_error *error)
{
    *output = (uf_output){0};
    if (path[0] == '\0')
        return uf_fail(error, UF_OUTPUT, "the name of the output folder is empty: give one after -o");
    char *copy = uf_copy_string(path);
    if (!copy)
        return uf_fail_memory(error, "a path");
    int not_made = make_folders(copy);
    int descriptor = open(path, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (descriptor < 0) {
        int number = not_made ? not_made : errno;
        free(copy);
        return cannot_open(error, path, number);
    }
    *output = (uf_output){.open = 1, .descriptor = descriptor, .path = copy};
    return UF_OK;
}

void uf_output_close(uf_output *output)
{
    if (output->open)
        (void)close(output->descriptor);
    free(output->path);
    *output = (uf_output){0};
}

/* A folder cannot be synced on some network file systems; they say EINVAL and there is no more to do. */
static int sync_folder(int descriptor)
{
    return fsync(descriptor) == 0 || errno == EINVAL ? 0 : errno;
}

/* The descriptor of a folder below the output, -1 with errno when it cannot be opened. The output's own
 * descriptor is duplicated, so that the caller always closes what it got. */
static int open_folder(const uf_output *output, const char *folder, bool make)
{
    if (!folder)
        return fcntl(output->descriptor, F_DUPFD_CLOEXEC, 0);
    if (make) {
        if (mkdirat(output->descriptor, folder, 0777) != 0) {
            if (errno != EEXIST)
                return -1;
        } else {
            int number = sync_folder(output->descriptor);
            if (number) {
                errno = number;
                return -1;
            }
        }
    }
    return openat(output->descriptor, folder, O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
}

/* ---- files ----------------------------------------------------------------------------------- */

/* One path component that leads nowhere else. */
static bool is_component(const char *name)
{
    return name[0] != '\0' && !strchr(name, '/') && strcmp(name, ".") != 0 && strcmp(name, "..") != 0;
}

static int write_all(int descriptor, const char *bytes, size_t count)
{
    while (count > 0) {
        ssize_t written = write(descriptor, bytes, count);
        if (written < 0 && errno == EINTR)
            continue;
        if (written < 0)
            return errno;
        bytes += written;
        count -= (size_t)written;
    }
    return 0;
}

/* Makes a new file with these bytes and sees them on the disk. Returns 0 or an error number. */
static int write_new(int folder, const char *name, const void *bytes, size_t count)
{
    int descriptor = openat(folder, name, O_WRONLY | O_CREAT | O_EXCL | O_NOFOLLOW | O_CLOEXEC, 0666);
    if (descriptor < 0)
        return errno;
    int number = write_all(descriptor, bytes, count);
    if (!number && fsync(descriptor) != 0)
        number = errno;
    /* The descriptor is gone after close even when close fails, so it is never called twice. */
    if (close(descriptor) != 0 && errno != EINTR && !number)
        number = errno;
    return number;
}

/* A device or a pipe of that name is not ours to replace; a file, a link or nothing is. Folders tell by themselves. */
static bool may_replace(int folder, const char *name)
{
    struct stat there;
    if (fstatat(folder, name, &there, AT_SYMLINK_NOFOLLOW) != 0)
        return true;
    return S_ISREG(there.st_mode) || S_ISLNK(there.st_mode) || S_ISDIR(there.st_mode);
}

/* Returns 0 or an error number; after a failure the old file, if any, is untouched. */
static int replace_file(int folder, const char *name, const void *bytes, size_t count)
{
    char temporary[LONGEST_NAME + 1];
    if (!may_replace(folder, name))
        return ENODEV;
    (void)snprintf(temporary, sizeof temporary, ".%s.part", name);
    /* A stale one, from a run that was killed. */
    if (unlinkat(folder, temporary, 0) != 0 && errno != ENOENT)
        return errno;
    int number = write_new(folder, temporary, bytes, count);
    if (!number && renameat(folder, temporary, folder, name) != 0)
        number = errno;
    if (number)
        (void)unlinkat(folder, temporary, 0);
    return number;
}

uf_status uf_output_write(const uf_output *output, const char *folder, const char *name, const void *bytes,
                          size_t count, uf_error *error)
{
    const place at = {output, folder, name};
    assert(output->open && is_component(name) && (!folder || is_component(folder)));
    if (strlen(name) + TEMPORARY_EXTRA > LONGEST_NAME)
        return cannot_write(error, &at, ENAMETOOLONG);
    int below = open_folder(output, folder, true);
    if (below < 0)
        return cannot_write(error, &at, errno);
    int number = replace_file(below, name, bytes, count);
    int unsynced = number ? 0 : sync_folder(below);
    (void)close(below);
    if (number)
        return cannot_write(error, &at, number);
    if (unsynced)
        return fail_at(error, &at, "was written but may not survive a power cut", unsynced, "");
    return UF_OK;
}

uf_status uf_output_file(const char *path, const void *bytes, size_t count, uf_error *error)
{
    const char *name = uf_base_name(path);
    uf_text folder = {0};
    uf_output output = {0};
    size_t before = (size_t)(name - path);
    uf_text_bytes(&folder, path, before > 1 ? before - 1 : before); /* without the '/', but for the root's */
    uf_text_add(&folder, before ? "" : ".");
    uf_status status = uf_text_check(&folder, path, error);
    if (status == UF_OK && !is_component(name))
        status = uf_fail(error, UF_USAGE, "'%.400s' is %s; expected the name of a file to write", path,
                         *path ? "a folder" : "no name");
    if (status == UF_OK)
        status = uf_output_open(&output, folder.bytes, error);
    if (status == UF_OK)
        status = uf_output_write(&output, NULL, name, bytes, count, error);
    uf_output_close(&output);
    uf_text_free(&folder);
    return status;
}

uf_status uf_output_remove(const uf_output *output, const char *folder, const char *name, uf_error *error)
{
    const place at = {output, folder, name};
    assert(output->open && is_component(name) && (!folder || is_component(folder)));
    int below = open_folder(output, folder, false);
    if (below < 0)
        return errno == ENOENT ? UF_OK : fail_at(error, &at, "cannot be removed", errno, "");
    int number = 0;
    if (unlinkat(below, name, 0) == 0)
        number = sync_folder(below);
    else if (errno != ENOENT)
        number = errno;
    (void)close(below);
    return number ? fail_at(error, &at, "cannot be removed", number, "") : UF_OK;
}

/* ---- names ----------------------------------------------------------------------------------- */

static bool stays(const char *key, size_t k, size_t length)
{
    char c = key[k];
    if ((c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9') || c == '_' || c == '-')
        return true;
    return c == '.' && k > 0 && k + 1 < length;
}

static size_t encoded_length(const char *key, size_t length)
{
    size_t encoded = 0;
    for (size_t k = 0; k < length; k++)
        encoded += stays(key, k, length) ? 1 : 3;
    return encoded;
}

/* Appends the encoded key, but whole letters only and no more than `room` bytes. */
static void put_encoded(uf_text *out, const char *key, size_t length, size_t room)
{
    for (size_t k = 0, used = 0; k < length; k++) {
        size_t size = stays(key, k, length) ? 1 : 3;
        used += size;
        if (used > room)
            return;
        if (size == 1)
            uf_text_bytes(out, key + k, 1);
        else
            uf_text_printf(out, "=%02X", (unsigned char)key[k]);
    }
}

/*
 * '=' never stays, and is followed by two upper-case hexadecimal digits wherever a letter was encoded. "="
 * alone (the empty key) and "=h" (a hash follows) can therefore come from no other key.
 */
void uf_output_key(uf_text *out, const char *key)
{
    size_t length = strlen(key);
    if (length == 0) {
        uf_text_add(out, "=");
        return;
    }
    if (encoded_length(key, length) <= LONGEST_KEY) {
        put_encoded(out, key, length, LONGEST_KEY);
        return;
    }
    XXH128_hash_t hash = XXH3_128bits(key, length);
    put_encoded(out, key, length, LONGEST_KEY - HASH_LETTERS);
    uf_text_printf(out, "=h%016" PRIx64 "%016" PRIx64, (uint64_t)hash.high64, (uint64_t)hash.low64);
}
