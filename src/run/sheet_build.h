/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `sheet build`: a sheet from a folder of images, their names, and layouts. */
#ifndef UF_RUN_SHEET_BUILD_H
#define UF_RUN_SHEET_BUILD_H

#include "base/text.h"
#include "sheet/fault.h"

typedef struct uf_sheet_build_request {
    const char *const *dirs; /* folders of images; empty with expect */
    int dir_count;
    const char *out;  /* the sheet to write */
    const char *name; /* name template, relative to a folder */
    const char *near_channel, *wide_channel, *nuclei_channel,
        *mask_channel;        /* what {channel}, or OME-XML, calls them */
    int near_page, wide_page; /* pages from 1, where both images are pages of one file; 0: they are not */
    int layer;                /* layer (Z) of OME-TIFFs, from 1; 0: there must be one only */
    const char *const *layouts;
    int layout_count;
    const char *positions;   /* a list with a column position, or NULL */
    const char *a1;          /* "X,Y": the stage's coordinates of A1's centre, um, or NULL */
    const char *order;       /* "row" or "serpentine", or NULL */
    const char *wells;       /* wells that `order` visits, or NULL: all */
    const char *vessel;      /* of all rows, or NULL */
    int fields_per_well;     /* 0: not said */
    const char *const *sets; /* "column=value" */
    int set_count;
    const char *const *excludes; /* templates of names to leave out */
    int exclude_count;
    const char *root;     /* what the sheet's paths are relative to; NULL: the sheet's folder */
    bool expect;          /* images are yet to be made: rows come from the layouts */
    bool append;          /* the sheet's rows of before are kept, and these added */
    bool skip_incomplete; /* fields without their near or wide image are left out, and said */
} uf_sheet_build_request;

typedef struct uf_sheet_build_summary {
    int rows, plates, wells;       /* wells of all plates; 0 where the sheet has none */
    int least_fields, most_fields; /* in a well */
    uf_text columns;               /* of the sheet, joined by blanks */
    bool written;
    uf_faults faults; /* all that was met, sorted; with any fault the sheet is not written */
} uf_sheet_build_summary;

/* Writes the sheet unless something is wrong with what it is made from: then summary->faults says what, all at once, and
 * the status is UF_OK all the same. UF_USAGE, UF_INPUT for what cannot be begun with; UF_OUTPUT. The caller frees the
 * summary in any case. */
UF_MUST_USE uf_status uf_sheet_build(const uf_sheet_build_request *request, uf_sheet_build_summary *summary,
                                     uf_error *error);

void uf_sheet_build_free(uf_sheet_build_summary *summary);

#endif
