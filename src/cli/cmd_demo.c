/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cli/cli.h"
#include "run/demo.h"

static int print_bench_summary(const char *dir, const uf_demo_summary *summary)
{
    uf_text out = {0};
    uf_text_printf(&out,
                   "%d images in %s, made in %.1f s; README.txt there says what they are. Begin with the beads:\n\n",
                   summary->images, dir, summary->seconds);
    uf_text_printf(&out,
                   "  underfoot calibrate bead %s/beads_*.tif --radius-nm 2500 -i %s/bench.ini -o %s/near_bead.ini\n",
                   dir, dir, dir);
    int status = uf_print_all(&out);
    uf_text_free(&out);
    return status;
}

static int print_summary(const char *dir, const uf_demo_summary *summary)
{
    if (!summary->fields)
        return print_bench_summary(dir, summary);
    const char *first = summary->first;
    uf_text out = {0};
    uf_text_printf(&out, "%d fields in %s, made in %.1f s; README.txt there tells the story. Measure the first:\n\n",
                   summary->fields, dir, summary->seconds);
    uf_text_printf(&out, "  underfoot measure %s/%s_near.tif %s/%s_wide.tif -i %s/%s -a %s/assay.ini -o %s/results\n",
                   dir, first, dir, first, dir, summary->instrument, dir, dir);
    int status = uf_print_all(&out);
    uf_text_free(&out);
    return status;
}

static int command_demo(int argc, char **argv)
{
    const char *dirs[1], *threads_text = NULL;
    uf_demo_request request = {.scenario = "coatings"};
    int count = 0;
    bool help, quiet = false;
    const uf_option options[] = {
        {"scenario", 's', "NAME",
         "coatings (12 fields, the default), doses (96), screen (40), or bench (calibration images)",
         &request.scenario, NULL, NULL, NULL, 0},
        {"threads", 't', "N", "threads, default one a processor", &threads_text, NULL, NULL, NULL, 0},
        {"quiet", 'q', NULL, "no summary", NULL, &quiet, NULL, NULL, 0}};
    uf_error error;
    uf_demo_summary summary;
    uf_status status = uf_options_parse(argc, argv, options, 3, dirs, &count, 1, &help, &error);
    if (status == UF_OK && help)
        return uf_help_print(&uf_command_demo, options, 3, NULL);
    if (status == UF_OK && (count != 1 || !*dirs[0]))
        status = uf_fail(&error, UF_USAGE, "demo needs a folder to write into: underfoot demo DIR");
    if (status == UF_OK)
        status = uf_threads(threads_text, &request.threads, &error);
    request.dir = dirs[0];
    if (status == UF_OK)
        status = uf_demo_write(&request, &summary, &error);
    if (status != UF_OK)
        return uf_report_error(&error);
    return quiet ? EXIT_DONE : print_summary(dirs[0], &summary);
}

const uf_command uf_command_demo = {
    "demo",
    "DIR [--scenario NAME]",
    "write a small experiment with known truth to try the program on",
    "Writes image pairs of simulated cells with flats, instrument and assay files, a sheet and the truth:\n"
    "two coatings on three days, a compound at eight doses on three plates, part of a screening plate, or\n"
    "the calibration images of a bench.\n"
    "The data are invented and stand for no measurement.",
    "  underfoot demo try-me --scenario coatings",
    command_demo};
