/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "cli/cli.h"

enum { MOST_FILES = 16 };

typedef struct measure_arguments {
    const char *instruments[MOST_FILES], *assays[MOST_FILES], *images[2];
    int instrument_count, assay_count, image_count;
    const char *out, *threads, *mask, *nuclei;
    bool quiet, help;
} measure_arguments;

/* ---- summary --------------------------------------------------------------------------------- */

static void put_median(uf_text *out, const char *what, double value, const char *unit)
{
    if (isnan(value))
        uf_text_printf(out, "  %-26s -\n", what);
    else
        uf_text_printf(out, "  %-26s %.4g%s\n", what, value, unit);
}

static int print_summary(const measure_arguments *a, const uf_measure_summary *s)
{
    uf_text out = {0};
    uf_text_printf(&out, "%d cells (%d used), %d focal spots; depth %.1f nm\n", s->cells, s->cells_used, s->spots,
                   s->depth_nm);
    if (*s->flags)
        uf_text_add(&out, "Flagged:\n");
    for (const char *line = s->flags; *line; line += strcspn(line, "\n") + 1)
        uf_text_printf(&out, "  %.*s\n", (int)strcspn(line, "\n"), line);
    if (s->cells_used) {
        if (!isnan(s->attachment_fraction_median))
            uf_text_printf(&out, "%d of %d used cells are attached\n", s->cells_attached, s->cells_used);
        uf_text_add(&out, "Medians over used cells:\n");
        put_median(&out, "spread area", s->spread_area_median_um2, " um2");
        put_median(&out, "contact area", s->contact_area_median_um2, " um2");
        put_median(&out, "attachment fraction", s->attachment_fraction_median, "");
        put_median(&out, "median gap", s->gap_median_nm, " nm");
    }
    uf_text_printf(&out, "Results in %s: cells.csv, spots.csv, fields.csv, run.json\n", a->out);
    if (*s->overlay)
        uf_text_printf(&out, "Look at %s/%s before you use the numbers.\n", a->out, s->overlay);
    int status = uf_print_all(&out);
    uf_text_free(&out);
    return status;
}

static void print_warnings(const char *lines)
{
    while (*lines) {
        int length = (int)strcspn(lines, "\n");
        (void)fprintf(stderr, "underfoot: note: %.*s\n", length, lines);
        lines += length + (lines[length] == '\n');
    }
}

/* ---- the command ----------------------------------------------------------------------------- */

static uf_status check_arguments(const measure_arguments *a, uf_error *error)
{
    if (a->image_count < 1)
        return uf_fail(error, UF_USAGE,
                       "measure needs two images, the near and the wide one: underfoot measure NEAR "
                       "WIDE -i INSTRUMENT -o OUT");
    if (!a->instrument_count)
        return uf_fail(error, UF_USAGE,
                       "measure needs an instrument file: -i INSTRUMENT (docs/settings.md lists what "
                       "it holds; underfoot demo writes one to start from)");
    if (!a->out)
        return uf_fail(error, UF_USAGE, "measure needs a folder for its results: -o OUT");
    return UF_OK;
}

static uf_status run_measure(const measure_arguments *a, int argc, char **argv, uf_measure_summary *summary,
                             uf_error *error)
{
    uf_settings *settings = NULL;
    uf_measure_request request = {.near_path = a->images[0],
                                  .wide_path = a->image_count > 1 ? a->images[1] : NULL,
                                  .mask_path = a->mask,
                                  .nuclei_path = a->nuclei,
                                  .out_dir = a->out};
    uf_text command = {0};
    uf_join_command(&command, "measure", argc, argv);
    request.command = command.bytes;
    uf_status status = uf_threads(a->threads, &request.threads, error);
    if (status == UF_OK)
        status = uf_read_settings((const char **)a->instruments, a->instrument_count, (const char **)a->assays,
                                  a->assay_count, &settings, error);
    if (status == UF_OK)
        status = uf_measure(settings, &request, summary, error);
    uf_settings_free(&settings);
    uf_text_free(&command);
    return status;
}

static int print_help(const uf_option *options, int count)
{
    uf_text settings = {0};
    uf_text_add(&settings, "Instrument file, facts about the bench:\n");
    uf_settings_help(&settings, UF_INSTRUMENT_FILE);
    uf_text_add(&settings, "\nAssay file, choices about the analysis:\n");
    uf_settings_help(&settings, UF_ASSAY_FILE);
    int status = uf_help_print(&uf_command_measure, options, count, settings.bytes);
    uf_text_free(&settings);
    return status;
}

static int command_measure(int argc, char **argv)
{
    measure_arguments a = {0};
    const uf_option options[] = {
        {"instrument", 'i', "FILE", "facts about the bench; may be repeated, later files override", NULL, NULL,
         a.instruments, &a.instrument_count, MOST_FILES},
        {"assay", 'a', "FILE", "choices about the analysis; may be repeated", NULL, NULL, a.assays, &a.assay_count,
         MOST_FILES},
        {"out", 'o', "DIR", "where results go; made when missing", &a.out, NULL, NULL, NULL, 0},
        {"mask", 'm', "FILE", "label image (0 outside cells) instead of segmentation", &a.mask, NULL, NULL, NULL, 0},
        {"nuclei", 'n', "FILE", "image of nuclei, taken as the wide image was: one cell each", &a.nuclei, NULL, NULL,
         NULL, 0},
        {"threads", 't', "N", "threads, default one a processor; results do not depend on it", &a.threads, NULL, NULL,
         NULL, 0},
        {"quiet", 'q', NULL, "no summary and no notes", NULL, &a.quiet, NULL, NULL, 0}};
    int count = (int)(sizeof options / sizeof options[0]);
    uf_error error;
    uf_measure_summary summary;
    uf_status status = uf_options_parse(argc, argv, options, count, a.images, &a.image_count, 2, &a.help, &error);
    if (status == UF_OK && a.help)
        return print_help(options, count);
    if (status == UF_OK)
        status = check_arguments(&a, &error);
    if (status == UF_OK)
        status = run_measure(&a, argc, argv, &summary, &error);
    if (status != UF_OK)
        return uf_report_error(&error);
    if (a.quiet)
        return EXIT_DONE;
    print_warnings(summary.warnings);
    return print_summary(&a, &summary);
}

const uf_command uf_command_measure = {
    "measure",
    "NEAR WIDE -i INSTRUMENT [-a ASSAY] [-m MASK] [-n NUCLEI] -o OUT",
    "measure one field from its near and wide image",
    "Segments the cells in the wide image, turns the near/wide ratio into the gap between membrane and\n"
    "substrate, and measures contact area, attachment and focal spots of every cell. Writes cells.csv,\n"
    "spots.csv, fields.csv, run.json and an overlay picture (docs/columns.md explains every column).",
    "  underfoot demo try-me\n"
    "  underfoot measure try-me/day1_a_near.tif try-me/day1_a_wide.tif -i try-me/day1.ini -a try-me/assay.ini -o "
    "try-me/results",
    command_measure};
