/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <stdio.h>
#include <string.h>

#include "cli/cli.h"
#include "cli/findings.h"
#include "cli/sheet_commands.h"
#include "run/sheet_build.h"
#include "run/sheet_check.h"
#include "run/sheet_json.h"

enum { MOST_FILES = 16, MOST_SETS = 32 };

#define COUNT_OF(array) ((int)(sizeof(array) / sizeof(array)[0]))

uf_status uf_option_whole(const char *option, const char *text, int most, int *value, uf_error *error)
{
    double number;
    *value = 0;
    if (!text)
        return UF_OK;
    if (!uf_parse_number(text, &number) || number < 1 || number > most || number != (int)number)
        return uf_fail(error, UF_USAGE, "--%s %.40s: expected a whole number from 1 to %d", option, text, most);
    *value = (int)number;
    return UF_OK;
}

int uf_close_with_faults(const char *what, const uf_faults *faults, const char *mend)
{
    uf_error error;
    (void)uf_fail(&error, UF_INPUT, "%.300s: %d fault%s%s", what, faults->faults, faults->faults == 1 ? "" : "s",
                  mend);
    return uf_report_error(&error);
}

/* ---- build ----------------------------------------------------------------------------------- */

typedef struct build_arguments {
    uf_sheet_build_request request;
    const char *dirs[MOST_FILES], *layouts[MOST_FILES], *sets[MOST_SETS], *excludes[MOST_FILES];
    const char *near_page, *wide_page, *layer, *fields;
    bool json, quiet, help;
} build_arguments;

static uf_status take_build(build_arguments *a, uf_error *error)
{
    uf_sheet_build_request *r = &a->request;
    uf_status status = UF_OK;
    r->dirs = a->dirs;
    r->layouts = a->layouts;
    r->sets = a->sets;
    r->excludes = a->excludes;
    if (!r->out)
        status = uf_fail(error, UF_USAGE, "sheet build needs a name for the sheet: -o SHEET.csv");
    else if (!r->name)
        status = uf_fail(
            error, UF_USAGE,
            "sheet build needs to know how the files are named: --name '{plate}_{well}_{field}_{channel}.tif'");
    if (status == UF_OK)
        status = uf_option_whole("near-page", a->near_page, 1000000, &r->near_page, error);
    if (status == UF_OK)
        status = uf_option_whole("wide-page", a->wide_page, 1000000, &r->wide_page, error);
    if (status == UF_OK)
        status = uf_option_whole("layer", a->layer, 100000, &r->layer, error);
    if (status == UF_OK)
        status = uf_option_whole("fields-per-well", a->fields, 10000, &r->fields_per_well, error);
    return status;
}

static int print_build(const build_arguments *a, const uf_sheet_build_summary *s)
{
    uf_text out = {0};
    const char *sheet = a->request.out;
    if (a->json) {
        const uf_named_number numbers[] = {
            {"rows", s->rows}, {"plates", s->plates}, {"wells", s->wells}, {"written", s->written}};
        uf_error error;
        if (uf_sheet_json(&out, sheet, numbers, COUNT_OF(numbers), &s->faults, &error) != UF_OK) {
            uf_text_free(&out);
            return uf_report_error(&error);
        }
    } else if (s->written && !a->quiet) {
        uf_text_printf(&out, "%s: %d rows", sheet, s->rows);
        if (s->wells)
            uf_text_printf(&out, ", %d wells%s", s->wells, s->plates > 1 ? "" : " of one plate");
        if (s->wells && s->plates > 1)
            uf_text_printf(&out, " on %d plates", s->plates);
        if (s->wells && s->most_fields > s->least_fields)
            uf_text_printf(&out, ", %d to %d fields a well", s->least_fields, s->most_fields);
        else if (s->wells)
            uf_text_printf(&out, ", %d field%s a well", s->most_fields, s->most_fields == 1 ? "" : "s");
        uf_text_printf(&out, "\nColumns: %s\n%s: underfoot sheet check %s%s%s\n",
                       s->columns.bytes ? s->columns.bytes : "",
                       a->request.expect ? "When the images are there" : "Next", sheet,
                       a->request.root ? " --root " : "", a->request.root ? a->request.root : "");
    }
    int status = out.length ? uf_print_all(&out) : EXIT_DONE;
    uf_text_free(&out);
    return status;
}

static int run_build(const build_arguments *a)
{
    uf_error error;
    uf_sheet_build_summary summary;
    uf_status status = uf_sheet_build(&a->request, &summary, &error);
    if (!a->json)
        uf_findings_print(&summary.faults, a->quiet ? UF_FAULT : UF_NOTE);
    int exit_status = status == UF_OK ? print_build(a, &summary) : uf_report_error(&error);
    if (status == UF_OK && exit_status == EXIT_DONE && summary.faults.faults)
        exit_status = uf_close_with_faults(a->request.out, &summary.faults, "; no sheet was written");
    uf_sheet_build_free(&summary);
    return exit_status;
}

static int command_build(int argc, char **argv)
{
    build_arguments a = {0};
    uf_sheet_build_request *r = &a.request;
    const uf_option options[] = {
        {"out", 'o', "SHEET", "the sheet to write", &r->out, NULL, NULL, NULL, 0},
        {"name", 'n', "TEMPLATE", "how files are named; fields are a sheet's columns, {channel} and {*}", &r->name,
         NULL, NULL, NULL, 0},
        {"near-channel", 0, "X", "what {channel}, or OME-XML, calls the near image", &r->near_channel, NULL, NULL,
         NULL, 0},
        {"wide-channel", 0, "Y", "the same for the wide image", &r->wide_channel, NULL, NULL, NULL, 0},
        {"nuclei-channel", 0, "X", "the same for an image of nuclei", &r->nuclei_channel, NULL, NULL, NULL, 0},
        {"mask-channel", 0, "X", "the same for a label image", &r->mask_channel, NULL, NULL, NULL, 0},
        {"near-page", 0, "N", "both images are pages of one file: the near one's, from 1", &a.near_page, NULL, NULL,
         NULL, 0},
        {"wide-page", 0, "N", "the wide one's", &a.wide_page, NULL, NULL, NULL, 0},
        {"layer", 0, "N", "the layer (Z) of OME-TIFFs that have several, from 1", &a.layer, NULL, NULL, NULL, 0},
        {"layout", 'l', "FILE", "what was done to which well; may be repeated, PLATE=FILE for one", NULL, NULL,
         a.layouts, &r->layout_count, MOST_FILES},
        {"positions", 0, "FILE", "list with columns position, well, field; or position, x_um, y_um", &r->positions,
         NULL, NULL, NULL, 0},
        {"a1", 0, "X,Y", "centre of A1 on the stage, um, for positions listed by x_um and y_um", &r->a1, NULL, NULL,
         NULL, 0},
        {"order", 0, "row|serpentine", "positions were numbered along rows, or there and back", &r->order, NULL, NULL,
         NULL, 0},
        {"fields-per-well", 0, "N", "positions in each well (with --order, --expect)", &a.fields, NULL, NULL, NULL,
         0},
        {"wells", 0, "B02-G11", "the wells that --order visits; default the whole plate", &r->wells, NULL, NULL, NULL,
         0},
        {"vessel", 0, "V", "wells of the plate (96), coverslip or dish", &r->vessel, NULL, NULL, NULL, 0},
        {"set", 0, "COLUMN=VALUE", "the same value in every row; may be repeated", NULL, NULL, a.sets, &r->set_count,
         MOST_SETS},
        {"exclude", 0, "TEMPLATE", "leave out files named so; may be repeated", NULL, NULL, a.excludes,
         &r->exclude_count, MOST_FILES},
        {"root", 0, "DIR", "write paths relative to this folder, not to the sheet's", &r->root, NULL, NULL, NULL, 0},
        {"expect", 0, NULL, "the images are yet to be made: rows come from the layout", NULL, &r->expect, NULL, NULL,
         0},
        {"append", 0, NULL, "keep the rows that the sheet has, of other days, and add these", NULL, &r->append, NULL,
         NULL, 0},
        {"skip-incomplete", 0, NULL, "leave out fields without their near or wide image", NULL, &r->skip_incomplete,
         NULL, NULL, 0},
        {"json", 0, NULL, "one JSON object instead of words", NULL, &a.json, NULL, NULL, 0},
        {"quiet", 'q', NULL, "faults only", NULL, &a.quiet, NULL, NULL, 0}};
    uf_error error;
    uf_status status =
        uf_options_parse(argc, argv, options, COUNT_OF(options), a.dirs, &r->dir_count, MOST_FILES, &a.help, &error);
    if (status == UF_OK && a.help)
        return uf_help_print(&uf_command_sheet_build, options, COUNT_OF(options), NULL);
    if (status == UF_OK)
        status = take_build(&a, &error);
    return status == UF_OK ? run_build(&a) : uf_report_error(&error);
}

const uf_command uf_command_sheet_build = {
    "sheet build",
    "DIR... -o SHEET --name TEMPLATE --near-channel X --wide-channel Y [--layout FILE] [options]",
    "make a sheet from a folder of images",
    "Reads the names of the files by a template, puts the images of one field into one row, and fills in what\n"
    "was done to it from layouts: blocks as drawn on paper, or lists with one well a line. Nothing is guessed:\n"
    "what does not fit is said, and with a fault no sheet is written. docs/sheets.md shows five starts.",
    "  underfoot demo try-doses --scenario doses\n"
    "  underfoot sheet build try-doses -o try-doses/my-sheet.csv --name '{plate}_{well}_{channel}.tif' \\\n"
    "      --near-channel near --wide-channel wide --vessel 96 --layout try-doses/layout.csv --layout "
    "try-doses/sessions.csv",
    command_build};

/* ---- check ----------------------------------------------------------------------------------- */

typedef struct check_arguments {
    uf_sheet_check_request request;
    const char *sheets[1], *instruments[MOST_FILES], *assays[MOST_FILES], *threads, *reference;
    int sheet_count, instrument_count, assay_count;
    bool json, quiet, help;
} check_arguments;

static void put_counts(uf_text *out, const char *path, const uf_sheet_check_summary *s)
{
    const struct {
        int count;
        const char *what;
    } counts[] = {{s->rows, "row"},         {s->images, "image"},        {s->plates, "plate"},
                  {s->sessions, "session"}, {s->faults.faults, "fault"}, {s->faults.warnings, "warning"}};
    uf_text_printf(out, "%s:", path);
    for (int k = 0; k < COUNT_OF(counts); k++)
        uf_text_printf(out, "%s %d %s%s",
                       k == 0   ? ""
                       : k == 4 ? ":"
                                : ",",
                       counts[k].count, counts[k].what, counts[k].count == 1 ? "" : "s");
    uf_text_add(out, "\n");
}

static int print_check(const check_arguments *a, const uf_sheet_check_summary *s)
{
    uf_text out = {0};
    const char *path = a->request.path;
    if (a->json) {
        const uf_named_number numbers[] = {
            {"rows", s->rows}, {"images", s->images}, {"plates", s->plates}, {"sessions", s->sessions}};
        uf_error error;
        if (uf_sheet_json(&out, path, numbers, COUNT_OF(numbers), &s->faults, &error) != UF_OK) {
            uf_text_free(&out);
            return uf_report_error(&error);
        }
    } else {
        uf_findings_put(&out, &s->faults, a->quiet ? UF_FAULT : UF_NOTE);
        if (!a->quiet)
            put_counts(&out, path, s);
    }
    int status = out.length ? uf_print_all(&out) : EXIT_DONE;
    uf_text_free(&out);
    return status;
}

static uf_status run_check(check_arguments *a, uf_sheet_check_summary *summary, uf_error *error)
{
    uf_settings *settings = NULL;
    uf_status status = uf_threads(a->threads, &a->request.threads, error);
    if (status == UF_OK && a->reference && strcmp(a->reference, "pooled") != 0 &&
        strcmp(a->reference, "wells") != 0 && strcmp(a->reference, "cell") != 0)
        status = uf_fail(error, UF_USAGE, "--reference %.40s: expected wells, pooled or cell", a->reference);
    if (status == UF_OK && (a->instrument_count || a->assay_count))
        status = uf_read_settings(a->instruments, a->instrument_count, a->assays, a->assay_count, &settings, error);
    a->request.settings = settings;
    a->request.pooled = (a->reference && strcmp(a->reference, "pooled") == 0) ||
                        (settings && settings->reference.from == UF_FROM_POOLED);
    if (status == UF_OK)
        status = uf_sheet_check(&a->request, summary, error);
    uf_settings_free(&settings);
    return status;
}

static int command_check(int argc, char **argv)
{
    check_arguments a = {0};
    const uf_option options[] = {
        {"root", 0, "DIR", "relative paths are relative to this folder, not to the sheet's", &a.request.root, NULL,
         NULL, NULL, 0},
        {"instrument", 'i', "FILE", "instrument file of rows that name none; may be repeated", NULL, NULL,
         a.instruments, &a.instrument_count, MOST_FILES},
        {"assay", 'a', "FILE", "assay file; may be repeated", NULL, NULL, a.assays, &a.assay_count, MOST_FILES},
        {"reference", 0, "wells|pooled|cell", "where an assumed reference will come from", &a.reference, NULL, NULL,
         NULL, 0},
        {"threads", 't', "N", "threads, default one a processor", &a.threads, NULL, NULL, NULL, 0},
        {"json", 0, NULL, "one JSON object instead of words", NULL, &a.json, NULL, NULL, 0},
        {"quiet", 'q', NULL, "faults only", NULL, &a.quiet, NULL, NULL, 0}};
    uf_error error;
    uf_sheet_check_summary summary = {0};
    uf_status status =
        uf_options_parse(argc, argv, options, COUNT_OF(options), a.sheets, &a.sheet_count, 1, &a.help, &error);
    if (status == UF_OK && a.help)
        return uf_help_print(&uf_command_sheet_check, options, COUNT_OF(options), NULL);
    if (status == UF_OK && a.sheet_count != 1)
        status = uf_fail(&error, UF_USAGE, "sheet check needs a sheet: underfoot sheet check SHEET");
    a.request.path = a.sheets[0];
    if (status == UF_OK)
        status = run_check(&a, &summary, &error);
    int exit_status = status == UF_OK ? print_check(&a, &summary) : uf_report_error(&error);
    if (status == UF_OK && exit_status == EXIT_DONE && summary.faults.faults)
        exit_status = uf_close_with_faults(a.request.path, &summary.faults, "; mend them and check again");
    uf_sheet_check_free(&summary);
    return exit_status;
}

const uf_command uf_command_sheet_check = {
    "sheet check",
    "SHEET [--root DIR] [-i INSTRUMENT] [-a ASSAY] [options]",
    "find every fault of a sheet at once",
    "Reads the sheet, looks at the header of every image and at every instrument file it names, and lists all that "
    "is\n"
    "wrong, with lines, and what should be looked at (warnings). Exit status 2 with any fault, 0 with warnings only.",
    "  underfoot demo try-me\n"
    "  underfoot sheet check try-me/sheet.csv",
    command_check};

/* ---- the command ----------------------------------------------------------------------------- */

static const uf_command *const commands[] = {&uf_command_sheet_layout, &uf_command_sheet_build,
                                             &uf_command_sheet_check};

static int print_overview(void)
{
    uf_text out = {0};
    uf_text_printf(&out, "underfoot sheet: %s\n\nUsage: underfoot sheet %s\n\n%s\n\nCommands:\n",
                   uf_command_sheet.summary, uf_command_sheet.arguments, uf_command_sheet.about);
    for (int k = 0; k < COUNT_OF(commands); k++)
        uf_text_printf(&out, "  %-13s %s\n", commands[k]->name, commands[k]->summary);
    uf_text_printf(&out, "\nunderfoot sheet build --help explains one, with an example.\n\nExample:\n%s\n",
                   uf_command_sheet.example);
    int status = uf_print_all(&out);
    uf_text_free(&out);
    return status;
}

static int command_sheet(int argc, char **argv)
{
    const char *nearest = commands[0]->name + strlen("sheet ");
    if (argc < 1 || strcmp(argv[0], "--help") == 0 || strcmp(argv[0], "-h") == 0) {
        int status = print_overview();
        return argc < 1 && status == EXIT_DONE ? EXIT_CANNOT : status;
    }
    for (int k = 0; k < COUNT_OF(commands); k++) {
        const char *name = commands[k]->name + strlen("sheet ");
        if (strcmp(argv[0], name) == 0)
            return commands[k]->run(argc - 1, argv + 1);
        if (uf_edit_distance(argv[0], name) < uf_edit_distance(argv[0], nearest))
            nearest = name;
    }
    uf_error error;
    (void)uf_fail(&error, UF_USAGE,
                  "unknown command 'sheet %.60s'; the nearest is 'sheet %s' (underfoot sheet --help)", argv[0],
                  nearest);
    return uf_report_error(&error);
}

const uf_command uf_command_sheet = {
    "sheet",
    "layout | build | check ...",
    "plan a plate, make or check a sheet of an experiment's fields",
    "A sheet is a CSV that lists the fields of an experiment and what was done to them (docs/sheets.md).",
    "  underfoot demo try-me\n"
    "  underfoot sheet check try-me/sheet.csv",
    command_sheet};
