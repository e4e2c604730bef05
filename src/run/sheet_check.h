/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `sheet check`: every fault of a sheet and of the files it names, at once. */
#ifndef UF_RUN_SHEET_CHECK_H
#define UF_RUN_SHEET_CHECK_H

#include "settings/settings.h"
#include "sheet/fault.h"

typedef struct uf_sheet_check_request {
    const char *path;
    const char *root;            /* NULL: paths are relative to the sheet's folder */
    const uf_settings *settings; /* of the files given by -i and -a; NULL: none were */
    bool pooled;                 /* the reference is to be pooled over all wells */
    int threads;
} uf_sheet_check_request;

typedef struct uf_sheet_check_summary {
    int rows, images, plates, sessions;
    uf_faults faults; /* sorted by line */
} uf_sheet_check_summary;

/* UF_OK whatever the sheet holds; summary->faults tells. UF_INPUT only for a file that is no sheet at all. Images' headers
 * are read, not their pixels. The caller frees the summary in any case. */
UF_MUST_USE uf_status uf_sheet_check(const uf_sheet_check_request *request, uf_sheet_check_summary *summary,
                                     uf_error *error);

void uf_sheet_check_free(uf_sheet_check_summary *summary);

#endif
