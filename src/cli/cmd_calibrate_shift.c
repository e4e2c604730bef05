/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cli/calibrate.h"
#include "run/calibrate_shift.h"

static uf_status run_shift(void *context, const uf_calibration_request *common, uf_text *out, uf_error *error)
{
    (void)context;
    return uf_calibrate_shift(common, out, error);
}

static int command_shift(int argc, char **argv)
{
    const uf_calibrate_kind kind = {&uf_calibrate_shift_command, NULL, 0, run_shift, NULL};
    return uf_calibrate_run(&kind, argc, argv);
}

const uf_command uf_calibrate_shift_command = {
    "calibrate shift",
    "NEAR WIDE [NEAR WIDE ...] [-i INSTRUMENT] -o FILE.ini",
    "shift of the wide image against the near one",
    "One field or several in both channels: beads that shine in both, or well spread cells. Gives the\n"
    "shift to a fraction of a pixel, and from parts of the field scale and rotation, with a warning when a\n"
    "plain shift is not enough.",
    "  underfoot demo bench --scenario bench\n"
    "  underfoot calibrate shift bench/shift_near.tif bench/shift_wide.tif -o shift.ini --plot shift.png",
    command_shift};
