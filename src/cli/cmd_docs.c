/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <string.h>

#include "cli/cli.h"
#include "record/columns.h"
#include "sheet/columns.h"

static const struct {
    const char *name;
    void (*put)(uf_text *out);
} known[] = {{"settings", uf_settings_page}, {"columns", uf_columns_page}, {"sheet-columns", uf_sheet_columns_page}};

static int command_docs(int argc, char **argv)
{
    const char *pages[1];
    int count;
    bool help;
    uf_error error;
    uf_status status = uf_options_parse(argc, argv, NULL, 0, pages, &count, 1, &help, &error);
    if (status == UF_OK && help)
        return uf_help_print(&uf_command_docs, NULL, 0, NULL);
    void (*put_page)(uf_text *) = NULL;
    for (size_t k = 0; status == UF_OK && count && k < sizeof known / sizeof known[0]; k++)
        put_page = strcmp(pages[0], known[k].name) == 0 ? known[k].put : put_page;
    if (status == UF_OK && !put_page)
        status = uf_fail(&error, UF_USAGE, "docs needs the name of a page: settings, columns or sheet-columns");
    if (status != UF_OK)
        return uf_report_error(&error);
    uf_text page = {0};
    put_page(&page);
    int printed = uf_print_all(&page);
    uf_text_free(&page);
    return printed;
}

const uf_command uf_command_docs = {
    "docs",
    "settings | columns | sheet-columns",
    "print the page of all settings or columns",
    "Prints the reference page (Markdown) of every setting, of every column of the tables, or of a sheet.",
    "  underfoot docs settings > settings.md",
    command_docs};
