/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A small experiment with known truth, to try the program on. */
#ifndef UF_RUN_DEMO_H
#define UF_RUN_DEMO_H

#include "base/status.h"

typedef struct uf_demo_summary {
    int fields;
    double seconds;
} uf_demo_summary;

/* Writes the demo experiment under `dir`: image pairs, flats, instrument and assay file, sheet, truth, and
 * a README that says what is what. The same bytes every time. UF_OUTPUT, UF_MEMORY. */
UF_MUST_USE uf_status uf_demo_write(const char *dir, int threads, uf_demo_summary *summary, uf_error *error);

#endif
