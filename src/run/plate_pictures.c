/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "io/image_encode.h"
#include "run/plate_pictures_parts.h"

void plate_pictures_note(plate_pictures *job, uf_status status, const uf_error *error)
{
    pthread_mutex_lock(&job->mutex);
    if (job->status == UF_OK) {
        job->status = status;
        job->error = *error;
    }
    pthread_mutex_unlock(&job->mutex);
}

int plate_pictures_failed(plate_pictures *job)
{
    pthread_mutex_lock(&job->mutex);
    int failed = job->status != UF_OK;
    pthread_mutex_unlock(&job->mutex);
    return failed;
}

uf_status plate_pictures_write(plate_pictures *job, const char *folder, const char *name, const uf_indexed *picture,
                               uf_error *error)
{
    uf_text png = {0}, file = {0};
    uf_text_printf(&file, "%s.png", name);
    uf_status status = uf_text_check(&file, "file names", error);
    if (status == UF_OK)
        status = uf_encode_indexed_png(&png, picture, error);
    if (status == UF_OK && !folder)
        status = uf_output_write(job->output, NULL, file.bytes, png.bytes, png.length, error);
    if (status == UF_OK && folder) {
        pthread_mutex_lock(&job->mutex);
        status = uf_output_write_soon(job->output, &job->batch, folder, file.bytes, png.bytes, png.length, error);
        pthread_mutex_unlock(&job->mutex);
    }
    uf_text_free(&png);
    uf_text_free(&file);
    return status;
}

/* ---- names ----------------------------------------------------------------------------------- */

const uf_sheet_row *plate_well_row(const plate_pictures *job, int well)
{
    return job->plan->rows[job->wells->wells[well].first_row].row;
}

int plate_has_sessions(const plate_pictures *job, const char *plate)
{
    int count = 0;
    for (int k = 0; k < job->plan->group_count; k++)
        count += strcmp(job->plan->groups[k].plate, plate) == 0;
    return count > 1;
}

const char *plate_picture_key(uf_work *work, const uf_text *text)
{
    uf_text key = {0};
    char *copy = NULL;
    if (!text->failed)
        uf_output_key(&key, text->bytes ? text->bytes : "");
    if (key.bytes && !key.failed)
        copy = uf_arena_take(&work->arena, key.length + 1);
    if (copy)
        memcpy(copy, key.bytes, key.length + 1);
    uf_text_free(&key);
    return copy;
}

typedef struct numbered_name {
    const char *name;
    int index;
} numbered_name;

static int by_name(const void *a, const void *b)
{
    const numbered_name *one = a, *other = b;
    int order = strcmp(one->name, other->name);
    return order ? order : one->index - other->index;
}

uf_status plate_names_apart(uf_work *work, const char **names, int count, uf_error *error)
{
    numbered_name *sorted;
    uf_status status = uf_take(work, (size_t)count + 1, sizeof *sorted, "names of pictures", &sorted, error);
    if (status != UF_OK)
        return status;
    for (int k = 0; k < count; k++)
        sorted[k] = (numbered_name){names[k], k};
    qsort(sorted, (size_t)count, sizeof *sorted, by_name);
    for (int k = 1, first = 0; status == UF_OK && k < count; k++) {
        char *name;
        if (strcmp(sorted[k].name, sorted[first].name) != 0) {
            first = k;
            continue;
        }
        size_t size = strlen(sorted[k].name) + 16;
        status = uf_take(work, size, 1, "names of pictures", &name, error);
        if (status != UF_OK)
            continue;
        (void)snprintf(name, size, "%s=%d", sorted[k].name, k - first + 1);
        names[sorted[k].index] = name;
    }
    return status;
}

/* ---- facts ----------------------------------------------------------------------------------- */

static void read_fact(void *context, int hand, int index)
{
    plate_pictures *job = context;
    uf_work *work = &job->works[hand];
    uf_plate_record r;
    uf_error error;
    int found;
    if (plate_pictures_failed(job))
        return;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_plate_record_of(job->output, job->plan, index, &work->arena, &r, &found, &error);
    if (status == UF_OK && !found)
        status =
            uf_fail(&error, UF_INPUT, "a record vanished while the pictures were made; run the same command again");
    if (status == UF_OK)
        job->facts[index] = (plate_fact){r.field.status,
                                         r.field.cells,
                                         r.field.near_focus,
                                         r.field.wide_focus,
                                         r.field.near_background_adu,
                                         r.field.wide_background_adu,
                                         r.thumbnail_white_adu};
    else
        plate_pictures_note(job, status, &error);
    uf_arena_back(&work->arena, mark);
}

static int by_value(const void *a, const void *b)
{
    double one = *(const double *)a, other = *(const double *)b;
    return one < other ? -1 : one > other;
}

/* White of a plate in a session is that of its bright fields, the ninth decile: what is dim is seen to be dim, and one speck of
 * dirt does not make all others dark. */
static void find_white(plate_pictures *job, int group, double *whites)
{
    int count = 0;
    for (int k = 0; k < job->plan->sheet.count; k++)
        if (job->plan->rows[k].group == group && !isnan(job->facts[k].thumbnail_white_adu))
            whites[count++] = job->facts[k].thumbnail_white_adu;
    qsort(whites, (size_t)count, sizeof *whites, by_value);
    job->white_adu[group] = count ? whites[(count - 1) * 9 / 10] : (double)NAN;
}

static uf_status find_whites(plate_pictures *job, uf_error *error)
{
    double *whites = calloc((size_t)job->plan->sheet.count + 1, sizeof *whites);
    if (!whites)
        return uf_fail_memory(error, "the pictures");
    for (int k = 0; k < job->plan->group_count; k++)
        find_white(job, k, whites);
    free(whites);
    return UF_OK;
}

/* ---- all of it ------------------------------------------------------------------------------- */

static uf_status start(plate_pictures *job, uf_error *error)
{
    uf_work like = {.pool = job->pool};
    job->works = calloc((size_t)uf_hands(&like), sizeof *job->works);
    job->facts = calloc((size_t)job->plan->sheet.count + 1, sizeof *job->facts);
    job->white_adu = calloc((size_t)job->plan->group_count + 1, sizeof *job->white_adu);
    if (!job->works || !job->facts || !job->white_adu)
        return uf_fail_memory(error, "the pictures");
    uf_pool_run(job->pool, job->plan->sheet.count, read_fact, job);
    if (job->status == UF_OK)
        return find_whites(job, error);
    if (error)
        *error = job->error;
    return job->status;
}

static void finish(plate_pictures *job)
{
    uf_work like = {.pool = job->pool};
    for (int k = 0; job->works && k < uf_hands(&like); k++)
        uf_arena_free(&job->works[k].arena);
    free(job->works);
    free(job->facts);
    free(job->white_adu);
    uf_output_batch_drop(&job->batch);
    (void)pthread_mutex_destroy(&job->mutex);
    free(job);
}

uf_status uf_plate_pictures(const uf_output *output, const uf_plate_plan *plan, const uf_plate_well_list *wells,
                            uf_pool *pool, uf_error *error)
{
    plate_pictures *job = calloc(1, sizeof *job);
    if (!job)
        return uf_fail_memory(error, "the pictures");
    job->output = output;
    job->plan = plan;
    job->wells = wells;
    job->pool = pool;
    (void)pthread_mutex_init(&job->mutex, NULL);
    uf_status status = start(job, error);
    if (status == UF_OK)
        status = plate_maps(job, error);
    if (status == UF_OK)
        status = plate_contact_sheets(job, error);
    if (status == UF_OK)
        status = plate_drift(job, error);
    if (status == UF_OK)
        status = uf_output_batch_commit(output, &job->batch, error);
    finish(job);
    return status;
}
