/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>

#include "cli/calibrate.h"
#include "run/calibrate_reference.h"

typedef struct reference_options {
    const char *kind, *gap, *gap_sd, *blank_near, *blank_wide, *exposure_near, *exposure_wide, *sheet;
} reference_options;

static uf_status run_reference(void *context, const uf_calibration_request *common, uf_text *out, uf_error *error)
{
    static const char *const kinds[] = {"cell", "film", NULL}; /* as uf_reference_kind */
    const reference_options *o = context;
    double none = (double)NAN;
    uf_reference_request r = {
        .common = *common, .blank_near = o->blank_near, .blank_wide = o->blank_wide, .sheet_path = o->sheet};
    uf_status status = uf_option_word("kind", o->kind, kinds, o->sheet ? 0 : -1, &r.kind, error);
    if (status == UF_OK)
        status = uf_option_number("gap-nm", o->gap, none, "15", &r.gap_nm, error);
    if (status == UF_OK)
        status = uf_option_number("gap-sd-nm", o->gap_sd, 0, "1", &r.gap_sd_nm, error);
    if (status == UF_OK)
        status = uf_option_number("exposure-near-ms", o->exposure_near, none, "100", &r.exposure_ms[UF_NEAR], error);
    if (status == UF_OK)
        status = uf_option_number("exposure-wide-ms", o->exposure_wide, none, "20", &r.exposure_ms[UF_WIDE], error);
    return status == UF_OK ? uf_calibrate_reference(&r, out, error) : status;
}

static int command_reference(int argc, char **argv)
{
    reference_options o = {0};
    const uf_option options[] = {
        {"kind", 'k', "WHAT", "film: one dyed layer; cell: cells whose gap is known", &o.kind, NULL, NULL, NULL, 0},
        {"gap-nm", 'g', "Z", "gap of that film (its spacer), or of those cells", &o.gap, NULL, NULL, NULL, 0},
        {"gap-sd-nm", 0, "S", "1 sigma of it (0)", &o.gap_sd, NULL, NULL, NULL, 0},
        {"blank-near", 0, "IMAGE", "bare substrate, near: what shines without a film", &o.blank_near, NULL, NULL,
         NULL, 0},
        {"blank-wide", 0, "IMAGE", "the same, wide", &o.blank_wide, NULL, NULL, NULL, 0},
        {"exposure-near-ms", 0, "T", "exposure of the near images (else [near.camera] exposure_ms)", &o.exposure_near,
         NULL, NULL, NULL, 0},
        {"exposure-wide-ms", 0, "T", "exposure of the wide images", &o.exposure_wide, NULL, NULL, NULL, 0},
        {"sheet", 's', "SHEET", "reference wells (else controls) of a sheet, at the assumed gap", &o.sheet, NULL,
         NULL, NULL, 0}};
    const uf_calibrate_kind kind = {&uf_calibrate_reference_command, options, sizeof options / sizeof options[0],
                                    run_reference, &o};
    return uf_calibrate_run(&kind, argc, argv);
}

const uf_command uf_calibrate_reference_command = {
    "calibrate reference",
    "NEAR WIDE [NEAR WIDE ...] --kind film|cell --gap-nm Z -i INSTRUMENT -o FILE.ini\n"
    "       underfoot calibrate reference --sheet SHEET -i INSTRUMENT [-a ASSAY] -o FILE.ini",
    "the near/wide ratio that stands for a known gap",
    "From a dyed film on a spacer of known thickness, from cells whose gap is known by other means, or from\n"
    "the reference wells (else controls) of a sheet at the assumed gap of [reference]. The fragment records\n"
    "exposures and flats; a run with other flats is refused. A CSV beside it has a row a plate and session.",
    "  underfoot demo bench --scenario bench\n"
    "  underfoot calibrate reference bench/spacer_near.tif bench/spacer_wide.tif --kind film --gap-nm 15 \\\n"
    "      -i bench/bench.ini -o reference.ini",
    command_reference};
