/* SPDX-License-Identifier: GPL-3.0-or-later */
/* `underfoot calibrate KIND`: finds the kind; what all kinds share. */
#include <stdio.h>
#include <string.h>

#include "cli/calibrate.h"

static const uf_command *const kinds[] = {&uf_calibrate_bead_command, &uf_calibrate_camera_command,
                                          &uf_calibrate_flat_command, &uf_calibrate_shift_command,
                                          &uf_calibrate_reference_command};
enum { KINDS = sizeof kinds / sizeof kinds[0], COMMON_OPTIONS = 7 };

const char *const uf_channel_words[] = {"near", "wide", NULL};

/* ---- values of options --------------------------------------------------------------------------- */

uf_status uf_option_number(const char *option, const char *text, double fallback, const char *example, double *value,
                           uf_error *error)
{
    *value = fallback;
    if (!text || (uf_parse_number(text, value) && *value >= 0))
        return UF_OK;
    return uf_fail(error, UF_USAGE, "--%s %.40s: expected a number, like --%s %s", option, text, option, example);
}

uf_status uf_option_word(const char *option, const char *text, const char *const *words, int fallback, int *chosen,
                         uf_error *error)
{
    uf_text list = {0};
    *chosen = fallback;
    if (!text && fallback >= 0)
        return UF_OK;
    for (int k = 0; words[k]; k++) {
        if (text && strcmp(text, words[k]) == 0) {
            *chosen = k;
            uf_text_free(&list);
            return UF_OK;
        }
        uf_text_printf(&list, "%s%s", k ? " or " : "", words[k]);
    }
    if (text)
        uf_fail(error, UF_USAGE, "--%s %.40s: expected %s", option, text, list.bytes ? list.bytes : "another word");
    else
        uf_fail(error, UF_USAGE, "--%s is needed: %s", option, list.bytes ? list.bytes : "a word");
    uf_text_free(&list);
    return UF_USAGE;
}

/* ---- one kind ------------------------------------------------------------------------------------ */

static uf_status check_arguments(const uf_calibrate_kind *kind, const uf_calibrate_arguments *a, uf_error *error)
{
    if (!a->out)
        return uf_fail(error, UF_USAGE, "%s needs a file for its result: -o FILE.ini", kind->command->name);
    return UF_OK;
}

static int run_kind(const uf_calibrate_kind *kind, const uf_calibrate_arguments *a)
{
    uf_error error;
    uf_settings *settings = NULL;
    uf_text out = {0};
    uf_calibration_request common = {.instruments = (const char *const *)a->instruments,
                                     .assays = (const char *const *)a->assays,
                                     .instrument_count = a->instrument_count,
                                     .assay_count = a->assay_count,
                                     .images = a->images,
                                     .image_count = a->image_count,
                                     .out_path = a->out,
                                     .plot_path = a->plot,
                                     .as_json = a->json};
    uf_status status = check_arguments(kind, a, &error);
    if (status == UF_OK)
        status = uf_threads(a->threads, &common.threads, &error);
    if (status == UF_OK)
        status = uf_read_settings((const char **)a->instruments, a->instrument_count, (const char **)a->assays,
                                  a->assay_count, &settings, &error);
    common.settings = settings;
    if (status == UF_OK)
        status = kind->job(kind->context, &common, &out, &error);
    int exit_status = status != UF_OK ? uf_report_error(&error) : a->quiet ? EXIT_DONE : uf_print_all(&out);
    uf_settings_free(&settings);
    uf_text_free(&out);
    return exit_status;
}

int uf_calibrate_run(const uf_calibrate_kind *kind, int argc, char **argv)
{
    static uf_calibrate_arguments a;
    uf_option options[UF_CALIBRATE_OWN_OPTIONS + COMMON_OPTIONS];
    const uf_option common[COMMON_OPTIONS] = {
        {"instrument", 'i', "FILE", "facts about the bench; may be repeated, later files override", NULL, NULL,
         a.instruments, &a.instrument_count, UF_CALIBRATE_FILES},
        {"assay", 'a', "FILE", "choices about the analysis, where cells are looked for", NULL, NULL, a.assays,
         &a.assay_count, UF_CALIBRATE_FILES},
        {"out", 'o', "FILE.ini", "where the result goes, to be given as -i from then on", &a.out, NULL, NULL, NULL,
         0},
        {"plot", 'p', "FILE.png", "a picture of data and fit", &a.plot, NULL, NULL, NULL, 0},
        {"json", 0, NULL, "one JSON object instead of words", NULL, &a.json, NULL, NULL, 0},
        {"threads", 't', "N", "threads, default one a processor", &a.threads, NULL, NULL, NULL, 0},
        {"quiet", 'q', NULL, "no report", NULL, &a.quiet, NULL, NULL, 0}};
    int count = kind->option_count + COMMON_OPTIONS;
    bool help;
    uf_error error;
    if (kind->option_count)
        memcpy(options, kind->options, (size_t)kind->option_count * sizeof *options);
    memcpy(options + kind->option_count, common, sizeof common);
    uf_status status =
        uf_options_parse(argc, argv, options, count, a.images, &a.image_count, UF_CALIBRATE_IMAGES, &help, &error);
    if (status != UF_OK)
        return uf_report_error(&error);
    return help ? uf_help_print(kind->command, options, count, NULL) : run_kind(kind, &a);
}

/* ---- which kind ---------------------------------------------------------------------------------- */

static int print_kinds(void)
{
    uf_text out = {0};
    uf_text_printf(&out, "underfoot calibrate: %s\n\nUsage: underfoot calibrate %s\n\n%s\n\nKinds:\n",
                   uf_command_calibrate.summary, uf_command_calibrate.arguments, uf_command_calibrate.about);
    for (int k = 0; k < KINDS; k++)
        uf_text_printf(&out, "  %-10s %s\n", strchr(kinds[k]->name, ' ') + 1, kinds[k]->summary);
    uf_text_printf(&out, "\nunderfoot calibrate KIND --help explains one, with an example.\n\nExample:\n%s\n",
                   uf_command_calibrate.example);
    int status = uf_print_all(&out);
    uf_text_free(&out);
    return status;
}

static int unknown_kind(const char *typed)
{
    uf_text list = {0};
    uf_error error;
    for (int k = 0; k < KINDS; k++)
        uf_text_printf(&list, "%s%s", k ? ", " : "", strchr(kinds[k]->name, ' ') + 1);
    if (*typed == '-')
        uf_fail(&error, UF_USAGE, "calibrate needs its kind first: %s", list.bytes ? list.bytes : "");
    else
        uf_fail(&error, UF_USAGE, "unknown kind of calibration '%.60s': expected %s", typed,
                list.bytes ? list.bytes : "another word");
    uf_text_free(&list);
    return uf_report_error(&error);
}

static int command_calibrate(int argc, char **argv)
{
    if (argc < 1 || strcmp(argv[0], "--help") == 0 || strcmp(argv[0], "-h") == 0) {
        int status = print_kinds();
        return argc < 1 && status == EXIT_DONE ? EXIT_CANNOT : status;
    }
    for (int k = 0; k < KINDS; k++)
        if (strcmp(argv[0], strchr(kinds[k]->name, ' ') + 1) == 0)
            return kinds[k]->run(argc - 1, argv + 1);
    return unknown_kind(argv[0]);
}

const uf_command uf_command_calibrate = {
    "calibrate",
    "KIND ... -o FILE.ini",
    "bench facts from calibration images",
    "Each kind prints its result with its uncertainty and a verdict, and writes an INI fragment in the\n"
    "instrument file's own keys, to be given after it: -i bench.ini -i FILE.ini. docs/calibration.md tells\n"
    "what to image and what goes wrong.",
    "  underfoot calibrate bead --help",
    command_calibrate};
