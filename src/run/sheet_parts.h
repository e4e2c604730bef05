/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Between the files of `sheet build`. Run's own. */
#ifndef UF_RUN_SHEET_PARTS_H
#define UF_RUN_SHEET_PARTS_H

#include "io/folder.h"
#include "run/sheet_build.h"
#include "sheet/draft.h"
#include "sheet/layout.h"
#include "sheet/template.h"

typedef struct build_job {
    const uf_sheet_build_request *request;
    uf_sheet_build_summary *summary;
    uf_error *error;
    uf_template name;
    int channel;                     /* number of the template's field channel, -1: none */
    int columns[UF_TEMPLATE_FIELDS]; /* the draft's column of each of the template's fields; -1 for channel */
    bool any_well;                   /* wells may have any name: coverslips, dishes */
    char *base;                      /* folder that the sheet's paths are relative to, plain; NULL: not there yet */
    char *folder, *plain;            /* the folder last made plain, and what it became */
    uf_draft draft;
    uf_layout layout, positions; /* the draft points into both */
} build_job;

/* Rows from the names of files; with a template without {channel} each file becomes one row, or as many as its OME-XML
 * has fields and times. */
uf_status build_from_files(build_job *job);

/* Rows of one file that holds both channels: by pages, or by OME-XML. `like` is what its name says. */
uf_status build_from_file(build_job *job, const char *path, const uf_draft_row *like);

/* Wells and fields of numbered positions, by --positions or by --order. */
uf_status build_positions(build_job *job);
uf_status build_order(build_job *job);

/* The vessel that options say for all rows, NULL for none. */
const char *build_vessel(const build_job *job);

/* How the sheet writes a path, kept in the draft; NULL without memory. */
const char *build_path(build_job *job, const char *path);

#endif
