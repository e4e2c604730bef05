/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>

#include "cli/calibrate.h"
#include "run/calibrate_bead.h"

typedef struct bead_options {
    const char *radius, *radius_sd, *model, *dye, *bead_n, *medium_n, *psf_sigma;
    bool despite_optics;
} bead_options;

static uf_status run_bead(void *context, const uf_calibration_request *common, uf_text *out, uf_error *error)
{
    static const char *const models[] = {"exponential", "scattered", NULL}, *const dyes[] = {"surface", "medium",
                                                                                             NULL};
    const bead_options *o = context;
    uf_bead_request r = {.common = *common, .despite_optics = o->despite_optics};
    if (!o->radius)
        return uf_fail(error, UF_USAGE, "calibrate bead needs the beads' radius: --radius-nm 2500");
    uf_status status = uf_option_number("radius-nm", o->radius, (double)NAN, "2500", &r.radius_nm, error);
    if (status == UF_OK)
        status = uf_option_number("radius-sd-nm", o->radius_sd, 0, "50", &r.radius_sd_nm, error);
    if (status == UF_OK)
        status = uf_option_number("bead-n", o->bead_n, (double)NAN, "1.46", &r.bead_n, error);
    if (status == UF_OK)
        status = uf_option_number("medium-n", o->medium_n, (double)NAN, "1.337", &r.medium_n, error);
    if (status == UF_OK)
        status = uf_option_number("psf-sigma-nm", o->psf_sigma, (double)NAN, "75", &r.psf_sigma_nm, error);
    if (status == UF_OK)
        status = uf_option_word("model", o->model, models, 1, &r.with_stray, error);
    if (status == UF_OK)
        status = uf_option_word("dye", o->dye, dyes, 0, &r.immersed, error);
    return status == UF_OK ? uf_calibrate_bead(&r, out, error) : status;
}

static int command_bead(int argc, char **argv)
{
    bead_options o = {0};
    const uf_option options[] = {
        {"radius-nm", 'r', "R", "radius of the beads (half the diameter)", &o.radius, NULL, NULL, NULL, 0},
        {"radius-sd-nm", 0, "S", "1 sigma of it, by the maker's sheet (0)", &o.radius_sd, NULL, NULL, NULL, 0},
        {"dye", 0, "WHERE", "surface: on the beads (default); medium: around clear beads", &o.dye, NULL, NULL, NULL,
         0},
        {"model", 0, "MODEL", "scattered: evanescent and stray light (default); exponential", &o.model, NULL, NULL,
         NULL, 0},
        {"bead-n", 0, "N", "index of the beads: refuses those that frustrate reflection", &o.bead_n, NULL, NULL, NULL,
         0},
        {"medium-n", 0, "N", "index of the medium the beads lie in (the instrument file's)", &o.medium_n, NULL, NULL,
         NULL, 0},
        {"psf-sigma-nm", 0, "S", "sigma of the point spread function (0.21 emission / NA)", &o.psf_sigma, NULL, NULL,
         NULL, 0},
        {"despite-optics", 0, NULL, "write the result even where it contradicts the optics", NULL, &o.despite_optics,
         NULL, NULL, 0}};
    const uf_calibrate_kind kind = {&uf_calibrate_bead_command, options, sizeof options / sizeof options[0], run_bead,
                                    &o};
    return uf_calibrate_run(&kind, argc, argv);
}

const uf_command uf_calibrate_bead_command = {
    "calibrate bead",
    "IMAGE... --radius-nm R -i INSTRUMENT -o FILE.ini [options]",
    "depth of the evanescent field and stray light, from beads",
    "Near images of round beads of known radius that lie on the substrate, with dye on them or around\n"
    "them. The round shape turns distance from a bead's centre into height, so that each bead is a decay\n"
    "curve; all beads together give the depth, what it means as n sin(angle), and the share of stray light.",
    "  underfoot demo bench --scenario bench\n"
    "  underfoot calibrate bead bench/beads_*.tif --radius-nm 2500 -i bench/bench.ini -o near_bead.ini \\\n"
    "      --plot near_bead.png",
    command_bead};
