/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `plate`: every field of a sheet, resumable to the same bytes. */
#ifndef UF_RUN_PLATE_H
#define UF_RUN_PLATE_H

#include <signal.h>

#include "base/text.h"
#include "settings/settings.h"

/* Told now and then, from any thread but never two at once: fields done of how many, of those measured in this run, seconds
 * since the first. `what` is "references" or "fields". */
typedef void uf_plate_progress(void *context, const char *what, int done, int total, int measured, double seconds);

typedef struct uf_plate_request {
    const char *sheet_path;
    const char *const *instruments, *const *assays;
    int instrument_count, assay_count;
    const char *out_dir;
    const char *exclude_path; /* fields that must not enter the reference; NULL: none */
    int threads;
    int fresh;  /* measure all again */
    int follow; /* measure as files come, until all have or none came for give_up_min */
    double give_up_min;
    int prepare;         /* write the plan and stop */
    int shard, shards;   /* 1 .. shards: only every so many-th field, by a plan that must be there; 0: all */
    const char *command; /* what the user typed, for the log */
    uf_plate_progress *progress;
    void *progress_context;
    const volatile sig_atomic_t *stop; /* not 0: finish the fields in hand and end */
} uf_plate_request;

enum { UF_PLATE_FAILURES = 8 };

typedef struct uf_plate_summary {
    int fields, measured, kept; /* of the sheet (or shard); in this run; from earlier ones */
    int failed, flagged, empty, cells, cells_used;
    int wells;
    double seconds, slowest_seconds;
    char slowest[200];
    int failure_count;
    char failures[UF_PLATE_FAILURES][400]; /* "field_id: why" of the first ones */
    int stopped;
    int prepared_only;
    char references[2048]; /* one a line, of estimated ones */
} uf_plate_summary;

/*
 * Measures what is not there yet and makes the tables. UF_OK also when some fields failed (summary->failed). UF_STOPPED after
 * *stop: what was finished stays, and the same command goes on. UF_INPUT, UF_USAGE: nothing could be begun. UF_OUTPUT: results
 * could not be written; what was written is whole.
 */
UF_MUST_USE uf_status uf_plate(const uf_plate_request *request, uf_plate_summary *summary, uf_error *error);

/* Joins what shards wrote, in out_dir or elsewhere (`parts`), into tables: same bytes as one run. Missing and doubled fields are
 * named. Only sheet, instruments, assays, exclude_path and out_dir of the request matter. */
UF_MUST_USE uf_status uf_merge(const uf_plate_request *request, const char *const *parts, int part_count,
                               uf_plate_summary *summary, uf_error *error);

#endif
