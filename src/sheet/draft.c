/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/draft.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "sheet/sheet.h"

void uf_draft_start(uf_draft *draft)
{
    *draft = (uf_draft){.columns = UF_SHEET_COLUMNS};
}

void uf_draft_free(uf_draft *draft)
{
    free(draft->rows);
    uf_arena_free(&draft->arena);
    *draft = (uf_draft){0};
}

const char *uf_draft_column_name(const uf_draft *draft, int column)
{
    return column < UF_SHEET_COLUMNS ? uf_sheet_columns[column].name : draft->extra[column - UF_SHEET_COLUMNS];
}

int uf_draft_column(uf_draft *draft, const char *name, uf_error *error)
{
    int nearest = uf_sheet_column_nearest(name);
    if (nearest >= 0 && strlen(name) == strlen(uf_sheet_columns[nearest].name)) {
        /* Other letters only: the distance of the plain name is 0. */
        char plain[UF_DRAFT_NAME];
        (void)snprintf(plain, sizeof plain, "%s", name);
        for (char *p = plain; *p; p++)
            *p = *p >= 'A' && *p <= 'Z' ? (char)(*p - 'A' + 'a') : *p == ' ' || *p == '-' ? '_' : *p;
        if (uf_sheet_column_find(plain) == nearest)
            return nearest;
    }
    for (int k = UF_SHEET_COLUMNS; k < draft->columns; k++)
        if (strcmp(draft->extra[k - UF_SHEET_COLUMNS], name) == 0)
            return k;
    const char *results = uf_result_table_of(name);
    if (!*name || strlen(name) >= UF_DRAFT_NAME)
        (void)uf_fail(error, UF_INPUT, "'%.80s' is no name of a column; expected 1 to %d letters", name,
                      UF_DRAFT_NAME - 1);
    else if (results)
        (void)uf_fail(error, UF_INPUT, "'%s' is a column of the results (%s.csv); choose another name, my_%s, say",
                      name, results, name);
    else if (nearest >= 0)
        (void)uf_fail(error, UF_INPUT, "'%s' is no column of a sheet; the nearest is '%s'", name,
                      uf_sheet_columns[nearest].name);
    else if (draft->columns == UF_DRAFT_COLUMNS)
        (void)uf_fail(error, UF_INPUT, "'%s' is one column too many; a sheet has at most %d beside its own", name,
                      UF_DRAFT_COLUMNS - UF_SHEET_COLUMNS);
    else {
        strcpy(draft->extra[draft->columns - UF_SHEET_COLUMNS], name); /* its length is checked above */
        return draft->columns++;
    }
    return -1;
}

uf_draft_row *uf_draft_add(uf_draft *draft)
{
    if (draft->count == draft->capacity) {
        int capacity = draft->capacity ? 2 * draft->capacity : 64;
        uf_draft_row *rows = realloc(draft->rows, (size_t)capacity * sizeof *rows);
        if (!rows)
            return NULL;
        draft->rows = rows;
        draft->capacity = capacity;
    }
    uf_draft_row *row = &draft->rows[draft->count++];
    *row = (uf_draft_row){0};
    return row;
}

const char *uf_draft_keep(uf_draft *draft, const char *text, size_t length)
{
    char *copy = uf_arena_take(&draft->arena, length + 1);
    if (copy) {
        memcpy(copy, text, length);
        copy[length] = '\0';
    }
    return copy;
}

void uf_cell_key(int column, const char *cell, char *out, size_t size)
{
    uf_well well;
    char name[UF_WELL_NAME];
    if (column == UF_SHEET_WELL && uf_well_parse(cell, &well)) {
        uf_well_name(name, well);
        cell = name;
    } else if (*cell && !cell[strspn(cell, "0123456789")]) {
        cell += strspn(cell, "0");
        cell -= *cell == '\0';
    }
    (void)snprintf(out, size, "%s", cell);
}

static int compare_cells(const uf_draft_row *a, const uf_draft_row *b, int column)
{
    const char *one = a->cells[column] ? a->cells[column] : "", *other = b->cells[column] ? b->cells[column] : "";
    uf_well p, q;
    if (column == UF_SHEET_WELL && uf_well_parse(one, &p) && uf_well_parse(other, &q))
        return uf_well_compare(p, q);
    double m, n;
    if (column == UF_SHEET_TIME_MIN && uf_parse_number(one, &m) && uf_parse_number(other, &n) && m != n)
        return m < n ? -1 : 1;
    return uf_natural_compare(one, other);
}

static int by_place(const void *a, const void *b)
{
    static const int order[] = {UF_SHEET_SESSION,  UF_SHEET_PLATE,    UF_SHEET_WELL, UF_SHEET_FIELD,
                                UF_SHEET_TIME_MIN, UF_SHEET_POSITION, UF_SHEET_NEAR, UF_SHEET_NEAR_PAGE};
    for (size_t k = 0; k < sizeof order / sizeof order[0]; k++) {
        int found = compare_cells(a, b, order[k]);
        if (found)
            return found;
    }
    return 0;
}

void uf_draft_sort(uf_draft *draft)
{
    if (draft->count)
        qsort(draft->rows, (size_t)draft->count, sizeof *draft->rows, by_place);
}

void uf_draft_describe(const uf_draft_row *row, uf_text *out)
{
    static const int parts[] = {UF_SHEET_SESSION,  UF_SHEET_PLATE, UF_SHEET_WELL,
                                UF_SHEET_POSITION, UF_SHEET_FIELD, UF_SHEET_TIME_MIN};
    size_t before = out->length;
    for (size_t k = 0; k < sizeof parts / sizeof parts[0]; k++)
        if (row->cells[parts[k]] && *row->cells[parts[k]])
            uf_text_printf(out, "%s%s %.60s", out->length > before ? ", " : "", uf_sheet_columns[parts[k]].name,
                           row->cells[parts[k]]);
    if (out->length == before)
        uf_text_printf(out, "%.200s", row->cells[UF_SHEET_NEAR] ? row->cells[UF_SHEET_NEAR] : "a row");
}
