/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `optics`: the numbers of an evanescent set-up, in words, as JSON, as a plot. */
#ifndef UF_RUN_OPTICS_H
#define UF_RUN_OPTICS_H

#include "base/text.h"
#include "settings/settings.h"

typedef struct uf_optics_request {
    const uf_settings *settings;
    double for_depth_nm;     /* wanted 1/e depth: which angle? NaN: not asked */
    double for_agreement_nm; /* wanted agreement of exponential and layered: which angles? NaN: not asked */
    int as_json;
    const char *plot_path; /* PNG to write, NULL: none */
} uf_optics_request;

/* Appends the report to `out` and writes the plot. Needs wavelength, both indices, and an angle or a wish; UF_INPUT
 * says what is missing, or which angle would be totally reflected. UF_OUTPUT when the plot cannot be written. */
UF_MUST_USE uf_status uf_optics_report(const uf_optics_request *request, uf_text *out, uf_error *error);

#endif
