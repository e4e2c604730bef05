/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "io/tiff_memory.h"

#include <stdio.h>
#include <string.h>

/* ---- complaints ------------------------------------------------------------------------------ */

/* Texts from a damaged file may hold anything: only printable ASCII reaches a terminal or a log. */
static void make_printable(char *text)
{
    for (; *text; text++)
        if (*text < ' ' || *text > '~')
            *text = '?';
}

static int keep_first(TIFF *tiff, void *user, const char *module, const char *format, va_list arguments)
{
    uf_tiff_complaint *complaint = user;
    (void)tiff;
    (void)module;
    if (complaint->text[0] == '\0') {
        (void)vsnprintf(complaint->text, sizeof complaint->text, format, arguments);
        make_printable(complaint->text);
        size_t length = strlen(complaint->text);
        if (length && complaint->text[length - 1] == '.')
            complaint->text[length - 1] = '\0';
    }
    return 1; /* handled: the process's own handler is not called */
}

static int keep_warning(TIFF *tiff, void *user, const char *module, const char *format, va_list arguments)
{
    const uf_tiff_complaint *complaint = user;
    return complaint->warnings_too ? keep_first(tiff, user, module, format, arguments) : 1;
}

TIFFOpenOptions *uf_tiff_options(uf_tiff_complaint *complaint, uint64_t max_bytes)
{
    TIFFOpenOptions *options = TIFFOpenOptionsAlloc();
    if (!options)
        return NULL;
    TIFFOpenOptionsSetErrorHandlerExtR(options, keep_first, complaint);
    TIFFOpenOptionsSetWarningHandlerExtR(options, keep_warning, complaint);
    TIFFOpenOptionsSetMaxSingleMemAlloc(options, (tmsize_t)(max_bytes < INT64_MAX ? max_bytes : INT64_MAX));
    return options;
}

/* ---- a file in memory ------------------------------------------------------------------------ */

static size_t size_now(const uf_tiff_memory *memory)
{
    return memory->out->length - memory->base;
}

static tmsize_t memory_read(thandle_t handle, void *buffer, tmsize_t count)
{
    uf_tiff_memory *memory = handle;
    size_t wanted = count > 0 ? (size_t)count : 0;
    size_t size = size_now(memory);
    size_t left = memory->at < size ? size - memory->at : 0;
    size_t given = wanted < left ? wanted : left;
    if (given)
        memcpy(buffer, memory->out->bytes + memory->base + memory->at, given);
    memory->at += given;
    return (tmsize_t)given;
}

/* libtiff may have moved past the end; the hole is filled with zeros, as in a file. */
static void fill_hole(uf_tiff_memory *memory)
{
    static const char zeros[64];
    while (!memory->out->failed && size_now(memory) < memory->at) {
        size_t hole = memory->at - size_now(memory);
        uf_text_bytes(memory->out, zeros, hole < sizeof zeros ? hole : sizeof zeros);
    }
}

static tmsize_t memory_write(thandle_t handle, void *buffer, tmsize_t count)
{
    uf_tiff_memory *memory = handle;
    const char *bytes = buffer;
    if (count <= 0)
        return 0;
    fill_hole(memory);
    if (memory->out->failed)
        return -1;
    size_t all = (size_t)count, left = size_now(memory) - memory->at;
    size_t over = all < left ? all : left;
    if (over)
        memcpy(memory->out->bytes + memory->base + memory->at, bytes, over);
    uf_text_bytes(memory->out, bytes + over, all - over);
    if (memory->out->failed)
        return -1;
    memory->at += all;
    return count;
}

static toff_t memory_seek(thandle_t handle, toff_t offset, int whence)
{
    uf_tiff_memory *memory = handle;
    size_t from = whence == SEEK_SET ? 0 : whence == SEEK_CUR ? memory->at : size_now(memory);
    /* Offsets are unsigned here; a negative one wraps round and the sum is right again. */
    memory->at = from + (size_t)offset;
    return (toff_t)memory->at;
}

static toff_t memory_size(thandle_t handle)
{
    return (toff_t)size_now(handle);
}

static int memory_close(thandle_t handle)
{
    (void)handle;
    return 0;
}

TIFF *uf_tiff_memory_open(uf_tiff_memory *memory, const char *mode, TIFFOpenOptions *options)
{
    return TIFFClientOpenExt("memory", mode, memory, memory_read, memory_write, memory_seek, memory_close,
                             memory_size, NULL, NULL, options);
}
