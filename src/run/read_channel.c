/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/read_channel.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "run/field.h"

static const uf_image_limits limits = {.max_pixels = 1e9};

const char *const uf_channel_names[UF_CHANNELS] = {"near", "wide"};

/* The list grows by powers of two. */
uf_status uf_note_input(uf_reader *reader, uf_run_input input, uf_error *error)
{
    int count = reader->count;
    for (int k = 0; k < count; k++)
        if (strcmp(reader->inputs[k].role, input.role) == 0 && strcmp(reader->inputs[k].path, input.path) == 0)
            return UF_OK;
    if ((count & (count - 1)) == 0) {
        uf_run_input *grown = realloc(reader->inputs, (size_t)(count ? 2 * count : 1) * sizeof *grown);
        if (!grown)
            return uf_fail_memory(error, "the list of inputs");
        reader->inputs = grown;
    }
    reader->inputs[reader->count++] = input;
    return UF_OK;
}

void uf_reader_free(uf_reader *reader)
{
    free(reader->inputs);
    reader->inputs = NULL;
    reader->count = 0;
}

static uf_status read_page(uf_reader *reader, const char *role, const char *path, int page, uf_plane *plane,
                           uf_image_info *info, uf_error *error)
{
    uf_status status = uf_image_read(reader->work, path, page, &limits, plane, info, error);
    if (status != UF_OK)
        return status;
    return uf_note_input(reader, (uf_run_input){role, path, info->file_bytes, info->fingerprint}, error);
}

uf_status uf_read_image(uf_reader *reader, const char *role, const char *path, uf_plane *plane, uf_image_info *info,
                        uf_error *error)
{
    return read_page(reader, role, path, 0, plane, info, error);
}

uf_status uf_read_companion(uf_reader *reader, const char *role, const char *path, uf_plane like, uf_plane *plane,
                            uf_error *error)
{
    uf_image_info info;
    *plane = (uf_plane){0};
    if (!path)
        return UF_OK;
    uf_status status = uf_read_image(reader, role, path, plane, &info, error);
    if (status == UF_OK && info.pages != 1)
        status = uf_fail(error, UF_INPUT,
                         "%s: the %s has %d pages, expected one; save the page to use as a file of its own", path,
                         role, info.pages);
    if (status == UF_OK && (plane->width != like.width || plane->height != like.height))
        status = uf_fail(error, UF_INPUT,
                         "%s: the %s is %d x %d px, the images are %d x %d; take one with the same camera settings",
                         path, role, plane->width, plane->height, like.width, like.height);
    return status;
}

/* The highest count where counts pile up there: 12 bits in a file of 16 end at 4095, whatever the file could hold. A tail of
 * light thins out towards its end; a ceiling collects what lies above it. +infinity without a ceiling. */
static double piled_up_at(uf_plane counts)
{
    enum { LEAST_PIXELS = 20, TIMES_BELOW = 4, STEPS_BELOW = 16 };
    float top = uf_plane_row(counts, 0)[0], bottom = top;
    int64_t at_top = 0, below = 0;
    for (int y = 0; y < counts.height; y++)
        for (int x = 0; x < counts.width; x++) {
            top = fmaxf(top, uf_plane_row(counts, y)[x]);
            bottom = fminf(bottom, uf_plane_row(counts, y)[x]);
        }
    for (int y = 0; y < counts.height; y++)
        for (int x = 0; x < counts.width; x++) {
            at_top += uf_plane_row(counts, y)[x] == top;
            below += uf_plane_row(counts, y)[x] < top && uf_plane_row(counts, y)[x] >= top - STEPS_BELOW;
        }
    int is_ceiling = bottom < top - STEPS_BELOW && at_top >= LEAST_PIXELS && at_top > TIMES_BELOW * below;
    return is_ceiling ? (double)top : (double)INFINITY;
}

static double full_scale(const uf_camera_settings *camera, const uf_image_info *info, uf_plane counts)
{
    if (!isnan(camera->full_scale_adu))
        return camera->full_scale_adu;
    if (info->is_float)
        return (double)INFINITY;
    return fmin(info->bits == 8 ? 255.0 : 65535.0, piled_up_at(counts));
}

static uf_status read_companions(uf_reader *reader, uf_channel_name which, uf_raw_channel *raw, uf_error *error)
{
    static const char *const flats[] = {"near flat", "wide flat"}, *const darks[] = {"near dark", "wide dark"};
    static const char *const maps[] = {"near defect map", "wide defect map"};
    const uf_settings *s = reader->settings;
    uf_status status = uf_read_companion(reader, darks[which], s->camera[which].dark, raw->counts, &raw->dark, error);
    if (status == UF_OK)
        status = uf_read_companion(reader, flats[which], s->flat[which].file, raw->counts, &raw->flat, error);
    if (status == UF_OK)
        status = uf_read_companion(reader, maps[which], s->camera[which].defects, raw->counts, &raw->defects, error);
    return status;
}

static uf_status check_pages(const char *role, const char *path, int found, int expected, uf_error *error)
{
    if (found == expected)
        return UF_OK;
    if (expected > 1)
        return uf_fail(error, UF_INPUT,
                       "%s: has %d page%s, but [series] angles_deg has %d angles; a series needs one page an angle, "
                       "in their order",
                       path, found, found == 1 ? "" : "s", expected);
    return uf_fail(error, UF_INPUT, "%s: has %d pages, expected one; save the page to measure as a file of its own%s",
                   path, found,
                   role == uf_channel_names[UF_NEAR] ? ", or give a series its [series] angles_deg" : "");
}

/* Raw counts of the pages of one file, all of one size, with room for their saturated pixels. */
static uf_status read_pages(uf_reader *reader, const char *role, const char *path, int page, int count,
                            uf_raw_channel *raw, uf_image_info *info, uf_error *error)
{
    uf_status status = read_page(reader, role, path, page ? page - 1 : 0, &raw[0].counts, info, error);
    if (status == UF_OK && !page)
        status = check_pages(role, path, info->pages, count, error);
    for (int k = 1; status == UF_OK && k < count; k++) {
        status = uf_image_read(reader->work, path, k, &limits, &raw[k].counts, NULL, error);
        if (status == UF_OK &&
            (raw[k].counts.width != raw[0].counts.width || raw[k].counts.height != raw[0].counts.height))
            status = uf_fail(
                error, UF_INPUT,
                "%s, page %d: is %d x %d px, page 1 is %d x %d; the pages of a series must have one size", path,
                k + 1, raw[k].counts.width, raw[k].counts.height, raw[0].counts.width, raw[0].counts.height);
    }
    for (int k = 0; status == UF_OK && k < count; k++)
        status = uf_mask_take(reader->work, raw[k].counts.width, raw[k].counts.height, &raw[k].saturated, error);
    return status;
}

uf_status uf_read_channel(uf_reader *reader, uf_channel_name which, const char *path, int page_wanted,
                          uf_channel *pages, int count, double *pixel_um, uf_error *error)
{
    uf_raw_channel raw[UF_REALS_LIMIT] = {0}, page = {.name = uf_channel_names[which]};
    uf_image_info info;
    uf_status status = read_pages(reader, page.name, path, page_wanted, count, raw, &info, error);
    if (status != UF_OK)
        return status;
    *pixel_um = info.pixel_size_x_um;
    page.camera = &reader->settings->camera[which];
    page.full_scale_adu = full_scale(page.camera, &info, raw[0].counts);
    page.counts = raw[0].counts;
    uf_arena_mark mark = uf_arena_now(&reader->work->arena);
    status = read_companions(reader, which, &page, error);
    for (int k = 0; status == UF_OK && k < count; k++) {
        page.counts = raw[k].counts;
        page.saturated = raw[k].saturated;
        status = uf_field_correct(reader->work, &page, &pages[k], error);
    }
    uf_arena_back(&reader->work->arena, mark);
    return status;
}
