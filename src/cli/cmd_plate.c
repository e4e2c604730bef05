/* SPDX-License-Identifier: GPL-3.0-or-later */
/* `underfoot plate` and `underfoot merge`. */
#include <math.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "cli/cli.h"
#include "run/plate.h"

enum { MOST_FILES = 16, MOST_PARTS = 1024 };

typedef struct plate_arguments {
    const char *instruments[MOST_FILES], *assays[MOST_FILES], *operands[MOST_PARTS];
    int instrument_count, assay_count, operand_count;
    const char *out, *threads, *exclude, *shard, *sheet;
    const char *give_up;
    bool quiet, json, fresh, prepare, follow, help;
} plate_arguments;

/* ---- stopping ------------------------------------------------------------------------------------ */

static volatile sig_atomic_t stop_asked;

/* The first one lets fields in hand be finished; the next one ends the program at once. */
static void ask_to_stop(int number)
{
    stop_asked = 1;
    (void)signal(number, SIG_DFL);
}

/* ---- progress ------------------------------------------------------------------------------------ */

typedef struct teller {
    bool on_terminal;
    double told;
} teller;

static void put_time(char *text, size_t size, double seconds)
{
    if (seconds < 90)
        (void)snprintf(text, size, "%.0f s", seconds);
    else if (seconds < 5400)
        (void)snprintf(text, size, "%.0f min", seconds / 60);
    else
        (void)snprintf(text, size, "%.1f h", seconds / 3600);
}

/* One line that renews itself on a terminal; elsewhere a line every ten seconds. */
static void tell_progress(void *context, const char *what, int done, int total, int measured, double seconds)
{
    teller *t = context;
    char left[32] = "?";
    double rate = seconds > 0 ? measured / seconds : 0;
    if (!t->on_terminal && (seconds - t->told < 10 && seconds >= t->told) && done < total)
        return;
    t->told = seconds;
    if (rate > 0)
        put_time(left, sizeof left, (total - done) / rate);
    (void)fprintf(stderr, "%s%s: %d of %d, %.1f a second, %s left%s",
                  t->on_terminal ? "\r\033[K" : "underfoot: ", what, done, total, rate, left,
                  t->on_terminal && done < total ? "" : "\n");
    (void)fflush(stderr);
}

/* ---- summary ------------------------------------------------------------------------------------- */

static void put_failures(uf_text *out, const uf_plate_summary *s)
{
    for (int k = 0; k < s->failure_count; k++)
        uf_text_printf(out, "  %s\n", s->failures[k]);
    if (s->failed > s->failure_count)
        uf_text_printf(out, "  and %d more: see reason in fields.csv\n", s->failed - s->failure_count);
}

static void put_references(uf_text *out, const uf_plate_summary *s)
{
    if (!*s->references)
        return;
    uf_text_add(out, "References at gap 0, from these fields:\n");
    for (const char *line = s->references; *line; line += strcspn(line, "\n") + 1)
        uf_text_printf(out, "  %.*s\n", (int)strcspn(line, "\n"), line);
}

static void put_words(uf_text *out, const plate_arguments *a, const uf_plate_summary *s)
{
    if (s->prepared_only) {
        uf_text_printf(out, "Plan of %d fields written to %s/plan.json\n", s->fields, a->out);
        put_references(out, s);
        uf_text_printf(
            out, "Measure it in parts, each with the same files: --shard 1/N .. --shard N/N, then underfoot merge\n");
        return;
    }
    uf_text_printf(out, "%d fields: %d measured now in %.1f s (%.1f a second), %d kept from earlier\n", s->fields,
                   s->measured, s->seconds, s->seconds > 0 ? s->measured / s->seconds : 0, s->kept);
    if (a->shard) {
        uf_text_printf(out, "Shard %s is done. When all are: underfoot merge\n", a->shard);
        return;
    }
    uf_text_printf(out, "%d cells (%d used) in %d wells; %d fields flagged, %d without a cell, %d failed\n", s->cells,
                   s->cells_used, s->wells, s->flagged, s->empty, s->failed);
    put_failures(out, s);
    put_references(out, s);
    if (*s->slowest)
        uf_text_printf(out, "Slowest: %s, %.2f s\n", s->slowest, s->slowest_seconds);
    uf_text_printf(
        out,
        "Results in %s: cells.csv, spots.csv, fields.csv, wells.csv, replicates.csv, reference.csv, run.json; "
        "pictures in maps, wells and drift.png\n",
        a->out);
}

static void put_json(uf_text *out, const uf_plate_summary *s)
{
    uf_text_printf(
        out,
        "{\"fields\": %d, \"measured\": %d, \"kept\": %d, \"failed\": %d, \"flagged\": %d, \"empty\": %d, \"wells\": "
        "%d, \"cells\": %d, \"cells_used\": %d, \"seconds\": %.3f}\n",
        s->fields, s->measured, s->kept, s->failed, s->flagged, s->empty, s->wells, s->cells, s->cells_used,
        s->seconds);
}

static int print_summary(const plate_arguments *a, const uf_plate_summary *s)
{
    uf_text out = {0};
    int failed = s->failed > 0 ? EXIT_SOME_FAILED : EXIT_DONE;
    if (a->json)
        put_json(&out, s);
    else if (!a->quiet)
        put_words(&out, a, s);
    int status = uf_print_all(&out);
    uf_text_free(&out);
    return status == EXIT_DONE ? failed : status;
}

/* ---- arguments ----------------------------------------------------------------------------------- */

/* "2/5" */
static uf_status read_shard(const char *text, int *shard, int *shards, uf_error *error)
{
    char *end;
    *shard = *shards = 0;
    if (!text)
        return UF_OK;
    long i = strtol(text, &end, 10), n = *end == '/' ? strtol(end + 1, &end, 10) : 0;
    if (*end || i < 1 || n < 1 || i > n || n > 1000000)
        return uf_fail(error, UF_USAGE, "--shard %.40s: expected i/n, like 2/5", text);
    *shard = (int)i;
    *shards = (int)n;
    return UF_OK;
}

static uf_status fill_request(const plate_arguments *a, uf_plate_request *r, uf_error *error)
{
    *r = (uf_plate_request){.sheet_path = a->sheet,
                            .instruments = (const char *const *)a->instruments,
                            .assays = (const char *const *)a->assays,
                            .instrument_count = a->instrument_count,
                            .assay_count = a->assay_count,
                            .out_dir = a->out,
                            .exclude_path = a->exclude,
                            .fresh = a->fresh,
                            .prepare = a->prepare,
                            .follow = a->follow,
                            .stop = &stop_asked};
    if (!a->out)
        return uf_fail(error, UF_USAGE, "a folder for the results is needed: -o OUT");
    uf_status status = read_shard(a->shard, &r->shard, &r->shards, error);
    if (status == UF_OK && a->prepare && a->shard)
        status = uf_fail(error, UF_USAGE, "--prepare and --shard exclude each other: first the plan, then its parts");
    r->give_up_min = 60;
    if (status == UF_OK && a->give_up && (!uf_parse_number(a->give_up, &r->give_up_min) || r->give_up_min <= 0))
        status = uf_fail(error, UF_USAGE, "--give-up-min %.40s: expected minutes above 0, like 60", a->give_up);
    if (status == UF_OK && a->follow && (a->shard || a->prepare))
        status = uf_fail(error, UF_USAGE,
                         "--follow goes with neither --shard nor --prepare: one run follows a microscope");
    return status == UF_OK ? uf_threads(a->threads, &r->threads, error) : status;
}

static int common_options(plate_arguments *a, uf_option *options)
{
    const uf_option common[] = {
        {"instrument", 'i', "FILE", "facts about the bench; may be repeated; a row's own instrument file overrides",
         NULL, NULL, a->instruments, &a->instrument_count, MOST_FILES},
        {"assay", 'a', "FILE", "choices about the analysis; may be repeated", NULL, NULL, a->assays, &a->assay_count,
         MOST_FILES},
        {"out", 'o', "DIR", "where results go; made when missing", &a->out, NULL, NULL, NULL, 0},
        {"exclude", 'x', "FILE", "exclusions.csv: fields that must not enter the reference", &a->exclude, NULL, NULL,
         NULL, 0},
        {"json", 0, NULL, "the summary as one JSON object", NULL, &a->json, NULL, NULL, 0},
        {"quiet", 'q', NULL, "no summary, no progress", NULL, &a->quiet, NULL, NULL, 0}};
    int count = (int)(sizeof common / sizeof common[0]);
    memcpy(options, common, sizeof common);
    return count;
}

/* ---- plate --------------------------------------------------------------------------------------- */

static int command_plate(int argc, char **argv)
{
    plate_arguments a = {0};
    uf_option options[16];
    int count = common_options(&a, options);
    const uf_option own[] = {
        {"threads", 't', "N", "fields at once, default one a processor; results do not depend on it", &a.threads,
         NULL, NULL, NULL, 0},
        {"fresh", 0, NULL, "measure all again, whatever is there", NULL, &a.fresh, NULL, NULL, 0},
        {"follow", 0, NULL, "measure while the microscope still writes (sheet build --expect)", NULL, &a.follow, NULL,
         NULL, 0},
        {"give-up-min", 0, "M", "with --follow: end when nothing came for so long (60)", &a.give_up, NULL, NULL, NULL,
         0},
        {"prepare", 0, NULL, "write the plan (with references) and stop", NULL, &a.prepare, NULL, NULL, 0},
        {"shard", 0, "i/n", "only every n-th field, from the i-th on, by a prepared plan", &a.shard, NULL, NULL, NULL,
         0}};
    memcpy(options + count, own, sizeof own);
    count += (int)(sizeof own / sizeof own[0]);
    uf_error error;
    uf_plate_request request;
    uf_plate_summary summary;
    teller t = {.on_terminal = isatty(STDERR_FILENO), .told = -100};
    uf_text command = {0};
    uf_status status = uf_options_parse(argc, argv, options, count, a.operands, &a.operand_count, 1, &a.help, &error);
    if (status == UF_OK && a.help)
        return uf_help_print(&uf_command_plate, options, count, NULL);
    a.sheet = a.operand_count ? a.operands[0] : NULL;
    if (status == UF_OK && !a.sheet)
        status = uf_fail(&error, UF_USAGE, "plate needs a sheet: underfoot plate SHEET -i INSTRUMENT -o OUT");
    if (status == UF_OK)
        status = fill_request(&a, &request, &error);
    if (status != UF_OK)
        return uf_report_error(&error);
    uf_join_command(&command, "plate", argc, argv);
    request.command = command.bytes;
    request.progress = a.quiet ? NULL : tell_progress;
    request.progress_context = &t;
    (void)signal(SIGINT, ask_to_stop);
    (void)signal(SIGTERM, ask_to_stop);
    status = uf_plate(&request, &summary, &error);
    uf_text_free(&command);
    return status == UF_OK ? print_summary(&a, &summary) : uf_report_error(&error);
}

const uf_command uf_command_plate = {
    "plate",
    "SHEET [-i INSTRUMENT] [-a ASSAY] -o OUT [options]",
    "measure every field of a sheet",
    "Runs the steps of measure over all fields of a sheet, several at once, and makes one table of cells,\n"
    "fields, wells and replicates. Where the reference is to come from the plates themselves\n"
    "([reference] from = wells or pooled) it is found first, one a plate and session. A run that was\n"
    "stopped, killed or cut off goes on with the same command and ends in the same bytes; a field that\n"
    "cannot be read is a row with its reason, and the rest goes on.",
    "  underfoot demo try-doses --scenario doses\n"
    "  underfoot plate try-doses/sheet.csv -a try-doses/assay.ini -o try-doses/results",
    command_plate};

/* ---- merge --------------------------------------------------------------------------------------- */

static int command_merge(int argc, char **argv)
{
    static plate_arguments a;
    uf_option options[16];
    int count = common_options(&a, options);
    options[count++] =
        (uf_option){"sheet", 's', "SHEET", "the sheet the plan was made of", &a.sheet, NULL, NULL, NULL, 0};
    uf_error error;
    uf_plate_request request;
    uf_plate_summary summary;
    uf_status status =
        uf_options_parse(argc, argv, options, count, a.operands, &a.operand_count, MOST_PARTS, &a.help, &error);
    if (status == UF_OK && a.help)
        return uf_help_print(&uf_command_merge, options, count, NULL);
    if (status == UF_OK && !a.operand_count)
        status = uf_fail(&error, UF_USAGE, "merge needs the folder with the plan: underfoot merge OUT --sheet SHEET");
    if (status == UF_OK && !a.sheet)
        status = uf_fail(&error, UF_USAGE,
                         "merge needs the sheet and the files the plan was made of: --sheet SHEET -i .. -a ..");
    if (status == UF_OK && a.out)
        status = uf_fail(&error, UF_USAGE, "merge writes into OUT itself: leave -o out");
    a.out = a.operand_count ? a.operands[0] : NULL;
    if (status == UF_OK)
        status = fill_request(&a, &request, &error);
    if (status == UF_OK)
        status = uf_merge(&request, a.operands + 1, a.operand_count - 1, &summary, &error);
    return status == UF_OK ? print_summary(&a, &summary) : uf_report_error(&error);
}

const uf_command uf_command_merge = {
    "merge",
    "OUT [PART...] --sheet SHEET [-i INSTRUMENT] [-a ASSAY]",
    "join what shards wrote, in OUT or elsewhere",
    "Makes the tables of a run whose fields were measured in shards: in OUT itself, or in copies of it on\n"
    "other machines, given as PARTs. The tables are those of one run, byte for byte. Fields that are\n"
    "missing, or there twice with different results, are named.",
    "  underfoot demo try-doses --scenario doses\n"
    "  underfoot plate try-doses/sheet.csv -a try-doses/assay.ini -o try-doses/shared --prepare\n"
    "  underfoot plate try-doses/sheet.csv -a try-doses/assay.ini -o try-doses/shared --shard 1/2\n"
    "  underfoot plate try-doses/sheet.csv -a try-doses/assay.ini -o try-doses/shared --shard 2/2\n"
    "  underfoot merge try-doses/shared --sheet try-doses/sheet.csv -a try-doses/assay.ini",
    command_merge};
