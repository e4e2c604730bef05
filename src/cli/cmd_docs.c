/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <string.h>

#include "cli/cli.h"
#include "record/columns.h"

static int command_docs(int argc, char **argv)
{
    const char *pages[1];
    int count;
    bool help;
    uf_error error;
    uf_status status = uf_options_parse(argc, argv, NULL, 0, pages, &count, 1, &help, &error);
    if (status == UF_OK && help)
        return uf_help_print(&uf_command_docs, NULL, 0, NULL);
    bool settings = count && strcmp(pages[0], "settings") == 0, columns = count && strcmp(pages[0], "columns") == 0;
    if (status == UF_OK && !settings && !columns)
        status = uf_fail(&error, UF_USAGE, "docs needs the name of a page: settings or columns");
    if (status != UF_OK)
        return uf_report_error(&error);
    uf_text page = {0};
    if (settings)
        uf_settings_page(&page);
    else
        uf_columns_page(&page);
    int printed = uf_print_all(&page);
    uf_text_free(&page);
    return printed;
}

const uf_command uf_command_docs = {
    "docs",
    "settings | columns",
    "print the page of all settings or of all columns",
    "Prints the reference page (Markdown) of every setting, or of every column of the tables.",
    "  underfoot docs settings > settings.md",
    command_docs};
