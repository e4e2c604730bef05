/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `sheet layout`: randomised plates from a list of treatments. */
#ifndef UF_RUN_SHEET_LAYOUT_H
#define UF_RUN_SHEET_LAYOUT_H

#include <stdint.h>

#include "base/text.h"
#include "sheet/draw.h"
#include "sheet/fault.h"

typedef struct uf_sheet_layout_request {
    const char *out;  /* the layout file: OUT.csv; the others stand beside it */
    const char *list; /* CSV of treatments, or NULL */
    const char *const *treatments, *const *controls, *const *positives; /* "NAME: 0.1, 1, 10 uM" */
    int treatment_count, control_count, positive_count;
    int wells, control_wells,
        positive_wells;     /* of each, on each plate; controls 0: eight, or fewer on a small plate */
    const char *vessel;     /* "96" */
    int plates;             /* each with places of its own */
    const char *plate_name; /* plates are NAME1, NAME2 .. */
    uf_edge_use edge;
    uint64_t seed;
} uf_sheet_layout_request;

typedef struct uf_sheet_layout_summary {
    int arms, treatments, wells_used, vessel_wells, blocks;
    bool edge_used;
    int quarters_without_control; /* the worst plate's; 4 where there are no controls */
    uf_text files;                /* that were written, one a line */
    uf_faults faults;             /* of the list; with any fault nothing is written */
} uf_sheet_layout_summary;

/* Writes OUT.csv (the blocks that `sheet build` reads), OUT_plates.csv (plates and replicates), OUT_pipetting.csv (what goes
 * where, one treatment and dose after the other) and OUT_map.png for each plate. UF_USAGE, UF_INPUT, UF_OUTPUT, UF_MEMORY.
 * The caller frees the summary in any case. */
UF_MUST_USE uf_status uf_sheet_layout(const uf_sheet_layout_request *request, uf_sheet_layout_summary *summary,
                                      uf_error *error);

void uf_sheet_layout_free(uf_sheet_layout_summary *summary);

#endif
