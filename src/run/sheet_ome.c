/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Rows from files that hold both channels: by the numbers of their pages, or by what their OME-XML says. */
#include <math.h>
#include <stdio.h>
#include <string.h>
#include <strings.h>

#include "io/image_file.h"
#include "io/ome_xml.h"
#include "run/sheet_parts.h"
#include "sheet/well.h"

static const char *keep(build_job *job, const char *text)
{
    return uf_draft_keep(&job->draft, text, strlen(text));
}

static const char *keep_number(build_job *job, double value)
{
    char text[UF_NUMBER_TEXT];
    uf_format_number(text, value, 10);
    return keep(job, text);
}

static void refuse(build_job *job, const char *path, const char *kind, const char *text)
{
    uf_fault_add(&job->summary->faults, UF_FAULT, kind, (uf_place){path, 0, NULL}, "%s", text);
}

/* ---- pages ----------------------------------------------------------------------------------- */

static uf_status add_pages(build_job *job, const uf_draft_row *like)
{
    uf_draft_row *row = uf_draft_add(&job->draft);
    if (!row)
        return uf_fail_memory(job->error, "rows of a sheet");
    *row = *like;
    row->cells[UF_SHEET_NEAR_PAGE] = keep_number(job, job->request->near_page);
    if (job->request->wide_page) {
        row->cells[UF_SHEET_WIDE] = like->cells[UF_SHEET_NEAR];
        row->cells[UF_SHEET_WIDE_PAGE] = keep_number(job, job->request->wide_page);
    }
    return row->cells[UF_SHEET_NEAR_PAGE] ? UF_OK : uf_fail_memory(job->error, "rows of a sheet");
}

/* ---- OME-TIFF -------------------------------------------------------------------------------- */

/* Number of the channel called so, in any letters, or numbered so from 1; -1 with a fault that lists the names. */
static int find_channel(build_job *job, const uf_ome_image *image, const char *wanted, const char *path)
{
    char text[UF_ERROR_TEXT];
    uf_text names = {0};
    int found = -1, count = 0;
    for (int k = 0; k < image->channel_count; k++) {
        uf_text_printf(&names, "%s'%s'", k ? ", " : "", image->channels[k]);
        if (strcasecmp(image->channels[k], wanted) == 0) {
            found = k;
            count++;
        }
    }
    if (count != 1 || found >= image->size_c) {
        (void)snprintf(text, sizeof text, "its OME-XML has %d channels called '%.60s'; there are %.300s", count,
                       wanted, names.bytes ? names.bytes : "none with a name");
        refuse(job, path, "channel", text);
        found = -1;
    }
    uf_text_free(&names);
    return found;
}

/* The layer of the image that is taken, from 0; -1 with a fault. */
static int find_layer(build_job *job, const uf_ome_image *image, const char *path)
{
    char text[160];
    int layer = job->request->layer;
    if (layer == 0 && image->size_z == 1)
        return 0;
    if (layer >= 1 && layer <= image->size_z)
        return layer - 1;
    (void)snprintf(text, sizeof text, "has %d layers (Z); say which is at the substrate, by --layer 1 to %d",
                   image->size_z, image->size_z);
    refuse(job, path, "layer", text);
    return -1;
}

/* Minutes from the first time point, NaN where the file does not say. */
static double minutes_of(const uf_ome_image *image, int t)
{
    double from = image->delta_s[0], seconds = image->delta_s[t] - (isnan(from) ? 0 : from);
    if (isnan(seconds))
        seconds = image->time_step_s * t;
    return uf_round_digits(seconds / 60, 6);
}

static void fill_place(build_job *job, const uf_ome_image *image, int number, int images, uf_draft_row *row)
{
    char name[UF_WELL_NAME];
    if (image->well_row >= 0 && image->well_column >= 0 && !row->cells[UF_SHEET_WELL]) {
        uf_well_name(name, (uf_well){image->well_row, image->well_column});
        row->cells[UF_SHEET_WELL] = *name ? keep(job, name) : NULL;
        if (!row->cells[UF_SHEET_FIELD])
            row->cells[UF_SHEET_FIELD] = keep_number(job, image->well_field);
        if (*image->plate && !row->cells[UF_SHEET_PLATE])
            row->cells[UF_SHEET_PLATE] = keep(job, image->plate);
    } else if (images > 1)
        row->cells[row->cells[UF_SHEET_FIELD] ? UF_SHEET_POSITION : UF_SHEET_FIELD] = keep_number(job, number);
    if (*image->acquired)
        row->cells[UF_SHEET_ACQUIRED] = keep(job, image->acquired);
}

static uf_status add_times(build_job *job, const uf_ome_image *image, int near, int wide, int layer,
                           const uf_draft_row *like, const char *path)
{
    for (int t = 0; t < image->size_t_; t++) {
        uf_draft_row *row = uf_draft_add(&job->draft);
        if (!row)
            return uf_fail_memory(job->error, "rows of a sheet");
        *row = *like;
        row->cells[UF_SHEET_NEAR_PAGE] = keep_number(job, uf_ome_page(image, near, layer, t) + 1);
        if (wide >= 0) {
            row->cells[UF_SHEET_WIDE] = like->cells[UF_SHEET_NEAR];
            row->cells[UF_SHEET_WIDE_PAGE] = keep_number(job, uf_ome_page(image, wide, layer, t) + 1);
        }
        if (image->size_t_ == 1)
            continue;
        double minutes = minutes_of(image, t);
        if (isnan(minutes) && t == 1)
            uf_fault_add(&job->summary->faults, UF_WARNING, "times", (uf_place){path, 0, NULL},
                         "its OME-XML does not say when its %d time points were taken; time_min counts them",
                         image->size_t_);
        row->cells[UF_SHEET_TIME_MIN] = keep_number(job, isnan(minutes) ? t : minutes);
    }
    return UF_OK;
}

static uf_status add_image(build_job *job, const uf_ome *ome, int number, const uf_draft_row *like, const char *path)
{
    const uf_ome_image *image = &ome->images[number];
    const uf_sheet_build_request *request = job->request;
    uf_draft_row row = *like;
    int near = find_channel(job, image, request->near_channel, path), wide = -1;
    if (near >= 0 && request->wide_channel)
        wide = find_channel(job, image, request->wide_channel, path);
    if (near < 0 || (request->wide_channel && wide < 0))
        return UF_OK;
    int layer = find_layer(job, image, path);
    if (layer < 0)
        return UF_OK;
    fill_place(job, image, number + 1, ome->image_count, &row);
    return add_times(job, image, near, wide, layer, &row, path);
}

/* What is wrong with one file does not stop the others from being looked at. */
static uf_status add_ome(build_job *job, const char *path, const uf_draft_row *like)
{
    uf_error error = {0};
    uf_page_probe first = {.page = 0};
    uf_text xml = {0};
    uf_ome ome = {0};
    uf_image_probe_pages(path, NULL, &first, 1, &xml);
    uf_status status = first.status;
    if (status != UF_OK)
        error = first.error;
    if (status == UF_OK && xml.failed)
        status = uf_fail_memory(&error, path);
    if (status == UF_OK && !uf_ome_is(xml.length ? xml.bytes : NULL))
        status = uf_fail(
            &error, UF_INPUT,
            "%.400s: has no OME-XML to find the channels by; put {channel} into --name, or give --near-page and "
            "--wide-page",
            path);
    if (status == UF_OK)
        status = uf_ome_parse(&ome, xml.bytes, xml.length, path, &error);
    if (status == UF_OK)
        status = uf_ome_check_pages(&ome, first.info.pages, path, &error);
    uf_text_free(&xml);
    if (status == UF_INPUT) {
        uf_fault_add(&job->summary->faults, UF_FAULT, "image", (uf_place){NULL, 0, NULL}, "%s", error.text);
        uf_ome_free(&ome);
        return UF_OK;
    }
    for (int k = 0; status == UF_OK && k < ome.image_count; k++)
        status = add_image(job, &ome, k, like, path);
    if (status != UF_OK && job->error)
        *job->error = error.status ? error : *job->error;
    uf_ome_free(&ome);
    return status;
}

uf_status build_from_file(build_job *job, const char *path, const uf_draft_row *like)
{
    return job->request->near_page ? add_pages(job, like) : add_ome(job, path, like);
}
