/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "io/input.h"

#include <errno.h>
#include <fcntl.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>
#include <xxhash.h>

static uf_status cannot_read(uf_error *error, const char *path, int number)
{
    if (!*path)
        return uf_fail(error, UF_USAGE, "an empty name where a file to read is expected; name the file");
    return uf_fail(error, UF_INPUT, "%.400s: cannot be read (%s); check the path and who may read the file", path,
                   strerror(number));
}

static const char *kind_of_file(mode_t mode)
{
    if (S_ISDIR(mode))
        return "a folder";
    if (S_ISFIFO(mode) || S_ISSOCK(mode))
        return "a pipe";
    return "a device";
}

uf_status uf_input_open(const char *path, int *descriptor, uint64_t *bytes, uf_error *error)
{
    struct stat facts;
    /* O_NONBLOCK means nothing to a regular file; it keeps a pipe without a writer from hanging us. */
    int opened = open(path, O_RDONLY | O_CLOEXEC | O_NONBLOCK | O_NOCTTY);
    *descriptor = -1;
    *bytes = 0;
    if (opened < 0)
        return cannot_read(error, path, errno);
    if (fstat(opened, &facts) != 0) {
        int number = errno;
        (void)close(opened);
        return cannot_read(error, path, number);
    }
    if (!S_ISREG(facts.st_mode)) {
        (void)close(opened);
        return uf_fail(error, UF_INPUT, "%.400s: is %s, expected a regular file; name the file itself", path,
                       kind_of_file(facts.st_mode));
    }
    *descriptor = opened;
    *bytes = (uint64_t)facts.st_size;
    return UF_OK;
}

/* pread that a signal does not disturb. */
static ssize_t read_at(int descriptor, void *buffer, size_t size, uint64_t at)
{
    ssize_t count;
    do
        count = pread(descriptor, buffer, size, (off_t)at);
    while (count < 0 && errno == EINTR);
    return count;
}

static uf_status read_whole(uf_text *out, int descriptor, const char *path, size_t max_bytes, uf_error *error)
{
    char piece[16384];
    ssize_t count;
    while ((count = read_at(descriptor, piece, sizeof piece, out->length)) > 0) {
        if ((size_t)count > max_bytes - out->length)
            return uf_fail(error, UF_INPUT,
                           "%.400s: is larger than %zu bytes, the most that is read here; is it the right "
                           "file?",
                           path, max_bytes);
        uf_text_bytes(out, piece, (size_t)count);
        if (out->failed)
            return uf_fail_memory(error, path);
    }
    return count < 0 ? cannot_read(error, path, errno) : UF_OK;
}

uf_status uf_input_read(uf_text *out, const char *path, size_t max_bytes, uf_error *error)
{
    int descriptor;
    uint64_t bytes;
    uf_text_free(out);
    uf_status status = uf_input_open(path, &descriptor, &bytes, error);
    if (status)
        return status;
    /* An empty file is an empty string, not a NULL pointer. */
    uf_text_add(out, "");
    status = uf_text_check(out, path, error);
    if (!status)
        status = read_whole(out, descriptor, path, max_bytes, error);
    (void)close(descriptor);
    if (status)
        uf_text_free(out);
    return status;
}

uint64_t uf_fingerprint(const void *bytes, size_t count)
{
    return XXH3_64bits(bytes, count);
}

uf_status uf_input_fingerprint(int descriptor, const char *path, void *buffer, size_t size, uint64_t *fingerprint,
                               uf_error *error)
{
    uint64_t at = 0;
    ssize_t count;
    XXH3_state_t *state = XXH3_createState();
    *fingerprint = 0;
    if (!state)
        return uf_fail_memory(error, "a checksum");
    (void)XXH3_64bits_reset(state);
    while ((count = read_at(descriptor, buffer, size, at)) > 0) {
        (void)XXH3_64bits_update(state, buffer, (size_t)count);
        at += (uint64_t)count;
    }
    int number = errno;
    *fingerprint = XXH3_64bits_digest(state);
    (void)XXH3_freeState(state);
    return count < 0 ? cannot_read(error, path, number) : UF_OK;
}

uf_input_facts uf_input_facts_of(const char *path)
{
    struct stat facts;
    if (!path || stat(path, &facts) != 0 || !S_ISREG(facts.st_mode))
        return (uf_input_facts){-1, 0};
    return (uf_input_facts){(int64_t)facts.st_size,
                            (int64_t)facts.st_mtim.tv_sec * 1000000000 + (int64_t)facts.st_mtim.tv_nsec};
}

void uf_input_expect(const char *path)
{
    int descriptor = path ? open(path, O_RDONLY | O_CLOEXEC | O_NONBLOCK | O_NOCTTY) : -1;
    if (descriptor < 0)
        return;
    (void)posix_fadvise(descriptor, 0, 0, POSIX_FADV_WILLNEED);
    (void)close(descriptor);
}
