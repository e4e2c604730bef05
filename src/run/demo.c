/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Writes one of the demo's experiments. Fields are made at once, each by one hand with an arena of its own; what they
 * say for the tables of truth is kept until all are done, and written in order.
 */
#include "run/demo.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "io/image_encode.h"
#include "io/output.h"
#include "run/demo_bench.h"
#include "run/demo_plan.h"
#include "sheet/well.h"

static const double cutoff_nm = 50; /* of the assay file below */

/* What one field leaves for the tables. */
typedef struct field_outcome {
    uf_status status;
    uf_error error;
    uf_text cells, spots; /* rows of truth */
} field_outcome;

typedef struct demo_job {
    demo_plan plan;
    uf_output output;
    uf_pool *pool;
    uf_arena *arenas; /* one a hand */
    field_outcome *outcomes;
} demo_job;

/* ---- files ----------------------------------------------------------------------------------- */

static uf_status write_text(const demo_job *job, const char *name, const uf_text *text, uf_error *error)
{
    uf_status status = uf_text_check(text, name, error);
    return status == UF_OK ? uf_output_write(&job->output, NULL, name, text->bytes, text->length, error) : status;
}

/* Writes an image that was encoded with `encoded` as its status, as NAMEWHAT.tif, and frees its bytes. */
static uf_status write_encoded(const demo_job *job, const char *name, const char *what, uf_status encoded,
                               uf_text *bytes, uf_error *error)
{
    uf_text file = {0};
    uf_text_printf(&file, "%s%s.tif", name, what);
    uf_status status = encoded == UF_OK ? uf_text_check(&file, "file names", error) : encoded;
    if (status == UF_OK)
        status = write_text(job, file.bytes, bytes, error);
    uf_text_free(bytes);
    uf_text_free(&file);
    return status;
}

typedef uf_status encoder(uf_text *out, uf_plane plane, double pixel_size_um, const char *description,
                          uf_error *error);

static uf_status write_plane(const demo_job *job, const char *name, const char *what, encoder *encode, uf_plane plane,
                             double pixel_size_um, uf_error *error)
{
    uf_text bytes = {0};
    uf_status status = encode(&bytes, plane, pixel_size_um, "simulated by underfoot demo", error);
    return write_encoded(job, name, what, status, &bytes, error);
}

static uf_status write_labels(const demo_job *job, const char *name, uf_labels labels, double pixel_size_um,
                              uf_error *error)
{
    uf_text bytes = {0};
    uf_status status = uf_encode_label_tiff(&bytes, labels, pixel_size_um, "true cells", error);
    return write_encoded(job, name, "_truth_labels", status, &bytes, error);
}

static uf_status write_images(const demo_job *job, const demo_field *field, const uf_scene *scene, uf_error *error)
{
    double um = field->scene.pixel_size_um;
    uf_status status = write_plane(job, field->name, "_near", uf_encode_count_tiff, scene->near_adu, um, error);
    if (status == UF_OK)
        status = write_plane(job, field->name, "_wide", uf_encode_count_tiff, scene->wide_adu, um, error);
    if (status == UF_OK && field->with_maps)
        status = write_plane(job, field->name, "_truth_gap", uf_encode_float_tiff, scene->gap_nm, um, error);
    if (status == UF_OK && field->with_maps)
        status = write_labels(job, field->name, scene->labels, um, error);
    return status;
}

/* ---- truth ----------------------------------------------------------------------------------- */

static void put_row(uf_text *out, const char *name, int cell, const double *values, int count)
{
    uf_text_printf(out, "%s,%d", name, cell);
    for (int k = 0; k < count; k++) {
        uf_text_add(out, ",");
        uf_text_number(out, values[k], 6);
    }
    uf_text_add(out, "\n");
}

/* True area and contact area of each cell, at the assay's cutoff. */
static void put_truth(const demo_field *field, const uf_scene *scene, field_outcome *outcome)
{
    double um2 = field->scene.pixel_size_um * field->scene.pixel_size_um;
    for (int k = 1; k <= scene->labels.count; k++) {
        double area = 0, contact = 0, x_sum = 0, y_sum = 0;
        for (int y = 0; y < scene->labels.height; y++)
            for (int x = 0; x < scene->labels.width; x++)
                if (uf_labels_row(scene->labels, y)[x] == k) {
                    area++;
                    contact += (double)uf_plane_row(scene->gap_nm, y)[x] <= cutoff_nm;
                    x_sum += x;
                    y_sum += y;
                }
        const double values[] = {x_sum / area, y_sum / area, area * um2, contact * um2};
        put_row(&outcome->cells, field->name, k, values, 4);
    }
    for (int k = 0; k < scene->spots; k++) {
        const double values[] = {(double)scene->spot_x_px[k], (double)scene->spot_y_px[k]};
        put_row(&outcome->spots, field->name, (int)scene->spot_cell[k], values, 2);
    }
}

static void make_field(void *context, int hand, int index)
{
    demo_job *job = context;
    const demo_field *field = &job->plan.fields[index];
    field_outcome *outcome = &job->outcomes[index];
    uf_work work = {.arena = job->arenas[hand]};
    uf_arena_mark mark = uf_arena_now(&work.arena);
    uf_scene scene;
    outcome->status = uf_scene_make(&work, &field->scene, &scene, &outcome->error);
    if (outcome->status == UF_OK)
        outcome->status = write_images(job, field, &scene, &outcome->error);
    if (outcome->status == UF_OK)
        put_truth(field, &scene, outcome);
    uf_arena_back(&work.arena, mark);
    job->arenas[hand] = work.arena;
}

static uf_status make_fields(demo_job *job, int threads, uf_error *error)
{
    int count = job->plan.field_count;
    job->arenas = calloc((size_t)threads, sizeof *job->arenas);
    job->outcomes = calloc((size_t)count, sizeof *job->outcomes);
    if (!job->arenas || !job->outcomes)
        return uf_fail_memory(error, "the demo");
    uf_pool_run(job->pool, count, make_field, job);
    for (int k = 0; k < count; k++)
        if (job->outcomes[k].status != UF_OK) {
            if (error)
                *error = job->outcomes[k].error;
            return job->outcomes[k].status;
        }
    return UF_OK;
}

static uf_status write_truth(const demo_job *job, uf_error *error)
{
    uf_text cells = {0}, spots = {0};
    uf_text_add(&cells, "field,cell,x_px,y_px,spread_area_um2,contact_area_um2\n");
    uf_text_add(&spots, "field,cell,x_px,y_px\n");
    for (int k = 0; k < job->plan.field_count; k++) {
        uf_text_bytes(&cells, job->outcomes[k].cells.bytes, job->outcomes[k].cells.length);
        uf_text_bytes(&spots, job->outcomes[k].spots.bytes, job->outcomes[k].spots.length);
        cells.failed |= job->outcomes[k].cells.failed;
        spots.failed |= job->outcomes[k].spots.failed;
    }
    uf_status status = write_text(job, "truth_cells.csv", &cells, error);
    if (status == UF_OK)
        status = write_text(job, "truth_spots.csv", &spots, error);
    uf_text_free(&cells);
    uf_text_free(&spots);
    return status;
}

/* ---- the bench ------------------------------------------------------------------------------- */

static void put_pair(uf_text *out, const char *key, double value)
{
    uf_text_printf(out, "%s = ", key);
    uf_text_number(out, value, 8);
    uf_text_add(out, "\n");
}

static void put_camera(uf_text *out, const demo_bench *bench, const char *channel)
{
    const uf_scene_settings *s = &bench->scene;
    uf_text_printf(out, "\n[%s.camera]\n", channel);
    put_pair(out, "offset_adu", s->offset_adu);
    put_pair(out, "gain_e_per_adu", s->gain_e_per_adu);
    put_pair(out, "read_noise_e", s->read_noise_e);
    put_pair(out, "full_scale_adu", 65535);
    uf_text_printf(out, "\n[%s.flat]\nfile = %s_flat_%s.tif\n", channel, bench->name, channel);
}

static void put_instrument(uf_text *out, const demo_bench *bench)
{
    const uf_scene_settings *s = &bench->scene;
    double ratio = s->near_peak_adu / s->wide_peak_adu;
    uf_text_add(out, "# Facts about the (simulated) bench. docs/settings.md explains every key.\n[light]\n");
    put_pair(out, "wavelength_nm", s->wavelength_nm);
    uf_text_add(out, "polarization = s\n\n[interface]\ngeometry = objective\n");
    put_pair(out, "substrate_n", s->substrate_n);
    put_pair(out, "medium_n", s->medium_n);
    put_pair(out, "cell_n", s->cell_n);
    put_pair(out, "angle_deg", s->angle_deg);
    uf_text_add(out, "angle_sd_deg = 0.2\nobjective_na = 1.49\n\n[decay]\n");
    uf_text_printf(out, "model = %s\n", s->layered ? "layered" : "exponential");
    if (s->scattered_fraction > 0) {
        put_pair(out, "scattered_fraction", s->scattered_fraction);
        put_pair(out, "scattered_depth_nm", s->scattered_depth_nm);
    }
    uf_text_add(out, "\n[pixel]\n");
    put_pair(out, "size_um", s->pixel_size_um);
    put_camera(out, bench, "near");
    put_camera(out, bench, "wide");
    uf_text_add(out, "\n[shift]\nestimate = yes\n\n[reference]\nkind = cell\n");
    put_pair(out, "ratio", ratio);
    put_pair(out, "ratio_sd", 0.02 * ratio);
    uf_text_add(out, "gap_nm = 0\n");
}

/* The light falls the same way on every field of a bench: a scene without cells has its flats. */
static uf_status write_flats(demo_job *job, const demo_bench *bench, uf_error *error)
{
    uf_work work = {0};
    uf_scene_settings settings = bench->scene;
    uf_scene scene;
    settings.cells = 0;
    uf_status status = uf_scene_make(&work, &settings, &scene, error);
    if (status == UF_OK)
        status = write_plane(job, bench->name, "_flat_near", uf_encode_float_tiff, scene.near_flat,
                             settings.pixel_size_um, error);
    if (status == UF_OK)
        status = write_plane(job, bench->name, "_flat_wide", uf_encode_float_tiff, scene.wide_flat,
                             settings.pixel_size_um, error);
    uf_arena_free(&work.arena);
    return status;
}

/* An instrument file is what people begin to edit: one that was changed is not written over. */
static uf_status keep_edited(const demo_job *job, const char *name, const uf_text *ini, uf_error *error)
{
    uf_text there = {0};
    uf_status status = uf_output_read(&job->output, NULL, name, &there, error);
    int edited = there.length && (there.length != ini->length || memcmp(there.bytes, ini->bytes, ini->length) != 0);
    uf_text_free(&there);
    if (status == UF_OK && edited)
        return uf_fail(error, UF_OUTPUT,
                       "%s/%s is not the demo's (was it edited?) and is kept; choose another folder",
                       job->output.path, name);
    return status;
}

static uf_status write_bench(demo_job *job, const demo_bench *bench, uf_error *error)
{
    uf_text ini = {0}, name = {0};
    put_instrument(&ini, bench);
    uf_text_printf(&name, "%s.ini", bench->name);
    uf_status status = uf_text_check(&name, "file names", error);
    if (status == UF_OK)
        status = keep_edited(job, name.bytes, &ini, error);
    if (status == UF_OK)
        status = write_text(job, name.bytes, &ini, error);
    uf_text_free(&ini);
    uf_text_free(&name);
    return status == UF_OK ? write_flats(job, bench, error) : status;
}

/* ---- sheet ----------------------------------------------------------------------------------- */

static void put_time(uf_text *out, int session, int minute)
{
    uf_text_printf(out, "2030-05-%02dT%02d:%02d:00", 6 + session, 9 + minute / 60, minute % 60);
}

/* The cell of one column of the sheet. */
static void put_cell(uf_text *out, const demo_plan *plan, const demo_field *f, const char *column, size_t length)
{
    uf_text name = {0};
    uf_text_bytes(&name, column, length);
    const char *key = name.bytes ? name.bytes : "";
    const struct {
        const char *key, *word;
    } words[] = {{"plate", f->plate},         {"well", f->well}, {"field", f->field},
                 {"treatment", f->treatment}, {"role", f->role}, {"coating", f->coating}};
    for (size_t k = 0; k < sizeof words / sizeof words[0]; k++)
        if (strcmp(key, words[k].key) == 0)
            uf_text_add(out, words[k].word);
    if (strcmp(key, "vessel") == 0)
        uf_text_add(out, *f->plate ? "96" : "coverslip");
    else if (strcmp(key, "dose") == 0)
        uf_text_number(out, f->dose_um, 6);
    else if (strcmp(key, "dose_unit") == 0)
        uf_text_add(out, "uM");
    else if (strcmp(key, "replicate") == 0)
        uf_text_printf(out, "%d", f->replicate);
    else if (strcmp(key, "session") == 0)
        uf_text_add(out, plan->benches[f->bench].name);
    else if (strcmp(key, "instrument") == 0)
        uf_text_printf(out, "%s.ini", plan->benches[f->bench].name);
    else if (strcmp(key, "acquired") == 0)
        put_time(out, f->bench, f->minute);
    uf_text_free(&name);
}

static uf_status write_sheet(const demo_job *job, uf_error *error)
{
    const demo_plan *plan = &job->plan;
    uf_text out = {0};
    uf_text_printf(&out, "near,wide,%s\n", plan->columns);
    for (int k = 0; k < plan->field_count; k++) {
        const demo_field *field = &plan->fields[k];
        uf_text_printf(&out, "%s_near.tif,%s_wide.tif", field->name, field->name);
        for (const char *column = plan->columns; *column;) {
            size_t length = strcspn(column, ",");
            uf_text_add(&out, ",");
            put_cell(&out, plan, field, column, length);
            column += length + (column[length] == ',');
        }
        uf_text_add(&out, "\n");
    }
    uf_status status = write_text(job, "sheet.csv", &out, error);
    uf_text_free(&out);
    return status;
}

/* ---- layouts --------------------------------------------------------------------------------- */

/* The field in a well of a plate, NULL where nothing was done. */
static const demo_field *field_in(const demo_plan *plan, const char *plate, int row, int column)
{
    char well[UF_WELL_NAME];
    uf_well_name(well, (uf_well){row, column - 1});
    for (int k = 0; k < plan->field_count; k++)
        if (strcmp(plan->fields[k].plate, plate) == 0 && strcmp(plan->fields[k].well, well) == 0)
            return &plan->fields[k];
    return NULL;
}

/* One property of a plate as people draw it: its name in the corner, columns to the right, rows below. */
static void put_block(uf_text *out, const demo_plan *plan, const char *plate, const char *corner, const char *column)
{
    enum { ROWS = 8, COLUMNS = 12 };
    uf_text_add(out, corner);
    for (int c = 1; c <= COLUMNS; c++)
        uf_text_printf(out, ",%d", c);
    for (int r = 0; r < ROWS; r++) {
        uf_text_printf(out, "\n%c", 'A' + r);
        for (int c = 1; c <= COLUMNS; c++) {
            const demo_field *field = field_in(plan, plate, r, c);
            uf_text_add(out, ",");
            if (field)
                put_cell(out, plan, field, column, strlen(column));
        }
    }
    uf_text_add(out, "\n\n");
}

static void put_plate_layout(uf_text *out, const demo_plan *plan, const char *plate)
{
    uf_text_printf(out, "plate,%s\n", plate);
    put_block(out, plan, plate, "treatment", "treatment");
    put_block(out, plan, plate, "role", "role");
    if (strstr(plan->columns, "dose"))
        put_block(out, plan, plate, "dose (uM)", "dose");
}

static void put_coverslip_layout(uf_text *out, const demo_plan *plan)
{
    uf_text_add(out, "session,field,vessel,coating,acquired\n");
    for (int k = 0; k < plan->field_count; k++) {
        const demo_field *f = &plan->fields[k];
        uf_text_printf(out, "%s,%s,coverslip,%s,", plan->benches[f->bench].name, f->field, f->coating);
        put_time(out, f->bench, f->minute);
        uf_text_add(out, "\n");
    }
}

/* The sheet can be made from the names of the images and these two: what was done where, and which session is which. */
static uf_status write_layouts(const demo_job *job, uf_error *error)
{
    const demo_plan *plan = &job->plan;
    bool plates = *plan->fields[0].plate != '\0';
    uf_text layout = {0}, sessions = {0};
    uf_text_printf(&sessions, "%s,replicate,instrument\n", plates ? "plate,session" : "session");
    for (int k = 0; k < plan->bench_count; k++) {
        const char *name = plan->benches[k].name;
        uf_text_printf(&sessions, "%s%s%s,%d,%s.ini\n", name, plates ? "," : "", plates ? name : "", k + 1, name);
        if (plates)
            put_plate_layout(&layout, plan, name);
    }
    if (!plates)
        put_coverslip_layout(&layout, plan);
    uf_status status = write_text(job, "layout.csv", &layout, error);
    if (status == UF_OK)
        status = write_text(job, "sessions.csv", &sessions, error);
    uf_text_free(&layout);
    uf_text_free(&sessions);
    return status;
}

/* ---- all of it ------------------------------------------------------------------------------- */

static const char assay[] = "# Choices about the analysis. docs/settings.md explains every key.\n"
                            "[cells]\nlabel = membrane\nmin_area_um2 = 20\n\n[contact]\ncutoff_nm = 50\n\n"
                            "[output]\noverlay = yes\nmaps = yes\n";

static const char what_is_what[] =
    "\nX_near.tif, X_wide.tif         the two images of field X, camera counts\n"
    "sheet.csv                      the fields and what was done to them\n"
    "layout.csv, sessions.csv       the same as people write it down, for underfoot sheet build\n"
    "*.ini, *_flat_*.tif            facts about the bench of each session, and its flat fields\n"
    "assay.ini                      choices about the analysis\n"
    "truth_cells.csv, truth_spots.csv, X_truth_gap.tif, X_truth_labels.tif   what was put in\n";

static uf_status write_beside(demo_job *job, uf_error *error)
{
    uf_text text = {0};
    uf_text_add(&text, assay);
    uf_status status = write_text(job, "assay.ini", &text, error);
    uf_text_free(&text);
    uf_text_printf(&text, "Simulated data made by `underfoot demo`. Invented; they stand for no measurement.\n\n%s%s",
                   job->plan.story, what_is_what);
    if (status == UF_OK)
        status = write_text(job, "README.txt", &text, error);
    uf_text_free(&text);
    for (int k = 0; status == UF_OK && k < job->plan.bench_count; k++)
        status = write_bench(job, &job->plan.benches[k], error);
    if (status == UF_OK)
        status = write_sheet(job, error);
    if (status == UF_OK)
        status = write_layouts(job, error);
    return status == UF_OK ? write_truth(job, error) : status;
}

static void free_job(demo_job *job, int threads)
{
    for (int k = 0; job->arenas && k < threads; k++)
        uf_arena_free(&job->arenas[k]);
    for (int k = 0; job->outcomes && k < job->plan.field_count; k++) {
        uf_text_free(&job->outcomes[k].cells);
        uf_text_free(&job->outcomes[k].spots);
    }
    free(job->arenas);
    free(job->outcomes);
    uf_output_close(&job->output);
    uf_pool_free(&job->pool);
    free(job);
}

/* The bench's calibration images are no fields of an experiment. */
static uf_status write_calibration(const uf_demo_request *request, uf_demo_summary *summary, uf_error *error)
{
    uf_work work = {0};
    uf_output output = {0};
    struct timespec from, to;
    clock_gettime(CLOCK_MONOTONIC, &from);
    *summary = (uf_demo_summary){0};
    uf_status status = uf_pool_new(&work.pool, request->threads, error);
    if (status == UF_OK)
        status = uf_output_open(&output, request->dir, error);
    if (status == UF_OK)
        status = uf_demo_bench_write(&work, &output, &summary->images, error);
    clock_gettime(CLOCK_MONOTONIC, &to);
    summary->seconds = (double)(to.tv_sec - from.tv_sec) + (double)(to.tv_nsec - from.tv_nsec) * 1e-9;
    uf_output_close(&output);
    uf_pool_free(&work.pool);
    uf_arena_free(&work.arena);
    return status;
}

uf_status uf_demo_write(const uf_demo_request *request, uf_demo_summary *summary, uf_error *error)
{
    struct timespec from, to;
    if (strcmp(request->scenario, "bench") == 0)
        return write_calibration(request, summary, error);
    demo_job *job = calloc(1, sizeof *job);
    if (!job)
        return uf_fail_memory(error, "the demo");
    clock_gettime(CLOCK_MONOTONIC, &from);
    uf_status status = demo_plan_make(request->scenario, &job->plan, error);
    if (status == UF_OK)
        status = uf_pool_new(&job->pool, request->threads, error);
    if (status == UF_OK)
        status = uf_output_open(&job->output, request->dir, error);
    if (status == UF_OK)
        status = make_fields(job, request->threads, error);
    if (status == UF_OK)
        status = write_beside(job, error);
    clock_gettime(CLOCK_MONOTONIC, &to);
    *summary =
        (uf_demo_summary){.fields = job->plan.field_count,
                          .seconds = (double)(to.tv_sec - from.tv_sec) + (double)(to.tv_nsec - from.tv_nsec) * 1e-9};
    (void)snprintf(summary->first, sizeof summary->first, "%s", job->plan.fields[0].name);
    (void)snprintf(summary->instrument, sizeof summary->instrument, "%s.ini", job->plan.benches[0].name);
    free_job(job, request->threads);
    return status;
}
