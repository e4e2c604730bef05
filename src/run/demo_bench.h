/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The demo's calibration images: an afternoon at a simulated bench whose truth is known. */
#ifndef UF_RUN_DEMO_BENCH_H
#define UF_RUN_DEMO_BENCH_H

#include "base/work.h"
#include "io/output.h"

/* Writes beads, dark frames, lights, films, a pair for the shift and one for the reference, bench.ini, README.txt and truth.txt
 * into an open folder. The same bytes every time. UF_OUTPUT, UF_MEMORY. */
UF_MUST_USE uf_status uf_demo_bench_write(uf_work *work, const uf_output *output, int *images, uf_error *error);

#endif
