/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/calibrate_flat.h"

#include <math.h>
#include <stdio.h>

#include "io/image_encode.h"
#include "io/output.h"
#include "run/frames.h"
#include "run/plan.h"
#include "run/report_parts.h"

static const char *const channels[] = {"near", "wide"}, *const samples[] = {"film", "solution", "cells"};

typedef struct flat_findings {
    const uf_flat_job *request;
    uf_flat_stack stack;
    uf_flat flat;
    uf_plane dark; /* data NULL: the offset */
    int dark_frames;
} flat_findings;

/* ---- images ------------------------------------------------------------------------------------ */

static uf_status check_request(const uf_flat_job *r, uf_error *error)
{
    if (!r->common.image_count)
        return uf_fail(
            error, UF_USAGE,
            "calibrate flat needs images of an even sample: underfoot calibrate flat --channel near --sample film "
            "IMAGE... -o FILE.ini");
    if (!(r->smooth_px <= UF_FLAT_SMOOTH_MOST))
        return uf_fail(error, UF_USAGE, "--smooth-px %.4g: expected 0 to %g", r->smooth_px, UF_FLAT_SMOOTH_MOST);
    return UF_OK;
}

static uf_status add_images(uf_reader *reader, flat_findings *f, uf_error *error)
{
    const uf_calibration_request *r = &f->request->common;
    uf_frame_list list = {r->images, r->image_count, "flat sample"};
    uf_frame_place place = {0};
    int found = 1;
    uf_status status = UF_OK;
    while (status == UF_OK && found) {
        uf_arena_mark mark = uf_arena_now(&reader->work->arena);
        uf_plane frame;
        status = uf_next_frame(reader, &list, &place, &frame, &found, error);
        if (status == UF_OK && found) {
            status = uf_flat_add(&f->stack, frame, error);
            if (status != UF_OK)
                uf_fail_in(error, status, place.name);
        }
        uf_arena_back(&reader->work->arena, mark);
    }
    return status;
}

static uf_status add_dark(const uf_plane *frame, const char *name, uf_plane sum, uf_error *error)
{
    if (frame->width != sum.width || frame->height != sum.height)
        return uf_fail(
            error, UF_INPUT,
            "%s: the dark frame is %d x %d px, the images are %d x %d; take it with the same camera settings", name,
            frame->width, frame->height, sum.width, sum.height);
    for (int y = 0; y < sum.height; y++)
        for (int x = 0; x < sum.width; x++)
            uf_plane_row(sum, y)[x] += uf_plane_row(*frame, y)[x];
    return UF_OK;
}

static uf_status average_darks(uf_reader *reader, flat_findings *f, uf_error *error)
{
    uf_frame_list list = {f->request->darks, f->request->dark_count, "dark frame"};
    uf_frame_place place = {0};
    int found = 1;
    uf_status status = uf_plane_take(reader->work, f->stack.width, f->stack.height, &f->dark, error);
    for (int y = 0; status == UF_OK && y < f->dark.height; y++)
        for (int x = 0; x < f->dark.width; x++)
            uf_plane_row(f->dark, y)[x] = 0;
    while (status == UF_OK && found) {
        uf_arena_mark mark = uf_arena_now(&reader->work->arena);
        uf_plane frame;
        status = uf_next_frame(reader, &list, &place, &frame, &found, error);
        if (status == UF_OK && found) {
            status = add_dark(&frame, place.name, f->dark, error);
            f->dark_frames++;
        }
        uf_arena_back(&reader->work->arena, mark);
    }
    for (int y = 0; status == UF_OK && y < f->dark.height; y++)
        for (int x = 0; x < f->dark.width; x++)
            uf_plane_row(f->dark, y)[x] /= (float)f->dark_frames;
    return status;
}

/* What is taken off: dark frames given here, else the settings' dark image, else their offset. */
static uf_status find_dark(uf_reader *reader, flat_findings *f, uf_error *error)
{
    const uf_camera_settings *camera = &reader->settings->camera[f->request->channel];
    uf_plane like = {.width = f->stack.width, .height = f->stack.height};
    if (f->request->dark_count)
        return average_darks(reader, f, error);
    return uf_read_companion(reader, "dark", camera->dark, like, &f->dark, error);
}

static const char *why_noisy(const uf_flat *flat, char *mend, size_t size)
{
    int at = 0;
    if (flat->images_wanted)
        at = snprintf(mend, size, "%d images of this kind would do", flat->images_wanted);
    if (!isnan(flat->smooth_wanted_px))
        (void)snprintf(mend + at, size - (size_t)at, "%s--smooth-px %.1f", at ? ", or " : "", flat->smooth_wanted_px);
    return mend;
}

static uf_status make_flat(uf_reader *reader, flat_findings *f, uf_error *error)
{
    const uf_camera_settings *camera = &reader->settings->camera[f->request->channel];
    uf_plane like = {.width = f->stack.width, .height = f->stack.height};
    char mend[160];
    uf_flat_request request = {.sample = f->request->sample,
                               .dark = f->dark,
                               .offset_adu = camera->offset_adu,
                               .full_scale_adu = camera->full_scale_adu,
                               .smooth_px = f->request->smooth_px};
    uf_status status = uf_read_companion(reader, "defect map", camera->defects, like, &request.defects, error);
    if (status == UF_OK)
        status = uf_flat_make(reader->work, &f->stack, &request, &f->flat, error);
    if (status == UF_OK && f->flat.too_noisy)
        return uf_fail(error, UF_INPUT,
                       "the flat's own noise is %.2g %% a pixel (at most %.2g %%: it would add to every image's); %s",
                       100 * f->flat.noise_halves, 100 * UF_FLAT_NOISE_MOST, why_noisy(&f->flat, mend, sizeof mend));
    return status;
}

/* ---- words ------------------------------------------------------------------------------------- */

/* Under a deep dye the evanescent light counts with its depth, the stray light with its own, much longer one. */
static void warn_solution(uf_text *out, const uf_settings *s)
{
    uf_bench bench;
    double share = s->decay.scattered_fraction > 0 ? s->decay.scattered_fraction : 0.1, depth = 100;
    int has_angle =
        !isnan(s->interface.angle_deg) || !isnan(s->interface.na_effective) || !isnan(s->interface.depth_nm);
    if (has_angle && uf_bench_make(s, &bench, NULL) == UF_OK)
        depth = uf_depth_nm(bench.wavelength_nm, bench.na_effective, bench.medium_n);
    double stray = share * s->decay.scattered_depth_nm, seen = stray / ((1 - share) * depth + stray);
    uf_text_printf(
        out,
        "CAUTION: a solution is lit all the way up. With %s%.0f %% stray light, %.0f %% of what this flat shows is "
        "the stray\nfield, not the evanescent one the cells will see. A film on the substrate shows the right one.\n",
        s->decay.scattered_fraction > 0 ? "" : "a usual ", 100 * share, 100 * seen);
}

static void put_words(uf_text *out, const flat_findings *f, const char *image)
{
    const uf_flat *flat = &f->flat;
    const uf_flat_job *r = f->request;
    double none = (double)NAN;
    uf_text_printf(out, "%s flat from %d images of %s, %d x %d px", channels[r->channel], flat->images,
                   r->sample == UF_FLAT_FILM       ? "a film"
                   : r->sample == UF_FLAT_SOLUTION ? "a solution"
                                                   : "cells",
                   f->stack.width, f->stack.height);
    if (r->smooth_px > 0)
        uf_text_printf(out, ", smoothed by %.3g px", r->smooth_px);
    uf_text_add(out, "\n\n");
    uf_report_row(out, "brightest over dimmest (99th, 1st percentile)", flat->unevenness, none, 3, "");
    uf_report_row(out, "lowest value", flat->lowest, none, 3, "of the mean");
    uf_report_row(out, "highest value", flat->highest, none, 3, "of the mean");
    uf_report_row(out, "its noise, a pixel", 100 * flat->noise_halves, none, 3, "%");
    uf_report_row(out, "pixels left out as dust or cells", 100 * flat->rejected_share, none, 2, "%");
    uf_report_row(out, "pixels filled from their neighbours", 100 * flat->never_kept_share, none, 3, "%");
    uf_text_add(out, "\n");
    if (flat->noise_halves > 2 * flat->noise_expected && flat->noise_halves > UF_FLAT_NOISE_MOST / 4)
        uf_text_add(
            out,
            "ROUGH. Half of the images make another flat than the other half: the sample is not even, or the light "
            "moved.\n");
    else
        uf_text_add(out, "GOOD. Its noise adds nothing that shows.\n");
    if (r->sample == UF_FLAT_SOLUTION && r->channel == UF_NEAR)
        warn_solution(out, r->common.settings);
    if (r->sample == UF_FLAT_CELLS)
        uf_text_add(out,
                    "Cells scatter light beside them, which stays in: a film is better where one can be made.\n");
    if (!f->dark.data && r->common.settings->camera[r->channel].offset_adu == 0)
        uf_text_add(
            out,
            "No dark frames and no offset are given: the camera's offset makes the flat flatter than the light is "
            "(--dark, or calibrate camera first).\n");
    uf_text_printf(out, "Written to %s and %s: -i bench.ini -i %s\n", r->common.out_path, image, r->common.out_path);
}

static uf_status put_json(uf_text *out, const flat_findings *f, const char *image, uf_error *error)
{
    const uf_flat *flat = &f->flat;
    json_t *o = json_object();
    json_object_set_new(o, "channel", json_string(channels[f->request->channel]));
    json_object_set_new(o, "sample", json_string(samples[f->request->sample]));
    json_object_set_new(o, "images", json_integer(flat->images));
    uf_json_number(o, "smooth_px", f->request->smooth_px);
    uf_json_number(o, "noise", flat->noise_halves);
    uf_json_number(o, "noise_expected", flat->noise_expected);
    uf_json_number(o, "unevenness", flat->unevenness);
    uf_json_number(o, "lowest", flat->lowest);
    uf_json_number(o, "highest", flat->highest);
    uf_json_number(o, "rejected_fraction", flat->rejected_share);
    json_object_set_new(o, "file", json_string(image));
    return uf_json_finish(out, o, error);
}

/* ---- plot -------------------------------------------------------------------------------------- */

typedef struct plot_data {
    double *x, *row, *column;
    double number[UF_FLAT_IMAGES_MOST], level[UF_FLAT_IMAGES_MOST];
} plot_data;

/* Means over a band about the middle, a sixteenth of the other side wide: what shows is light, not noise. */
static void fill_profiles(uf_plane flat, plot_data *d)
{
    int band_y = 1 + flat.height / 32, band_x = 1 + flat.width / 32, middle_y = flat.height / 2,
        middle_x = flat.width / 2;
    for (int x = 0; x < flat.width; x++) {
        double sum = 0;
        for (int y = middle_y - band_y / 2; y < middle_y - band_y / 2 + band_y; y++)
            sum += (double)uf_plane_row(flat, y)[x];
        d->row[x] = sum / band_y;
    }
    for (int y = 0; y < flat.height; y++) {
        double sum = 0;
        for (int x = middle_x - band_x / 2; x < middle_x - band_x / 2 + band_x; x++)
            sum += (double)uf_plane_row(flat, y)[x];
        d->column[y] = sum / band_x;
    }
}

static uf_status take_plot(uf_work *work, const flat_findings *f, plot_data **data, uf_error *error)
{
    int width = f->flat.image.width, height = f->flat.image.height, longest = width > height ? width : height;
    uf_status status = uf_take(work, 1, sizeof **data, "a plot", data, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)longest, sizeof(double), "a plot", &(*data)->x, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)longest, sizeof(double), "a plot", &(*data)->row, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)longest, sizeof(double), "a plot", &(*data)->column, error);
    if (status != UF_OK)
        return status;
    for (int k = 0; k < longest; k++)
        (*data)->x[k] = k;
    for (int k = 0; k < f->flat.images; k++) {
        (*data)->number[k] = k + 1;
        (*data)->level[k] = f->flat.level_adu[k];
    }
    fill_profiles(f->flat.image, *data);
    return UF_OK;
}

static uf_status write_plot(uf_work *work, const flat_findings *f, uf_error *error)
{
    plot_data *d;
    double none = (double)NAN;
    uf_status status = take_plot(work, f, &d, error);
    if (status != UF_OK)
        return status;
    const uf_plot_series profiles[] = {{"along the middle row", f->flat.image.width, d->x, d->row, NULL, NULL,
                                        UF_PLOT_DARK, UF_LINE_SOLID, UF_MARK_NONE, UF_SPREAD_NONE},
                                       {"down the middle column", f->flat.image.height, d->x, d->column, NULL, NULL,
                                        UF_PLOT_AMBER, UF_LINE_DASHED, UF_MARK_NONE, UF_SPREAD_NONE}};
    const uf_plot_series levels[] = {{"level of each image", f->flat.images, d->number, d->level, NULL, NULL,
                                      UF_PLOT_DARK, UF_LINE_DOTTED, UF_MARK_DISC, UF_SPREAD_NONE}};
    const uf_plot_panel panels[] = {{"Flat field",
                                     {"place (px)", none, none, 0},
                                     {"light (mean = 1)", none, none, 0},
                                     profiles,
                                     2,
                                     NULL,
                                     0,
                                     NULL,
                                     0},
                                    {"Brightness of the images",
                                     {"image", none, none, 0},
                                     {"level above the dark (ADU)", 0, none, 0},
                                     levels,
                                     1,
                                     NULL,
                                     0,
                                     NULL,
                                     0}};
    return uf_plot_file(panels, 2, 1300, 560, f->request->common.plot_path, error);
}

/* ---- results ----------------------------------------------------------------------------------- */

static uf_status write_files(const flat_findings *f, const uf_reader *reader, const char *image_path, uf_error *error)
{
    static const char *const sections[] = {"near.flat", "wide.flat"};
    uf_fragment fragment;
    uf_text bytes = {0};
    uf_status status = uf_encode_float_tiff(&bytes, f->flat.image, (double)NAN, "flat field, mean 1", error);
    if (status == UF_OK)
        status = uf_output_file(image_path, bytes.bytes, bytes.length, error);
    uf_text_free(&bytes);
    if (status != UF_OK)
        return status;
    uf_fragment_start(&fragment, "flat", reader);
    uf_fragment_word(&fragment, sections[f->request->channel], "file", uf_base_name(image_path));
    return uf_fragment_write(&fragment, f->request->common.out_path, error);
}

static uf_status find_all(uf_reader *reader, flat_findings *f, uf_error *error)
{
    uf_status status = check_request(f->request, error);
    if (status == UF_OK)
        status = add_images(reader, f, error);
    if (status == UF_OK)
        status = find_dark(reader, f, error);
    return status == UF_OK ? make_flat(reader, f, error) : status;
}

static uf_status write_all(uf_reader *reader, const flat_findings *f, uf_text *out, uf_error *error)
{
    const uf_calibration_request *r = &f->request->common;
    uf_text image = {0};
    uf_fragment_beside(&image, r->out_path, ".tif");
    uf_status status = uf_text_check(&image, "file names", error);
    if (status == UF_OK && r->plot_path)
        status = write_plot(reader->work, f, error);
    if (status == UF_OK)
        status = write_files(f, reader, image.bytes, error);
    if (status == UF_OK && r->as_json)
        status = put_json(out, f, image.bytes, error);
    else if (status == UF_OK)
        put_words(out, f, image.bytes);
    uf_text_free(&image);
    return status == UF_OK ? uf_text_check(out, "the report", error) : status;
}

uf_status uf_calibrate_flat(const uf_flat_job *request, uf_text *out, uf_error *error)
{
    uf_work work = {0};
    uf_reader reader = {.work = &work, .settings = request->common.settings};
    flat_findings findings = {.request = request};
    uf_status status = uf_pool_new(&work.pool, request->common.threads, error);
    if (status == UF_OK)
        status = find_all(&reader, &findings, error);
    if (status == UF_OK)
        status = write_all(&reader, &findings, out, error);
    uf_flat_stack_free(&findings.stack);
    uf_reader_free(&reader);
    uf_pool_free(&work.pool);
    uf_arena_free(&work.arena);
    return status;
}
