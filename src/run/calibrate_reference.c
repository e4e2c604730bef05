/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/calibrate_reference.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "fit/robust.h"
#include "io/output.h"
#include "optics/decay.h"
#include "run/calibrate_reference_parts.h"
#include "run/field_read.h"
#include "run/row_settings.h"
#include "run/sheet_read.h"

/* Film: light above the background must exceed this many sigma of a block's noise to be a film at all. */
static const double least_film_adu = 20;
enum { LEAST_CELLS = 3 };

typedef struct reference_job {
    const uf_reference_request *request;
    uf_work work;
    uf_reader reader;
    uf_reference_findings findings;
} reference_job;

/* ---- one field ----------------------------------------------------------------------------------- */

/* Which flats the field was corrected by, as fingerprints. */
static void note_flats(const uf_reader *reader, uf_reference_group *group)
{
    static const char *const roles[] = {"near flat", "wide flat"};
    for (int k = 0; k < UF_CHANNELS; k++) {
        (void)snprintf(group->flat[k], sizeof group->flat[k], "none");
        for (int j = 0; j < reader->count; j++)
            if (strcmp(reader->inputs[j].role, roles[k]) == 0)
                (void)snprintf(group->flat[k], sizeof group->flat[k], "%016llx",
                               (unsigned long long)reader->inputs[j].fingerprint);
    }
}

/* What shines without a film, above offset or dark; a plane without data where there is no blank image. */
static uf_status read_blank(reference_job *job, uf_channel_name which, const char *path, uf_plane like,
                            uf_plane *blank, uf_error *error)
{
    uf_channel channel;
    double pixel_um;
    *blank = (uf_plane){0};
    if (!path)
        return UF_OK;
    uf_status status = uf_read_channel(&job->reader, which, path, 0, &channel, 1, &pixel_um, error);
    if (status == UF_OK && (channel.image.width != like.width || channel.image.height != like.height))
        status = uf_fail(error, UF_INPUT, "%s: the blank image is %d x %d px, the film's are %d x %d", path,
                         channel.image.width, channel.image.height, like.width, like.height);
    *blank = channel.image;
    return status;
}

static uf_status measure_film(reference_job *job, const uf_field_files *files, uf_reference_group *group,
                              uf_reference_unit *unit, uf_error *error)
{
    uf_channel near, wide;
    uf_film_ratio film;
    uf_plane near_blank, wide_blank;
    double pixel_um;
    uf_status status = uf_read_channel(&job->reader, UF_NEAR, files->near_path, 0, &near, 1, &pixel_um, error);
    if (status == UF_OK)
        status = uf_read_channel(&job->reader, UF_WIDE, files->wide_path, 0, &wide, 1, &pixel_um, error);
    if (status == UF_OK && (near.image.width != wide.image.width || near.image.height != wide.image.height))
        status =
            uf_fail(error, UF_INPUT, "%s is %d x %d px, but %s is %d x %d; the two images must have the same size",
                    files->near_path, near.image.width, near.image.height, files->wide_path, wide.image.width,
                    wide.image.height);
    if (status == UF_OK)
        status = read_blank(job, UF_NEAR, job->request->blank_near, near.image, &near_blank, error);
    if (status == UF_OK)
        status = read_blank(job, UF_WIDE, job->request->blank_wide, near.image, &wide_blank, error);
    if (status == UF_OK)
        status = uf_film_ratio_of(&job->work, near.image, wide.image, near.saturated, wide.saturated, near_blank,
                                  wide_blank, &film, error);
    if (status != UF_OK)
        return status;
    if (!film.blocks)
        return uf_fail(error, UF_INPUT,
                       "%s, %s: no part of the film can be used (%.0f %% of the pixels are saturated): %s",
                       files->near_path, files->wide_path, 100 * film.saturated_fraction,
                       film.saturated_fraction > 0.01 ? "expose less" : "is there light, and the right background?");
    if (film.near_adu < least_film_adu || film.wide_adu < least_film_adu)
        return uf_fail(
            error, UF_INPUT,
            "%s, %s: the film is hardly brighter than the background (near %.0f, wide %.0f ADU above it); expose "
            "longer, or check offset_adu and the blank images",
            files->near_path, files->wide_path, film.near_adu, film.wide_adu);
    *unit = (uf_reference_unit){.well = unit->well, .ratio = film.ratio, .spread = film.spread};
    group->near_adu = film.near_adu;
    group->wide_adu = film.wide_adu;
    group->saturated_fraction = fmax(group->saturated_fraction, film.saturated_fraction);
    return UF_OK;
}

static int is_good_cell(const uf_cell *row)
{
    return row->used && !(row->flags & (1u << UF_FLAG_SATURATED | 1u << UF_FLAG_MOVED)) &&
           !isnan(row->gap_core_median_nm);
}

/* The ratio of each cell's core, whatever reference it was measured with: that times the decay at the gap it was told. */
static uf_status take_cells(reference_job *job, const uf_plan *plan, const uf_field_result *r,
                            uf_reference_unit *unit, int *cells, uf_error *error)
{
    double *ln;
    size_t count = 0;
    uf_status status =
        uf_take(&job->work, (size_t)r->cells.labels.count + 1, sizeof *ln, "the reference", &ln, error);
    for (int k = 0; status == UF_OK && k < r->cells.labels.count; k++)
        if (is_good_cell(&r->rows[k]))
            ln[count++] = log(plan->reference_ratio) + uf_decay_ln(&plan->decay, r->rows[k].gap_core_median_nm);
    if (status != UF_OK)
        return status;
    double middle = uf_median(ln, count);
    unit->ratio = exp(middle);
    for (size_t k = 0; k < count; k++)
        ln[k] = fabs(ln[k] - middle);
    unit->spread = count >= LEAST_CELLS ? 1.4826 * uf_median(ln, count) : (double)NAN;
    *cells = (int)count;
    return UF_OK;
}

/* Runs the field with `ratio` standing for gap 0, or with each cell's own reference where it is NaN. */
static uf_status run_field(reference_job *job, const uf_field_files *files, const uf_settings *settings, double ratio,
                           uf_reference_unit *unit, int *cells, uf_error *error)
{
    struct uf_settings own = *settings;
    uf_plan plan;
    uf_field_result result = {0};
    uf_arena_mark mark = uf_arena_now(&job->work.arena);
    own.reference.ratio = ratio;
    own.reference.kind = UF_REFERENCE_CELL;
    own.reference.from = isnan(ratio) ? UF_FROM_CELL : UF_SETTING_NOT_GIVEN;
    own.reference.gap_nm = isnan(ratio) ? settings->reference.gap_nm : 0;
    own.reference.flat[UF_NEAR] = own.reference.flat[UF_WIDE] = NULL;
    own.reference.exposure_ms[UF_NEAR] = own.reference.exposure_ms[UF_WIDE] = (double)NAN;
    job->reader.settings = &own;
    uf_status status = uf_field_read(&job->reader, files, &plan, &result, error);
    if (status == UF_OK)
        status = uf_field_run(&job->work, &plan, &own, &result, error);
    if (status == UF_OK && isnan(ratio)) {
        unit->ratio = result.cells.labels.count ? result.reference_ratio : (double)NAN;
        unit->spread = (double)NAN;
        *cells = result.cells.labels.count;
    } else if (status == UF_OK)
        status = take_cells(job, &plan, &result, unit, cells, error);
    uf_field_result_free(&result);
    uf_arena_back(&job->work.arena, mark);
    job->reader.settings = settings;
    return status;
}

/* Twice: the first ratio is a guess, and a guess far off loses digits where the decay is continued beyond its table. */
static uf_status measure_cells(reference_job *job, const uf_field_files *files, const uf_settings *settings,
                               uf_reference_unit *unit, int *cells, uf_error *error)
{
    uf_status status = run_field(job, files, settings, 1, unit, cells, error);
    if (status == UF_OK && *cells && unit->ratio > 0)
        status = run_field(job, files, settings, unit->ratio, unit, cells, error);
    if (status == UF_OK && !*cells)
        status =
            uf_fail(error, UF_INPUT, "%s, %s: no cell in it can be used (whole, not saturated); see it with measure",
                    files->near_path, files->wide_path);
    return status;
}

/* ---- pairs --------------------------------------------------------------------------------------- */

static uf_status take_group(reference_job *job, int units, uf_reference_group **group, uf_error *error)
{
    uf_reference_findings *f = &job->findings;
    if (f->group_count == UF_REFERENCE_GROUPS)
        return uf_fail(error, UF_INPUT, "more than %d plates and sessions in one sheet", UF_REFERENCE_GROUPS);
    *group = &f->groups[f->group_count];
    **group = (uf_reference_group){.plate = "", .session = "", .exposure_ms = {(double)NAN, (double)NAN}};
    uf_status status =
        uf_take(&job->work, (size_t)units, sizeof(uf_reference_unit), "the reference", &(*group)->units, error);
    if (status == UF_OK)
        f->group_count++;
    return status;
}

static uf_status measure_pairs(reference_job *job, uf_error *error)
{
    const uf_calibration_request *c = &job->request->common;
    uf_reference_group *group = NULL;
    if (c->image_count < 2 || c->image_count % 2 || c->image_count / 2 > UF_REFERENCE_WELLS)
        return uf_fail(
            error, UF_USAGE,
            "calibrate reference needs images in pairs, near and wide: underfoot calibrate reference NEAR WIDE "
            "--kind film --gap-nm 15 -i INSTRUMENT -o FILE.ini");
    uf_status status = take_group(job, c->image_count / 2, &group, error);
    if (status != UF_OK)
        return status;
    group->settings = c->settings;
    for (int k = 0; k < UF_CHANNELS; k++)
        group->exposure_ms[k] =
            isnan(job->request->exposure_ms[k]) ? c->settings->camera[k].exposure_ms : job->request->exposure_ms[k];
    for (int k = 0; status == UF_OK && k < c->image_count / 2; k++) {
        uf_field_files files = {.near_path = c->images[2 * k], .wide_path = c->images[2 * k + 1]};
        uf_reference_unit *unit = &group->units[group->unit_count++];
        uf_arena_mark mark = uf_arena_now(&job->work.arena);
        int cells = 0;
        unit->well = k;
        group->well_names[group->well_count++] = c->images[2 * k];
        status = job->findings.is_film ? measure_film(job, &files, group, unit, error)
                                       : measure_cells(job, &files, c->settings, unit, &cells, error);
        group->cells += cells;
        uf_arena_back(&job->work.arena, mark);
    }
    note_flats(&job->reader, group);
    if (status == UF_OK && !job->findings.is_film && group->cells < LEAST_CELLS)
        return uf_fail(error, UF_INPUT, "%d cells are too few to stand for a gap; expected at least %d, better 20",
                       group->cells, LEAST_CELLS);
    return status;
}

/* ---- a sheet --------------------------------------------------------------------------------------- */

static int rows_with_role(const uf_sheet *sheet, uf_role role)
{
    int count = 0;
    for (int k = 0; k < sheet->count; k++)
        count += sheet->rows[k].role == role;
    return count;
}

static uf_status find_group(reference_job *job, const uf_sheet *sheet, const uf_sheet_row *row,
                            uf_reference_group **group, uf_error *error)
{
    const char *plate = row->text[UF_SHEET_PLATE], *session = row->text[UF_SHEET_SESSION];
    for (int k = 0; k < job->findings.group_count; k++) {
        *group = &job->findings.groups[k];
        if (strcmp((*group)->plate, plate) == 0 && strcmp((*group)->session, session) == 0)
            return UF_OK;
    }
    uf_status status = take_group(job, sheet->count, group, error);
    if (status == UF_OK) {
        (*group)->plate = plate;
        (*group)->session = session;
    }
    return status;
}

static uf_status find_well(uf_reference_group *group, const char *name, int *well, uf_error *error)
{
    for (*well = 0; *well < group->well_count; (*well)++)
        if (strcmp(group->well_names[*well], name) == 0)
            return UF_OK;
    if (group->well_count == UF_REFERENCE_WELLS)
        return uf_fail(error, UF_INPUT, "more than %d reference wells on one plate", UF_REFERENCE_WELLS);
    group->well_names[group->well_count++] = name;
    return UF_OK;
}

static double or_else(double value, double other)
{
    return isnan(value) ? other : value;
}

/* Counts go with exposure: fields of a group are brought to the exposures of its first. */
static void bring_to_exposures(uf_reference_group *group, const double *exposure_ms, uf_reference_unit *unit)
{
    for (int k = 0; k < UF_CHANNELS; k++) {
        if (isnan(group->exposure_ms[k]))
            group->exposure_ms[k] = exposure_ms[k];
        double factor = group->exposure_ms[k] / exposure_ms[k];
        if (!isnan(factor))
            unit->ratio *= k == UF_NEAR ? factor : 1 / factor;
    }
}

static uf_status measure_row(reference_job *job, const uf_sheet *sheet, const uf_sheet_row *row, uf_row_settings *all,
                             uf_error *error)
{
    uf_reference_group *group = NULL;
    const uf_settings *settings;
    uf_field_files files = {.near_path = row->near_path,
                            .wide_path = row->wide_path,
                            .mask_path = row->mask_path,
                            .nuclei_path = row->nuclei_path,
                            .near_page = sheet->has[UF_SHEET_NEAR_PAGE] ? row->near_page : 0,
                            .wide_page = sheet->has[UF_SHEET_WIDE_PAGE] ? row->wide_page : 0};
    uf_reference_unit unit = {0};
    int cells = 0;
    uf_status status = uf_row_settings_of(all, row->instrument_path, &settings, NULL, error);
    if (status == UF_OK)
        status = find_group(job, sheet, row, &group, error);
    if (status == UF_OK)
        status = find_well(group, row->text[UF_SHEET_WELL], &unit.well, error);
    if (status != UF_OK)
        return status;
    group->settings = settings;
    const double exposure_ms[] = {or_else(row->exposure_near_ms, settings->camera[UF_NEAR].exposure_ms),
                                  or_else(row->exposure_wide_ms, settings->camera[UF_WIDE].exposure_ms)};
    status = run_field(job, &files, settings, (double)NAN, &unit, &cells, error);
    if (status != UF_OK)
        return status;
    bring_to_exposures(group, exposure_ms, &unit);
    group->units[group->unit_count++] = unit;
    group->cells += cells;
    note_flats(&job->reader, group);
    return UF_OK;
}

static uf_status measure_rows(reference_job *job, const uf_sheet *sheet, uf_row_settings *all, uf_error *error)
{
    uf_role role = rows_with_role(sheet, UF_ROLE_REFERENCE) ? UF_ROLE_REFERENCE : UF_ROLE_CONTROL;
    uf_status status = UF_OK;
    job->findings.role = uf_role_words[role];
    if (!rows_with_role(sheet, role))
        return uf_fail(error, UF_INPUT,
                       "%s: no row has role reference or control; give the wells that stand for the gap one",
                       sheet->path);
    for (int k = 0; status == UF_OK && k < sheet->count; k++)
        if (sheet->rows[k].role == role)
            status = measure_row(job, sheet, &sheet->rows[k], all, error);
    return status;
}

/* ---- results --------------------------------------------------------------------------------------- */

static uf_status pool_groups(reference_job *job, uf_error *error)
{
    uf_reference_findings *f = &job->findings;
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < f->group_count; k++) {
        uf_reference_group *g = &f->groups[k];
        status = uf_reference_pool_units(&job->work, g->units, g->unit_count, &g->pool, error);
        if (status == UF_OK && !g->pool.wells)
            return uf_fail(error, UF_INPUT, "plate '%s', session '%s': none of the %d fields has a cell", g->plate,
                           g->session, g->unit_count);
    }
    return status;
}

static void put_fragment(const uf_reference_findings *f, const uf_reference_group *g, uf_fragment *fragment)
{
    static const char *const exposures[] = {"exposure_near_ms", "exposure_wide_ms"};
    static const char *const flats[] = {"near_flat_checksum", "wide_flat_checksum"};
    const uf_reference_request *r = f->request;
    uf_fragment_number(fragment, "reference", "ratio", g->pool.ratio, 6);
    uf_fragment_number(fragment, "reference", "ratio_sd", isnan(g->pool.ratio_sd) ? 0 : g->pool.ratio_sd, 3);
    uf_fragment_number(fragment, "reference", "gap_nm", r->sheet_path ? 0 : r->gap_nm, 6);
    uf_fragment_number(fragment, "reference", "gap_sd_nm",
                       r->sheet_path ? g->settings->reference.gap_sd_nm : r->gap_sd_nm, 6);
    uf_fragment_word(fragment, "reference", "kind", f->is_film ? "film" : "cell");
    uf_fragment_word(fragment, "reference", "gap_is", r->sheet_path ? "assumed" : "measured");
    for (int k = 0; k < UF_CHANNELS; k++) {
        if (!isnan(g->exposure_ms[k]))
            uf_fragment_number(fragment, "reference", exposures[k], g->exposure_ms[k], 6);
        uf_fragment_word(fragment, "reference", flats[k], g->flat[k]);
    }
}

static uf_status write_fragments(const reference_job *job, uf_error *error)
{
    const uf_reference_findings *f = &job->findings;
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < f->group_count; k++) {
        uf_fragment fragment;
        uf_text path = {0};
        uf_reference_path(&path, f, k, ".ini");
        status = uf_text_check(&path, "file names", error);
        uf_fragment_start(&fragment, "reference", &job->reader);
        if (f->request->sheet_path)
            uf_fragment_note(&fragment, "ratio at gap 0, from an assumed gap: gaps are relative");
        put_fragment(f, &f->groups[k], &fragment);
        if (status == UF_OK)
            status = uf_fragment_write(&fragment, path.bytes, error);
        uf_fragment_free(&fragment);
        uf_text_free(&path);
    }
    return status;
}

static uf_status write_csv(const reference_job *job, uf_error *error)
{
    uf_text path = {0}, csv = {0};
    uf_fragment_beside(&path, job->request->common.out_path, ".csv");
    uf_reference_csv(&csv, &job->findings);
    uf_status status = uf_text_check(&path, "file names", error);
    if (status == UF_OK)
        status = uf_text_check(&csv, "reference.csv", error);
    if (status == UF_OK)
        status = uf_output_file(path.bytes, csv.bytes, csv.length, error);
    uf_text_free(&path);
    uf_text_free(&csv);
    return status;
}

static uf_status report(const reference_job *job, uf_text *out, uf_error *error)
{
    uf_status status = write_csv(job, error);
    if (status == UF_OK)
        status = write_fragments(job, error);
    if (status == UF_OK && job->request->common.as_json)
        status = uf_reference_json(out, &job->findings, error);
    else if (status == UF_OK)
        uf_reference_words(out, &job->findings);
    return status == UF_OK ? uf_text_check(out, "the report", error) : status;
}

/* ---- all of it --------------------------------------------------------------------------------------- */

static uf_status check_request(const uf_reference_request *r, uf_error *error)
{
    if (r->common.plot_path)
        return uf_fail(error, UF_USAGE, "calibrate reference draws no plot; leave --plot out");
    if (r->sheet_path)
        return r->common.image_count
                   ? uf_fail(error, UF_USAGE, "calibrate reference takes a sheet or images, not both")
                   : UF_OK;
    if (isnan(r->gap_nm))
        return uf_fail(error, UF_USAGE, "calibrate reference needs the gap of the film or of the cells: --gap-nm 15");
    if (r->gap_nm > 1000 || r->gap_sd_nm > 1000)
        return uf_fail(error, UF_USAGE, "--gap-nm %.6g: expected 0 to 1000 nm", fmax(r->gap_nm, r->gap_sd_nm));
    if (!r->blank_near != !r->blank_wide)
        return uf_fail(error, UF_USAGE, "blank images come in pairs: --blank-near IMAGE --blank-wide IMAGE");
    return UF_OK;
}

/* The sheet's rows and texts are needed until the report is written. */
static uf_status run_sheet(reference_job *job, uf_text *out, uf_error *error)
{
    const uf_calibration_request *c = &job->request->common;
    uf_sheet sheet;
    uf_faults faults = {0};
    uf_row_settings all = {.instruments = c->instruments,
                           .assays = c->assays,
                           .instrument_count = c->instrument_count,
                           .assay_count = c->assay_count};
    uf_status status = uf_sheet_read(&sheet, job->request->sheet_path, NULL, &faults, error);
    if (status == UF_OK)
        status = uf_sheet_refuse(&faults, error);
    if (status == UF_OK)
        status = measure_rows(job, &sheet, &all, error);
    if (status == UF_OK)
        status = pool_groups(job, error);
    if (status == UF_OK)
        status = report(job, out, error);
    uf_faults_free(&faults);
    uf_row_settings_free(&all);
    uf_sheet_free(&sheet);
    return status;
}

static uf_status run_pairs(reference_job *job, uf_text *out, uf_error *error)
{
    uf_status status = measure_pairs(job, error);
    if (status == UF_OK)
        status = pool_groups(job, error);
    return status == UF_OK ? report(job, out, error) : status;
}

uf_status uf_calibrate_reference(const uf_reference_request *request, uf_text *out, uf_error *error)
{
    reference_job job = {
        .request = request,
        .reader.settings = request->common.settings,
        .findings = {.request = request, .is_film = !request->sheet_path && request->kind == UF_REFERENCE_FILM}};
    job.reader.work = &job.work;
    uf_status status = check_request(request, error);
    if (status == UF_OK)
        status = uf_pool_new(&job.work.pool, request->common.threads, error);
    if (status == UF_OK)
        status = uf_take(&job.work, UF_REFERENCE_GROUPS, sizeof *job.findings.groups, "the reference",
                         &job.findings.groups, error);
    if (status == UF_OK)
        status = request->sheet_path ? run_sheet(&job, out, error) : run_pairs(&job, out, error);
    uf_reader_free(&job.reader);
    uf_pool_free(&job.work.pool);
    uf_arena_free(&job.work.arena);
    return status;
}
