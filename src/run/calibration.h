/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What all calibrations share: how they are asked, and the INI fragment they write. */
#ifndef UF_RUN_CALIBRATION_H
#define UF_RUN_CALIBRATION_H

#include "base/text.h"
#include "run/read_channel.h"

typedef struct uf_calibration_request {
    const uf_settings *settings;
    const char *const *instruments, *const *assays; /* the files they come from */
    int instrument_count, assay_count;
    const char *const *images; /* what they are depends on the kind */
    int image_count;
    const char *out_path;  /* the fragment; other results lie beside it */
    const char *plot_path; /* PNG to write, NULL: none */
    int as_json, threads;
} uf_calibration_request;

/* An INI fragment in the making, in the instrument file's own keys. */
typedef struct uf_fragment {
    uf_text text;
    const char *section; /* the one that is open */
} uf_fragment;

/* Comment lines: which calibration of which files (with fingerprints), and how to use it. */
void uf_fragment_start(uf_fragment *fragment, const char *kind, const uf_reader *reader);
void uf_fragment_note(uf_fragment *fragment, const char *note);
void uf_fragment_number(uf_fragment *fragment, const char *section, const char *key, double value, int digits);
void uf_fragment_word(uf_fragment *fragment, const char *section, const char *key, const char *word);

/* Writes it and frees it. UF_OUTPUT. */
UF_MUST_USE uf_status uf_fragment_write(uf_fragment *fragment, const char *path, uf_error *error);
void uf_fragment_free(uf_fragment *fragment);

/* Appends "NAME beside the fragment": out_path with its ending replaced, near_camera.ini and "_dark.tif" giving
 * near_camera_dark.tif. */
void uf_fragment_beside(uf_text *out, const char *out_path, const char *ending);

#endif
