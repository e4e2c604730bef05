/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What reports of jobs share: aligned rows of words, JSON numbers, a plot as a file. */
#ifndef UF_RUN_REPORT_PARTS_H
#define UF_RUN_REPORT_PARTS_H

#include <jansson.h>

#include "base/text.h"
#include "report/plot.h"

/* "WHAT                  VALUE UNIT  1 sd SD UNIT" and a new line; `digits` after the point. No sd for NaN. */
void uf_report_row(uf_text *out, const char *what, double value, double sd, int digits, const char *unit);

/* A number of 10 digits, null when it is not finite. */
void uf_json_number(json_t *object, const char *name, double value);

/* Appends the object as text and gives it up. UF_MEMORY. */
UF_MUST_USE uf_status uf_json_finish(uf_text *out, json_t *object, uf_error *error);

/* Draws panels and writes them as a PNG. UF_OUTPUT, UF_MEMORY. */
UF_MUST_USE uf_status uf_plot_file(const uf_plot_panel *panels, int count, int width, int height, const char *path,
                                   uf_error *error);

#endif
