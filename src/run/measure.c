/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `measure`: two image files in, tables and pictures out. */
#include <math.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "fit/robust.h"
#include "io/csv.h"
#include "io/output.h"
#include "run/field_pictures.h"
#include "run/field_read.h"
#include "run/field_warnings.h"
#include "run/plan.h"
#include "run/run_json.h"

typedef struct measure_job {
    const uf_settings *settings;
    const uf_measure_request *request;
    uf_work work;
    uf_plan plan;
    uf_field_result result;
    uf_reader reader;
    uf_text warnings;
    uf_text name; /* of this field's pictures, without ending */
    uf_output output;
    char overlay_name[300];
} measure_job;

/* ---- writing --------------------------------------------------------------------------------- */

static uf_status write_text(measure_job *job, const char *folder, const char *name, const uf_text *text,
                            uf_error *error)
{
    uf_status status = uf_text_check(text, name, error);
    return status == UF_OK ? uf_output_write(&job->output, folder, name, text->bytes, text->length, error) : status;
}

static uf_status write_tables(measure_job *job, uf_error *error)
{
    const char *id = job->result.field.field_id;
    uf_text cells = {0}, spots = {0}, fields = {0};
    uf_csv_header(&cells, &uf_table_cells);
    for (int k = 0; k < job->result.cells.labels.count; k++)
        uf_csv_row(&cells, &uf_table_cells, id, &job->result.rows[k]);
    uf_csv_header(&spots, &uf_table_spots);
    for (int k = 0; k < job->result.field.spots; k++)
        uf_csv_row(&spots, &uf_table_spots, id, &job->result.spots[k]);
    uf_csv_header(&fields, &uf_table_fields);
    uf_csv_row(&fields, &uf_table_fields, id, &job->result.field);
    uf_status status = write_text(job, NULL, "cells.csv", &cells, error);
    if (status == UF_OK)
        status = write_text(job, NULL, "spots.csv", &spots, error);
    if (status == UF_OK)
        status = write_text(job, NULL, "fields.csv", &fields, error);
    uf_text_free(&cells);
    uf_text_free(&spots);
    uf_text_free(&fields);
    return status;
}

static uf_status put_picture(void *context, const char *folder, const char *name, const uf_text *bytes,
                             uf_error *error)
{
    measure_job *job = context;
    return bytes ? uf_output_write(&job->output, folder, name, bytes->bytes, bytes->length, error)
                 : uf_output_remove(&job->output, folder, name, error);
}

static uf_status write_pictures(measure_job *job, uf_error *error)
{
    uf_pictures pictures = {.work = &job->work,
                            .settings = job->settings,
                            .plan = &job->plan,
                            .result = &job->result,
                            .key = job->name.bytes,
                            .title = uf_base_name(job->request->near_path),
                            .put = put_picture,
                            .context = job};
    uf_status status = uf_pictures_write(&pictures, error);
    (void)snprintf(job->overlay_name, sizeof job->overlay_name, "%s", pictures.overlay_name);
    return status;
}

/* A folder holds one field: another one's tables would be replaced and its pictures left, which looks like one result. */
static uf_status check_folder(measure_job *job, uf_error *error)
{
    uf_text fields = {0}, plan = {0}, line = {0};
    uf_text_add(&line, "\n");
    uf_csv_field(&line, job->request->near_path);
    uf_text_add(&line, ",");
    uf_status status = uf_output_read(&job->output, NULL, "fields.csv", &fields, error);
    if (status == UF_OK)
        status = uf_output_read(&job->output, NULL, "plan.json", &plan, error);
    if (status == UF_OK)
        status = uf_text_check(&line, "a name", error);
    if (status == UF_OK && (plan.length || (fields.length && !strstr(fields.bytes, line.bytes))))
        status = uf_fail(error, UF_USAGE,
                         "%s: holds the results of %s; give each field a folder of its own, or measure many by "
                         "underfoot plate",
                         job->request->out_dir, plan.length ? "a plate" : "another field");
    uf_text_free(&fields);
    uf_text_free(&plan);
    uf_text_free(&line);
    return status;
}

static uf_status name_field(measure_job *job, uf_error *error)
{
    uf_picture_key(&job->name, job->request->near_path);
    return uf_text_check(&job->name, "file names", error);
}

static uf_status write_story(measure_job *job, double seconds, uf_error *error)
{
    uf_text json = {0};
    uf_run_story story = {job->settings,
                          &job->plan,
                          job->reader.inputs,
                          job->reader.count,
                          job->warnings.bytes ? job->warnings.bytes : "",
                          job->request->command,
                          seconds};
    uf_status status = uf_run_json(&json, &story, error);
    if (status == UF_OK)
        status = write_text(job, NULL, "run.json", &json, error);
    uf_text_free(&json);
    return status;
}

/* ---- summary --------------------------------------------------------------------------------- */

static double median_of(const measure_job *job, size_t member, double *scratch)
{
    size_t count = 0;
    for (int k = 0; k < job->result.cells.labels.count; k++) {
        const uf_cell *row = &job->result.rows[k];
        double value = *(const double *)(const void *)((const char *)row + member);
        if (row->used && !isnan(value))
            scratch[count++] = value;
    }
    return uf_median(scratch, count);
}

static void put_field_flags(uf_flags flags, char *lines, size_t size)
{
    size_t at = 0;
    for (int k = 0; k < UF_FLAG_COUNT; k++)
        if (flags >> k & 1u && at < size)
            at += (size_t)snprintf(lines + at, size - at, "%s: %s\n", uf_flag_word((uf_flag)k),
                                   uf_flag_advice((uf_flag)k));
}

static uf_status summarise(measure_job *job, uf_measure_summary *summary, uf_error *error)
{
    double *scratch;
    int cells = job->result.cells.labels.count;
    uf_status status = uf_take(&job->work, (size_t)cells + 1, sizeof *scratch, "the summary", &scratch, error);
    if (status != UF_OK)
        return status;
    summary->cells = cells;
    summary->spots = job->result.field.spots;
    for (int k = 0; k < cells; k++) {
        const uf_cell *row = &job->result.rows[k];
        summary->cells_used += row->used;
        summary->cells_attached +=
            row->used && row->attachment_fraction >= job->settings->contact.attached_threshold; /* NaN: no */
    }
    summary->spread_area_median_um2 = median_of(job, offsetof(uf_cell, spread_area_um2), scratch);
    summary->contact_area_median_um2 = median_of(job, offsetof(uf_cell, contact_area_um2), scratch);
    summary->attachment_fraction_median = median_of(job, offsetof(uf_cell, attachment_fraction), scratch);
    summary->gap_median_nm = median_of(job, offsetof(uf_cell, gap_median_nm), scratch);
    summary->depth_nm = job->plan.depth_nm;
    put_field_flags(job->result.field.flags, summary->flags, sizeof summary->flags);
    (void)snprintf(summary->overlay, sizeof summary->overlay, "%s", job->overlay_name);
    (void)snprintf(summary->warnings, sizeof summary->warnings, "%s", job->warnings.bytes ? job->warnings.bytes : "");
    return UF_OK;
}

/* ---- all of it ------------------------------------------------------------------------------- */

static double now_seconds(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + (double)t.tv_nsec * 1e-9;
}

static uf_status measure_and_write(measure_job *job, double started, uf_measure_summary *summary, uf_error *error)
{
    uf_field_files files = {.near_path = job->request->near_path,
                            .wide_path = job->request->wide_path,
                            .mask_path = job->request->mask_path,
                            .nuclei_path = job->request->nuclei_path};
    uf_status status = uf_field_read(&job->reader, &files, &job->plan, &job->result, error);
    if (status == UF_OK)
        status = name_field(job, error);
    if (status == UF_OK)
        status = uf_output_open(&job->output, job->request->out_dir, error);
    if (status == UF_OK)
        status = check_folder(job, error);
    if (status == UF_OK)
        status = uf_field_run(&job->work, &job->plan, job->settings, &job->result, error);
    if (status != UF_OK)
        return status;
    job->result.field.field_id = job->request->near_path;
    uf_field_warn(&job->warnings, job->settings, &job->plan, &job->result);
    /* run.json goes last: where it stands, the rest stands too. An older one must not vouch for new tables. */
    status = uf_output_remove(&job->output, NULL, "run.json", error);
    if (status == UF_OK)
        status = write_pictures(job, error);
    if (status == UF_OK)
        status = write_tables(job, error);
    if (status == UF_OK)
        status = summarise(job, summary, error);
    summary->seconds = now_seconds() - started;
    return status == UF_OK ? write_story(job, summary->seconds, error) : status;
}

uf_status uf_measure(const uf_settings *settings, const uf_measure_request *request, uf_measure_summary *summary,
                     uf_error *error)
{
    measure_job job = {.settings = settings, .request = request, .reader.settings = settings};
    job.reader.work = &job.work;
    double started = now_seconds();
    *summary = (uf_measure_summary){0};
    uf_status status = uf_pool_new(&job.work.pool, request->threads, error);
    if (status == UF_OK)
        status = measure_and_write(&job, started, summary, error);
    uf_reader_free(&job.reader);
    uf_field_result_free(&job.result);
    uf_output_close(&job.output);
    uf_text_free(&job.warnings);
    uf_text_free(&job.name);
    uf_pool_free(&job.work.pool);
    uf_arena_free(&job.work.arena);
    return status;
}
