/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The pictures of one measured field: overlay and its outlines, gap and label maps, as the assay asks for. */
#ifndef UF_RUN_FIELD_PICTURES_H
#define UF_RUN_FIELD_PICTURES_H

#include "run/field.h"

/* Takes one file: its bytes, or NULL for a file that an earlier run may have left and this one does not make. */
typedef uf_status uf_put_picture(void *context, const char *folder, const char *name, const uf_text *bytes,
                                 uf_error *error);

typedef struct uf_pictures {
    uf_work *work;
    const uf_settings *settings;
    const uf_plan *plan;
    const uf_field_result *result;
    const char *key;   /* of the files' names */
    const char *title; /* in the overlay */
    uf_put_picture *put;
    void *context;
    int thumbnail;              /* wanted, as far as overlays are at all */
    double thumbnail_white_adu; /* filled: what its white stands for above background; NaN without one */
    char overlay_name[300];     /* filled: "overlay/KEY.png", empty without one */
} uf_pictures;

UF_MUST_USE uf_status uf_pictures_write(uf_pictures *pictures, uf_error *error);

/* File names for a field whose near image is at `path`: the name without its ending, as a safe key. */
void uf_picture_key(uf_text *out, const char *path);

#endif
