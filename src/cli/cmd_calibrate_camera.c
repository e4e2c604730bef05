/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>
#include <string.h>

#include "cli/calibrate.h"
#include "run/calibrate_camera.h"

typedef struct camera_options {
    const char *channel, *exposures, *plain_exposures, *excess;
    const char *darks[UF_CALIBRATE_IMAGES], *flats[UF_CALIBRATE_IMAGES];
    const char *plain_darks[UF_CALIBRATE_IMAGES], *plain_flats[UF_CALIBRATE_IMAGES];
    int dark_count, flat_count, plain_dark_count, plain_flat_count;
} camera_options;

/* "2,5,10": one a pair. */
static uf_status read_exposures(const char *option, const char *text, uf_reals *list, uf_error *error)
{
    list->count = 0;
    for (const char *at = text; at; list->count++) {
        char item[UF_NUMBER_TEXT] = "";
        size_t length = strcspn(at, ",");
        memcpy(item, at, length < sizeof item ? length : sizeof item - 1);
        if (list->count == UF_REALS_LIMIT || !uf_parse_number(item, &list->values[list->count]) ||
            list->values[list->count] <= 0)
            return uf_fail(error, UF_USAGE, "--%s %.60s: expected at most %d exposures above 0, like 2,5,10", option,
                           text, UF_REALS_LIMIT);
        at = at[length] ? at + length + 1 : NULL;
    }
    return UF_OK;
}

static uf_status run_camera(void *context, const uf_calibration_request *common, uf_text *out, uf_error *error)
{
    const camera_options *o = context;
    int channel = 0;
    uf_camera_request r = {
        .common = *common,
        .frames = {.darks = o->darks, .flats = o->flats, .dark_count = o->dark_count, .flat_count = o->flat_count},
        .plain = {.darks = o->plain_darks,
                  .flats = o->plain_flats,
                  .dark_count = o->plain_dark_count,
                  .flat_count = o->plain_flat_count}};
    uf_status status = uf_option_word("channel", o->channel, uf_channel_words, -1, &channel, error);
    if (status == UF_OK)
        status = read_exposures("exposures-ms", o->exposures, &r.frames.exposures_ms, error);
    if (status == UF_OK)
        status = read_exposures("plain-exposures-ms", o->plain_exposures, &r.plain.exposures_ms, error);
    if (status == UF_OK)
        status = uf_option_number("excess-noise", o->excess, 1, "1.41", &r.excess_noise, error);
    if (status == UF_OK && (r.excess_noise < 1 || r.excess_noise > 4))
        status = uf_fail(error, UF_USAGE, "--excess-noise %.40s: expected 1 to 4, like 1.41", o->excess);
    r.channel = (uf_channel_name)channel;
    return status == UF_OK ? uf_calibrate_camera(&r, out, error) : status;
}

static int command_camera(int argc, char **argv)
{
    static camera_options o;
    const uf_option options[] = {
        {"channel", 'c', "NAME", "near or wide: whose camera it is", &o.channel, NULL, NULL, NULL, 0},
        {"dark", 'd', "IMAGE...", "frames without light (a file's pages are frames), 2 or more", NULL, NULL, o.darks,
         &o.dark_count, UF_CALIBRATE_IMAGES},
        {"flat", 'f', "IMAGE...", "pairs of even light, first and second of each exposure", NULL, NULL, o.flats,
         &o.flat_count, UF_CALIBRATE_IMAGES},
        {"exposures-ms", 'e', "T,T,..", "exposure of each pair, for the linear range", &o.exposures, NULL, NULL, NULL,
         0},
        {"excess-noise", 0, "F", "known excess noise of a multiplying camera (1)", &o.excess, NULL, NULL, NULL, 0},
        {"plain-dark", 0, "IMAGE...", "the same without multiplication, to measure it:", NULL, NULL, o.plain_darks,
         &o.plain_dark_count, UF_CALIBRATE_IMAGES},
        {"plain-flat", 0, "IMAGE...", "pairs in the same light", NULL, NULL, o.plain_flats, &o.plain_flat_count,
         UF_CALIBRATE_IMAGES},
        {"plain-exposures-ms", 0, "T,T,..", "their exposures", &o.plain_exposures, NULL, NULL, NULL, 0}};
    const uf_calibrate_kind kind = {&uf_calibrate_camera_command, options, sizeof options / sizeof options[0],
                                    run_camera, &o};
    return uf_calibrate_run(&kind, argc, argv);
}

const uf_command uf_calibrate_camera_command = {
    "calibrate camera",
    "--channel near|wide --dark IMAGE... --flat IMAGE... -o FILE.ini [options]",
    "offset, gain, noise, range and bad pixels of a camera",
    "Photon transfer: the variance of even light grows with its mean, and how fast tells how many\n"
    "electrons a count is. Frames without light give offset and read noise; pairs of flats at several\n"
    "exposures the rest. Bad pixels go into a map beside the fragment.",
    "  underfoot demo bench --scenario bench\n"
    "  underfoot calibrate camera --channel near --dark bench/dark_*.tif --flat bench/light_*.tif \\\n"
    "      --exposures-ms 2,4,8,15,30,60,120,200,300 -o near_camera.ini --plot near_camera.png",
    command_camera};
