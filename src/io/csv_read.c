/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "io/csv_read.h"

#include <csv.h>
#include <stdlib.h>
#include <string.h>

#include "io/input.h"

/* Cells are kept as offsets until the bytes stop moving. */
typedef struct csv_job {
    uf_csv_table *table;
    const char *path;
    uf_error *error;
    uf_status status;
    uf_text offsets, lines; /* of size_t, of int */
    int line, row_line;     /* being read; where the row in hand starts */
    int fields;             /* of the row in hand */
} csv_job;

static void take_field(void *bytes, size_t count, void *context)
{
    csv_job *job = context;
    size_t at = job->table->bytes.length;
    if (job->fields++ == 0)
        uf_text_bytes(&job->lines, &job->row_line, sizeof job->row_line);
    uf_text_bytes(&job->offsets, &at, sizeof at);
    uf_text_bytes(&job->table->bytes, bytes, bytes ? count : 0);
    uf_text_bytes(&job->table->bytes, "", 1);
}

static void take_row(int end, void *context)
{
    (void)end;
    csv_job *job = context;
    uf_csv_table *table = job->table;
    if (table->rows == 0)
        table->columns = job->fields;
    if (job->status == UF_OK && job->fields != table->columns)
        job->status = uf_fail(job->error, UF_INPUT, "%s:%d: %d fields, but the header has %d", job->path,
                              job->row_line, job->fields, table->columns);
    table->rows++;
    job->fields = 0;
}

/* Line by line, since the parser does not count them. */
static void feed(csv_job *job, struct csv_parser *parser, const char *text, size_t length)
{
    for (size_t at = 0; at < length && job->status == UF_OK; job->line++) {
        const char *end = memchr(text + at, '\n', length - at);
        size_t count = end ? (size_t)(end - (text + at)) + 1 : length - at;
        if (job->fields == 0)
            job->row_line = job->line;
        if (csv_parse(parser, text + at, count, take_field, take_row, job) != count)
            job->status =
                uf_fail(job->error, UF_INPUT,
                        csv_error(parser) == CSV_ENOMEM ? "%s:%d: not enough memory"
                                                        : "%s:%d: a quote inside a field; write \"a \"\"b\"\"\"",
                        job->path, job->line);
        at += count;
    }
    if (job->status == UF_OK && csv_fini(parser, take_field, take_row, job) != 0)
        job->status =
            uf_fail(job->error, UF_INPUT, "%s:%d: a quote is opened and never closed", job->path, job->row_line);
}

static uf_status point_cells(csv_job *job)
{
    uf_csv_table *table = job->table;
    size_t count = (size_t)table->rows * (size_t)table->columns;
    if (table->rows == 0)
        return uf_fail(job->error, UF_INPUT, "%s:1: empty; expected a header row", job->path);
    if (table->columns == 1 && strchr(table->bytes.bytes, ';'))
        return uf_fail(job->error, UF_INPUT, "%s:1: semicolons; expected commas between columns", job->path);
    table->cells = malloc(count * sizeof *table->cells);
    table->lines = malloc((size_t)table->rows * sizeof *table->lines);
    if (!table->cells || !table->lines || job->offsets.failed || job->lines.failed || table->bytes.failed)
        return uf_fail_memory(job->error, job->path);
    for (size_t k = 0; k < count; k++) {
        size_t at;
        memcpy(&at, job->offsets.bytes + k * sizeof at, sizeof at);
        table->cells[k] = table->bytes.bytes + at;
    }
    memcpy(table->lines, job->lines.bytes, (size_t)table->rows * sizeof *table->lines);
    return UF_OK;
}

uf_status uf_csv_parse(uf_csv_table *table, const char *text, size_t length, const char *path, uf_error *error)
{
    csv_job job = {.table = table, .path = path, .error = error, .line = 1};
    struct csv_parser parser;
    *table = (uf_csv_table){0};
    if (memchr(text, '\0', length))
        return uf_fail(error, UF_INPUT, "%s: a zero byte; expected CSV text", path);
    if (csv_init(&parser, CSV_STRICT | CSV_STRICT_FINI) != 0)
        return uf_fail_memory(error, path);
    size_t mark = length >= 3 && memcmp(text, "\xEF\xBB\xBF", 3) == 0 ? 3 : 0;
    feed(&job, &parser, text + mark, length - mark);
    csv_free(&parser);
    if (job.status == UF_OK)
        job.status = point_cells(&job);
    uf_text_free(&job.offsets);
    uf_text_free(&job.lines);
    if (job.status != UF_OK)
        uf_csv_free(table);
    return job.status;
}

uf_status uf_csv_read(uf_csv_table *table, const char *path, size_t max_bytes, uf_error *error)
{
    uf_text text = {0};
    *table = (uf_csv_table){0};
    uf_status status = uf_input_read(&text, path, max_bytes, error);
    if (status == UF_OK)
        status = uf_csv_parse(table, text.bytes ? text.bytes : "", text.length, path, error);
    uf_text_free(&text);
    return status;
}

int uf_csv_column(const uf_csv_table *table, const char *name)
{
    for (int k = 0; k < table->columns; k++)
        if (strcmp(uf_csv_cell(table, 0, k), name) == 0)
            return k;
    return -1;
}

void uf_csv_free(uf_csv_table *table)
{
    free(table->cells);
    free(table->lines);
    uf_text_free(&table->bytes);
    *table = (uf_csv_table){0};
}
