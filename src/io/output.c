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

/* ---- group commits --------------------------------------------------------------------------- */

static void note_folder(uf_output_batch *batch, const char *folder)
{
    for (int k = 0; k < batch->folder_count; k++)
        if (strcmp(batch->folders[k], folder) == 0)
            return;
    assert(batch->folder_count < UF_BATCH_FOLDERS);
    batch->folders[batch->folder_count++] = folder;
}

/* Writes the temporary file and keeps it open for its fsync. */
static int write_kept(int folder, const char *name, const void *bytes, size_t count, int *descriptor)
{
    char temporary[LONGEST_NAME + 1];
    if (!may_replace(folder, name))
        return ENODEV;
    (void)snprintf(temporary, sizeof temporary, ".%s.part", name);
    if (unlinkat(folder, temporary, 0) != 0 && errno != ENOENT)
        return errno;
    *descriptor = openat(folder, temporary, O_WRONLY | O_CREAT | O_EXCL | O_NOFOLLOW | O_CLOEXEC, 0666);
    if (*descriptor < 0)
        return errno;
    int number = write_all(*descriptor, bytes, count);
    if (number) {
        (void)close(*descriptor);
        (void)unlinkat(folder, temporary, 0);
    }
    return number;
}

static int rename_temporary(int folder, const char *name)
{
    char temporary[LONGEST_NAME + 1];
    (void)snprintf(temporary, sizeof temporary, ".%s.part", name);
    return renameat(folder, temporary, folder, name) == 0 ? 0 : errno;
}

static uf_status write_soon(const uf_output *output, uf_output_batch *batch, const char *folder, const char *name,
                            const void *bytes, size_t count, bool is_record, uf_error *error)
{
    const place at = {output, folder, name};
    assert(output->open && is_component(name) && is_component(folder));
    if (strlen(name) + TEMPORARY_EXTRA > LONGEST_NAME)
        return cannot_write(error, &at, ENAMETOOLONG);
    if (batch->count == UF_BATCH_FILES) {
        uf_status status = uf_output_batch_commit(output, batch, error);
        if (status != UF_OK)
            return status;
    }
    int below = open_folder(output, folder, true), descriptor = -1;
    if (below < 0)
        return cannot_write(error, &at, errno);
    int number = write_kept(below, name, bytes, count, &descriptor);
    if (!number && !is_record) {
        number = rename_temporary(below, name);
        if (number)
            (void)close(descriptor);
    }
    (void)close(below);
    if (number)
        return cannot_write(error, &at, number);
    batch->descriptors[batch->count++] = descriptor;
    note_folder(batch, folder);
    if (is_record) {
        batch->records[batch->record_count].folder = folder;
        (void)snprintf(batch->records[batch->record_count++].name, sizeof batch->records[0].name, "%s", name);
    }
    return UF_OK;
}

uf_status uf_output_write_soon(const uf_output *output, uf_output_batch *batch, const char *folder, const char *name,
                               const void *bytes, size_t count, uf_error *error)
{
    return write_soon(output, batch, folder, name, bytes, count, false, error);
}

uf_status uf_output_record_soon(const uf_output *output, uf_output_batch *batch, const char *folder, const char *name,
                                const void *bytes, size_t count, uf_error *error)
{
    return write_soon(output, batch, folder, name, bytes, count, true, error);
}

static int sync_named_folder(const uf_output *output, const char *folder)
{
    int below = open_folder(output, folder, false);
    if (below < 0)
        return errno;
    int number = sync_folder(below);
    (void)close(below);
    return number;
}

static int name_records(const uf_output *output, uf_output_batch *batch)
{
    int number = 0;
    for (int k = 0; !number && k < batch->record_count; k++) {
        int below = open_folder(output, batch->records[k].folder, false);
        number = below < 0 ? errno : rename_temporary(below, batch->records[k].name);
        if (below >= 0)
            (void)close(below);
    }
    return number;
}

/* First the bytes, then the names of the data, then the records, then their names: at no moment does a record stand without
 * what it speaks of. */
uf_status uf_output_batch_commit(const uf_output *output, uf_output_batch *batch, uf_error *error)
{
    const place at = {output, NULL, "its files"};
    int number = 0;
    for (int k = 0; k < batch->count; k++) {
        if (!number && fsync(batch->descriptors[k]) != 0)
            number = errno;
        if (close(batch->descriptors[k]) != 0 && errno != EINTR && !number)
            number = errno;
    }
    batch->count = 0;
    for (int k = 0; !number && k < batch->folder_count; k++)
        number = sync_named_folder(output, batch->folders[k]);
    if (!number && batch->record_count)
        number = name_records(output, batch);
    for (int k = 0; !number && batch->record_count && k < batch->folder_count; k++)
        number = sync_named_folder(output, batch->folders[k]);
    batch->record_count = batch->folder_count = 0;
    return number ? cannot_write(error, &at, number) : UF_OK;
}

void uf_output_batch_drop(uf_output_batch *batch)
{
    for (int k = 0; k < batch->count; k++)
        (void)close(batch->descriptors[k]);
    *batch = (uf_output_batch){0};
}

/* ---- long files ------------------------------------------------------------------------------- */

enum { STREAM_BYTES = 1 << 20 };

static uf_status stream_failed(uf_output_stream *stream, const uf_output *output, int number, uf_error *error)
{
    const place at = {output, NULL, stream->name};
    uf_status status = cannot_write(error, &at, number);
    uf_stream_drop(stream);
    return status;
}

uf_status uf_stream_open(uf_output_stream *stream, const uf_output *output, const char *name, uf_error *error)
{
    *stream = (uf_output_stream){.open = 1, .descriptor = -1};
    (void)snprintf(stream->name, sizeof stream->name, "%s", name);
    stream->folder = open_folder(output, NULL, false);
    int number = stream->folder < 0 ? errno : write_kept(stream->folder, name, "", 0, &stream->descriptor);
    if (number)
        stream->descriptor = -1;
    return number ? stream_failed(stream, output, number, error) : UF_OK;
}

static int write_waiting(uf_output_stream *stream)
{
    int number = stream->waiting.failed
                     ? ENOMEM
                     : write_all(stream->descriptor, stream->waiting.bytes ? stream->waiting.bytes : "",
                                 stream->waiting.length);
    stream->waiting.length = 0;
    return number;
}

uf_status uf_stream_flush(uf_output_stream *stream, const uf_output *output, uf_error *error)
{
    if (stream->waiting.length < STREAM_BYTES && !stream->waiting.failed)
        return UF_OK;
    int number = write_waiting(stream);
    return number ? stream_failed(stream, output, number, error) : UF_OK;
}

uf_status uf_stream_finish(uf_output_stream *stream, const uf_output *output, uf_error *error)
{
    int number = write_waiting(stream);
    if (!number && fsync(stream->descriptor) != 0)
        number = errno;
    if (!number)
        number = rename_temporary(stream->folder, stream->name);
    if (!number)
        number = sync_folder(stream->folder);
    if (number)
        return stream_failed(stream, output, number, error);
    stream->name[0] = '\0'; /* nothing to remove */
    uf_stream_drop(stream);
    return UF_OK;
}

void uf_stream_drop(uf_output_stream *stream)
{
    if (stream->open && stream->descriptor >= 0) {
        char temporary[LONGEST_NAME + 8];
        (void)close(stream->descriptor);
        (void)snprintf(temporary, sizeof temporary, ".%s.part", stream->name);
        if (*stream->name)
            (void)unlinkat(stream->folder, temporary, 0);
    }
    if (stream->open && stream->folder >= 0)
        (void)close(stream->folder);
    uf_text_free(&stream->waiting);
    *stream = (uf_output_stream){0};
}

/* ---- one run at a time ------------------------------------------------------------------------ */

uf_status uf_output_lock(const uf_output *output, const char *name, const char *who, int *descriptor, uf_error *error)
{
    const place at = {output, NULL, name};
    int file = openat(output->descriptor, name, O_RDWR | O_CREAT | O_NOFOLLOW | O_CLOEXEC, 0666);
    *descriptor = -1;
    if (file < 0)
        return cannot_write(error, &at, errno);
    struct flock lock = {.l_type = F_WRLCK, .l_whence = SEEK_SET};
    if (fcntl(file, F_SETLK, &lock) != 0) {
        char holder[200] = "";
        ssize_t count = pread(file, holder, sizeof holder - 1, 0);
        holder[count > 0 ? count : 0] = '\0';
        holder[strcspn(holder, "\n")] = '\0';
        (void)close(file);
        return uf_fail(error, UF_OUTPUT,
                       "%.400s: another run is at work here (%s); wait for it, or choose another folder",
                       output->path, *holder ? holder : "it has not said who it is");
    }
    int number = ftruncate(file, 0) != 0 ? errno : write_all(file, who, strlen(who));
    if (number) {
        (void)close(file);
        return cannot_write(error, &at, number);
    }
    *descriptor = file;
    return UF_OK;
}

uf_status uf_output_read(const uf_output *output, const char *folder, const char *name, uf_text *bytes,
                         uf_error *error)
{
    const place at = {output, folder, name};
    char chunk[1 << 16];
    *bytes = (uf_text){0};
    int below = open_folder(output, folder, false);
    if (below < 0)
        return errno == ENOENT ? UF_OK : fail_at(error, &at, "cannot be read", errno, "");
    int file = openat(below, name, O_RDONLY | O_NOFOLLOW | O_CLOEXEC | O_NONBLOCK);
    int number = file < 0 ? errno : 0;
    (void)close(below);
    if (file < 0)
        return number == ENOENT ? UF_OK : fail_at(error, &at, "cannot be read", number, "");
    for (;;) {
        ssize_t count = read(file, chunk, sizeof chunk);
        if (count < 0 && errno == EINTR)
            continue;
        if (count < 0)
            number = errno;
        if (count <= 0)
            break;
        uf_text_bytes(bytes, chunk, (size_t)count);
    }
    (void)close(file);
    if (number)
        return fail_at(error, &at, "cannot be read", number, "");
    return uf_text_check(bytes, name, error);
}

/* ---- one file -------------------------------------------------------------------------------- */

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
