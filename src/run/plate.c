/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/plate.h"

#include <inttypes.h>
#include <math.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "fit/robust.h"
#include "io/csv.h"
#include "io/output.h"
#include "run/field_pictures.h"
#include "run/field_warnings.h"
#include "run/plate_follow.h"
#include "run/plate_json.h"
#include "run/plate_pictures.h"
#include "run/plate_plan.h"
#include "run/plate_record.h"
#include "run/plate_tables.h"

/* Records are committed after so many fields or seconds: what a power cut can cost. */
enum { COMMIT_FIELDS = 16 };
static const double commit_seconds = 0.5, tell_seconds = 0.5;

/* ROW_NOT_COMPLETE: with --follow, its files are not there yet. */
typedef enum row_state { ROW_WAITING, ROW_KEPT, ROW_MEASURED, ROW_OTHER_SHARD, ROW_NOT_COMPLETE } row_state;

typedef struct plate_job {
    const uf_plate_request *request;
    uf_plate_summary *summary;
    uf_plate_plan plan;
    uf_output output;
    int lock;
    uf_pool *pool;
    uf_arena *arenas; /* one a hand */
    int hands;
    unsigned char *states;         /* row_state of each row */
    double *seconds;               /* of each row measured in this run */
    uf_reference_unit *references; /* of each row; ratio NaN where it has none */
    int *reference_cells;
    struct {
        int known;
        double adu[UF_CHANNELS];
    } * blanks;            /* of each row */
    pthread_mutex_t mutex; /* guards all below, and the progress */
    uf_output_batch batch;
    int since_commit, done, total, measured;
    double started, committed, told;
    const char *telling;
    uf_follow follow;
    uf_status status; /* of what ends the whole run */
    uf_error error;
} plate_job;

static double now_seconds(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + (double)t.tv_nsec * 1e-9;
}

static int is_stopped(const plate_job *job)
{
    return job->request->stop && *job->request->stop;
}

/* Under the mutex. */
static void tell(plate_job *job, int always)
{
    double now = now_seconds();
    if (!job->request->progress || (!always && now - job->told < tell_seconds))
        return;
    job->told = now;
    job->request->progress(job->request->progress_context, job->telling, job->done, job->total, job->measured,
                           now - job->started);
}

static void begin_telling(plate_job *job, const char *what, int done, int total)
{
    job->telling = what;
    job->done = done;
    job->total = total;
    job->measured = 0;
    job->started = job->told = job->committed = now_seconds();
}

/* Something that ends the run: the first one is kept. Under the mutex. */
static void end_run(plate_job *job, uf_status status, const uf_error *error)
{
    if (job->status != UF_OK)
        return;
    job->status = status;
    job->error = *error;
}

static int is_ended(plate_job *job)
{
    pthread_mutex_lock(&job->mutex);
    int ended = job->status != UF_OK;
    pthread_mutex_unlock(&job->mutex);
    return ended || is_stopped(job);
}

/* ---- references ------------------------------------------------------------------------------ */

/* A reference from a field of its own: each cell's closest part (gap/own_reference.h), the median over cells. */
static void measure_reference(void *context, int hand, int index)
{
    plate_job *job = context;
    uf_work work = {.arena = job->arenas[hand]};
    uf_plan plan;
    uf_field_result result = {0};
    uf_error error;
    job->references[index].ratio = job->references[index].spread = (double)NAN;
    if (!uf_plate_is_reference(&job->plan, index) || is_ended(job))
        return;
    struct uf_settings settings = uf_plate_reference_settings(&job->plan, index);
    uf_field_files files = uf_plate_files(&job->plan, index);
    uf_reader reader = {.work = &work, .settings = &settings};
    uf_arena_mark mark = uf_arena_now(&work.arena);
    uf_status status = uf_field_read(&reader, &files, &plan, &result, &error);
    if (status == UF_OK)
        status = uf_field_run(&work, &plan, &settings, &result, &error);
    /* A field that cannot be read is told when it is measured; it lends nothing to the reference. */
    if (status == UF_OK && result.cells.labels.count) {
        job->references[index].ratio = result.reference_ratio;
        job->reference_cells[index] = result.cells.labels.count;
    }
    uf_field_result_free(&result);
    uf_reader_free(&reader);
    uf_arena_back(&work.arena, mark);
    job->arenas[hand] = work.arena;
    pthread_mutex_lock(&job->mutex);
    job->done++;
    job->measured++;
    tell(job, 0);
    pthread_mutex_unlock(&job->mutex);
}

/* ---- blanks ---------------------------------------------------------------------------------- */

static uf_status median_of_channel(uf_reader *reader, uf_channel_name which, const uf_field_files *files,
                                   double *median, uf_error *error)
{
    enum { SAMPLE = 1 << 16 };
    const char *path = which == UF_NEAR ? files->near_path : files->wide_path;
    uf_channel channel;
    double pixel_um, *values;
    uf_status status = uf_read_channel(reader, which, path, which == UF_NEAR ? files->near_page : files->wide_page,
                                       &channel, 1, &pixel_um, error);
    if (status == UF_OK)
        status = uf_take(reader->work, SAMPLE, sizeof *values, "a blank field", &values, error);
    if (status != UF_OK)
        return status;
    int64_t pixels = (int64_t)channel.image.width * channel.image.height, step = pixels / SAMPLE + 1;
    size_t count = 0;
    for (int64_t k = 0; k < pixels && count < SAMPLE; k += step)
        values[count++] =
            (double)uf_plane_row(channel.image, (int)(k / channel.image.width))[k % channel.image.width];
    *median = uf_median(values, count);
    return UF_OK;
}

/* A blank field that cannot be read lends nothing, and is told when it is measured. */
static void look_at_blank(plate_job *job, int hand, int index)
{
    uf_work work = {.arena = job->arenas[hand]};
    struct uf_settings settings = uf_plate_reference_settings(&job->plan, index);
    uf_field_files files = uf_plate_files(&job->plan, index);
    uf_reader reader = {.work = &work, .settings = &settings};
    double near, wide;
    uf_error error;
    uf_arena_mark mark = uf_arena_now(&work.arena);
    if (median_of_channel(&reader, UF_NEAR, &files, &near, &error) == UF_OK &&
        median_of_channel(&reader, UF_WIDE, &files, &wide, &error) == UF_OK) {
        job->blanks[index].adu[UF_NEAR] = near;
        job->blanks[index].adu[UF_WIDE] = wide;
        job->blanks[index].known = 1;
    }
    uf_reader_free(&reader);
    uf_arena_back(&work.arena, mark);
    job->arenas[hand] = work.arena;
}

static void blank_task(void *context, int hand, int index)
{
    plate_job *job = context;
    if (uf_plate_is_blank(&job->plan, index) && !is_ended(job))
        look_at_blank(job, hand, index);
}

/* Mean over a group's blank fields, and the sd of that mean (of one field: none is known, 0). */
static void pool_blanks(plate_job *job, int group)
{
    uf_plate_group *g = &job->plan.groups[group];
    for (int c = 0; c < UF_CHANNELS; c++) {
        double sum = 0, squares = 0;
        int n = 0;
        for (int k = 0; k < job->plan.sheet.count; k++)
            if (job->plan.rows[k].group == group && job->blanks[k].known) {
                sum += job->blanks[k].adu[c];
                n++;
            }
        for (int k = 0; k < job->plan.sheet.count; k++)
            if (job->plan.rows[k].group == group && job->blanks[k].known)
                squares += (job->blanks[k].adu[c] - sum / n) * (job->blanks[k].adu[c] - sum / n);
        g->blanks = n;
        g->blank_adu[c] = n ? uf_round_digits(sum / n, 12) : (double)NAN;
        g->blank_sd_adu[c] = n > 1 ? uf_round_digits(sqrt(squares / (n - 1) / n), 12) : 0;
    }
}

static uf_status find_blanks(plate_job *job, uf_error *error)
{
    job->blanks = calloc((size_t)job->plan.sheet.count + 1, sizeof *job->blanks);
    if (!job->blanks)
        return uf_fail_memory(error, "the blank fields");
    uf_pool_run(job->pool, job->plan.sheet.count, blank_task, job);
    for (int k = 0; k < job->plan.group_count; k++)
        pool_blanks(job, k);
    return UF_OK;
}

/* ---- references pooled ------------------------------------------------------------------------ */

/* Pooling all cells of one treatment would make its own effect the reference. */
static uf_status check_pooled(const plate_job *job, int group, uf_error *error)
{
    const uf_plate_plan *plan = &job->plan;
    const uf_sheet_row *first = NULL;
    int differ = 0;
    if (plan->all.settings[plan->groups[group].settings]->reference.from != UF_FROM_POOLED)
        return UF_OK;
    for (int k = 0; k < plan->sheet.count; k++) {
        const uf_sheet_row *row = plan->rows[k].row;
        if (plan->rows[k].group != group || !uf_plate_is_reference(plan, k))
            continue;
        first = first ? first : row;
        differ |= strcmp(first->text[UF_SHEET_TREATMENT], row->text[UF_SHEET_TREATMENT]) != 0 ||
                  strcmp(first->text[UF_SHEET_COATING], row->text[UF_SHEET_COATING]) != 0;
    }
    if (differ)
        return UF_OK;
    return uf_fail(error, UF_INPUT,
                   "plate '%s', session '%s' holds one treatment and coating: pooled over it the reference would "
                   "hide what it does; "
                   "use from = wells with control wells on every plate, or a measured reference",
                   plan->groups[group].plate, plan->groups[group].session);
}

static uf_status no_reference(const plate_job *job, int group, uf_error *error)
{
    const uf_plate_group *g = &job->plan.groups[group];
    return uf_fail(
        error, UF_INPUT,
        "plate '%s', session '%s': no field tells its reference (from = wells takes role reference, else control); "
        "give wells that role, or a measured reference",
        g->plate, g->session);
}

/* Well of a row among those of its group: the first row of the group with the same well. */
static int well_number(const uf_plate_plan *plan, int index)
{
    const uf_plate_row *r = &plan->rows[index];
    for (int k = 0; k < index; k++)
        if (plan->rows[k].group == r->group && *r->row->text[UF_SHEET_WELL] &&
            strcmp(plan->rows[k].row->text[UF_SHEET_WELL], r->row->text[UF_SHEET_WELL]) == 0)
            return k;
    return index;
}

/* Ratios go with exposure: all are brought to those of the group's first field. */
static void bring_to_exposures(plate_job *job, uf_plate_group *g, int index, uf_reference_unit *unit)
{
    struct uf_settings s = uf_plate_reference_settings(&job->plan, index);
    for (int k = 0; k < UF_CHANNELS; k++) {
        if (isnan(g->exposure_ms[k]))
            g->exposure_ms[k] = s.camera[k].exposure_ms;
        double factor = g->exposure_ms[k] / s.camera[k].exposure_ms;
        if (!isnan(factor))
            unit->ratio *= k == UF_NEAR ? factor : 1 / factor;
    }
}

static uf_status pool_group(plate_job *job, int group, uf_work *work, uf_error *error)
{
    uf_plate_group *g = &job->plan.groups[group];
    uf_reference_unit *units;
    int count = 0, rows = job->plan.sheet.count;
    uf_status status = check_pooled(job, group, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)rows, sizeof *units, "the reference", &units, error);
    if (status != UF_OK)
        return status;
    for (int k = 0; k < rows; k++) {
        if (job->plan.rows[k].group != group || !uf_plate_is_reference(&job->plan, k))
            continue;
        units[count] = job->references[k];
        units[count].well = well_number(&job->plan, k);
        bring_to_exposures(job, g, k, &units[count++]);
        g->cells += job->reference_cells[k];
    }
    status = uf_reference_pool_units(work, units, count, &g->pool, error);
    if (status == UF_OK && !g->pool.wells)
        return no_reference(job, group, error);
    if (status == UF_OK && g->pool.worst_well >= 0)
        g->worst_well = job->plan.rows[g->pool.worst_well].row->text[UF_SHEET_WELL];
    g->pool.ratio = uf_round_digits(g->pool.ratio, 12);
    g->pool.ratio_sd = uf_round_digits(g->pool.ratio_sd, 12);
    return status;
}

/* ---- following a microscope ------------------------------------------------------------------ */

static int has_given_up(const plate_job *job)
{
    return now_seconds() - job->follow.changed > 60 * job->request->give_up_min;
}

/* Until every field that a reference is to come from is complete. */
static uf_status await_references(plate_job *job, uf_error *error)
{
    int missing = 1;
    while (missing && !is_stopped(job)) {
        double now = now_seconds();
        missing = 0;
        for (int k = 0; k < job->plan.sheet.count; k++)
            if ((uf_plate_is_reference(&job->plan, k) || uf_plate_is_blank(&job->plan, k)) &&
                !uf_follow_is_complete(&job->follow, k, now))
                missing++;
        if (missing && has_given_up(job))
            return uf_fail(
                error, UF_INPUT,
                "%d fields that the reference is to come from have not come; acquire them first, or give a measured "
                "reference",
                missing);
        if (missing)
            uf_watch_wait(&job->follow.watch, 1);
    }
    return UF_OK;
}

/* Measures what is complete, again and again, until all is or nothing comes any more; what is still missing then fails as a
 * missing file does. */
static void follow_fields(plate_job *job, uf_task *task)
{
    int count = job->plan.sheet.count, open_rows = 1;
    while (open_rows && !is_ended(job)) {
        double now = now_seconds();
        int given_up = has_given_up(job), ready = 0;
        open_rows = 0;
        for (int k = 0; k < count; k++) {
            if (job->states[k] != ROW_WAITING && job->states[k] != ROW_NOT_COMPLETE)
                continue;
            int complete = uf_follow_is_complete(&job->follow, k, now) || given_up;
            job->states[k] = complete ? ROW_WAITING : ROW_NOT_COMPLETE;
            ready += complete;
            open_rows += !complete;
        }
        if (ready)
            uf_pool_run(job->pool, count, task, job);
        else if (open_rows)
            uf_watch_wait(&job->follow.watch, 1);
    }
}

static uf_status find_references(plate_job *job, uf_error *error)
{
    int count = job->plan.sheet.count, wanted = 0;
    uf_work work = {0};
    job->references = calloc((size_t)count + 1, sizeof *job->references);
    job->reference_cells = calloc((size_t)count + 1, sizeof *job->reference_cells);
    if (!job->references || !job->reference_cells)
        return uf_fail_memory(error, "the references");
    uf_status status = job->request->follow ? await_references(job, error) : UF_OK;
    if (status != UF_OK)
        return status;
    status = find_blanks(job, error);
    if (status != UF_OK)
        return status;
    for (int k = 0; k < count; k++)
        wanted += uf_plate_is_reference(&job->plan, k);
    begin_telling(job, "references", 0, wanted);
    uf_pool_run(job->pool, count, measure_reference, job);
    tell(job, 1);
    if (is_stopped(job))
        return uf_fail(error, UF_STOPPED, "stopped before the references were known; the same command starts over");
    for (int k = 0; status == UF_OK && k < job->plan.group_count; k++)
        if (job->plan.groups[k].estimated)
            status = pool_group(job, k, &work, error);
    uf_arena_free(&work.arena);
    return status;
}

/* ---- one field ------------------------------------------------------------------------------- */

/* Everything goes into the batch, under the mutex. */
static uf_status put_picture(void *context, const char *folder, const char *name, const uf_text *bytes,
                             uf_error *error)
{
    plate_job *job = context;
    pthread_mutex_lock(&job->mutex);
    uf_status status =
        bytes ? uf_output_write_soon(&job->output, &job->batch, folder, name, bytes->bytes, bytes->length, error)
              : uf_output_remove(&job->output, folder, name, error);
    pthread_mutex_unlock(&job->mutex);
    return status;
}

typedef struct field_work {
    uf_work work;
    uf_reader reader;
    struct uf_settings settings;
    uf_field_files files;
    uf_input_facts near, wide; /* before they were read */
    uf_plan plan;
    uf_field_result result;
    uf_text warnings;
    uf_pictures pictures;
} field_work;

static int is_same(uf_input_facts a, uf_input_facts b)
{
    return a.bytes == b.bytes && a.changed_ns == b.changed_ns;
}

static uf_status measure_field(plate_job *job, int index, field_work *f, uf_error *error)
{
    uf_status status = uf_field_read(&f->reader, &f->files, &f->plan, &f->result, error);
    if (status == UF_OK && (!is_same(f->near, uf_input_facts_of(f->files.near_path)) ||
                            !is_same(f->wide, uf_input_facts_of(f->files.wide_path))))
        status = uf_fail(error, UF_INPUT, "%s: changed while it was read; run again when it is complete",
                         f->files.near_path);
    if (status == UF_OK)
        status = uf_field_run(&f->work, &f->plan, &f->settings, &f->result, error);
    if (status != UF_OK)
        return status;
    uf_field_warn(&f->warnings, &f->settings, &f->plan, &f->result);
    f->pictures = (uf_pictures){.work = &f->work,
                                .settings = &f->settings,
                                .plan = &f->plan,
                                .result = &f->result,
                                .key = job->plan.rows[index].key,
                                .title = job->plan.rows[index].row->field_id,
                                .thumbnail = 1,
                                .put = put_picture,
                                .context = job};
    return uf_pictures_write(&f->pictures, error);
}

/* Files that were asked for and not read (a field that failed) are inputs too: when they come or change, it is time to try
 * again. */
static void add_wanted(uf_record_input *inputs, int *count, const char *role, const char *path)
{
    for (int k = 0; k < *count; k++)
        if (path && strcmp(inputs[k].path, path) == 0)
            return;
    if (path)
        inputs[(*count)++] = (uf_record_input){role, path, uf_input_facts_of(path), 0};
}

static uf_status list_inputs(field_work *f, uf_plate_record *record, uf_error *error)
{
    enum { MORE = 12 };
    const uf_settings *s = &f->settings;
    uf_status status =
        uf_take(&f->work, (size_t)f->reader.count + MORE, sizeof *record->inputs, "a record", &record->inputs, error);
    if (status != UF_OK)
        return status;
    for (int k = 0; k < f->reader.count; k++) {
        const uf_run_input *in = &f->reader.inputs[k];
        record->inputs[record->input_count++] =
            (uf_record_input){in->role, in->path, uf_input_facts_of(in->path), in->fingerprint};
    }
    add_wanted(record->inputs, &record->input_count, "near", f->files.near_path);
    add_wanted(record->inputs, &record->input_count, "wide", f->files.wide_path);
    add_wanted(record->inputs, &record->input_count, "mask", f->files.mask_path);
    add_wanted(record->inputs, &record->input_count, "nuclei image", f->files.nuclei_path);
    for (int k = 0; k < UF_CHANNELS; k++) {
        add_wanted(record->inputs, &record->input_count, "flat", s->flat[k].file);
        add_wanted(record->inputs, &record->input_count, "dark", s->camera[k].dark);
        add_wanted(record->inputs, &record->input_count, "defect map", s->camera[k].defects);
    }
    return UF_OK;
}

static uf_status put_record(plate_job *job, int index, field_work *f, uf_plate_record *record, uf_error *error)
{
    const uf_plate_row *r = &job->plan.rows[index];
    uf_text bytes = {0}, name = {0};
    uf_status status = list_inputs(f, record, error);
    if (status == UF_OK) {
        uf_plate_record_put(&bytes, job->plan.hash, r->row->field_id, record);
        uf_text_printf(&name, "%s.record", r->key);
        status = uf_text_check(&bytes, "a record", error);
    }
    if (status == UF_OK)
        status = uf_text_check(&name, "a record", error);
    if (status == UF_OK) {
        pthread_mutex_lock(&job->mutex);
        status = uf_output_record_soon(&job->output, &job->batch, UF_RECORDS, name.bytes, bytes.bytes, bytes.length,
                                       error);
        pthread_mutex_unlock(&job->mutex);
    }
    uf_text_free(&bytes);
    uf_text_free(&name);
    return status;
}

static void set_failed(uf_plate_record *record, const char *why)
{
    for (int k = 0; k < uf_table_fields.count; k++) {
        const uf_column *c = &uf_table_fields.columns[k];
        if (c->kind == UF_COLUMN_REAL || c->kind == UF_COLUMN_COUNT)
            *(double *)(void *)((char *)&record->field + c->offset) = (double)NAN;
    }
    record->field.status = UF_FIELD_FAILED;
    record->field.reason = why;
}

/* Measures, writes pictures, then the record. Only what cannot be written ends the run. */
static uf_status do_field(plate_job *job, int index, field_work *f, uf_error *error)
{
    uf_plate_record record = {.thumbnail_white_adu = (double)NAN};
    uf_status status = measure_field(job, index, f, error);
    char why[UF_ERROR_TEXT];
    if (status == UF_OUTPUT)
        return status;
    if (status != UF_OK) {
        (void)snprintf(why, sizeof why, "%s", error->text);
        set_failed(&record, why);
    } else {
        record.field = f->result.field;
        record.cells = f->result.rows;
        record.spots = f->result.spots;
        record.warnings = f->warnings.bytes;
        record.overlay = *f->pictures.overlay_name ? f->pictures.overlay_name : NULL;
        record.thumbnail_white_adu = f->pictures.thumbnail_white_adu;
        record.depth_nm = f->plan.depth_nm;
        record.contact_cutoff_nm = f->settings.contact.cutoff_nm;
    }
    return put_record(job, index, f, &record, error);
}

static void commit_if_due(plate_job *job)
{
    uf_error error;
    double now = now_seconds();
    if (++job->since_commit < COMMIT_FIELDS && now - job->committed < commit_seconds)
        return;
    uf_status status = uf_output_batch_commit(&job->output, &job->batch, &error);
    job->since_commit = 0;
    job->committed = now;
    if (status != UF_OK)
        end_run(job, status, &error);
}

/* The next field that a hand will come to is fetched from the disk while this one is worked on. */
static void expect_next(const plate_job *job, int index)
{
    for (int k = index + 1; k < job->plan.sheet.count && k <= index + job->hands; k++)
        if (job->states[k] == ROW_WAITING) {
            uf_input_expect(job->plan.rows[k].row->near_path);
            uf_input_expect(job->plan.rows[k].row->wide_path);
        }
}

static void field_task(void *context, int hand, int index)
{
    plate_job *job = context;
    if (job->states[index] != ROW_WAITING || is_ended(job))
        return;
    double started = now_seconds();
    uf_error error;
    field_work f = {.work = {.arena = job->arenas[hand]},
                    .settings = uf_plate_settings(&job->plan, index),
                    .files = uf_plate_files(&job->plan, index)};
    f.reader = (uf_reader){.work = &f.work, .settings = &f.settings};
    f.near = uf_input_facts_of(f.files.near_path);
    f.wide = uf_input_facts_of(f.files.wide_path);
    expect_next(job, index);
    uf_arena_mark mark = uf_arena_now(&f.work.arena);
    uf_status status = do_field(job, index, &f, &error);
    uf_field_result_free(&f.result);
    uf_text_free(&f.warnings);
    uf_reader_free(&f.reader);
    uf_arena_back(&f.work.arena, mark);
    job->arenas[hand] = f.work.arena;
    pthread_mutex_lock(&job->mutex);
    if (status != UF_OK)
        end_run(job, status, &error);
    else {
        job->states[index] = ROW_MEASURED;
        job->seconds[index] = now_seconds() - started;
        job->done++;
        job->measured++;
        commit_if_due(job);
    }
    tell(job, 0);
    pthread_mutex_unlock(&job->mutex);
}

/* ---- which fields ---------------------------------------------------------------------------- */

/* Kept is what has a whole record of this plan, of files as they are now (unless inputs need not be here: merge). */
static uf_status look_at_records(plate_job *job, int inputs_matter, uf_error *error)
{
    const uf_plate_request *r = job->request;
    int count = job->plan.sheet.count;
    uf_status status = UF_OK;
    uf_arena arena = {0};
    job->states = calloc((size_t)count + 1, sizeof *job->states);
    job->seconds = calloc((size_t)count + 1, sizeof *job->seconds);
    if (!job->states || !job->seconds)
        return uf_fail_memory(error, "the run");
    for (int k = 0; status == UF_OK && k < count; k++) {
        uf_plate_record record;
        int found;
        if (r->shards && k % r->shards != r->shard - 1) {
            job->states[k] = ROW_OTHER_SHARD;
            continue;
        }
        uf_arena_mark mark = uf_arena_now(&arena);
        job->summary->fields++;
        if (!r->fresh) {
            status = uf_plate_record_of(&job->output, &job->plan, k, &arena, &record, &found, error);
            if (status == UF_OK && found && (!inputs_matter || uf_plate_record_is_current(&record)))
                job->states[k] = ROW_KEPT;
        }
        job->summary->kept += job->states[k] == ROW_KEPT;
        uf_arena_back(&arena, mark);
    }
    uf_arena_free(&arena);
    return status;
}

/* ---- plan and lock --------------------------------------------------------------------------- */

static uf_status take_lock(plate_job *job, uf_error *error)
{
    char name[48], who[256], host[100] = "?", when[40] = "";
    time_t now = time(NULL);
    struct tm parts;
    if (gmtime_r(&now, &parts))
        (void)strftime(when, sizeof when, "%Y-%m-%dT%H:%M:%SZ", &parts);
    (void)gethostname(host, sizeof host - 1);
    (void)snprintf(who, sizeof who, "process %ld on %s since %s\n", (long)getpid(), host, when);
    if (job->request->shards)
        (void)snprintf(name, sizeof name, ".lock-%d-of-%d", job->request->shard, job->request->shards);
    else
        (void)snprintf(name, sizeof name, ".lock");
    return uf_output_lock(&job->output, name, who, &job->lock, error);
}

static uf_status read_plan(plate_job *job, uf_error *error)
{
    const uf_plate_request *r = job->request;
    job->plan.all = (uf_row_settings){.instruments = r->instruments,
                                      .assays = r->assays,
                                      .instrument_count = r->instrument_count,
                                      .assay_count = r->assay_count};
    return uf_plate_plan_read(&job->plan, r->sheet_path, r->exclude_path, error);
}

/* plan.json as it must be for these settings and this sheet; references are found when no earlier plan of the same draft tells
 * them. */
static uf_status settle_plan(plate_job *job, uf_error *error)
{
    uf_text json = {0}, before = {0};
    uf_status status = uf_plate_plan_put(&job->plan, &json, error);
    if (status == UF_OK)
        status = uf_output_read(&job->output, NULL, "plan.json", &before, error);
    uf_text_free(&json);
    int known = status == UF_OK && uf_plate_plan_take_references(&job->plan, &before);
    if (status == UF_OK && job->request->shards && !known)
        status = uf_fail(
            error, UF_INPUT,
            "%s: there is no plan of this sheet and these settings; make it first: the same command with --prepare "
            "instead of --shard",
            job->request->out_dir);
    if (status == UF_OK && uf_plate_needs_references(&job->plan) &&
        (!known || (job->request->fresh && !job->request->shards)))
        status = find_references(job, error);
    if (status == UF_OK)
        status = uf_plate_plan_put(&job->plan, &json, error);
    int same = json.length == before.length && (!json.length || memcmp(json.bytes, before.bytes, json.length) == 0);
    /* A new plan makes what older tables say untrue: run.json, which vouches for them, goes first. */
    if (status == UF_OK && !same)
        status = uf_output_remove(&job->output, NULL, "run.json", error);
    if (status == UF_OK && !same)
        status = uf_output_write(&job->output, NULL, "plan.json", json.bytes, json.length, error);
    uf_text_free(&json);
    uf_text_free(&before);
    return status;
}

/* ---- results --------------------------------------------------------------------------------- */

static uf_status write_timing(plate_job *job, uf_error *error)
{
    uf_text out = {0};
    uf_text_add(&out, "field_id,seconds\n");
    for (int k = 0; k < job->plan.sheet.count; k++) {
        if (job->states[k] != ROW_MEASURED)
            continue;
        uf_csv_field(&out, job->plan.rows[k].row->field_id);
        uf_text_add(&out, ",");
        uf_text_number(&out, job->seconds[k], 4);
        uf_text_add(&out, "\n");
        if (job->seconds[k] > job->summary->slowest_seconds) {
            job->summary->slowest_seconds = job->seconds[k];
            (void)snprintf(job->summary->slowest, sizeof job->summary->slowest, "%s",
                           job->plan.rows[k].row->field_id);
        }
    }
    /* Shards write at once: each has a file of its own. */
    char name[64] = "timing.csv";
    if (job->request->shards)
        (void)snprintf(name, sizeof name, "timing-%d-of-%d.csv", job->request->shard, job->request->shards);
    uf_status status = uf_text_check(&out, name, error);
    if (status == UF_OK)
        status = uf_output_write(&job->output, "log", name, out.bytes, out.length, error);
    uf_text_free(&out);
    return status;
}

static uf_status finish_tables(plate_job *job, uf_error *error)
{
    uf_text json = {0};
    uf_plate_well_list wells = {0};
    uf_status status = uf_output_remove(&job->output, NULL, "run.json", error);
    if (status == UF_OK)
        status = uf_plate_tables(&job->output, &job->plan, job->summary, &wells, error);
    if (status == UF_OK)
        status = uf_plate_pictures(&job->output, &job->plan, &wells, job->pool, error);
    uf_plate_well_list_free(&wells);
    if (status == UF_OK)
        status = uf_plate_json(&json, &job->output, &job->plan, job->summary, job->request->command, error);
    if (status == UF_OK)
        status = uf_output_write(&job->output, NULL, "run.json", json.bytes, json.length, error);
    uf_text_free(&json);
    return status;
}

static void tell_references(const plate_job *job)
{
    size_t at = 0, size = sizeof job->summary->references;
    char *text = job->summary->references;
    for (int k = 0; k < job->plan.group_count && at < size; k++) {
        const uf_plate_group *g = &job->plan.groups[k];
        if (!g->estimated)
            continue;
        at += (size_t)snprintf(text + at, size - at, "%s%s%s: %.4g (1 sd %.2g) from %d wells, %d cells\n", g->plate,
                               *g->plate && *g->session ? ", " : "", g->session, g->pool.ratio, g->pool.ratio_sd,
                               g->pool.wells, g->cells);
    }
}

static int waiting_rows(const plate_job *job)
{
    int waiting = 0;
    for (int k = 0; k < job->plan.sheet.count; k++)
        waiting += job->states[k] == ROW_WAITING || job->states[k] == ROW_NOT_COMPLETE;
    return waiting;
}

static uf_status measure_fields(plate_job *job, uf_error *error)
{
    uf_status status = UF_OK;
    if (waiting_rows(job))
        status = uf_output_remove(&job->output, NULL, "run.json", error);
    if (status != UF_OK)
        return status;
    begin_telling(job, "fields", job->summary->kept, job->summary->fields);
    if (job->request->follow)
        follow_fields(job, field_task);
    else
        uf_pool_run(job->pool, job->plan.sheet.count, field_task, job);
    job->summary->measured = job->measured;
    tell(job, 1);
    /* What is finished is kept even when the run ends here. */
    status = uf_output_batch_commit(&job->output, &job->batch, error);
    if (job->status != UF_OK) {
        if (error)
            *error = job->error;
        return job->status;
    }
    return status;
}

static uf_status start_hands(plate_job *job, uf_error *error)
{
    uf_status status = uf_pool_new(&job->pool, job->request->threads, error);
    uf_work like = {.pool = job->pool};
    job->hands = status == UF_OK ? uf_hands(&like) : 0;
    job->arenas = calloc((size_t)job->hands + 1, sizeof *job->arenas);
    return job->arenas || status != UF_OK ? status : uf_fail_memory(error, "the run");
}

static uf_status run(plate_job *job, uf_error *error)
{
    const uf_plate_request *r = job->request;
    uf_status status = read_plan(job, error);
    if (status == UF_OK)
        status = uf_output_open(&job->output, r->out_dir, error);
    if (status == UF_OK)
        status = take_lock(job, error);
    if (status == UF_OK)
        status = start_hands(job, error);
    if (status == UF_OK && r->follow)
        status = uf_follow_start(&job->follow, &job->plan, now_seconds(), error);
    if (status == UF_OK)
        status = settle_plan(job, error);
    tell_references(job);
    job->summary->prepared_only = r->prepare;
    if (status != UF_OK || r->prepare) {
        job->summary->fields = job->plan.sheet.count;
        return status;
    }
    status = look_at_records(job, 1, error);
    if (status == UF_OK)
        status = measure_fields(job, error);
    if (status == UF_OK && is_stopped(job) && waiting_rows(job)) {
        job->summary->stopped = 1;
        return uf_fail(error, UF_STOPPED, "stopped: %d of %d fields are done and kept; the same command goes on",
                       job->summary->kept + job->summary->measured, job->summary->fields);
    }
    if (status == UF_OK)
        status = write_timing(job, error);
    if (status == UF_OK && !r->shards)
        status = finish_tables(job, error);
    return status;
}

static void free_job(plate_job *job)
{
    for (int k = 0; job->arenas && k < job->hands; k++)
        uf_arena_free(&job->arenas[k]);
    free(job->arenas);
    free(job->states);
    free(job->seconds);
    free(job->references);
    free(job->reference_cells);
    free(job->blanks);
    uf_follow_free(&job->follow);
    uf_output_batch_drop(&job->batch);
    uf_pool_free(&job->pool);
    uf_plate_plan_free(&job->plan);
    if (job->lock >= 0)
        (void)close(job->lock);
    uf_output_close(&job->output);
    (void)pthread_mutex_destroy(&job->mutex);
    free(job);
}

static plate_job *new_job(const uf_plate_request *request, uf_plate_summary *summary)
{
    plate_job *job = calloc(1, sizeof *job);
    *summary = (uf_plate_summary){0};
    if (!job)
        return NULL;
    job->request = request;
    job->summary = summary;
    job->lock = -1;
    (void)pthread_mutex_init(&job->mutex, NULL);
    return job;
}

uf_status uf_plate(const uf_plate_request *request, uf_plate_summary *summary, uf_error *error)
{
    double started = now_seconds();
    plate_job *job = new_job(request, summary);
    if (!job)
        return uf_fail_memory(error, "the run");
    uf_status status = run(job, error);
    summary->seconds = now_seconds() - started;
    free_job(job);
    return status;
}

/* ---- shards joined --------------------------------------------------------------------------- */

/* Copies what a part has of one field, pictures first. */
static uf_status copy_file(plate_job *job, const uf_output *part, const char *folder, const char *name, int is_record,
                           uf_error *error)
{
    uf_text bytes = {0};
    uf_status status = uf_output_read(part, folder, name, &bytes, error);
    if (status == UF_OK && bytes.length)
        status =
            is_record
                ? uf_output_record_soon(&job->output, &job->batch, folder, name, bytes.bytes, bytes.length, error)
                : uf_output_write_soon(&job->output, &job->batch, folder, name, bytes.bytes, bytes.length, error);
    uf_text_free(&bytes);
    return status;
}

static uf_status copy_field(plate_job *job, const uf_output *part, int index, uf_error *error)
{
    static const struct {
        const char *folder, *ending;
    } files[] = {{"overlay", ".png"}, {"outlines", ".json"}, {"gap", ".tif"},
                 {"labels", ".tif"},  {"thumb", ".png"},     {UF_RECORDS, ".record"}};
    uf_status status = UF_OK;
    for (size_t k = 0; status == UF_OK && k < sizeof files / sizeof files[0]; k++) {
        uf_text name = {0};
        uf_text_printf(&name, "%s%s", job->plan.rows[index].key, files[k].ending);
        status = uf_text_check(&name, "file names", error);
        if (status == UF_OK)
            status =
                copy_file(job, part, files[k].folder, name.bytes, k + 1 == sizeof files / sizeof files[0], error);
        uf_text_free(&name);
    }
    return status;
}

static uf_status doubled(const plate_job *job, int index, const char *part, uf_error *error)
{
    return uf_fail(error, UF_INPUT,
                   "%s: field '%s' is there already, with another result; were two shards given one number?", part,
                   job->plan.rows[index].row->field_id);
}

static int same_record(const uf_output *a, const uf_output *b, const char *key)
{
    uf_text name = {0}, x = {0}, y = {0};
    uf_text_printf(&name, "%s.record", key);
    int same = !name.failed && uf_output_read(a, UF_RECORDS, name.bytes, &x, NULL) == UF_OK &&
               uf_output_read(b, UF_RECORDS, name.bytes, &y, NULL) == UF_OK && x.length == y.length &&
               (!x.length || memcmp(x.bytes, y.bytes, x.length) == 0);
    uf_text_free(&name);
    uf_text_free(&x);
    uf_text_free(&y);
    return same;
}

static uf_status join_part(plate_job *job, const char *path, uf_error *error)
{
    uf_output part = {0};
    uf_arena arena = {0};
    uf_status status = uf_output_open(&part, path, error);
    for (int k = 0; status == UF_OK && k < job->plan.sheet.count; k++) {
        uf_plate_record record;
        int theirs, ours = 0;
        uf_arena_mark mark = uf_arena_now(&arena);
        status = uf_plate_record_of(&part, &job->plan, k, &arena, &record, &theirs, error);
        if (status == UF_OK && theirs)
            status = uf_plate_record_of(&job->output, &job->plan, k, &arena, &record, &ours, error);
        if (status == UF_OK && theirs && ours && !same_record(&part, &job->output, job->plan.rows[k].key))
            status = doubled(job, k, path, error);
        if (status == UF_OK && theirs && !ours)
            status = copy_field(job, &part, k, error);
        uf_arena_back(&arena, mark);
    }
    if (status == UF_OK)
        status = uf_output_batch_commit(&job->output, &job->batch, error);
    uf_arena_free(&arena);
    uf_output_close(&part);
    return status;
}

/* The first few by name, the rest by number. */
static uf_status check_missing(plate_job *job, uf_error *error)
{
    uf_text names = {0};
    int missing = 0;
    uf_status status = UF_OK;
    for (int k = 0; k < job->plan.sheet.count; k++) {
        if (job->states[k] == ROW_KEPT)
            continue;
        if (missing++ < 5)
            uf_text_printf(&names, "%s%s", missing > 1 ? ", " : "", job->plan.rows[k].row->field_id);
    }
    if (missing)
        status = uf_fail(error, UF_INPUT,
                         "%d of %d fields are missing (%s%s): did every shard end? Run those that did not again",
                         missing, job->plan.sheet.count, names.bytes ? names.bytes : "", missing > 5 ? ", .." : "");
    uf_text_free(&names);
    return status;
}

static uf_status merge(plate_job *job, const char *const *parts, int part_count, uf_error *error)
{
    uf_text json = {0}, before = {0};
    uf_status status = read_plan(job, error);
    if (status == UF_OK)
        status = uf_output_open(&job->output, job->request->out_dir, error);
    if (status == UF_OK)
        status = take_lock(job, error);
    if (status == UF_OK)
        status = uf_plate_plan_put(&job->plan, &json, error);
    if (status == UF_OK)
        status = uf_output_read(&job->output, NULL, "plan.json", &before, error);
    uf_text_free(&json);
    if (status == UF_OK && !uf_plate_plan_take_references(&job->plan, &before))
        status = uf_fail(error, UF_INPUT,
                         "%s: holds no plan of this sheet and these settings; merge takes the same sheet and -i "
                         "and -a as plate --prepare did",
                         job->request->out_dir);
    if (status == UF_OK)
        status = uf_plate_plan_put(&job->plan, &json, error);
    uf_text_free(&json);
    uf_text_free(&before);
    for (int k = 0; status == UF_OK && k < part_count; k++)
        status = join_part(job, parts[k], error);
    if (status == UF_OK)
        status = look_at_records(job, 0, error);
    if (status == UF_OK)
        status = check_missing(job, error);
    tell_references(job);
    return status == UF_OK ? finish_tables(job, error) : status;
}

uf_status uf_merge(const uf_plate_request *request, const char *const *parts, int part_count,
                   uf_plate_summary *summary, uf_error *error)
{
    double started = now_seconds();
    plate_job *job = new_job(request, summary);
    if (!job)
        return uf_fail_memory(error, "the run");
    uf_status status = merge(job, parts, part_count, error);
    summary->seconds = now_seconds() - started;
    free_job(job);
    return status;
}
