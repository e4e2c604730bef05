/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/fault.h"

#include <limits.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/text.h"

static bool make_room(uf_faults *faults)
{
    if (faults->count < faults->capacity)
        return true;
    int capacity = faults->capacity ? 2 * faults->capacity : 32;
    uf_fault *list = realloc(faults->list, (size_t)capacity * sizeof *list);
    if (!list)
        return false;
    faults->list = list;
    faults->capacity = capacity;
    return true;
}

static void free_fault(uf_fault *fault)
{
    free(fault->file);
    free(fault->column);
    free(fault->text);
}

void uf_fault_add(uf_faults *faults, uf_severity severity, const char *kind, uf_place place, const char *format, ...)
{
    char text[UF_ERROR_TEXT];
    va_list arguments;
    va_start(arguments, format);
    (void)vsnprintf(text, sizeof text, format, arguments);
    va_end(arguments);
    uf_fault fault = {severity,
                      kind,
                      place.file ? uf_copy_string(place.file) : NULL,
                      place.line,
                      place.column ? uf_copy_string(place.column) : NULL,
                      uf_copy_string(text)};
    bool whole = fault.text && (fault.file || !place.file) && (fault.column || !place.column);
    /* The count stands even where the words are lost, so that no fault passes for none. */
    faults->faults += severity == UF_FAULT;
    faults->warnings += severity == UF_WARNING;
    faults->notes += severity == UF_NOTE;
    if (!whole || !make_room(faults)) {
        free_fault(&fault);
        faults->failed = true;
        return;
    }
    faults->list[faults->count++] = fault;
}

/* A fault with what orders it. */
typedef struct ranked {
    uf_fault fault;
    int file, line, index;
} ranked;

static int by_place(const void *a, const void *b)
{
    const ranked *one = a, *other = b;
    if (one->file != other->file)
        return one->file < other->file ? -1 : 1;
    if (one->line != other->line)
        return one->line < other->line ? -1 : 1;
    return one->index < other->index ? -1 : one->index > other->index;
}

static int file_rank(const uf_faults *faults, int index)
{
    const char *file = faults->list[index].file;
    for (int k = 0; file && k < index; k++)
        if (faults->list[k].file && strcmp(faults->list[k].file, file) == 0)
            return k;
    return file ? index : INT_MAX;
}

void uf_faults_sort(uf_faults *faults)
{
    if (faults->count == 0)
        return;
    ranked *list = malloc((size_t)faults->count * sizeof *list);
    faults->failed |= !list;
    for (int k = 0; list && k < faults->count; k++) {
        int line = faults->list[k].line;
        list[k] = (ranked){faults->list[k], file_rank(faults, k), line ? line : INT_MAX, k};
    }
    if (list) {
        qsort(list, (size_t)faults->count, sizeof *list, by_place);
        for (int k = 0; k < faults->count; k++)
            faults->list[k] = list[k].fault;
    }
    free(list);
}

uf_status uf_faults_check(const uf_faults *faults, uf_error *error)
{
    return faults->failed ? uf_fail_memory(error, "the list of faults") : UF_OK;
}

void uf_faults_free(uf_faults *faults)
{
    for (int k = 0; k < faults->count; k++)
        free_fault(&faults->list[k]);
    free(faults->list);
    *faults = (uf_faults){0};
}

const char *uf_severity_word(uf_severity severity)
{
    static const char *const words[] = {[UF_NOTE] = "note", [UF_WARNING] = "warning", [UF_FAULT] = "fault"};
    return words[severity];
}
