/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "io/csv.h"

#include <string.h>

static bool is_blank(char c)
{
    return c == ' ' || c == '\t';
}

/* RFC 4180 asks for quotes around commas, quotes and line ends; outer blanks are quoted too, because many
 * readers strip them. */
static bool needs_quotes(const char *value)
{
    size_t length = strlen(value);
    if (length == 0)
        return false;
    return is_blank(value[0]) || is_blank(value[length - 1]) || value[strcspn(value, ",\"\r\n")] != '\0';
}

void uf_csv_field(uf_text *out, const char *value)
{
    if (!needs_quotes(value)) {
        uf_text_add(out, value);
        return;
    }
    uf_text_add(out, "\"");
    for (const char *p = value; *p;) {
        size_t plain = strcspn(p, "\"");
        uf_text_bytes(out, p, plain);
        p += plain;
        if (*p) {
            uf_text_add(out, "\"\"");
            p++;
        }
    }
    uf_text_add(out, "\"");
}

void uf_csv_header(uf_text *out, const uf_table *table)
{
    uf_text_add(out, "field_id");
    for (int k = 0; k < table->count; k++) {
        uf_text_add(out, ",");
        uf_csv_field(out, table->columns[k].name);
    }
    uf_text_add(out, "\n");
}

void uf_csv_row(uf_text *out, const uf_table *table, const char *field_id, const void *row)
{
    uf_text value = {0};
    uf_csv_field(out, field_id);
    for (int k = 0; k < table->count; k++) {
        value.length = 0;
        uf_column_value(&value, &table->columns[k], row);
        uf_text_add(out, ",");
        /* What an earlier column left in the buffer is not this column's value. */
        if (value.length)
            uf_csv_field(out, value.bytes);
    }
    uf_text_add(out, "\n");
    out->failed = out->failed || value.failed;
    uf_text_free(&value);
}
