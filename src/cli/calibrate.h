/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the kinds of `underfoot calibrate` have in common on the command line. */
#ifndef UF_CLI_CALIBRATE_H
#define UF_CLI_CALIBRATE_H

#include "cli/cli.h"
#include "run/calibration.h"

enum { UF_CALIBRATE_FILES = 16, UF_CALIBRATE_IMAGES = 2048, UF_CALIBRATE_OWN_OPTIONS = 12 };

typedef struct uf_calibrate_arguments {
    const char *instruments[UF_CALIBRATE_FILES], *assays[UF_CALIBRATE_FILES];
    int instrument_count, assay_count;
    const char *images[UF_CALIBRATE_IMAGES];
    int image_count;
    const char *out, *plot, *threads;
    bool json, quiet;
} uf_calibrate_arguments;

/* The kind's own work, once arguments and settings are read: parses its own values, appends the report. */
typedef uf_status uf_calibrate_job(void *context, const uf_calibration_request *common, uf_text *out,
                                   uf_error *error);

/* One kind: its page for --help, its own options and its work. */
typedef struct uf_calibrate_kind {
    const uf_command *command;
    const uf_option *options;
    int option_count;
    uf_calibrate_job *job;
    void *context;
} uf_calibrate_kind;

int uf_calibrate_run(const uf_calibrate_kind *kind, int argc, char **argv);

/* A number above 0 (or at least 0) from the text of an option; `fallback` when it was not given. UF_USAGE names the option
 * and shows `example`. */
UF_MUST_USE uf_status uf_option_number(const char *option, const char *text, double fallback, const char *example,
                                       double *value, uf_error *error);

/* Which of `words` (NULL at the end) an option says; `fallback` when it was not given, an error when that is below 0. */
UF_MUST_USE uf_status uf_option_word(const char *option, const char *text, const char *const *words, int fallback,
                                     int *chosen, uf_error *error);

extern const char *const uf_channel_words[]; /* near, wide, NULL */

extern const uf_command uf_calibrate_bead_command, uf_calibrate_camera_command, uf_calibrate_flat_command,
    uf_calibrate_shift_command, uf_calibrate_reference_command;

#endif
