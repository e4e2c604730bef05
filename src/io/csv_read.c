/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "io/csv_read.h"

#include <csv.h>
#include <stdlib.h>
#include <string.h>

#include "io/csv_dialect.h"
#include "io/input.h"

/* Cells are kept as offsets until the bytes stop moving. */
typedef struct csv_job {
    uf_csv_table *table;
    const char *path;
    uf_error *error;
    uf_status status;
    bool loose;                    /* rows may differ in length */
    uf_text offsets, lines, spans; /* of size_t, of int, of int: fields of each row */
    int line, row_line;            /* being read; where the row in hand starts */
    int fields;                    /* of the row in hand */
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
    if (table->rows == 0 || (job->loose && job->fields > table->columns))
        table->columns = job->fields;
    if (job->status == UF_OK && job->fields != table->columns && !job->loose)
        job->status = uf_fail(job->error, UF_INPUT, "%s:%d: %d fields, but the header has %d", job->path,
                              job->row_line, job->fields, table->columns);
    uf_text_bytes(&job->spans, &job->fields, sizeof job->fields);
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

static bool take_tables(uf_csv_table *table)
{
    size_t rows = (size_t)table->rows, count = rows * (size_t)table->columns;
    table->cells = malloc(count * sizeof *table->cells);
    table->lines = malloc(rows * sizeof *table->lines);
    table->fields = malloc(rows * sizeof *table->fields);
    return table->cells && table->lines && table->fields;
}

static char nothing[] = "";

static uf_status point_cells(csv_job *job)
{
    enum { MOST_CELLS = 1 << 26 };
    uf_csv_table *table = job->table;
    if (table->rows == 0)
        return uf_fail(job->error, UF_INPUT, "%s:1: empty; expected a header row", job->path);
    if (!job->loose && table->columns == 1 && strchr(table->bytes.bytes, ';'))
        return uf_fail(job->error, UF_INPUT, "%s:1: semicolons; expected commas between columns", job->path);
    /* One very long row makes all the others as long. */
    if ((double)table->rows * table->columns > MOST_CELLS)
        return uf_fail(job->error, UF_INPUT, "%s: %d rows of %d columns; is it the right file?", job->path,
                       table->rows, table->columns);
    if (job->offsets.failed || job->lines.failed || job->spans.failed || table->bytes.failed || !take_tables(table))
        return uf_fail_memory(job->error, job->path);
    memcpy(table->lines, job->lines.bytes, (size_t)table->rows * sizeof *table->lines);
    memcpy(table->fields, job->spans.bytes, (size_t)table->rows * sizeof *table->fields);
    const char *offsets = job->offsets.bytes;
    char **cell = table->cells;
    for (int row = 0; row < table->rows; row++)
        for (int k = 0; k < table->columns; k++, cell++) {
            size_t at;
            *cell = nothing;
            if (k >= table->fields[row])
                continue;
            memcpy(&at, offsets, sizeof at);
            offsets += sizeof at;
            *cell = table->bytes.bytes + at;
        }
    return UF_OK;
}

static uf_status parse(uf_csv_table *table, const char *text, size_t length, char separator, csv_job *job)
{
    struct csv_parser parser;
    if (csv_init(&parser, CSV_STRICT | CSV_STRICT_FINI) != 0)
        return uf_fail_memory(job->error, job->path);
    csv_set_delim(&parser, (unsigned char)separator);
    feed(job, &parser, text, length);
    csv_free(&parser);
    if (job->status == UF_OK)
        job->status = point_cells(job);
    uf_text_free(&job->offsets);
    uf_text_free(&job->lines);
    uf_text_free(&job->spans);
    if (job->status != UF_OK)
        uf_csv_free(table);
    return job->status;
}

uf_status uf_csv_parse(uf_csv_table *table, const char *text, size_t length, const char *path, uf_error *error)
{
    csv_job job = {.table = table, .path = path, .error = error, .line = 1};
    *table = (uf_csv_table){.dialect = {.separator = ','}};
    if (memchr(text, '\0', length))
        return uf_fail(error, UF_INPUT, "%s: a zero byte; expected CSV text", path);
    size_t mark = length >= 3 && memcmp(text, "\xEF\xBB\xBF", 3) == 0 ? 3 : 0;
    return parse(table, text + mark, length - mark, ',', &job);
}

uf_status uf_csv_parse_loose(uf_csv_table *table, const char *text, size_t length, const char *path, uf_error *error)
{
    csv_job job = {.table = table, .path = path, .error = error, .loose = true, .line = 1};
    uf_text plain = {0};
    uf_csv_dialect dialect;
    *table = (uf_csv_table){0};
    uf_status status = uf_csv_plain(&plain, text, length, path, &dialect, error);
    if (status == UF_OK) {
        job.line += dialect.said;
        status = parse(table, plain.bytes, plain.length, dialect.separator, &job);
    }
    table->dialect = dialect;
    uf_text_free(&plain);
    return status;
}

typedef uf_status parser_of(uf_csv_table *table, const char *text, size_t length, const char *path, uf_error *error);

static uf_status read_with(parser_of *parse_text, uf_csv_table *table, const char *path, size_t max_bytes,
                           uf_error *error)
{
    uf_text text = {0};
    *table = (uf_csv_table){0};
    uf_status status = uf_input_read(&text, path, max_bytes, error);
    if (status == UF_OK)
        status = parse_text(table, text.bytes ? text.bytes : "", text.length, path, error);
    uf_text_free(&text);
    return status;
}

uf_status uf_csv_read(uf_csv_table *table, const char *path, size_t max_bytes, uf_error *error)
{
    return read_with(uf_csv_parse, table, path, max_bytes, error);
}

uf_status uf_csv_read_loose(uf_csv_table *table, const char *path, size_t max_bytes, uf_error *error)
{
    return read_with(uf_csv_parse_loose, table, path, max_bytes, error);
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
    free(table->fields);
    uf_text_free(&table->bytes);
    *table = (uf_csv_table){0};
}
