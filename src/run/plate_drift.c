/* SPDX-License-Identifier: GPL-3.0-or-later */
/* drift.png: what may change while a plate is imaged, against the time each field was taken. */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "report/plot.h"
#include "run/plate_pictures_parts.h"
#include "sheet/time.h"

enum { WIDTH = 1280, HEIGHT = 720, COLUMNS = 3, MOST_NAMES = 6, NAME_TEXT = 48 };

/* Which of a fact's numbers. */
static const struct {
    const char *title, *words;
    size_t offset;
    double from;
} panels[] = {
    {"Near focus", "near_focus (about 0.6 in focus)", offsetof(plate_fact, near_focus), 0},
    {"Near background", "near_background_adu (ADU)", offsetof(plate_fact, near_background_adu), (double)NAN},
    {"Cells a field", "cells", 0, 0},
    {"Wide focus", "wide_focus (about 0.45 in focus)", offsetof(plate_fact, wide_focus), 0},
    {"Wide background", "wide_background_adu (ADU)", offsetof(plate_fact, wide_background_adu), (double)NAN},
};
enum { FACTS = sizeof panels / sizeof *panels, CELLS = 2 };

typedef struct drift_job {
    plate_pictures *all;
    uf_work work;
    int rows, plates, has_reference;
    const char **plate;  /* names, in the order of the plan */
    int *plate_of_group; /* into `plate` */
    int *plate_of_row;
    double *x, most_x; /* of each row */
    char x_words[160], more[NAME_TEXT], (*names)[NAME_TEXT];
} drift_job;

/* ---- where points lie ------------------------------------------------------------------------ */

static int all_have_times(const drift_job *job, double *first)
{
    *first = (double)NAN;
    for (int k = 0; k < job->rows; k++) {
        double seconds = uf_time_seconds(job->all->plan->rows[k].row->text[UF_SHEET_ACQUIRED]);
        if (isnan(seconds))
            return 0;
        *first = isnan(*first) || seconds < *first ? seconds : *first;
    }
    return job->rows > 0;
}

static void put_times(drift_job *job, double first)
{
    const char *first_text = "", *unit = "min";
    double seconds_a_unit = 60;
    job->most_x = 0;
    for (int k = 0; k < job->rows; k++) {
        const char *text = job->all->plan->rows[k].row->text[UF_SHEET_ACQUIRED];
        job->x[k] = uf_time_seconds(text) - first;
        job->most_x = fmax(job->most_x, job->x[k]);
        if (job->x[k] == 0 && !*first_text)
            first_text = text;
    }
    if (job->most_x > 3 * 3600) {
        unit = "h";
        seconds_a_unit = 3600;
    }
    if (job->most_x > 5 * 86400.0) {
        unit = "days";
        seconds_a_unit = 86400;
    }
    for (int k = 0; k < job->rows; k++)
        job->x[k] /= seconds_a_unit;
    job->most_x /= seconds_a_unit;
    (void)snprintf(job->x_words, sizeof job->x_words, "acquired, %s after %.40s", unit, first_text);
}

static void put_places(drift_job *job)
{
    double first;
    if (all_have_times(job, &first)) {
        put_times(job, first);
        return;
    }
    for (int k = 0; k < job->rows; k++)
        job->x[k] = k + 1;
    job->most_x = job->rows;
    (void)snprintf(job->x_words, sizeof job->x_words, "row of the sheet (not every field says when it was acquired)");
}

/* ---- plates ---------------------------------------------------------------------------------- */

static void find_plates(drift_job *job)
{
    const uf_plate_plan *plan = job->all->plan;
    for (int g = 0; g < plan->group_count; g++) {
        int p = 0;
        while (p < job->plates && strcmp(job->plate[p], plan->groups[g].plate) != 0)
            p++;
        if (p == job->plates)
            job->plate[job->plates++] = plan->groups[g].plate;
        job->plate_of_group[g] = p;
        job->has_reference |= plan->groups[g].estimated;
    }
    for (int k = 0; k < job->rows; k++)
        job->plate_of_row[k] = job->plate_of_group[plan->rows[k].group];
}

static void name_plates(drift_job *job)
{
    for (int p = 0; p < job->plates; p++)
        (void)snprintf(job->names[p], NAME_TEXT, "%.40s", *job->plate[p] ? job->plate[p] : "fields");
    if (job->plates > MOST_NAMES)
        (void)snprintf(job->names[MOST_NAMES], NAME_TEXT, "and %d more plates", job->plates - MOST_NAMES);
}

/* Three inks and four marks, each plate the next of both: twelve plates differ. The amber is kept for flags. */
static uf_plot_series plate_series(const drift_job *job, int p, int is_named)
{
    static const uf_plot_ink inks[] = {UF_PLOT_BLUE, UF_PLOT_DARK, UF_PLOT_PINE};
    static const uf_plot_mark marks[] = {UF_MARK_DISC, UF_MARK_SQUARE, UF_MARK_DIAMOND, UF_MARK_TRIANGLE};
    return (uf_plot_series){
        .name = is_named && p <= MOST_NAMES ? job->names[p] : NULL, .ink = inks[p % 3], .mark = marks[p % 4]};
}

/* ---- panels ---------------------------------------------------------------------------------- */

static double fact_value(const drift_job *job, int row, int panel)
{
    const plate_fact *fact = &job->all->facts[row];
    if (fact->status == UF_FIELD_FAILED)
        return (double)NAN;
    if (panel == CELLS)
        return fact->cells;
    return *(const double *)(const void *)((const char *)fact + panels[panel].offset);
}

static uf_status take_points(drift_job *job, int count, double **x, double **y, uf_error *error)
{
    uf_status status = uf_take(&job->work, (size_t)count + 1, sizeof **x, "a plot", x, error);
    return status == UF_OK ? uf_take(&job->work, (size_t)count + 1, sizeof **y, "a plot", y, error) : status;
}

/* Points of one plate (all when p is -1), only those flagged if asked. */
static uf_status fill_series(drift_job *job, int panel, int p, int only_flagged, uf_plot_series *series,
                             uf_error *error)
{
    double *x, *y;
    int wanted = 0;
    for (int pass = 0; pass < 2; pass++) {
        series->count = wanted;
        if (pass) {
            uf_status status = take_points(job, wanted, &x, &y, error);
            if (status != UF_OK)
                return status;
            series->x = x;
            series->y = y;
        }
        wanted = 0;
        for (int k = 0; k < job->rows; k++) {
            if ((p >= 0 && job->plate_of_row[k] != p) ||
                (only_flagged && job->all->facts[k].status != UF_FIELD_FLAGGED))
                continue;
            if (pass) {
                x[wanted] = job->x[k];
                y[wanted] = fact_value(job, k, panel);
            }
            wanted++;
        }
    }
    return UF_OK;
}

/* A range that is never narrower than a tenth of the mean to both sides: differences that do not matter must not look as if they
 * did. */
static uf_status hold_range(drift_job *job, double sum, int count, uf_plot_series *series, uf_error *error)
{
    double *x, *y;
    uf_status status = take_points(job, 2, &x, &y, error);
    *series = (uf_plot_series){0};
    if (status != UF_OK || !count)
        return status;
    x[0] = x[1] = 0;
    y[0] = 0.9 * sum / count;
    y[1] = 1.1 * sum / count;
    *series = (uf_plot_series){.count = 2, .x = x, .y = y};
    return UF_OK;
}

static uf_status hold_facts(drift_job *job, int panel, uf_plot_series *series, uf_error *error)
{
    double sum = 0;
    int count = 0;
    for (int k = 0; isnan(panels[panel].from) && k < job->rows; k++) {
        double value = fact_value(job, k, panel);
        sum += isnan(value) ? 0 : value;
        count += !isnan(value);
    }
    return hold_range(job, sum, count, series, error);
}

static uf_status fill_panel(drift_job *job, int panel, uf_plot_series *series, uf_error *error)
{
    uf_status status = UF_OK;
    for (int p = 0; status == UF_OK && p < job->plates; p++) {
        series[p] = plate_series(job, p, panel == 0);
        status = fill_series(job, panel, p, 0, &series[p], error);
    }
    series[job->plates] =
        (uf_plot_series){.name = panel == 0 ? "flagged" : NULL, .ink = UF_PLOT_AMBER, .mark = UF_MARK_AROUND};
    if (status == UF_OK)
        status = fill_series(job, panel, -1, 1, &series[job->plates], error);
    return status == UF_OK ? hold_facts(job, panel, &series[job->plates + 1], error) : status;
}

/* Middle of the fields of a plate and session. */
static double group_x(const drift_job *job, int group)
{
    double sum = 0;
    int count = 0;
    for (int k = 0; k < job->rows; k++)
        if (job->all->plan->rows[k].group == group) {
            sum += job->x[k];
            count++;
        }
    return count ? sum / count : (double)NAN;
}

/* One point a session, with 1 sd. */
static uf_status fill_references(drift_job *job, uf_plot_series *series, uf_error *error)
{
    const uf_plate_plan *plan = job->all->plan;
    double sum = 0;
    int count = 0;
    for (int p = 0; p < job->plates; p++) {
        double *x, *y, *low, *high;
        uf_status status = take_points(job, plan->group_count, &x, &y, error);
        if (status == UF_OK)
            status = take_points(job, plan->group_count, &low, &high, error);
        if (status != UF_OK)
            return status;
        series[p] = plate_series(job, p, 0);
        series[p].x = x;
        series[p].y = y;
        series[p].low = low;
        series[p].high = high;
        series[p].spread = UF_SPREAD_BARS;
        for (int g = 0; g < plan->group_count; g++) {
            const uf_plate_group *group = &plan->groups[g];
            if (job->plate_of_group[g] != p || !group->estimated)
                continue;
            int n = series[p].count++;
            x[n] = group_x(job, g);
            y[n] = group->pool.ratio;
            low[n] = y[n] - group->pool.ratio_sd;
            high[n] = y[n] + group->pool.ratio_sd;
            sum += y[n];
            count++;
        }
    }
    series[job->plates] = (uf_plot_series){0};
    return hold_range(job, sum, count, &series[job->plates + 1], error);
}

static uf_status draw_drift(drift_job *job, uf_indexed *picture, uf_error *error)
{
    uf_plot_panel drawn[FACTS + 1];
    int count = FACTS + job->has_reference;
    double margin = job->most_x > 0 ? 0.03 * job->most_x : 1;
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < count; k++) {
        uf_plot_series *series;
        int is_reference = k == FACTS;
        status = uf_take(&job->work, (size_t)job->plates + 2, sizeof *series, "a plot", &series, error);
        if (status == UF_OK)
            status = is_reference ? fill_references(job, series, error) : fill_panel(job, k, series, error);
        drawn[k] = (uf_plot_panel){.title = is_reference ? "Reference" : panels[k].title,
                                   .x = {job->x_words, -margin, job->most_x + margin, 0},
                                   .y = {is_reference ? "reference ratio at gap 0, 1 sd" : panels[k].words,
                                         is_reference ? (double)NAN : panels[k].from, (double)NAN, 0},
                                   .series = series,
                                   .series_count = job->plates + 2};
    }
    if (status == UF_OK)
        status = uf_plot_rows(&job->work, drawn, count, COLUMNS, WIDTH, HEIGHT, picture, NULL, error);
    return status;
}

uf_status plate_drift(plate_pictures *all, uf_error *error)
{
    drift_job job = {.all = all, .rows = all->plan->sheet.count};
    size_t groups = (size_t)all->plan->group_count + 2, rows = (size_t)job.rows + 1;
    uf_indexed picture;
    uf_status status = uf_take(&job.work, groups, sizeof *job.plate, "a plot", &job.plate, error);
    if (status == UF_OK)
        status = uf_take(&job.work, groups, sizeof *job.plate_of_group, "a plot", &job.plate_of_group, error);
    if (status == UF_OK)
        status = uf_take(&job.work, groups, sizeof *job.names, "a plot", &job.names, error);
    if (status == UF_OK)
        status = uf_take(&job.work, rows, sizeof *job.plate_of_row, "a plot", &job.plate_of_row, error);
    if (status == UF_OK)
        status = uf_take(&job.work, rows, sizeof *job.x, "a plot", &job.x, error);
    if (status == UF_OK) {
        find_plates(&job);
        name_plates(&job);
        put_places(&job);
        status = draw_drift(&job, &picture, error);
    }
    if (status == UF_OK)
        status = plate_pictures_write(all, NULL, "drift", &picture, error);
    uf_arena_free(&job.work.arena);
    return status;
}
