/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/order.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "sheet/sheet.h"

uf_status uf_wells_parse(const char *text, uf_vessel vessel, bool wells[UF_MOST_ROWS][UF_MOST_COLUMNS],
                         uf_error *error)
{
    memset(wells, 0, sizeof(bool[UF_MOST_ROWS][UF_MOST_COLUMNS]));
    while (*text) {
        char names[2][8] = {"", ""};
        size_t length = strcspn(text, ","), first = strcspn(text, "-,");
        bool good = first < sizeof names[0] && length - first < sizeof names[1] + 1 && length > 0;
        uf_well from = {-1, -1}, to;
        if (good) {
            memcpy(names[0], text, first);
            memcpy(names[1], text + first + (first < length), length - first - (first < length));
            good = uf_well_parse(names[0], &from) && uf_well_parse(first < length ? names[1] : names[0], &to) &&
                   uf_well_on(vessel, from) && uf_well_on(vessel, to) && from.row <= to.row &&
                   from.column <= to.column;
        }
        if (!good)
            return uf_fail(error, UF_USAGE,
                           "'%.40s' names no wells of this plate; expected wells and rectangles, like B02-G11,H01",
                           text);
        for (int r = from.row; r <= to.row; r++)
            for (int c = from.column; c <= to.column; c++)
                wells[r][c] = true;
        text += length + (text[length] == ',');
    }
    return UF_OK;
}

static int list_wells(const uf_order *order, uf_well *list, uf_error *error, uf_status *status)
{
    bool wells[UF_MOST_ROWS][UF_MOST_COLUMNS];
    char all[24], last[UF_WELL_NAME];
    int count = 0, row_number = 0;
    uf_well_name(last, (uf_well){order->vessel.rows - 1, order->vessel.columns - 1});
    (void)snprintf(all, sizeof all, "A01-%s", last);
    *status = uf_wells_parse(order->wells ? order->wells : all, order->vessel, wells, error);
    for (int r = 0; *status == UF_OK && r < order->vessel.rows; r++) {
        int before = count;
        bool back = order->serpentine && row_number % 2;
        for (int k = 0; k < order->vessel.columns; k++) {
            int c = back ? order->vessel.columns - 1 - k : k;
            if (wells[r][c])
                list[count++] = (uf_well){r, c};
        }
        row_number += count > before;
    }
    return count;
}

static const char *cell(const uf_draft_row *row, int column)
{
    return row->cells[column] ? row->cells[column] : "";
}

static int compare_plate(const uf_draft_row *a, const uf_draft_row *b)
{
    int order = strcmp(cell(a, UF_SHEET_SESSION), cell(b, UF_SHEET_SESSION));
    return order ? order : strcmp(cell(a, UF_SHEET_PLATE), cell(b, UF_SHEET_PLATE));
}

static int by_position(const void *a, const void *b)
{
    const uf_draft_row *one = *(uf_draft_row *const *)a, *other = *(uf_draft_row *const *)b;
    int order = compare_plate(one, other);
    return order ? order : uf_natural_compare(cell(one, UF_SHEET_POSITION), cell(other, UF_SHEET_POSITION));
}

static bool set_place(uf_draft *draft, uf_draft_row *row, uf_well well, int field)
{
    char name[UF_WELL_NAME], number[16];
    uf_well_name(name, well);
    (void)snprintf(number, sizeof number, "%d", field);
    row->cells[UF_SHEET_WELL] = uf_draft_keep(draft, name, strlen(name));
    row->cells[UF_SHEET_FIELD] = uf_draft_keep(draft, number, strlen(number));
    return row->cells[UF_SHEET_WELL] && row->cells[UF_SHEET_FIELD];
}

/* Rows of one plate, sorted by position; rows of one position (time points) share its place. */
static uf_status place_plate(const uf_order *order, uf_draft *draft, uf_draft_row **rows, int count,
                             const uf_well *wells, int well_count, uf_error *error)
{
    int positions = 0;
    for (int k = 0; k < count; k++)
        positions += k == 0 || strcmp(cell(rows[k], UF_SHEET_POSITION), cell(rows[k - 1], UF_SHEET_POSITION)) != 0;
    if (positions != well_count * order->fields_per_well)
        return uf_fail(error, UF_INPUT,
                       "%s%.60s%d positions, but %d wells of %d fields make %d; give --wells (like B02-G11) and "
                       "--fields-per-well as they were imaged, or a table by --positions",
                       cell(rows[0], UF_SHEET_PLATE), *cell(rows[0], UF_SHEET_PLATE) ? ": " : "", positions,
                       well_count, order->fields_per_well, well_count * order->fields_per_well);
    for (int k = 0, at = -1; k < count; k++) {
        at += k == 0 || strcmp(cell(rows[k], UF_SHEET_POSITION), cell(rows[k - 1], UF_SHEET_POSITION)) != 0;
        if (!set_place(draft, rows[k], wells[at / order->fields_per_well], 1 + at % order->fields_per_well))
            return uf_fail_memory(error, "positions");
    }
    return UF_OK;
}

uf_status uf_order_apply(const uf_order *order, uf_draft *draft, uf_error *error)
{
    uf_well wells[UF_MOST_ROWS * UF_MOST_COLUMNS];
    uf_status status;
    int well_count = list_wells(order, wells, error, &status);
    if (status != UF_OK)
        return status;
    if (!draft->given[UF_SHEET_POSITION])
        return uf_fail(error, UF_USAGE,
                       "--order needs the number of the position in the files' names: {position} in --name");
    uf_draft_row **rows = malloc(((size_t)draft->count + 1) * sizeof *rows);
    if (!rows)
        return uf_fail_memory(error, "positions");
    for (int k = 0; k < draft->count; k++)
        rows[k] = &draft->rows[k];
    qsort(rows, (size_t)draft->count, sizeof *rows, by_position);
    for (int from = 0, to; status == UF_OK && from < draft->count; from = to) {
        for (to = from + 1; to < draft->count && compare_plate(rows[from], rows[to]) == 0;)
            to++;
        status = place_plate(order, draft, rows + from, to - from, wells, well_count, error);
    }
    free(rows);
    draft->given[UF_SHEET_WELL] = draft->given[UF_SHEET_FIELD] = true;
    return status;
}
