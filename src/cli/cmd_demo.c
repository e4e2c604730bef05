/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cli/cli.h"
#include "run/demo.h"

static int print_summary(const char *dir, const uf_demo_summary *summary)
{
    uf_text out = {0};
    uf_text_printf(&out, "%d fields in %s, made in %.1f s. Measure the first:\n\n", summary->fields, dir,
                   summary->seconds);
    uf_text_printf(
        &out, "  underfoot measure %s/a_near.tif %s/a_wide.tif -i %s/instrument.ini -a %s/assay.ini -o %s/results\n",
        dir, dir, dir, dir, dir);
    int status = uf_print_all(&out);
    uf_text_free(&out);
    return status;
}

static int command_demo(int argc, char **argv)
{
    const char *dirs[1], *threads_text = NULL;
    int count = 0, threads = 1;
    bool help, quiet = false;
    const uf_option options[] = {
        {"threads", 't', "N", "threads, default one a processor", &threads_text, NULL, NULL, NULL, 0},
        {"quiet", 'q', NULL, "no summary", NULL, &quiet, NULL, NULL, 0}};
    uf_error error;
    uf_demo_summary summary;
    uf_status status = uf_options_parse(argc, argv, options, 2, dirs, &count, 1, &help, &error);
    if (status == UF_OK && help)
        return uf_help_print(&uf_command_demo, options, 2, NULL);
    if (status == UF_OK && count != 1)
        status = uf_fail(&error, UF_USAGE, "demo needs a folder to write into: underfoot demo DIR");
    if (status == UF_OK)
        status = uf_threads(threads_text, &threads, &error);
    if (status == UF_OK)
        status = uf_demo_write(dirs[0], threads, &summary, &error);
    if (status != UF_OK)
        return uf_report_error(&error);
    return quiet ? EXIT_DONE : print_summary(dirs[0], &summary);
}

const uf_command uf_command_demo = {
    "demo",
    "DIR",
    "write a small experiment with known truth to try the program on",
    "Writes image pairs of simulated cells on two coatings, with flats, instrument and assay file, a sheet\n"
    "and the truth. The data are invented and stand for no measurement.",
    "  underfoot demo try-me",
    command_demo};
