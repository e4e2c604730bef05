/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/field_read.h"

#include <math.h>
#include <stddef.h>
#include <stdio.h>
#include <string.h>

#include "io/input.h"
#include "run/decay_law.h"
#include "run/plan.h"
#include "run/series_plan.h"

typedef struct field_job {
    uf_reader *reader;
    const uf_field_files *files;
    uf_plan *plan;
    uf_field_result *result;
} field_job;

/* The plan has read the table of a measured decay; here it joins the list of inputs. */
static uf_status note_decay_file(field_job *job, uf_error *error)
{
    const char *path = job->reader->settings->decay.file;
    uf_text text = {0};
    if (job->plan->law.model != UF_FIELD_TABLE)
        return UF_OK;
    uf_status status = uf_input_read(&text, path, UF_DECAY_FILE_BYTES, error);
    if (status == UF_OK)
        status = uf_note_input(
            job->reader, (uf_run_input){"decay table", path, text.length, uf_fingerprint(text.bytes, text.length)},
            error);
    uf_text_free(&text);
    return status;
}

/* The pages of a series. The one of the smallest angle is the near channel, but its saturated pixels are those of the
 * page that has most of them. */
static uf_status read_series(field_job *job, double *pixel_um, uf_error *error)
{
    int count = job->reader->settings->series.angles_deg.count, widest = uf_series_widest(job->reader->settings);
    uf_status status =
        uf_take(job->reader->work, (size_t)count, sizeof(uf_channel), "a series", &job->result->pages, error);
    if (status == UF_OK)
        status = uf_read_channel(job->reader, UF_NEAR, job->files->near_path, 0, job->result->pages, count, pixel_um,
                                 error);
    if (status != UF_OK)
        return status;
    job->result->near = job->result->pages[widest];
    for (int k = 0; k < count; k++) {
        const uf_channel *page = &job->result->pages[k];
        job->result->near.display_scaled |= page->display_scaled;
        if (page->saturated_fraction > job->result->near.saturated_fraction) {
            job->result->near.saturated_fraction = page->saturated_fraction;
            job->result->near.saturated = page->saturated;
        }
    }
    return UF_OK;
}

static uf_status read_near(field_job *job, double *pixel_um, uf_error *error)
{
    return job->reader->settings->series.angles_deg.count
               ? read_series(job, pixel_um, error)
               : uf_read_channel(job->reader, UF_NEAR, job->files->near_path, job->files->near_page,
                                 &job->result->near, 1, pixel_um, error);
}

/* Without a wide image cells are outlined in the near one, which must then be kept beside what becomes of it. */
static uf_status copy_near(field_job *job, uf_error *error)
{
    uf_channel *wide = &job->result->wide;
    uf_plane near = job->result->near.image;
    if (job->reader->settings->cells.label != UF_LABEL_ADHESION_PROTEIN)
        return uf_fail(
            error, UF_USAGE,
            "measure needs the wide image as well: underfoot measure NEAR WIDE; only label = adhesion-protein "
            "does without");
    *wide = job->result->near;
    job->result->one_image = 1;
    uf_status status = uf_plane_take(job->reader->work, near.width, near.height, &wide->image, error);
    for (int y = 0; status == UF_OK && y < near.height; y++)
        memcpy(uf_plane_row(wide->image, y), uf_plane_row(near, y), (size_t)near.width * sizeof(float));
    return status;
}

/* Counts as they are: only where nuclei are matters. */
static uf_status read_nuclei(field_job *job, uf_error *error)
{
    uf_channel *nuclei = &job->result->nuclei;
    nuclei->noise.gain_e_per_adu = (double)NAN;
    uf_status status = uf_read_companion(job->reader, "nuclei image", job->files->nuclei_path,
                                         job->result->near.image, &nuclei->image, error);
    return status == UF_OK && nuclei->image.data ? uf_background_first(job->reader->work, nuclei, error) : status;
}

/* A ratio belongs to the flats it was measured with: another flat of the same bench may be scaled or shaped otherwise. */
static uf_status check_reference_flats(const field_job *job, uf_error *error)
{
    static const char *const roles[] = {"near flat", "wide flat"};
    const uf_settings *s = job->reader->settings;
    if (s->reference.from != UF_SETTING_NOT_GIVEN || s->series.angles_deg.count || job->result->one_image)
        return UF_OK;
    for (int k = 0; k < UF_CHANNELS; k++) {
        char used[24] = "none";
        for (int j = 0; j < job->reader->count; j++)
            if (strcmp(job->reader->inputs[j].role, roles[k]) == 0)
                (void)snprintf(used, sizeof used, "%016llx", (unsigned long long)job->reader->inputs[j].fingerprint);
        const char *wanted = s->reference.flat[k];
        if (wanted && strcmp(wanted, used) != 0)
            return uf_fail(
                error, UF_INPUT,
                "the reference (%s) was measured with the %s of fingerprint %s, this run uses %s (%s); use the "
                "same flat, or calibrate the reference again with this one",
                s->origin[uf_setting_at(offsetof(struct uf_settings, reference.ratio)) - uf_setting_table], roles[k],
                wanted, s->flat[k].file ? s->flat[k].file : "no flat", used);
    }
    return UF_OK;
}

/* One image twice has the ratio 1 everywhere and would look like a result. */
static uf_status check_two_images(const field_job *job, uf_error *error)
{
    const uf_run_input *near = NULL, *wide = NULL;
    for (int k = 0; k < job->reader->count; k++) {
        const uf_run_input *in = &job->reader->inputs[k];
        near = strcmp(in->role, "near") == 0 ? in : near;
        wide = strcmp(in->role, "wide") == 0 ? in : wide;
    }
    if (!near || !wide || near->fingerprint != wide->fingerprint || near->bytes != wide->bytes ||
        job->files->near_page != job->files->wide_page || job->reader->settings->series.angles_deg.count)
        return UF_OK;
    return uf_fail(error, UF_INPUT, "%s and %s are the same image; give the near and the wide image of the field",
                   job->files->near_path, job->files->wide_path);
}

/* Everything that can be wrong with the settings is said before pixels are worked on. */
uf_status uf_field_read(uf_reader *reader, const uf_field_files *files, uf_plan *plan, uf_field_result *result,
                        uf_error *error)
{
    field_job read = {reader, files, plan, result}, *job = &read;
    double near_um = (double)NAN, wide_um = (double)NAN;
    uf_status status = read_near(job, &near_um, error);
    if (status == UF_OK)
        status = uf_plan_make(job->reader->settings, near_um, job->plan, error);
    if (status == UF_OK)
        status = note_decay_file(job, error);
    if (status == UF_OK)
        status = job->files->wide_path
                     ? uf_read_channel(job->reader, UF_WIDE, job->files->wide_path, job->files->wide_page,
                                       &job->result->wide, 1, &wide_um, error)
                     : copy_near(job, error);
    if (status == UF_OK)
        status = read_nuclei(job, error);
    if (status == UF_OK)
        status = uf_read_companion(job->reader, "mask", job->files->mask_path, job->result->near.image,
                                   &job->result->mask, error);
    if (status != UF_OK)
        return status;
    uf_plane near = job->result->near.image, wide = job->result->wide.image;
    if (near.width != wide.width || near.height != wide.height)
        return uf_fail(
            error, UF_INPUT, "%s is %d x %d px, but %s is %d x %d; the two images of a field must have the same size",
            job->files->near_path, near.width, near.height, job->files->wide_path, wide.width, wide.height);
    status = check_two_images(job, error);
    return status == UF_OK ? check_reference_flats(job, error) : status;
}
