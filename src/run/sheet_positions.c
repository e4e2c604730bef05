/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Positions of the stage to wells: by a list that says the well of each, by its coordinates, or by the order of imaging. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "io/csv_read.h"
#include "run/sheet_parts.h"
#include "sheet/order.h"
#include "sheet/stage.h"

static const size_t most_list_bytes = (size_t)32 << 20;

static int list_column(const uf_list *list, const char *name)
{
    for (int k = 0; k < list->columns; k++)
        if (strcmp(list->names[k], name) == 0)
            return k;
    return -1;
}

static const char **list_cell(const uf_list *list, int row, int column)
{
    return &list->cells[(size_t)row * (size_t)list->columns + (size_t)column];
}

/* ---- coordinates ----------------------------------------------------------------------------- */

static uf_status take_points(build_job *job, const uf_list *list, int x, int y, uf_stage_point *points)
{
    for (int r = 0; r < list->rows; r++)
        if (!uf_parse_number(*list_cell(list, r, x), &points[r].x_um) ||
            !uf_parse_number(*list_cell(list, r, y), &points[r].y_um))
            return uf_fail(job->error, UF_INPUT, "%.400s:%d: x_um and y_um must be numbers, in micrometres",
                           list->file, list->lines[r]);
    return UF_OK;
}

static uf_status take_a1(build_job *job, double *x_um, double *y_um)
{
    const char *text = job->request->a1, *comma = text ? strchr(text, ',') : NULL;
    char first[40];
    if (!text)
        return uf_fail(job->error, UF_USAGE,
                       "positions by coordinates need to know where the centre of A1 is: --a1 X,Y in "
                       "micrometres of the stage");
    if (comma && (size_t)(comma - text) < sizeof first) {
        memcpy(first, text, (size_t)(comma - text));
        first[comma - text] = '\0';
        if (uf_parse_number(first, x_um) && uf_parse_number(comma + 1, y_um))
            return UF_OK;
    }
    return uf_fail(job->error, UF_USAGE, "--a1 %.60s: expected two numbers, like --a1 14380,11240", text);
}

/* The list with the columns position, well and field; fields of a well are numbered as they come. */
static uf_status put_wells(build_job *job, uf_list *list, int position, const uf_stage_point *points)
{
    static const char *names[] = {"position", "well", "field"};
    static const char *units[] = {NULL, NULL, NULL};
    enum { COLUMNS = 3 };
    int fields[UF_MOST_ROWS][UF_MOST_COLUMNS] = {{0}};
    const char **cells = uf_arena_take(&job->draft.arena, ((size_t)list->rows + 1) * COLUMNS * sizeof *cells);
    bool whole = cells != NULL;
    for (int r = 0; whole && r < list->rows; r++) {
        char well[UF_WELL_NAME], field[16];
        uf_well_name(well, points[r].well);
        (void)snprintf(field, sizeof field, "%d", ++fields[points[r].well.row][points[r].well.column]);
        const char **row = cells + (size_t)r * COLUMNS;
        row[0] = *list_cell(list, r, position);
        row[1] = uf_draft_keep(&job->draft, well, strlen(well));
        row[2] = uf_draft_keep(&job->draft, field, strlen(field));
        whole = row[1] && row[2];
    }
    if (!whole)
        return uf_fail_memory(job->error, "positions");
    list->names = names;
    list->units = units;
    list->columns = COLUMNS;
    list->cells = cells;
    return UF_OK;
}

static uf_status find_wells(build_job *job, uf_list *list, int position, int x, int y)
{
    uf_vessel vessel = {0};
    double x_um, y_um;
    uf_status status = take_a1(job, &x_um, &y_um);
    const char *text = build_vessel(job);
    if (status == UF_OK && (!text || !uf_vessel_parse(text, &vessel) || !vessel.wells))
        status = uf_fail(job->error, UF_USAGE, "positions by coordinates need the plate: --vessel 96, 384 or 1536");
    uf_stage_point *points = status == UF_OK ? calloc((size_t)list->rows + 1, sizeof *points) : NULL;
    if (status == UF_OK && !points)
        status = uf_fail_memory(job->error, "positions");
    if (status == UF_OK)
        status = take_points(job, list, x, y, points);
    if (status == UF_OK)
        status = uf_stage_find(points, list->rows, x_um, y_um, vessel, job->error);
    if (status == UF_OK)
        status = put_wells(job, list, position, points);
    free(points);
    return status;
}

/* ---- the list -------------------------------------------------------------------------------- */

/* The stage's own columns (coordinates, focus) are not the sheet's, and some have the names of results. */
static void drop_other_columns(uf_list *list)
{
    int kept = 0;
    const int columns = list->columns;
    int from[UF_DRAFT_COLUMNS];
    for (int k = 0; k < columns && kept < UF_DRAFT_COLUMNS; k++)
        if (uf_sheet_column_find(list->names[k]) >= 0)
            from[kept++] = k;
    for (int r = 0; r < list->rows; r++)
        for (int k = 0; k < kept; k++)
            list->cells[(size_t)r * (size_t)kept + (size_t)k] =
                list->cells[(size_t)r * (size_t)columns + (size_t)from[k]];
    for (int k = 0; k < kept; k++) {
        list->names[k] = list->names[from[k]];
        list->units[k] = list->units[from[k]];
    }
    list->columns = kept;
}

static uf_status prepare_list(build_job *job, uf_list *list)
{
    int position = list_column(list, "position"), x = list_column(list, "x_um"), y = list_column(list, "y_um");
    if (position < 0)
        return uf_fail(job->error, UF_INPUT, "%.400s: no column position; expected position, well and field",
                       list->file);
    if (list_column(list, "well") < 0 && x >= 0 && y >= 0)
        return find_wells(job, list, position, x, y);
    if (list_column(list, "well") < 0)
        return uf_fail(
            job->error, UF_INPUT,
            "%.400s: says no wells; expected the columns position, well and field, or position, x_um and y_um",
            list->file);
    drop_other_columns(list);
    return UF_OK;
}

/* A list of positions is a layout like any other, but what it says is known when the layouts come. */
uf_status build_positions(build_job *job)
{
    uf_csv_table table;
    const char *path = job->request->positions;
    uf_layout *positions = &job->positions;
    uf_status status = uf_csv_read_loose(&table, path, most_list_bytes, job->error);
    if (status == UF_OK && !job->draft.given[UF_SHEET_POSITION])
        status = uf_fail(job->error, UF_USAGE,
                         "--positions needs the number of the position in the files' names: {position} in --name");
    if (status == UF_OK)
        status = uf_layout_take(positions, &table, path, NULL, &job->summary->faults, job->error);
    uf_csv_free(&table);
    if (status == UF_OK && (positions->list_count != 1 || positions->block_count))
        status = uf_fail(job->error, UF_INPUT,
                         "%.400s: no list of positions; expected the columns position, well and field", path);
    if (status == UF_OK)
        status = prepare_list(job, &positions->lists[0]);
    if (status == UF_OK)
        status = uf_layout_apply(positions, &job->draft, &job->summary->faults, job->error);
    for (int r = 0; status == UF_OK && r < job->draft.count; r++)
        for (int k = 0; k < UF_DRAFT_COLUMNS; k++)
            job->draft.given[k] |= job->draft.rows[r].cells[k] != NULL;
    return status;
}

/* ---- order ----------------------------------------------------------------------------------- */

uf_status build_order(build_job *job)
{
    const uf_sheet_build_request *r = job->request;
    uf_order order = {.fields_per_well = r->fields_per_well, .wells = r->wells};
    const char *vessel = build_vessel(job);
    order.serpentine = strcmp(r->order, "serpentine") == 0;
    if (!order.serpentine && strcmp(r->order, "row") != 0)
        return uf_fail(job->error, UF_USAGE, "--order %.40s: expected row or serpentine", r->order);
    if (r->fields_per_well < 1)
        return uf_fail(job->error, UF_USAGE, "--order needs --fields-per-well N");
    if (!vessel || !uf_vessel_parse(vessel, &order.vessel) || order.vessel.wells == 0)
        return uf_fail(job->error, UF_USAGE, "--order needs the plate: --vessel 6, 12, 24, 48, 96, 384 or 1536");
    return uf_order_apply(&order, &job->draft, job->error);
}
