/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "cli/findings.h"
#include "cli/sheet_commands.h"
#include "run/sheet_json.h"
#include "run/sheet_layout.h"

enum { MOST_TREATMENTS = 512, MOST_CONTROLS = 16, MOST_WELLS = 1536, MOST_PLATES = 1000, USUAL_WELLS = 3 };

#define COUNT_OF(array) ((int)(sizeof(array) / sizeof(array)[0]))

typedef struct layout_arguments {
    uf_sheet_layout_request request;
    const char *lists[1], *treatments[MOST_TREATMENTS], *controls[MOST_CONTROLS], *positives[MOST_CONTROLS];
    const char *wells, *control_wells, *positive_wells, *plates, *edge, *seed;
    int list_count;
    bool json, quiet, help;
} layout_arguments;

/* A seed that is not given comes from the clock, and is printed, so that the plate can be drawn again. */
static uf_status take_seed(const char *text, uint64_t *seed, uf_error *error)
{
    double number;
    if (!text) {
        *seed = (uint64_t)time(NULL) % 1000000 + 1;
        return UF_OK;
    }
    if (!uf_parse_number(text, &number) || number < 0 || number > 9007199254740992.0 ||
        number != (double)(uint64_t)number)
        return uf_fail(error, UF_USAGE, "--seed %.40s: expected a whole number", text);
    *seed = (uint64_t)number;
    return UF_OK;
}

static uf_status take_edge(const char *text, uf_edge_use *edge, uf_error *error)
{
    *edge = UF_EDGE_AUTO;
    if (!text || strcmp(text, "auto") == 0)
        return UF_OK;
    *edge = strcmp(text, "use") == 0 ? UF_EDGE_USE : UF_EDGE_LEAVE;
    if (*edge == UF_EDGE_USE || strcmp(text, "leave") == 0)
        return UF_OK;
    return uf_fail(error, UF_USAGE, "--edge %.40s: expected auto, use or leave", text);
}

static uf_status take_layout(layout_arguments *a, uf_error *error)
{
    uf_sheet_layout_request *r = &a->request;
    uf_status status = UF_OK;
    r->list = a->list_count ? a->lists[0] : NULL;
    r->treatments = a->treatments;
    r->controls = a->controls;
    r->positives = a->positives;
    if (!r->out)
        status = uf_fail(error, UF_USAGE, "sheet layout needs a name for the layout file: -o LAYOUT.csv");
    if (status == UF_OK)
        status = uf_option_whole("wells", a->wells, MOST_WELLS, &r->wells, error);
    if (status == UF_OK)
        status = uf_option_whole("control-wells", a->control_wells, MOST_WELLS, &r->control_wells, error);
    if (status == UF_OK)
        status = uf_option_whole("positive-wells", a->positive_wells, MOST_WELLS, &r->positive_wells, error);
    if (status == UF_OK)
        status = uf_option_whole("plates", a->plates, MOST_PLATES, &r->plates, error);
    if (status == UF_OK)
        status = take_edge(a->edge, &r->edge, error);
    if (status == UF_OK)
        status = take_seed(a->seed, &r->seed, error);
    r->wells = r->wells ? r->wells : USUAL_WELLS;
    r->plates = r->plates ? r->plates : 1;
    return status;
}

static void put_words(const layout_arguments *a, const uf_sheet_layout_summary *s, uf_text *out)
{
    const uf_sheet_layout_request *r = &a->request;
    uf_text_printf(
        out, "%d treatment%s (%d with doses counted apart) in %d of %d wells, on %d plate%s; seed %" PRIu64 "\n",
        s->treatments, s->treatments == 1 ? "" : "s", s->arms, s->wells_used, s->vessel_wells, r->plates,
        r->plates == 1 ? "" : "s", r->seed);
    uf_text_printf(out, "%d block%s of neighbouring columns; edge wells %s\n", s->blocks, s->blocks == 1 ? "" : "s",
                   s->edge_used ? "shared out evenly" : "left out");
    if (s->quarters_without_control == 4)
        uf_text_add(out, "No control on the plate: --control NAME adds one; comparisons need it.\n");
    else if (s->quarters_without_control)
        uf_text_printf(out, "%d of 4 quarters of a plate hold no control: take at least 4 control wells.\n",
                       s->quarters_without_control);
    uf_text_add(out, "Wrote:\n");
    for (const char *p = s->files.bytes; p && *p;) {
        int length = (int)strcspn(p, "\n");
        uf_text_printf(out, "  %.*s\n", length, p);
        p += length + (p[length] == '\n');
    }
    uf_text_printf(out, "The same again: --seed %" PRIu64 "\n", r->seed);
}

static int print_layout(const layout_arguments *a, const uf_sheet_layout_summary *s)
{
    uf_text out = {0};
    uf_error error;
    uf_status status = UF_OK;
    if (a->json) {
        const uf_named_number numbers[] = {{"seed", (double)a->request.seed},
                                           {"treatments", s->treatments},
                                           {"arms", s->arms},
                                           {"plates", a->request.plates},
                                           {"wells_used", s->wells_used},
                                           {"blocks", s->blocks},
                                           {"edge_used", s->edge_used},
                                           {"quarters_without_control", s->quarters_without_control}};
        status = uf_sheet_json(&out, a->request.out, numbers, COUNT_OF(numbers), &s->faults, &error);
    } else if (!a->quiet && !s->faults.faults)
        put_words(a, s, &out);
    int exit_status = status != UF_OK ? uf_report_error(&error) : out.length ? uf_print_all(&out) : EXIT_DONE;
    uf_text_free(&out);
    return exit_status;
}

static int run_layout(const layout_arguments *a)
{
    uf_error error;
    uf_sheet_layout_summary summary;
    uf_status status = uf_sheet_layout(&a->request, &summary, &error);
    if (!a->json)
        uf_findings_print(&summary.faults, a->quiet ? UF_FAULT : UF_NOTE);
    int exit_status = status == UF_OK ? print_layout(a, &summary) : uf_report_error(&error);
    if (status == UF_OK && exit_status == EXIT_DONE && summary.faults.faults)
        exit_status = uf_close_with_faults(a->request.list ? a->request.list : a->request.out, &summary.faults,
                                           "; no layout was written");
    uf_sheet_layout_free(&summary);
    return exit_status;
}

static int command_layout(int argc, char **argv)
{
    layout_arguments *a = calloc(1, sizeof *a);
    uf_error error;
    if (!a) {
        (void)uf_fail_memory(&error, "arguments");
        return uf_report_error(&error);
    }
    uf_sheet_layout_request *r = &a->request;
    r->vessel = "96";
    r->plate_name = "plate";
    const uf_option options[] = {
        {"out", 'o', "LAYOUT", "the layout file; map and pipetting order are written beside it", &r->out, NULL, NULL,
         NULL, 0},
        {"treatment", 0, "'NAME: D, D uM'", "a treatment, with its doses where it has some; may be repeated", NULL,
         NULL, a->treatments, &r->treatment_count, MOST_TREATMENTS},
        {"control", 0, "NAME", "what the others are compared to", NULL, NULL, a->controls, &r->control_count,
         MOST_CONTROLS},
        {"positive", 0, "NAME", "a control that is known to work", NULL, NULL, a->positives, &r->positive_count,
         MOST_CONTROLS},
        {"wells", 0, "N", "wells of each treatment and dose on each plate (3)", &a->wells, NULL, NULL, NULL, 0},
        {"control-wells", 0, "N", "wells of each control (8; 4 and 1 on small plates)", &a->control_wells, NULL, NULL,
         NULL, 0},
        {"positive-wells", 0, "N", "wells of each positive control (8; 4 and 1)", &a->positive_wells, NULL, NULL,
         NULL, 0},
        {"vessel", 0, "V", "wells of the plate (96)", &r->vessel, NULL, NULL, NULL, 0},
        {"plates", 0, "N", "plates, each drawn for itself: one a replicate (1)", &a->plates, NULL, NULL, NULL, 0},
        {"plate-name", 0, "NAME", "plates are called NAME1, NAME2 (plate)", &r->plate_name, NULL, NULL, NULL, 0},
        {"edge", 0, "E", "edge wells: use, leave, or auto: leave where all fits inside", &a->edge, NULL, NULL, NULL,
         0},
        {"seed", 0, "N", "of the random numbers; default from the clock, printed", &a->seed, NULL, NULL, NULL, 0},
        {"json", 0, NULL, "one JSON object instead of words", NULL, &a->json, NULL, NULL, 0},
        {"quiet", 'q', NULL, "faults only", NULL, &a->quiet, NULL, NULL, 0}};
    uf_status status =
        uf_options_parse(argc, argv, options, COUNT_OF(options), a->lists, &a->list_count, 1, &a->help, &error);
    int exit_status;
    if (status == UF_OK && a->help)
        exit_status = uf_help_print(&uf_command_sheet_layout, options, COUNT_OF(options), NULL);
    else {
        if (status == UF_OK)
            status = take_layout(a, &error);
        exit_status = status == UF_OK ? run_layout(a) : uf_report_error(&error);
    }
    free(a);
    return exit_status;
}

const uf_command uf_command_sheet_layout = {
    "sheet layout",
    "[LIST] -o LAYOUT [--treatment 'NAME: D, D uM'] [--control NAME] [options]",
    "draw a randomised, blocked plate",
    "Puts treatments, doses and controls into the wells of a plate at random: in blocks of neighbouring columns "
    "that\n"
    "hold each of them, controls in every quarter, rows, columns and the plate's edge shared out. LIST is a CSV with "
    "the\n"
    "columns treatment (or coating), dose, dose_unit, role, wells. Writes the layout that sheet build reads, a map "
    "to print, "
    "and the\n"
    "order of pipetting. The same seed draws the same plate.",
    "  underfoot sheet layout -o try-plate.csv --treatment 'samphire: 0.03, 0.1, 0.3, 1, 3, 10, 30, 100 uM' \\\n"
    "      --control vehicle --plates 3 --seed 7",
    command_layout};
