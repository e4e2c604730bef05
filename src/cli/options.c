/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "cli/cli.h"

/* ---- parsing --------------------------------------------------------------------------------- */

static const uf_option *find_long(const uf_option *options, int count, const char *name, size_t length)
{
    for (int k = 0; k < count; k++)
        if (strlen(options[k].name) == length && strncmp(options[k].name, name, length) == 0)
            return &options[k];
    return NULL;
}

static const uf_option *find_letter(const uf_option *options, int count, char letter)
{
    for (int k = 0; k < count; k++)
        if (options[k].letter == letter)
            return &options[k];
    return NULL;
}

static uf_status unknown_option(const uf_option *options, int count, const char *typed, uf_error *error)
{
    const char *nearest = "help";
    int least = 1000;
    for (int k = 0; k < count; k++) {
        int distance = uf_edit_distance(typed, options[k].name);
        /* A beginning is nearer than any slip: --angle means --angle-deg. */
        if (strlen(typed) > 1 && strncmp(typed, options[k].name, strlen(typed)) == 0)
            distance = 0;
        if (distance < least) {
            least = distance;
            nearest = options[k].name;
        }
    }
    return uf_fail(error, UF_USAGE, "unknown option --%.60s; the nearest is --%s", typed, nearest);
}

static uf_status take_value(const uf_option *option, const char *value, uf_error *error)
{
    if (option->text)
        *option->text = value;
    if (!option->list)
        return UF_OK;
    if (*option->count >= option->limit)
        return uf_fail(error, UF_USAGE, "--%s is given more than %d times", option->name, option->limit);
    option->list[(*option->count)++] = value;
    return UF_OK;
}

/* One argument that starts with '-': *next moves on when the option takes the following argument. */
static uf_status parse_option(int argc, char **argv, int *next, const uf_option *options, int count, bool *help,
                              uf_error *error)
{
    const char *typed = argv[*next], *value = NULL;
    const uf_option *option;
    if (typed[1] == '-') {
        const char *equals = strchr(typed, '=');
        size_t length = equals ? (size_t)(equals - typed - 2) : strlen(typed + 2);
        value = equals ? equals + 1 : NULL;
        option = find_long(options, count, typed + 2, length);
    } else {
        option = find_letter(options, count, typed[1]);
        value = typed[2] ? typed + 2 : NULL;
    }
    if (strcmp(typed, "--help") == 0 || strcmp(typed, "-h") == 0) {
        *help = true;
        return UF_OK;
    }
    if (!option)
        return unknown_option(options, count, typed[1] == '-' ? typed + 2 : typed + 1, error);
    if (option->flag) {
        if (value)
            return uf_fail(error, UF_USAGE, "--%s takes no value", option->name);
        *option->flag = true;
        return UF_OK;
    }
    if (!value && *next + 1 < argc)
        value = argv[++*next];
    if (!value)
        return uf_fail(error, UF_USAGE, "--%s needs a value: --%s %s", option->name, option->name, option->argument);
    uf_status status = take_value(option, value, error);
    while (status == UF_OK && option->list && option->limit >= UF_OPTION_TAKES_ALL && *next + 1 < argc &&
           argv[*next + 1][0] != '-')
        status = take_value(option, argv[++*next], error);
    return status;
}

uf_status uf_options_parse(int argc, char **argv, const uf_option *options, int option_count, const char **operands,
                           int *operand_count, int operand_limit, bool *help, uf_error *error)
{
    bool only_operands = false;
    *operand_count = 0;
    *help = false;
    for (int k = 0; k < argc; k++) {
        if (!only_operands && strcmp(argv[k], "--") == 0) {
            only_operands = true;
            continue;
        }
        if (!only_operands && argv[k][0] == '-' && argv[k][1]) {
            uf_status status = parse_option(argc, argv, &k, options, option_count, help, error);
            if (status != UF_OK)
                return status;
            continue;
        }
        if (*operand_count >= operand_limit)
            return uf_fail(error, UF_USAGE, "'%.200s' is one argument too many; see --help", argv[k]);
        operands[(*operand_count)++] = argv[k];
    }
    return UF_OK;
}

/* ---- help ------------------------------------------------------------------------------------ */

static void put_option(uf_text *out, const uf_option *o)
{
    char left[64];
    if (o->letter)
        (void)snprintf(left, sizeof left, "-%c, --%s%s%s", o->letter, o->name, o->argument ? " " : "",
                       o->argument ? o->argument : "");
    else
        (void)snprintf(left, sizeof left, "    --%s%s%s", o->name, o->argument ? " " : "",
                       o->argument ? o->argument : "");
    uf_text_printf(out, "  %-28s %s\n", left, o->help);
}

int uf_help_print(const uf_command *command, const uf_option *options, int option_count, const char *more)
{
    uf_text out = {0};
    uf_text_printf(&out, "underfoot %s: %s\n\nUsage: underfoot %s %s\n\n%s\n\nOptions:\n", command->name,
                   command->summary, command->name, command->arguments, command->about);
    for (int k = 0; k < option_count; k++)
        put_option(&out, &options[k]);
    uf_text_add(&out, "  -h, --help                   this page\n");
    uf_text_printf(&out, "\nExample:\n%s\n", command->example);
    if (more)
        uf_text_printf(&out, "\n%s", more);
    int status = uf_print_all(&out);
    uf_text_free(&out);
    return status;
}

/* ---- printing -------------------------------------------------------------------------------- */

int uf_print_all(const uf_text *text)
{
    bool written = !text->failed && fwrite(text->bytes, 1, text->length, stdout) == text->length;
    if (written && fflush(stdout) == 0)
        return EXIT_DONE;
    (void)fprintf(stderr, "underfoot: standard output cannot be written (%s)\n", strerror(errno));
    return EXIT_NOT_WRITTEN;
}

int uf_report_error(const uf_error *error)
{
    bool colour = isatty(STDERR_FILENO) && !getenv("NO_COLOR");
    (void)fprintf(stderr, "%sunderfoot: %s%s\n", colour ? "\033[1;31m" : "", colour ? "\033[0m" : "", error->text);
    switch (error->status) {
    case UF_OUTPUT:
        return EXIT_NOT_WRITTEN;
    case UF_STOPPED:
        return EXIT_STOPPED;
    default:
        return EXIT_CANNOT;
    }
}

/* ---- what several commands need -------------------------------------------------------------- */

uf_status uf_read_settings(const char **instruments, int instrument_count, const char **assays, int assay_count,
                           uf_settings **settings, uf_error *error)
{
    uf_status status = uf_settings_new(settings, error);
    for (int k = 0; status == UF_OK && k < instrument_count; k++)
        status = uf_settings_read(*settings, instruments[k], UF_INSTRUMENT_FILE, error);
    for (int k = 0; status == UF_OK && k < assay_count; k++)
        status = uf_settings_read(*settings, assays[k], UF_ASSAY_FILE, error);
    return status;
}

void uf_join_command(uf_text *out, const char *name, int argc, char **argv)
{
    uf_text_printf(out, "underfoot %s", name);
    for (int k = 0; k < argc; k++)
        uf_text_printf(out, " %s", argv[k]);
}

uf_status uf_threads(const char *text, int *threads, uf_error *error)
{
    if (!text) {
        long processors = sysconf(_SC_NPROCESSORS_ONLN);
        *threads = processors < 1 ? 1 : processors > 256 ? 256 : (int)processors;
        return UF_OK;
    }
    double value;
    if (!uf_parse_number(text, &value) || value < 1 || value > 256 || value != (int)value)
        return uf_fail(error, UF_USAGE, "--threads %.40s: expected a whole number from 1 to 256", text);
    *threads = (int)value;
    return UF_OK;
}
