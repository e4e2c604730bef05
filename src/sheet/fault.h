/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What is wrong with a sheet, a layout or a folder, all of it at once: a list that checks add to. */
#ifndef UF_SHEET_FAULT_H
#define UF_SHEET_FAULT_H

#include <stdbool.h>

#include "base/status.h"

typedef enum uf_severity {
    UF_NOTE,    /* understood, and said */
    UF_WARNING, /* can be used, but look at it */
    UF_FAULT    /* cannot be used */
} uf_severity;

typedef struct uf_fault {
    uf_severity severity;
    const char *kind; /* a word for scripts: "missing_file"; a literal */
    char *file;       /* as the user typed it, NULL: no one file */
    int line;         /* from 1, 0: no one line */
    char *column;     /* NULL: no one column */
    char *text;       /* what was found, what was expected and the mend */
} uf_fault;

/* Zeroed it is empty and may be freed. */
typedef struct uf_faults {
    uf_fault *list;
    int count, capacity;
    int faults, warnings, notes; /* how many of each severity */
    bool failed;                 /* memory ran out and something is missing from the list */
} uf_faults;

/* Where a fault is; file and column may be NULL, line 0. */
typedef struct uf_place {
    const char *file;
    int line;
    const char *column;
} uf_place;

/* Adds one; the texts are copied. */
void uf_fault_add(uf_faults *faults, uf_severity severity, const char *kind, uf_place place, const char *format, ...)
    UF_PRINTF(5, 6);

/* Orders by file (in the order they were met first) and line, what has no line last; equal ones as they came. */
void uf_faults_sort(uf_faults *faults);

/* UF_MEMORY when an addition failed. */
UF_MUST_USE uf_status uf_faults_check(const uf_faults *faults, uf_error *error);

void uf_faults_free(uf_faults *faults);

/* "warning", and "fault", "note". */
const char *uf_severity_word(uf_severity severity);

#endif
