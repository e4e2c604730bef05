/* SPDX-License-Identifier: GPL-3.0-or-later */
/* maps/PLATE_METRIC.png: what wells.csv says, where the wells are. */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "run/plate_pictures_parts.h"

/* NULL: cells per mm2, the one that is no mean over cells. */
static const struct {
    const char *name, *words;
} metrics[] = {{"spread_area_um2", "spread area, mean of the cells (µm²)"},
               {"contact_area_um2", "contact area, mean of the cells (µm²)"},
               {"attachment_fraction", "attachment fraction, mean of the cells"},
               {"gap_median_nm", "median gap, mean of the cells (nm)"},
               {"spot_count", "focal spots a cell, mean"},
               {"cells_per_mm2", "cells per mm²"}};
enum { METRICS = sizeof metrics / sizeof *metrics };

/* One plate in one session at one time. */
typedef struct map_view {
    const uf_sheet_row *row; /* of its first well */
    const char *names[METRICS];
    int columns, rows;
    uf_vessel vessel;
} map_view;

typedef struct maps_job {
    plate_pictures *all;
    uf_work work;
    map_view *views;
    int view_count, *view_of_well; /* -1: not on a plate */
    const uf_column *columns[METRICS];
    int at[METRICS]; /* of the metric among the wells' means, -1: none */
    double least[METRICS], most[METRICS];
    char row_letters[UF_MOST_ROWS][UF_WELL_NAME];
    const char *row_names[UF_MOST_ROWS];
} maps_job;

static double value_of(const maps_job *job, int well, int metric)
{
    const uf_plate_well *w = &job->all->wells->wells[well];
    if (job->at[metric] < 0)
        return w->cells_per_mm2;
    return w->means[job->at[metric]];
}

/* ---- which plates ---------------------------------------------------------------------------- */

static int is_view(const map_view *view, const uf_sheet_row *row)
{
    static const uf_sheet_column key[] = {UF_SHEET_PLATE, UF_SHEET_SESSION, UF_SHEET_TIME_MIN};
    for (size_t k = 0; k < sizeof key / sizeof *key; k++)
        if (strcmp(view->row->text[key[k]], row->text[key[k]]) != 0)
            return 0;
    return 1;
}

static void larger_plate(map_view *view, const uf_sheet_row *row)
{
    uf_vessel said;
    uf_vessel vessel =
        uf_vessel_parse(row->text[UF_SHEET_VESSEL], &said) && said.wells ? said : uf_vessel_holding(row->well);
    if (vessel.wells > view->vessel.wells)
        view->vessel = vessel;
}

static uf_status sort_into_views(maps_job *job, uf_error *error)
{
    int wells = job->all->wells->count, last = 0;
    uf_status status = uf_take(&job->work, (size_t)wells + 1, sizeof *job->views, "plate maps", &job->views, error);
    if (status == UF_OK)
        status = uf_take(&job->work, (size_t)wells + 1, sizeof *job->view_of_well, "plate maps", &job->view_of_well,
                         error);
    for (int w = 0; status == UF_OK && w < wells; w++) {
        const uf_sheet_row *row = plate_well_row(job->all, w);
        job->view_of_well[w] = -1;
        if (row->well.row < 0)
            continue;
        /* Most often the plate of the well before. */
        int v = last < job->view_count && is_view(&job->views[last], row) ? last : 0;
        while (v < job->view_count && !is_view(&job->views[v], row))
            v++;
        if (v == job->view_count)
            job->views[job->view_count++] = (map_view){.row = row};
        larger_plate(&job->views[v], row);
        job->view_of_well[w] = last = v;
    }
    return status;
}

static int has_times(const maps_job *job, const map_view *view)
{
    for (int v = 0; v < job->view_count; v++)
        if (strcmp(job->views[v].row->text[UF_SHEET_PLATE], view->row->text[UF_SHEET_PLATE]) == 0 &&
            strcmp(job->views[v].row->text[UF_SHEET_TIME_MIN], view->row->text[UF_SHEET_TIME_MIN]) != 0)
            return 1;
    return 0;
}

/* "P1", and what else tells its maps apart. */
static void put_view(const maps_job *job, const map_view *view, const char *between, const char *unit, uf_text *out)
{
    const char *plate = view->row->text[UF_SHEET_PLATE];
    uf_text_add(out, *plate ? plate : "plate");
    if (plate_has_sessions(job->all, plate))
        uf_text_printf(out, "%s%s", between, view->row->text[UF_SHEET_SESSION]);
    if (has_times(job, view))
        uf_text_printf(out, "%s%s%s", between, view->row->text[UF_SHEET_TIME_MIN], unit);
}

static uf_status name_maps(maps_job *job, uf_error *error)
{
    const char **names;
    int count = job->view_count * METRICS;
    uf_status status = uf_take(&job->work, (size_t)count + 1, sizeof *names, "plate maps", &names, error);
    for (int k = 0; status == UF_OK && k < count; k++) {
        uf_text text = {0};
        put_view(job, &job->views[k / METRICS], "_", "", &text);
        uf_text_printf(&text, "_%s", metrics[k % METRICS].name);
        names[k] = plate_picture_key(&job->work, &text);
        uf_text_free(&text);
        if (!names[k])
            status = uf_fail_memory(error, "names of pictures");
    }
    if (status == UF_OK)
        status = plate_names_apart(&job->work, names, count, error);
    for (int k = 0; status == UF_OK && k < count; k++)
        job->views[k / METRICS].names[k % METRICS] = names[k];
    return status;
}

/* ---- values ---------------------------------------------------------------------------------- */

static void find_columns(maps_job *job)
{
    const uf_plate_well_list *list = job->all->wells;
    for (int m = 0; m < METRICS; m++) {
        job->at[m] = -1;
        for (int k = 0; k < list->metric_count; k++)
            if (strcmp(list->metrics[k]->name, metrics[m].name) == 0)
                job->at[m] = k;
    }
}

/* One range for all plates of the run, so that they may be laid side by side. */
static void find_ranges(maps_job *job)
{
    for (int m = 0; m < METRICS; m++) {
        job->least[m] = job->most[m] = (double)NAN;
        for (int w = 0; w < job->all->wells->count; w++) {
            double value = job->view_of_well[w] < 0 ? (double)NAN : value_of(job, w, m);
            if (isnan(value))
                continue;
            job->least[m] = isnan(job->least[m]) || value < job->least[m] ? value : job->least[m];
            job->most[m] = isnan(job->most[m]) || value > job->most[m] ? value : job->most[m];
        }
    }
}

/* ---- one map --------------------------------------------------------------------------------- */

static uf_map_frame frame_of(const uf_sheet_row *row)
{
    return row->role == UF_ROLE_CONTROL ? UF_MAP_HEAVY : row->role == UF_ROLE_POSITIVE ? UF_MAP_DOUBLE : UF_MAP_THIN;
}

/* What was done to the well; where the sheet does not say, its role; of what is no sample, at least that. */
static const char *first_word(const uf_sheet_row *row)
{
    if (*row->text[UF_SHEET_TREATMENT])
        return row->text[UF_SHEET_TREATMENT];
    return row->role == UF_ROLE_SAMPLE ? "" : uf_role_words[row->role];
}

static uf_status put_wells(const maps_job *job, uf_work *work, int v, int metric, uf_value_well *wells,
                           uf_error *error)
{
    const map_view *view = &job->views[v];
    uf_status status = UF_OK;
    memset(wells, 0, (size_t)view->vessel.wells * sizeof *wells);
    for (int k = 0; k < view->vessel.wells; k++)
        wells[k] = (uf_value_well){UF_WELL_ABSENT, (double)NAN, UF_MAP_THIN, "", ""};
    for (int w = 0; status == UF_OK && w < job->all->wells->count; w++) {
        if (job->view_of_well[w] != v)
            continue;
        const uf_sheet_row *row = plate_well_row(job->all, w);
        char *dose;
        enum { DOSE_TEXT = 48 };
        status = uf_take(work, DOSE_TEXT, 1, "a plate's map", &dose, error);
        if (status != UF_OK)
            break;
        (void)snprintf(dose, DOSE_TEXT, "%.20s%s%.20s", row->text[UF_SHEET_DOSE],
                       *row->text[UF_SHEET_DOSE] && *row->text[UF_SHEET_DOSE_UNIT] ? " " : "",
                       *row->text[UF_SHEET_DOSE] ? row->text[UF_SHEET_DOSE_UNIT] : "");
        wells[row->well.row * view->vessel.columns + row->well.column] = (uf_value_well){
            job->all->wells->wells[w].state, value_of(job, w, metric), frame_of(row), first_word(row), dose};
    }
    return status;
}

static uf_status draw_map(const maps_job *job, uf_work *work, int v, int metric, uf_error *error)
{
    const map_view *view = &job->views[v];
    uf_text title = {0};
    uf_value_well *wells;
    uf_indexed picture;
    put_view(job, view, ", ", " min", &title);
    uf_status status = uf_text_check(&title, "a plate's map", error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)view->vessel.wells, sizeof *wells, "a plate's map", &wells, error);
    if (status == UF_OK)
        status = put_wells(job, work, v, metric, wells, error);
    if (status == UF_OK) {
        uf_well_map map = {.title = title.bytes,
                           .metric = metrics[metric].words,
                           .rows = view->vessel.rows,
                           .columns = view->vessel.columns,
                           .row_names = job->row_names,
                           .wells = wells,
                           .least = job->least[metric],
                           .most = job->most[metric]};
        status = uf_well_map_draw(work, &map, &picture, NULL, error);
    }
    if (status == UF_OK)
        status = plate_pictures_write(job->all, "maps", view->names[metric], &picture, error);
    uf_text_free(&title);
    return status;
}

static void map_task(void *context, int hand, int index)
{
    maps_job *job = context;
    uf_work *work = &job->all->works[hand];
    uf_error error;
    if (plate_pictures_failed(job->all))
        return;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = draw_map(job, work, index / METRICS, index % METRICS, &error);
    uf_arena_back(&work->arena, mark);
    if (status != UF_OK)
        plate_pictures_note(job->all, status, &error);
}

uf_status plate_maps(plate_pictures *all, uf_error *error)
{
    maps_job job = {.all = all};
    for (int r = 0; r < UF_MOST_ROWS; r++) {
        uf_well_name(job.row_letters[r], (uf_well){r, 0});
        job.row_letters[r][strlen(job.row_letters[r]) - 2] = '\0';
        job.row_names[r] = job.row_letters[r];
    }
    uf_status status = sort_into_views(&job, error);
    if (status == UF_OK)
        status = name_maps(&job, error);
    if (status == UF_OK) {
        find_columns(&job);
        find_ranges(&job);
        uf_pool_run(all->pool, job.view_count * METRICS, map_task, &job);
    }
    uf_arena_free(&job.work.arena);
    if (status == UF_OK && all->status != UF_OK && error)
        *error = all->error;
    return status == UF_OK ? all->status : status;
}
