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
#include "run/plan.h"
#include "run/run_json.h"
#include "run/series_plan.h"

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

/* ---- warnings -------------------------------------------------------------------------------- */

static void warn_optics(measure_job *job)
{
    const uf_plan *plan = &job->plan;
    if (uf_bench_leaks_into_cell(&plan->bench))
        uf_text_printf(
            &job->warnings,
            "n sin(angle) %.4f does not exceed cell_n + 2 sd (%.3f): light may pass into the cell where it "
            "touches; a steeper angle avoids it\n",
            plan->bench.na_effective, plan->bench.cell_n + 2 * plan->bench.cell_n_sd);
    if (plan->series.count && plan->series.farthest_nm < UF_SERIES_FARTHEST_NM)
        uf_text_printf(
            &job->warnings,
            "with this stray light the series cannot tell gaps beyond %.0f nm from closer ones; places darker "
            "than that are left unresolved\n",
            plan->series.farthest_nm);
    if (fabs(plan->layered_effect_nm) > 3)
        uf_text_printf(
            &job->warnings,
            "a layered model reads the %.4g nm cutoff %+.1f nm differently from the exponential in force; %s\n",
            job->settings->contact.cutoff_nm, -plan->layered_effect_nm,
            plan->series.count ? "a series shows the full difference: use model = layered"
                               : "the two agree best around n sin(angle) 1.44");
}

static void warn_settings(measure_job *job)
{
    for (int k = 0; k < UF_CHANNELS; k++) {
        if (isnan(job->settings->camera[k].gain_e_per_adu))
            uf_text_printf(
                &job->warnings,
                "no gain_e_per_adu in [%s.camera]: noise and detection limit are estimated from the image\n",
                uf_channel_names[k]);
        if (!job->settings->flat[k].file)
            uf_text_printf(&job->warnings, "no [%s.flat]: uneven light goes into the gaps\n", uf_channel_names[k]);
    }
}

static void warn_exposures(measure_job *job)
{
    const uf_settings *s = job->settings;
    for (int k = 0; k < UF_CHANNELS; k++) {
        double now = s->camera[k].exposure_ms, then = s->reference.exposure_ms[k];
        if (!isnan(then) && isnan(now))
            uf_text_printf(
                &job->warnings,
                "the reference's %s image was exposed for %.6g ms; this run's exposure is not told (exposure_ms in "
                "[%s.camera]) and taken to be the same\n",
                uf_channel_names[k], then, uf_channel_names[k]);
        else if (now < then || now > then)
            uf_text_printf(&job->warnings,
                           "%s exposures differ: %.6g ms here, %.6g ms at the reference; its ratio is converted\n",
                           uf_channel_names[k], now, then);
    }
}

static void warn_reference(measure_job *job)
{
    const uf_plan *plan = &job->plan;
    if (plan->has_gap && !plan->reference_from_cell && !plan->series.count)
        warn_exposures(job);
    if (!plan->has_gap)
        uf_text_printf(&job->warnings,
                       "an adhesion protein's light tells no gap: gap columns are empty, spots are told by "
                       "near contrast%s\n",
                       isnan(job->settings->contact.near_threshold_adu)
                           ? ", and contact is not reported without near_threshold_adu in [contact]"
                           : ", contact by near_threshold_adu");
    else if (plan->is_relative)
        uf_text_printf(&job->warnings,
                       "gaps are relative%s: compare them within this bench and label, not with measured distances\n",
                       plan->reference_from_cell
                           ? " to each cell's own closest part, so that a cell lifted as a whole does "
                             "not show"
                           : "");
}

static void warn_field(measure_job *job)
{
    const uf_field *field = &job->result.field;
    if (field->flags >> UF_FLAG_DISPLAY_SCALED & 1u)
        uf_text_add(&job->warnings,
                    "the images look contrast-stretched to 8 bits: their ratios mean nothing; save the "
                    "camera's own counts\n");
    if (field->flags >> UF_FLAG_SHIFT_UNSURE & 1u)
        uf_text_add(&job->warnings, "the shift between near and wide could not be found with confidence; the bench's "
                                    "value was used\n");
    if (field->flags >> UF_FLAG_SHIFT_DIFFERS & 1u)
        uf_text_add(&job->warnings,
                    "this field's own shift differs from the bench's by more than a pixel; check [shift] "
                    "or set estimate = yes\n");
    if (field->flags >> UF_FLAG_SERIES_MISFIT & 1u)
        uf_text_printf(
            &job->warnings,
            "the pages of the series do not obey the field in force (median reduced chi-square %.1f): check "
            "angles_deg, power and the indices, and whether the cells moved or bleached between pages\n",
            field->series_chi_square);
    if (field->flags >> UF_FLAG_EMPTY & 1u)
        uf_text_add(&job->warnings, "no cells were found\n");
}

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
        status = uf_field_run(&job->work, &job->plan, job->settings, &job->result, error);
    if (status != UF_OK)
        return status;
    job->result.field.field_id = job->request->near_path;
    warn_optics(job);
    warn_settings(job);
    warn_reference(job);
    warn_field(job);
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
