/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/sheet.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "sheet/cells.h"
#include "sheet/sheet_parts.h"

/* ---- texts ----------------------------------------------------------------------------------- */

/* A copy without outer blanks; NULL when there is no memory. */
static const char *keep(uf_sheet *sheet, const char *text)
{
    text += strspn(text, " \t\n");
    size_t length = strlen(text);
    while (length && strchr(" \t\n", text[length - 1]))
        length--;
    if (length == 0)
        return "";
    char *copy = uf_arena_take(&sheet->arena, length + 1);
    if (copy) {
        memcpy(copy, text, length);
        copy[length] = '\0';
    }
    return copy;
}

/* ---- header ---------------------------------------------------------------------------------- */

static bool column_is_empty(const uf_csv_table *table, int column)
{
    for (int row = 1; row < table->rows; row++)
        if (*uf_csv_cell(table, row, column))
            return false;
    return true;
}

static void refuse_name(sheet_taking *t, const char *name, int column)
{
    uf_place at = {t->sheet->path, t->table->lines[0], name};
    const char *results = uf_result_table_of(name);
    int nearest = uf_sheet_column_nearest(name);
    if (!*name)
        uf_fault_add(t->faults, UF_FAULT, "header", at, "column %d has cells but no name; give it one, or empty it",
                     column + 1);
    else if (results)
        uf_fault_add(t->faults, UF_FAULT, "result_column", at,
                     "'%.60s' is a column of the results (%s.csv), which would hide it; rename it, to my_%.60s, say",
                     name, results, name);
    else if (nearest >= 0)
        uf_fault_add(
            t->faults, UF_FAULT, "header", at,
            "column '%.60s' is not known; the nearest is '%s': correct it, or rename it if it is another thing", name,
            uf_sheet_columns[nearest].name);
}

/* A name in other letters (Well, Dose unit) is the column all the same. */
static int known_column(const char *name)
{
    char plain[64];
    size_t length = strlen(name);
    if (length >= sizeof plain)
        return -1;
    for (size_t k = 0; k <= length; k++) {
        char c = name[k] >= 'A' && name[k] <= 'Z' ? (char)(name[k] - 'A' + 'a') : name[k];
        plain[k] = c == ' ' || c == '-' ? '_' : c;
    }
    return uf_sheet_column_find(plain);
}

static bool seen_before(sheet_taking *t, const char *name, int column)
{
    for (int k = 0; k < column; k++) {
        const char *other = uf_csv_cell(t->table, 0, k);
        other += strspn(other, " \t");
        int known = known_column(name);
        if (strcmp(other, name) == 0 || (known >= 0 && known_column(other) == known)) {
            uf_fault_add(t->faults, UF_FAULT, "header", (uf_place){t->sheet->path, t->table->lines[0], name},
                         "two columns are called '%.60s' (columns %d and %d); keep one", name, k + 1, column + 1);
            return true;
        }
    }
    return false;
}

static uf_status take_header(sheet_taking *t, uf_error *error)
{
    enum { MOST_COLUMNS = 1000 };
    uf_sheet *sheet = t->sheet;
    int columns = t->table->columns;
    if (columns > MOST_COLUMNS) {
        uf_fault_add(t->faults, UF_FAULT, "header", (uf_place){sheet->path, t->table->lines[0], NULL},
                     "a row has %d columns, of which the first %d are read; is it the right file?", columns,
                     MOST_COLUMNS);
        columns = MOST_COLUMNS;
    }
    sheet->extra = uf_arena_take(&sheet->arena, (size_t)columns * sizeof *sheet->extra);
    t->extra_from = uf_arena_take(&sheet->arena, (size_t)columns * sizeof *t->extra_from);
    if (!sheet->extra || !t->extra_from)
        return uf_fail_memory(error, "a sheet");
    for (int k = 0; k < UF_SHEET_COLUMNS; k++)
        t->from[k] = -1;
    for (int k = 0; k < columns; k++) {
        const char *name = keep(sheet, uf_csv_cell(t->table, 0, k));
        if (!name)
            return uf_fail_memory(error, "a sheet");
        int known = known_column(name);
        if (!*name && column_is_empty(t->table, k))
            continue;
        if (*name && seen_before(t, name, k))
            continue;
        if (known >= 0) {
            t->from[known] = k;
            sheet->has[known] = true;
            continue;
        }
        refuse_name(t, name, k);
        t->extra_from[sheet->extra_count] = k;
        sheet->extra[sheet->extra_count++] = name;
    }
    for (int k = UF_SHEET_NEAR; k <= UF_SHEET_WIDE; k++)
        if (!sheet->has[k])
            uf_fault_add(t->faults, UF_FAULT, "header", (uf_place){sheet->path, t->table->lines[0], NULL},
                         "no column '%s'; a sheet needs near and wide, the files of the two images",
                         uf_sheet_columns[k].name);
    return UF_OK;
}

/* ---- rows ------------------------------------------------------------------------------------ */

static bool row_is_empty(const uf_csv_table *table, int row)
{
    for (int k = 0; k < table->columns; k++) {
        const char *cell = uf_csv_cell(table, row, k);
        if (cell[strspn(cell, " \t")])
            return false;
    }
    return true;
}

static uf_status take_texts(sheet_taking *t, uf_sheet_row *row, int from, uf_error *error)
{
    uf_sheet *sheet = t->sheet;
    bool whole = true;
    row->extra = uf_arena_take(&sheet->arena, (size_t)sheet->extra_count * sizeof *row->extra);
    if (!row->extra)
        return uf_fail_memory(error, "a sheet");
    for (int k = 0; k < UF_SHEET_COLUMNS; k++) {
        row->text[k] = t->from[k] < 0 ? "" : keep(sheet, uf_csv_cell(t->table, from, t->from[k]));
        whole = whole && row->text[k];
    }
    for (int k = 0; k < sheet->extra_count; k++) {
        row->extra[k] = keep(sheet, uf_csv_cell(t->table, from, t->extra_from[k]));
        whole = whole && row->extra[k];
    }
    return whole ? UF_OK : uf_fail_memory(error, "a sheet");
}

static void check_fields(sheet_taking *t, int row)
{
    int header = t->table->fields[0], fields = t->table->fields[row];
    if (fields != header)
        uf_fault_add(t->faults, UF_FAULT, "fields", (uf_place){t->sheet->path, t->table->lines[row], NULL},
                     "%d fields, but the header has %d; a cell that holds the separator needs quotes around it",
                     fields, header);
}

static uf_status take_rows(sheet_taking *t, uf_error *error)
{
    uf_sheet *sheet = t->sheet;
    size_t most = t->table->rows > 1 ? (size_t)t->table->rows - 1 : 1;
    sheet->rows = uf_arena_take(&sheet->arena, most * sizeof *sheet->rows);
    if (!sheet->rows)
        return uf_fail_memory(error, "a sheet");
    for (int k = 1; k < t->table->rows; k++) {
        if (row_is_empty(t->table, k))
            continue;
        uf_sheet_row *row = &sheet->rows[sheet->count++];
        *row = (uf_sheet_row){.line = t->table->lines[k]};
        check_fields(t, k);
        uf_status status = take_texts(t, row, k, error);
        if (status == UF_OK)
            status = uf_sheet_take_cells(t, row, error);
        if (status != UF_OK)
            return status;
    }
    if (!sheet->count)
        uf_fault_add(t->faults, UF_FAULT, "empty", (uf_place){sheet->path, t->table->lines[0], NULL},
                     "no rows below the header; a sheet has one row a field");
    return UF_OK;
}

/* ---- rows against each other ----------------------------------------------------------------- */

static int by_id(const void *a, const void *b)
{
    const uf_sheet_row *one = *(const uf_sheet_row *const *)a, *other = *(const uf_sheet_row *const *)b;
    int order = strcmp(one->field_id, other->field_id);
    return order ? order : one->line - other->line;
}

static int by_image(const void *a, const void *b)
{
    const uf_sheet_row *one = *(const uf_sheet_row *const *)a, *other = *(const uf_sheet_row *const *)b;
    int order = strcmp(one->near_path ? one->near_path : "", other->near_path ? other->near_path : "");
    order = order ? order : one->near_page - other->near_page;
    return order ? order : one->line - other->line;
}

static void report_twins(sheet_taking *t, const uf_sheet_row *const *rows)
{
    const char *const path = t->sheet->path;
    for (int k = 1; k < t->sheet->count; k++)
        if (strcmp(rows[k]->field_id, rows[k - 1]->field_id) == 0)
            uf_fault_add(t->faults, UF_FAULT, "duplicate_field", (uf_place){path, rows[k]->line, NULL},
                         "is field '%.200s', as is line %d; tell them apart by plate, well, field or time_min",
                         rows[k]->field_id, rows[k - 1]->line);
}

static void report_twin_images(sheet_taking *t, const uf_sheet_row *const *rows)
{
    for (int k = 1; k < t->sheet->count; k++) {
        const uf_sheet_row *a = rows[k - 1], *b = rows[k];
        /* Two rows of one field are told already. */
        if (a->near_path && b->near_path && strcmp(a->near_path, b->near_path) == 0 && a->near_page == b->near_page &&
            strcmp(a->field_id, b->field_id) != 0)
            uf_fault_add(t->faults, UF_FAULT, "duplicate_image", (uf_place){t->sheet->path, b->line, "near"},
                         "'%.200s' page %d is the near image of line %d too; one field, one row",
                         b->text[UF_SHEET_NEAR], b->near_page, a->line);
    }
}

static uf_status check_twins(sheet_taking *t, uf_error *error)
{
    size_t count = (size_t)t->sheet->count;
    const uf_sheet_row **rows = uf_arena_take(&t->sheet->arena, (count + 1) * sizeof *rows);
    if (!rows)
        return uf_fail_memory(error, "a sheet");
    for (size_t k = 0; k < count; k++)
        rows[k] = &t->sheet->rows[k];
    qsort(rows, count, sizeof *rows, by_id);
    report_twins(t, rows);
    qsort(rows, count, sizeof *rows, by_image);
    report_twin_images(t, rows);
    return UF_OK;
}

/* ---- all of it ------------------------------------------------------------------------------- */

uf_status uf_sheet_take(uf_sheet *sheet, const uf_csv_table *table, const char *path, const char *root,
                        uf_faults *faults, uf_error *error)
{
    *sheet = (uf_sheet){.dialect = table->dialect};
    sheet_taking t = {.sheet = sheet, .table = table, .root = root, .faults = faults};
    sheet->path = keep(sheet, path);
    uf_status status = sheet->path ? UF_OK : uf_fail_memory(error, "a sheet");
    if (status == UF_OK)
        status = take_header(&t, error);
    if (status == UF_OK)
        status = take_rows(&t, error);
    if (status == UF_OK) {
        uf_sheet_say_understood(&t);
        status = uf_sheet_unify_doses(&t, error);
    }
    if (status == UF_OK)
        status = check_twins(&t, error);
    if (status == UF_OK)
        status = uf_faults_check(faults, error);
    if (status != UF_OK)
        uf_sheet_free(sheet);
    return status;
}

void uf_sheet_free(uf_sheet *sheet)
{
    uf_arena_free(&sheet->arena);
    *sheet = (uf_sheet){0};
}

/* ---- order ----------------------------------------------------------------------------------- */

static bool is_digit(char c)
{
    return c >= '0' && c <= '9';
}

int uf_natural_compare(const char *a, const char *b)
{
    const char *p = a, *q = b;
    while (*p && *q) {
        if (!is_digit(*p) || !is_digit(*q)) {
            if (*p != *q)
                return (unsigned char)*p < (unsigned char)*q ? -1 : 1;
            p++;
            q++;
            continue;
        }
        p += strspn(p, "0");
        q += strspn(q, "0");
        size_t m = strspn(p, "0123456789"), n = strspn(q, "0123456789");
        int order = m != n ? (m < n ? -1 : 1) : memcmp(p, q, m);
        if (order)
            return order;
        p += m;
        q += n;
    }
    if (*p || *q)
        return *p ? 1 : -1;
    return strcmp(a, b);
}
