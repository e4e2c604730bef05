/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The demo: an invented lab tries whether a coating of its own ("marram") makes cells of an invented line hold
 * on better than plain glass. Two fields of each.
 */
#include "run/demo.h"

#include <stdio.h>
#include <time.h>

#include "io/image_encode.h"
#include "io/output.h"
#include "scene/scene.h"

typedef struct demo_field {
    const char *name, *coating;
    uint64_t seed;
    double base_gap_nm, patch_fraction, lifted;
    int spots_min, spots_max;
} demo_field;

static const demo_field fields[] = {
    {"a", "marram", 11, 90, 0.38, 0.0, 12, 30},
    {"b", "marram", 12, 90, 0.38, 0.1, 12, 30},
    {"c", "glass", 13, 118, 0.16, 0.3, 3, 12},
    {"d", "glass", 14, 118, 0.16, 0.3, 3, 12},
};
enum { FIELDS = sizeof fields / sizeof fields[0] };

typedef struct demo_job {
    uf_output output;
    uf_work work;
    uf_text truth, spots;
    double reference_ratio;
    uf_scene_settings settings; /* of the last field; optics and camera are the same for all */
} demo_job;

static uf_status write_text(const demo_job *job, const char *name, const uf_text *text, uf_error *error)
{
    uf_status status = uf_text_check(text, name, error);
    return status == UF_OK ? uf_output_write(&job->output, NULL, name, text->bytes, text->length, error) : status;
}

/* Writes an image that was encoded with `encoded` as its status, as FIELDWHAT.tif, and frees its bytes. */
static uf_status write_encoded(const demo_job *job, const char *field, const char *what, uf_status encoded,
                               uf_text *bytes, uf_error *error)
{
    uf_text name = {0};
    uf_text_printf(&name, "%s%s.tif", field, what);
    uf_status status = encoded == UF_OK ? uf_text_check(&name, "file names", error) : encoded;
    if (status == UF_OK)
        status = write_text(job, name.bytes, bytes, error);
    uf_text_free(bytes);
    uf_text_free(&name);
    return status;
}

typedef uf_status encoder(uf_text *out, uf_plane plane, double pixel_size_um, const char *description,
                          uf_error *error);

static uf_status write_plane(const demo_job *job, const char *field, const char *what, encoder *encode,
                             uf_plane plane, uf_error *error)
{
    uf_text bytes = {0};
    uf_status status = encode(&bytes, plane, job->settings.pixel_size_um, "simulated by underfoot demo", error);
    return write_encoded(job, field, what, status, &bytes, error);
}

static uf_status write_labels(const demo_job *job, const char *field, uf_labels labels, uf_error *error)
{
    uf_text bytes = {0};
    uf_status status = uf_encode_label_tiff(&bytes, labels, job->settings.pixel_size_um, "true cells", error);
    return write_encoded(job, field, "_truth_labels", status, &bytes, error);
}

static uf_status write_images(demo_job *job, const char *name, const uf_scene *scene, int first, uf_error *error)
{
    uf_status status = write_plane(job, name, "_near", uf_encode_count_tiff, scene->near_adu, error);
    if (status == UF_OK)
        status = write_plane(job, name, "_wide", uf_encode_count_tiff, scene->wide_adu, error);
    if (status == UF_OK)
        status = write_plane(job, name, "_truth_gap", uf_encode_float_tiff, scene->gap_nm, error);
    if (status == UF_OK)
        status = write_labels(job, name, scene->labels, error);
    if (status == UF_OK && first)
        status = write_plane(job, "flat_near", "", uf_encode_float_tiff, scene->near_flat, error);
    if (status == UF_OK && first)
        status = write_plane(job, "flat_wide", "", uf_encode_float_tiff, scene->wide_flat, error);
    return status;
}

/* True area and contact area of each cell, at the assay's cutoff. */
static void put_truth(demo_job *job, const char *name, const uf_scene *scene, double cutoff_nm)
{
    double um2 = job->settings.pixel_size_um * job->settings.pixel_size_um;
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
        uf_text_printf(&job->truth, "%s,%d,", name, k);
        double values[] = {x_sum / area, y_sum / area, area * um2, contact * um2};
        for (int j = 0; j < 4; j++) {
            uf_text_number(&job->truth, values[j], 6);
            uf_text_add(&job->truth, j < 3 ? "," : "\n");
        }
    }
    for (int k = 0; k < scene->spots; k++) {
        uf_text_printf(&job->spots, "%s,%d,", name, (int)scene->spot_cell[k]);
        uf_text_number(&job->spots, (double)scene->spot_x_px[k], 6);
        uf_text_add(&job->spots, ",");
        uf_text_number(&job->spots, (double)scene->spot_y_px[k], 6);
        uf_text_add(&job->spots, "\n");
    }
}

static uf_status make_field(demo_job *job, int k, uf_error *error)
{
    const demo_field *f = &fields[k];
    uf_scene_settings *s = &job->settings;
    *s = uf_scene_defaults();
    s->seed = f->seed;
    s->base_gap_nm = f->base_gap_nm;
    s->patch_fraction = f->patch_fraction;
    s->lifted = f->lifted;
    s->spots_min = f->spots_min;
    s->spots_max = f->spots_max;
    s->shift_dx_px = 1.4;
    s->shift_dy_px = -0.8;
    uf_arena_mark mark = uf_arena_now(&job->work.arena);
    uf_scene scene;
    uf_status status = uf_scene_make(&job->work, s, &scene, error);
    if (status == UF_OK)
        status = write_images(job, f->name, &scene, k == 0, error);
    if (status == UF_OK) {
        put_truth(job, f->name, &scene, 50);
        job->reference_ratio = scene.reference_ratio;
    }
    uf_arena_back(&job->work.arena, mark);
    return status;
}

/* ---- files beside the images ----------------------------------------------------------------- */

static void put_pair(uf_text *out, const char *key, double value)
{
    uf_text_printf(out, "%s = ", key);
    uf_text_number(out, value, 8);
    uf_text_add(out, "\n");
}

static void put_camera(uf_text *out, const uf_scene_settings *s, const char *channel)
{
    uf_text_printf(out, "\n[%s.camera]\n", channel);
    put_pair(out, "offset_adu", s->offset_adu);
    put_pair(out, "gain_e_per_adu", s->gain_e_per_adu);
    put_pair(out, "read_noise_e", s->read_noise_e);
    put_pair(out, "full_scale_adu", 65535);
    uf_text_printf(out, "\n[%s.flat]\nfile = flat_%s.tif\n", channel, channel);
}

static uf_status write_instrument(const demo_job *job, uf_error *error)
{
    const uf_scene_settings *s = &job->settings;
    uf_text out = {0};
    uf_text_add(&out, "# Facts about the (simulated) bench. docs/settings.md explains every key.\n[light]\n");
    put_pair(&out, "wavelength_nm", s->wavelength_nm);
    uf_text_add(&out, "polarization = s\n\n[interface]\ngeometry = objective\n");
    put_pair(&out, "substrate_n", s->substrate_n);
    put_pair(&out, "medium_n", s->medium_n);
    uf_text_add(&out, "cell_n = 1.37\n");
    put_pair(&out, "angle_deg", s->angle_deg);
    uf_text_add(&out, "angle_sd_deg = 0.2\nobjective_na = 1.49\n\n[decay]\nmodel = exponential\n\n[pixel]\n");
    put_pair(&out, "size_um", s->pixel_size_um);
    put_camera(&out, s, "near");
    put_camera(&out, s, "wide");
    uf_text_add(&out, "\n[shift]\nestimate = yes\n\n[reference]\nkind = cell\n");
    put_pair(&out, "ratio", job->reference_ratio);
    put_pair(&out, "ratio_sd", 0.02 * job->reference_ratio);
    uf_text_add(&out, "gap_nm = 0\n");
    uf_status status = write_text(job, "instrument.ini", &out, error);
    uf_text_free(&out);
    return status;
}

static uf_status write_sheet(const demo_job *job, uf_error *error)
{
    uf_text out = {0};
    uf_text_add(&out, "near,wide,field,vessel,coating\n");
    for (int k = 0; k < FIELDS; k++)
        uf_text_printf(&out, "%s_near.tif,%s_wide.tif,%s,coverslip,%s\n", fields[k].name, fields[k].name,
                       fields[k].name, fields[k].coating);
    uf_status status = write_text(job, "sheet.csv", &out, error);
    uf_text_free(&out);
    return status;
}

static const char assay[] = "# Choices about the analysis. docs/settings.md explains every key.\n"
                            "[cells]\nlabel = membrane\nmin_area_um2 = 20\n\n[contact]\ncutoff_nm = 50\n\n"
                            "[output]\noverlay = yes\nmaps = yes\n";

static const char readme[] =
    "Simulated data made by `underfoot demo`. Invented; they stand for no measurement.\n\n"
    "A lab asks whether cells hold on to its coating \"marram\" better than to bare glass. Fields a and b are on\n"
    "marram, c and d on glass (sheet.csv).\n\n"
    "X_near.tif, X_wide.tif      the two images of field X, camera counts\n"
    "flat_near.tif, flat_wide.tif  flat fields\n"
    "instrument.ini, assay.ini   facts about the bench; choices about the analysis\n"
    "truth_cells.csv, truth_spots.csv, X_truth_gap.tif, X_truth_labels.tif   what was put in\n";

static uf_status write_beside(demo_job *job, uf_error *error)
{
    uf_text text = {0};
    uf_text_add(&text, assay);
    uf_status status = write_text(job, "assay.ini", &text, error);
    uf_text_free(&text);
    uf_text_add(&text, readme);
    if (status == UF_OK)
        status = write_text(job, "README.txt", &text, error);
    uf_text_free(&text);
    if (status == UF_OK)
        status = write_instrument(job, error);
    if (status == UF_OK)
        status = write_sheet(job, error);
    if (status == UF_OK)
        status = write_text(job, "truth_cells.csv", &job->truth, error);
    return status == UF_OK ? write_text(job, "truth_spots.csv", &job->spots, error) : status;
}

uf_status uf_demo_write(const char *dir, int threads, uf_demo_summary *summary, uf_error *error)
{
    demo_job job = {0};
    struct timespec from, to;
    clock_gettime(CLOCK_MONOTONIC, &from);
    uf_text_add(&job.truth, "field,cell,x_px,y_px,spread_area_um2,contact_area_um2\n");
    uf_text_add(&job.spots, "field,cell,x_px,y_px\n");
    uf_status status = uf_pool_new(&job.work.pool, threads, error);
    if (status == UF_OK)
        status = uf_output_open(&job.output, dir, error);
    for (int k = 0; status == UF_OK && k < FIELDS; k++)
        status = make_field(&job, k, error);
    if (status == UF_OK)
        status = write_beside(&job, error);
    clock_gettime(CLOCK_MONOTONIC, &to);
    *summary =
        (uf_demo_summary){FIELDS, (double)(to.tv_sec - from.tv_sec) + (double)(to.tv_nsec - from.tv_nsec) * 1e-9};
    uf_text_free(&job.truth);
    uf_text_free(&job.spots);
    uf_output_close(&job.output);
    uf_pool_free(&job.work.pool);
    uf_arena_free(&job.work.arena);
    return status;
}
