/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cli/calibrate.h"
#include "run/calibrate_flat.h"

typedef struct flat_options {
    const char *channel, *sample, *smooth;
    const char *darks[UF_CALIBRATE_IMAGES];
    int dark_count;
} flat_options;

static uf_status run_flat(void *context, const uf_calibration_request *common, uf_text *out, uf_error *error)
{
    static const char *const samples[] = {"film", "solution", "cells", NULL};
    const flat_options *o = context;
    int channel = 0, sample = 0;
    uf_flat_job r = {.common = *common, .darks = o->darks, .dark_count = o->dark_count};
    uf_status status = uf_option_word("channel", o->channel, uf_channel_words, -1, &channel, error);
    if (status == UF_OK)
        status = uf_option_word("sample", o->sample, samples, -1, &sample, error);
    if (status == UF_OK)
        status = uf_option_number("smooth-px", o->smooth, 0, "3", &r.smooth_px, error);
    r.channel = (uf_channel_name)channel;
    r.sample = (uf_flat_sample)sample;
    return status == UF_OK ? uf_calibrate_flat(&r, out, error) : status;
}

static int command_flat(int argc, char **argv)
{
    static flat_options o;
    const uf_option options[] = {
        {"channel", 'c', "NAME", "near or wide: whose light it is", &o.channel, NULL, NULL, NULL, 0},
        {"sample", 's', "WHAT", "film, solution, or cells (many fields; what lies between them is even)", &o.sample,
         NULL, NULL, NULL, 0},
        {"dark", 'd', "IMAGE...", "frames without light (else [..camera] dark or offset_adu)", NULL, NULL, o.darks,
         &o.dark_count, UF_CALIBRATE_IMAGES},
        {"smooth-px", 0, "S", "Gaussian smoothing, sigma (0: none)", &o.smooth, NULL, NULL, NULL, 0}};
    const uf_calibrate_kind kind = {&uf_calibrate_flat_command, options, sizeof options / sizeof options[0], run_flat,
                                    &o};
    return uf_calibrate_run(&kind, argc, argv);
}

const uf_command uf_calibrate_flat_command = {
    "calibrate flat",
    "--channel near|wide --sample film|solution|cells IMAGE... -o FILE.ini [options]",
    "flat field of a channel, from images of something even",
    "At least 3 images, better 12 or more, the stage moved between them: what moves (dust, cells) is left\n"
    "out, what stays is the light. The flat has mean 1 and lies beside the fragment. One whose own noise\n"
    "would add to the data is refused.",
    "  underfoot demo bench --scenario bench\n"
    "  underfoot calibrate flat --channel near --sample film bench/film_near_*.tif --dark bench/dark_*.tif \\\n"
    "      -o near_flat.ini --plot near_flat.png",
    command_flat};
