/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/plate_tables.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "io/csv.h"

/* ---- the sheet's columns --------------------------------------------------------------------- */

void uf_put_sheet_header(uf_text *out, const uf_sheet *sheet, uf_want_column *want)
{
    for (int c = 0; c < UF_SHEET_COLUMNS; c++)
        if (sheet->has[c] && (!want || want((uf_sheet_column)c)))
            uf_text_printf(out, "%s,", uf_sheet_columns[c].name);
    for (int c = 0; !want && c < sheet->extra_count; c++) {
        uf_csv_field(out, sheet->extra[c]);
        uf_text_add(out, ",");
    }
}

void uf_put_sheet_cells(uf_text *out, const uf_sheet *sheet, const uf_sheet_row *row, uf_want_column *want)
{
    for (int c = 0; c < UF_SHEET_COLUMNS; c++)
        if (sheet->has[c] && (!want || want((uf_sheet_column)c))) {
            uf_csv_field(out, row->text[c]);
            uf_text_add(out, ",");
        }
    for (int c = 0; !want && c < sheet->extra_count; c++) {
        uf_csv_field(out, row->extra[c]);
        uf_text_add(out, ",");
    }
}

/* ---- records --------------------------------------------------------------------------------- */

uf_status uf_plate_record_of(const uf_output *output, const uf_plate_plan *plan, int row, uf_arena *arena,
                             uf_plate_record *record, int *found, uf_error *error)
{
    const uf_plate_row *r = &plan->rows[row];
    uf_text name = {0}, bytes = {0};
    uf_text_printf(&name, "%s.record", r->key);
    uf_status status = uf_text_check(&name, "file names", error);
    if (status == UF_OK)
        status = uf_output_read(output, UF_RECORDS, name.bytes, &bytes, error);
    *found = status == UF_OK && uf_plate_record_take(&bytes, plan->hash, r->row->field_id, arena, record);
    uf_text_free(&name);
    uf_text_free(&bytes);
    return status;
}

/* ---- long tables ----------------------------------------------------------------------------- */

typedef struct tables_job {
    const uf_output *output;
    const uf_plate_plan *plan;
    uf_output_stream cells, spots, fields;
    uf_arena arena;
    uf_plate_summary *summary;
} tables_job;

/* A field that failed has no numbers, not zeros. */
static void put_failed(uf_text *out, const uf_field *field, const char *field_id)
{
    uf_text value = {0};
    uf_csv_field(out, field_id);
    for (int k = 0; k < uf_table_fields.count; k++) {
        const uf_column *column = &uf_table_fields.columns[k];
        uf_text_add(out, ",");
        if (column->kind != UF_COLUMN_STATE && column->kind != UF_COLUMN_TEXT)
            continue;
        value.length = 0;
        uf_column_value(&value, column, field);
        if (value.length)
            uf_csv_field(out, value.bytes);
    }
    uf_text_add(out, "\n");
    out->failed |= value.failed;
    uf_text_free(&value);
}

static void count(uf_plate_summary *summary, const uf_plate_record *r, const char *field_id)
{
    summary->failed += r->field.status == UF_FIELD_FAILED;
    summary->flagged += r->field.status == UF_FIELD_FLAGGED;
    summary->empty += r->field.status != UF_FIELD_FAILED && !r->field.cells;
    summary->cells += r->field.cells;
    for (int k = 0; k < r->field.cells; k++)
        summary->cells_used += r->cells[k].used;
    if (r->field.status == UF_FIELD_FAILED && summary->failure_count < UF_PLATE_FAILURES)
        (void)snprintf(summary->failures[summary->failure_count++], sizeof summary->failures[0], "%.120s: %.270s",
                       field_id, r->field.reason ? r->field.reason : "");
}

static uf_status put_field(tables_job *job, int index, uf_error *error)
{
    const uf_sheet *sheet = &job->plan->sheet;
    const uf_sheet_row *row = job->plan->rows[index].row;
    uf_plate_record r;
    int found;
    uf_arena_mark mark = uf_arena_now(&job->arena);
    uf_status status = uf_plate_record_of(job->output, job->plan, index, &job->arena, &r, &found, error);
    if (status == UF_OK && !found)
        status = uf_fail(error, UF_INPUT, "%s: its record is missing or spoilt; run the same command again",
                         row->field_id);
    if (status != UF_OK)
        return status;
    count(job->summary, &r, row->field_id);
    uf_put_sheet_cells(&job->fields.waiting, sheet, row, NULL);
    if (r.field.status == UF_FIELD_FAILED)
        put_failed(&job->fields.waiting, &r.field, row->field_id);
    else
        uf_csv_row(&job->fields.waiting, &uf_table_fields, row->field_id, &r.field);
    for (int k = 0; k < r.field.cells; k++) {
        uf_put_sheet_cells(&job->cells.waiting, sheet, row, NULL);
        uf_csv_row(&job->cells.waiting, &uf_table_cells, row->field_id, &r.cells[k]);
    }
    for (int k = 0; k < r.field.spots; k++)
        uf_csv_row(&job->spots.waiting, &uf_table_spots, row->field_id, &r.spots[k]);
    uf_arena_back(&job->arena, mark);
    status = uf_stream_flush(&job->cells, job->output, error);
    if (status == UF_OK)
        status = uf_stream_flush(&job->spots, job->output, error);
    return status == UF_OK ? uf_stream_flush(&job->fields, job->output, error) : status;
}

static uf_status put_long_tables(tables_job *job, uf_error *error)
{
    uf_status status = uf_stream_open(&job->cells, job->output, "cells.csv", error);
    if (status == UF_OK)
        status = uf_stream_open(&job->spots, job->output, "spots.csv", error);
    if (status == UF_OK)
        status = uf_stream_open(&job->fields, job->output, "fields.csv", error);
    if (status != UF_OK)
        return status;
    uf_put_sheet_header(&job->cells.waiting, &job->plan->sheet, NULL);
    uf_csv_header(&job->cells.waiting, &uf_table_cells);
    uf_csv_header(&job->spots.waiting, &uf_table_spots);
    uf_put_sheet_header(&job->fields.waiting, &job->plan->sheet, NULL);
    uf_csv_header(&job->fields.waiting, &uf_table_fields);
    for (int k = 0; status == UF_OK && k < job->plan->sheet.count; k++)
        status = put_field(job, k, error);
    if (status == UF_OK)
        status = uf_stream_finish(&job->cells, job->output, error);
    if (status == UF_OK)
        status = uf_stream_finish(&job->spots, job->output, error);
    return status == UF_OK ? uf_stream_finish(&job->fields, job->output, error) : status;
}

/* ---- references ------------------------------------------------------------------------------ */

static const char *from_word(const uf_settings *s)
{
    static const char *const words[] = {"wells", "pooled", "cell"};
    if (s->series.angles_deg.count)
        return "series";
    if (s->reference.from != UF_SETTING_NOT_GIVEN)
        return words[s->reference.from];
    return s->reference.kind == UF_REFERENCE_FILM ? "film" : "measured";
}

static void put_number(uf_text *out, double value)
{
    uf_text_number(out, value, 6);
    uf_text_add(out, ",");
}

static void put_group(uf_text *out, const uf_plate_plan *plan, const uf_plate_group *g)
{
    const uf_settings *s = plan->all.settings[g->settings];
    int measured = s->reference.from == UF_SETTING_NOT_GIVEN && !s->series.angles_deg.count;
    uf_csv_field(out, g->plate);
    uf_text_add(out, ",");
    uf_csv_field(out, g->session);
    uf_text_printf(out, ",%s,", from_word(s));
    put_number(out, g->estimated ? g->pool.ratio : measured ? s->reference.ratio : (double)NAN);
    put_number(out, g->estimated ? g->pool.ratio_sd : measured ? s->reference.ratio_sd : (double)NAN);
    put_number(out, g->estimated ? 0 : measured ? s->reference.gap_nm : (double)NAN);
    if (g->estimated)
        uf_text_printf(out, "%d,%d,%d,", g->pool.fields, g->pool.wells, g->cells);
    else
        uf_text_add(out, ",,,");
    uf_csv_field(out, g->estimated && g->pool.wells > 1 ? g->worst_well : "");
    uf_text_add(out, ",");
    uf_text_number(out, g->estimated && g->pool.wells > 1 ? g->pool.worst_change : (double)NAN, 6);
    uf_text_add(out, "\n");
}

static uf_status put_references(const uf_output *output, const uf_plate_plan *plan, uf_error *error)
{
    uf_text out = {0};
    uf_text_add(&out, "plate,session,from,ratio,ratio_sd,gap_nm,fields,wells,cells,worst_well,worst_change\n");
    for (int k = 0; k < plan->group_count; k++)
        put_group(&out, plan, &plan->groups[k]);
    uf_status status = uf_text_check(&out, "reference.csv", error);
    if (status == UF_OK)
        status = uf_output_write(output, NULL, "reference.csv", out.bytes, out.length, error);
    uf_text_free(&out);
    return status;
}

uf_status uf_plate_tables(const uf_output *output, const uf_plate_plan *plan, uf_plate_summary *summary,
                          uf_plate_well_list *wells, uf_error *error)
{
    tables_job job = {.output = output, .plan = plan, .summary = summary};
    uf_status status = put_long_tables(&job, error);
    uf_stream_drop(&job.cells);
    uf_stream_drop(&job.spots);
    uf_stream_drop(&job.fields);
    uf_arena_free(&job.arena);
    if (status == UF_OK)
        status = put_references(output, plan, error);
    return status == UF_OK ? uf_plate_wells(output, plan, summary, wells, error) : status;
}
