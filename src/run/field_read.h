/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The images of one field, read and corrected, and the plan they are measured by. */
#ifndef UF_RUN_FIELD_READ_H
#define UF_RUN_FIELD_READ_H

#include "run/field.h"
#include "run/read_channel.h"

typedef struct uf_field_files {
    const char *near_path, *wide_path;   /* wide NULL: with label = adhesion-protein only */
    const char *mask_path, *nuclei_path; /* NULL: none */
    int near_page, wide_page;            /* from 1; 0: the file must have one page (near of a series: one an angle) */
} uf_field_files;

/*
 * Reads what the reader's settings and `files` name into result->near, ->pages, ->wide, ->mask and ->nuclei (in the arena of
 * the reader's work) and makes the plan, which needs the image's pixel size where the settings give none. Everything that
 * can be wrong with settings or files is said before pixels are worked on: UF_INPUT, UF_USAGE.
 */
UF_MUST_USE uf_status uf_field_read(uf_reader *reader, const uf_field_files *files, uf_plan *plan,
                                    uf_field_result *result, uf_error *error);

#endif
