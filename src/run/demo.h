/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A small experiment with known truth, to try the program on. */
#ifndef UF_RUN_DEMO_H
#define UF_RUN_DEMO_H

#include "base/status.h"

typedef struct uf_demo_request {
    const char *dir;
    const char *scenario; /* coatings, doses, screen or bench */
    int threads;
} uf_demo_request;

typedef struct uf_demo_summary {
    int fields; /* 0: calibration images of a bench */
    int images; /* of these */
    double seconds;
    char first[64], instrument[64]; /* names of the first field and of its instrument file, to measure it */
} uf_demo_summary;

/* Writes a scenario's experiment under `dir`: image pairs, flats, instrument files, assay file, sheet, truth, and a
 * README that says what is what. The same bytes every time, whatever the threads. UF_USAGE for an unknown scenario,
 * UF_OUTPUT, UF_MEMORY. */
UF_MUST_USE uf_status uf_demo_write(const uf_demo_request *request, uf_demo_summary *summary, uf_error *error);

#endif
