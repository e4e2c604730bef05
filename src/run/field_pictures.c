/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/field_pictures.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "io/image_encode.h"
#include "io/output.h"
#include "report/outlines.h"
#include "report/overlay.h"
#include "report/thumbnail.h"

typedef struct picture_job {
    uf_pictures *in;
} picture_job;

/* Pictures that an earlier run left and this one does not make must not be taken for this one's. */
static uf_status write_or_remove(picture_job *job, const char *folder, const char *ending, const uf_text *bytes,
                                 uf_error *error)
{
    uf_text name = {0};
    uf_text_add(&name, job->in->key);
    uf_text_add(&name, ending);
    uf_status status = uf_text_check(&name, "file names", error);
    if (status == UF_OK && bytes)
        status = uf_text_check(bytes, name.bytes, error);
    if (status == UF_OK)
        status = job->in->put(job->in->context, folder, name.bytes, bytes, error);
    if (status == UF_OK && bytes && strcmp(folder, "overlay") == 0)
        (void)snprintf(job->in->overlay_name, sizeof job->in->overlay_name, "%s/%s", folder, name.bytes);
    uf_text_free(&name);
    return status;
}

static uf_status write_maps(picture_job *job, uf_error *error)
{
    uf_text gap = {0}, labels = {0};
    double px = job->in->plan->pixel_size_um;
    int wanted = job->in->settings->output.maps == UF_YES;
    uf_status status = UF_OK;
    if (wanted)
        status = uf_encode_float_tiff(&gap, job->in->result->gaps.gap_nm, px, "gap, nm", error);
    if (status == UF_OK)
        status = write_or_remove(job, "gap", ".tif", wanted ? &gap : NULL, error);
    if (status == UF_OK && wanted)
        status = uf_encode_label_tiff(&labels, job->in->result->cells.labels, px, "cell numbers", error);
    if (status == UF_OK)
        status = write_or_remove(job, "labels", ".tif", wanted ? &labels : NULL, error);
    uf_text_free(&gap);
    uf_text_free(&labels);
    return status;
}

static void settings_line(const picture_job *job, uf_text *line)
{
    static const char *const models[] = {
        [UF_FIELD_EXPONENTIAL] = "exponential", [UF_FIELD_LAYERED] = "layered", [UF_FIELD_TABLE] = "measured"};
    const uf_settings *s = job->in->settings;
    if (!job->in->plan->has_gap) {
        uf_text_add(line, "adhesion-protein label: no gap; spots by the contrast of the near image");
        return;
    }
    uf_text_printf(line, "%s decay%s, depth %.1f nm, contact at most %.4g nm, ", models[job->in->plan->law.model],
                   job->in->plan->law.stray.fraction > 0 ? " with stray light" : "", job->in->plan->depth_nm,
                   s->contact.cutoff_nm);
    if (job->in->plan->series.count)
        uf_text_printf(line, "series of %d angles", job->in->plan->series.count);
    else if (job->in->plan->reference_from_cell)
        uf_text_printf(line, "each cell's closest part taken to lie at %.4g nm", job->in->plan->reference_gap_nm);
    else
        uf_text_printf(line, "reference %.4g at gap 0", job->in->plan->reference_ratio);
}

static void flag_words(uf_flags flags, uf_text *words)
{
    for (int k = 0; k < UF_FLAG_COUNT; k++)
        if (flags >> k & 1u)
            uf_text_printf(words, "%s%s", words->length ? ", " : "", uf_flag_word((uf_flag)k));
}

static int overlay_wanted(const picture_job *job)
{
    switch (job->in->settings->output.overlay) {
    case UF_OVERLAY_NO:
        return 0;
    case UF_OVERLAY_FLAGGED:
        return job->in->result->field.flags != 0;
    default:
        return 1;
    }
}

static int all_resolved(const picture_job *job)
{
    for (int k = 0; k < job->in->result->cells.labels.count; k++)
        if (job->in->result->rows[k].unresolved_um2 > 0)
            return 0;
    return 1;
}

/* The gaps that the overlay shows. Where none is measured the map holds the detection limit, which must not be drawn
 * as if it were one: of a dim cell it may lie in the colours of contact. */
static uf_status measured_gaps(picture_job *job, uf_plane *gap_nm, uf_error *error)
{
    const uf_gap_map *map = &job->in->result->gaps;
    *gap_nm = map->gap_nm;
    if (all_resolved(job))
        return UF_OK;
    uf_status status = uf_plane_take(job->in->work, map->gap_nm.width, map->gap_nm.height, gap_nm, error);
    for (int y = 0; status == UF_OK && y < gap_nm->height; y++) {
        const float *from = uf_plane_row(map->gap_nm, y);
        const uint8_t *state = uf_mask_row(map->state, y);
        float *to = uf_plane_row(*gap_nm, y);
        for (int x = 0; x < gap_nm->width; x++)
            to[x] = state[x] == UF_GAP_RESOLVED ? from[x] : (float)NAN;
    }
    return status;
}

static uf_status draw_overlay(picture_job *job, uf_text *png, uf_overlay_layout *layout, uf_error *error)
{
    const uf_field_result *r = job->in->result;
    uf_text line = {0}, flags = {0};
    settings_line(job, &line);
    flag_words(r->field.flags, &flags);
    uf_overlay_input input = {.near_adu = r->gaps.near_adu,
                              .labels = r->cells.labels,
                              .contact = r->contact,
                              .cells = r->rows,
                              .spots = r->spots,
                              .spot_count = r->field.spots,
                              .pixel_size_um = job->in->plan->pixel_size_um,
                              .near_background_adu = 0,
                              .cutoff_nm = job->in->settings->contact.cutoff_nm,
                              .title = job->in->title,
                              .settings = line.bytes ? line.bytes : "",
                              .flags = flags.bytes ? flags.bytes : "",
                              .full = job->in->settings->output.overlay == UF_OVERLAY_FULL};
    uf_arena_mark mark = uf_arena_now(&job->in->work->arena);
    uf_indexed picture;
    uf_status status = measured_gaps(job, &input.gap_nm, error);
    if (status == UF_OK)
        status = uf_overlay_draw(job->in->work, &input, &picture, layout, error);
    if (status == UF_OK)
        status = uf_encode_indexed_png(png, &picture, error);
    uf_arena_back(&job->in->work->arena, mark);
    uf_text_free(&line);
    uf_text_free(&flags);
    return status;
}

static uf_status write_overlay(picture_job *job, uf_error *error)
{
    uf_text png = {0}, outlines = {0};
    uf_outlines_input input = {.labels = job->in->result->cells.labels,
                               .pixel_size_um = job->in->plan->pixel_size_um};
    int wanted = overlay_wanted(job);
    uf_status status = wanted ? draw_overlay(job, &png, &input.layout, error) : UF_OK;
    if (status == UF_OK)
        status = write_or_remove(job, "overlay", ".png", wanted ? &png : NULL, error);
    input.overlay_name = job->in->overlay_name;
    if (status == UF_OK && wanted)
        status = uf_outlines_json(job->in->work, &input, &outlines, error);
    if (status == UF_OK)
        status = write_or_remove(job, "outlines", ".json", wanted ? &outlines : NULL, error);
    uf_text_free(&png);
    uf_text_free(&outlines);
    return status;
}

static uf_status draw_thumbnail(picture_job *job, uf_text *png, uf_error *error)
{
    const uf_field_result *r = job->in->result;
    uf_thumbnail_input input = {.near_adu = r->gaps.near_adu, .labels = r->cells.labels, .near_background_adu = 0};
    uf_arena_mark mark = uf_arena_now(&job->in->work->arena);
    uf_indexed picture;
    uf_status status = uf_thumbnail_draw(job->in->work, &input, &picture, &job->in->thumbnail_white_adu, error);
    if (status == UF_OK)
        status = uf_encode_indexed_png(png, &picture, error);
    uf_arena_back(&job->in->work->arena, mark);
    return status;
}

/* Kept by every field as soon as there are overlays at all: a contact sheet shows all fields of a well. */
static uf_status write_thumbnail(picture_job *job, uf_error *error)
{
    uf_text png = {0};
    int wanted = job->in->settings->output.overlay != UF_OVERLAY_NO;
    uf_status status = wanted ? draw_thumbnail(job, &png, error) : UF_OK;
    if (status == UF_OK)
        status = write_or_remove(job, "thumb", ".png", wanted ? &png : NULL, error);
    uf_text_free(&png);
    return status;
}

uf_status uf_pictures_write(uf_pictures *pictures, uf_error *error)
{
    picture_job job = {pictures};
    pictures->overlay_name[0] = '\0';
    uf_status status = write_overlay(&job, error);
    pictures->thumbnail_white_adu = (double)NAN;
    if (status == UF_OK)
        status = write_maps(&job, error);
    return status == UF_OK && pictures->thumbnail ? write_thumbnail(&job, error) : status;
}

void uf_picture_key(uf_text *out, const char *path)
{
    const char *base = uf_base_name(path);
    const char *dot = strrchr(base, '.');
    uf_text stem = {0};
    uf_text_bytes(&stem, base, dot && dot != base ? (size_t)(dot - base) : strlen(base));
    if (!stem.failed)
        uf_output_key(out, stem.bytes);
    out->failed |= stem.failed;
    uf_text_free(&stem);
}
