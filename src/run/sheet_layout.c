/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/sheet_layout.h"

#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>

#include "io/csv.h"
#include "io/csv_read.h"
#include "io/image_encode.h"
#include "io/output.h"
#include "report/plate_map.h"
#include "sheet/arms.h"

static const size_t most_list_bytes = (size_t)8 << 20;

typedef struct layout_job {
    const uf_sheet_layout_request *request;
    uf_sheet_layout_summary *summary;
    uf_error *error;
    uf_vessel vessel;
    uf_arms arms;
    uf_drawing *plates;
    bool any_treatment, any_coating, any_dose, any_role, one_unit; /* what the drawing has to say */
} layout_job;

/* ---- what is asked --------------------------------------------------------------------------- */

/* Usual numbers of control wells: eight let a plate be judged, and a small plate has no room for them. */
static int usual_controls(uf_vessel vessel)
{
    return vessel.wells >= 96 ? 8 : vessel.wells >= 24 ? 4 : 1;
}

static uf_status add_all(layout_job *job, const char *const *texts, int count, uf_role role, int wells)
{
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < count; k++)
        status = uf_arms_add(&job->arms, texts[k], role, wells, job->error);
    return status;
}

static uf_status read_list(layout_job *job)
{
    uf_csv_table table;
    const char *path = job->request->list;
    uf_status status = uf_csv_read_loose(&table, path, most_list_bytes, job->error);
    if (status == UF_OK)
        status = uf_arms_take(&job->arms, &table, path, job->request->wells, &job->summary->faults, job->error);
    uf_csv_free(&table);
    return status;
}

static void note_what_differs(layout_job *job)
{
    const char *unit = NULL;
    job->one_unit = true;
    for (int k = 0; k < job->arms.count; k++) {
        const uf_arm *arm = &job->arms.list[k];
        job->any_treatment |= *arm->treatment != '\0';
        job->any_coating |= *arm->coating != '\0';
        job->any_role |= arm->role != UF_ROLE_SAMPLE;
        if (isnan(arm->dose))
            continue;
        job->any_dose = true;
        job->one_unit &= !unit || strcmp(unit, arm->unit) == 0;
        unit = arm->unit;
    }
}

static uf_status take_arms(layout_job *job)
{
    const uf_sheet_layout_request *r = job->request;
    int usual = usual_controls(job->vessel);
    uf_status status = r->list ? read_list(job) : UF_OK;
    if (status == UF_OK)
        status =
            add_all(job, r->controls, r->control_count, UF_ROLE_CONTROL, r->control_wells ? r->control_wells : usual);
    if (status == UF_OK)
        status = add_all(job, r->positives, r->positive_count, UF_ROLE_POSITIVE,
                         r->positive_wells ? r->positive_wells : usual);
    if (status == UF_OK)
        status = add_all(job, r->treatments, r->treatment_count, UF_ROLE_SAMPLE, r->wells);
    if (status == UF_OK && !job->arms.count && !job->summary->faults.faults)
        status = uf_fail(
            job->error, UF_USAGE,
            "sheet layout needs treatments: a list, or --treatment 'NAME: 0.1, 1, 10 uM', and --control NAME");
    note_what_differs(job);
    return status;
}

static uf_status draw_plates(layout_job *job)
{
    const uf_sheet_layout_request *r = job->request;
    uf_status status = UF_OK;
    job->plates = calloc((size_t)r->plates, sizeof *job->plates);
    if (!job->plates)
        return uf_fail_memory(job->error, "plates");
    for (int p = 0; status == UF_OK && p < r->plates; p++) {
        status = uf_draw_plate(job->arms.list, job->arms.count, job->vessel, r->edge, r->seed, p, &job->plates[p],
                               job->error);
        int without = status == UF_OK ? uf_quarters_without(&job->plates[p], job->arms.list, UF_ROLE_CONTROL) : 0;
        if (without > job->summary->quarters_without_control)
            job->summary->quarters_without_control = without;
    }
    return status;
}

/* ---- names ----------------------------------------------------------------------------------- */

static void plate_name(const layout_job *job, int plate, uf_text *out)
{
    out->length = 0;
    uf_text_printf(out, "%s%d", job->request->plate_name, plate + 1);
}

/* OUT without ".csv", and what follows. */
static void file_name(const layout_job *job, const char *ending, uf_text *out)
{
    const char *path = job->request->out;
    size_t length = strlen(path);
    if (length > 4 && strcasecmp(path + length - 4, ".csv") == 0)
        length -= 4;
    out->length = 0;
    uf_text_bytes(out, path, length);
    uf_text_add(out, ending);
}

static uf_status write_file(layout_job *job, const char *ending, const uf_text *bytes)
{
    uf_text path = {0};
    file_name(job, ending, &path);
    uf_status status = uf_text_check(bytes, "a layout", job->error);
    if (status == UF_OK)
        status = uf_text_check(&path, "a layout", job->error);
    if (status == UF_OK)
        status = uf_output_file(path.bytes, bytes->bytes, bytes->length, job->error);
    if (status == UF_OK)
        uf_text_printf(&job->summary->files, "%s\n", path.bytes);
    uf_text_free(&path);
    return status;
}

/* ---- the layout file ------------------------------------------------------------------------- */

enum property { TREATMENT, COATING, DOSE, ROLE, BLOCK };

static void put_value(const layout_job *job, const uf_drawing *d, int row, int column, enum property what,
                      uf_text *out)
{
    int index = d->arm[row][column];
    uf_text value = {0};
    if (index < 0)
        return;
    const uf_arm *arm = &job->arms.list[index];
    if (what == TREATMENT)
        uf_text_add(&value, arm->treatment);
    else if (what == COATING)
        uf_text_add(&value, arm->coating);
    else if (what == DOSE)
        uf_arm_dose(arm, !job->one_unit, &value);
    else if (what == ROLE)
        uf_text_add(&value, uf_role_words[arm->role]);
    else
        uf_text_printf(&value, "%d", d->block[row][column] + 1);
    if (value.length)
        uf_csv_field(out, value.bytes);
    out->failed |= value.failed;
    uf_text_free(&value);
}

static const char *unit_of(const layout_job *job)
{
    for (int k = 0; k < job->arms.count; k++)
        if (!isnan(job->arms.list[k].dose))
            return job->arms.list[k].unit;
    return "";
}

static void put_corner(const layout_job *job, enum property what, uf_text *out)
{
    static const char *const names[] = {"treatment", "coating", "dose", "role", "block"};
    uf_text corner = {0};
    uf_text_add(&corner, names[what]);
    if (what == DOSE && job->one_unit && *unit_of(job))
        uf_text_printf(&corner, " (%s)", unit_of(job));
    uf_csv_field(out, corner.bytes ? corner.bytes : "");
    uf_text_free(&corner);
}

static void put_block(const layout_job *job, const uf_drawing *d, enum property what, uf_text *out)
{
    put_corner(job, what, out);
    for (int c = 0; c < d->vessel.columns; c++)
        uf_text_printf(out, ",%d", c + 1);
    for (int r = 0; r < d->vessel.rows; r++) {
        char name[UF_WELL_NAME];
        uf_well_name(name, (uf_well){r, 0});
        uf_text_printf(out, "\n%.*s", (int)strlen(name) - 2, name);
        for (int c = 0; c < d->vessel.columns; c++) {
            uf_text_add(out, ",");
            put_value(job, d, r, c, what, out);
        }
    }
    uf_text_add(out, "\n\n");
}

static uf_status write_layout(layout_job *job)
{
    uf_text out = {0}, name = {0};
    uf_text_printf(&out, "randomised by underfoot sheet layout with seed %" PRIu64 "\n\n", job->request->seed);
    for (int p = 0; p < job->request->plates; p++) {
        const uf_drawing *d = &job->plates[p];
        plate_name(job, p, &name);
        uf_text_add(&out, "plate,");
        uf_csv_field(&out, name.bytes ? name.bytes : "");
        uf_text_add(&out, "\n");
        if (job->any_treatment)
            put_block(job, d, TREATMENT, &out);
        if (job->any_coating)
            put_block(job, d, COATING, &out);
        if (job->any_dose)
            put_block(job, d, DOSE, &out);
        if (job->any_role)
            put_block(job, d, ROLE, &out);
        if (d->blocks > 1)
            put_block(job, d, BLOCK, &out);
    }
    uf_status status = write_file(job, ".csv", &out);
    uf_text_free(&out);
    uf_text_free(&name);
    return status;
}

static uf_status write_plates(layout_job *job)
{
    uf_text out = {0}, name = {0};
    uf_text_add(&out, "plate,replicate\n");
    for (int p = 0; p < job->request->plates; p++) {
        plate_name(job, p, &name);
        uf_csv_field(&out, name.bytes ? name.bytes : "");
        uf_text_printf(&out, ",%d\n", p + 1);
    }
    uf_status status = write_file(job, "_plates.csv", &out);
    uf_text_free(&out);
    uf_text_free(&name);
    return status;
}

/* ---- pipetting ------------------------------------------------------------------------------- */

/* Arms by treatment as they were given, doses from low to high: a tip need not be changed on the way up. */
static int by_use(const void *a, const void *b)
{
    const uf_arm *one = *(const uf_arm *const *)a, *other = *(const uf_arm *const *)b;
    if (one->treatment_index != other->treatment_index)
        return one->treatment_index - other->treatment_index;
    if (isnan(one->dose) || isnan(other->dose))
        return isnan(other->dose) - isnan(one->dose);
    return one->dose < other->dose ? -1 : one->dose > other->dose;
}

static void put_steps(const layout_job *job, int index, int *step, uf_text *out)
{
    const uf_arm *arm = &job->arms.list[index];
    uf_text name = {0}, dose = {0};
    uf_arm_dose(arm, false, &dose);
    for (int p = 0; p < job->request->plates; p++) {
        const uf_drawing *d = &job->plates[p];
        plate_name(job, p, &name);
        for (int c = 0; c < d->vessel.columns; c++)
            for (int r = 0; r < d->vessel.rows; r++) {
                char well[UF_WELL_NAME];
                if (d->arm[r][c] != index)
                    continue;
                uf_well_name(well, (uf_well){r, c});
                uf_text_printf(out, "%d,", ++*step);
                uf_csv_field(out, arm->treatment);
                uf_text_add(out, ",");
                uf_csv_field(out, arm->coating);
                uf_text_printf(out, ",%s,%s,%s,", dose.bytes ? dose.bytes : "", isnan(arm->dose) ? "" : arm->unit,
                               uf_role_words[arm->role]);
                uf_csv_field(out, name.bytes ? name.bytes : "");
                uf_text_printf(out, ",%s\n", well);
            }
    }
    out->failed |= name.failed || dose.failed;
    uf_text_free(&name);
    uf_text_free(&dose);
}

static uf_status write_pipetting(layout_job *job)
{
    uf_text out = {0};
    int step = 0;
    const uf_arm **order = malloc((size_t)job->arms.count * sizeof *order);
    if (!order)
        return uf_fail_memory(job->error, "a layout");
    for (int k = 0; k < job->arms.count; k++)
        order[k] = &job->arms.list[k];
    qsort(order, (size_t)job->arms.count, sizeof *order, by_use);
    uf_text_add(&out, "step,treatment,coating,dose,dose_unit,role,plate,well\n");
    for (int k = 0; k < job->arms.count; k++)
        put_steps(job, (int)(order[k] - job->arms.list), &step, &out);
    free(order);
    uf_status status = write_file(job, "_pipetting.csv", &out);
    uf_text_free(&out);
    return status;
}

/* ---- maps ------------------------------------------------------------------------------------ */

/* What a map points to. */
typedef struct map_words {
    uf_map_well wells[UF_MOST_ROWS * UF_MOST_COLUMNS];
    uf_map_key *keys;
    char rows[UF_MOST_ROWS][UF_WELL_NAME];
    const char *row_names[UF_MOST_ROWS];
    uf_text *doses, *names; /* of the arms; of the treatments */
    uf_text title, note;
} map_words;

static bool start_words(const layout_job *job, map_words *w)
{
    w->keys = calloc((size_t)job->arms.treatments + 1, sizeof *w->keys);
    w->doses = calloc((size_t)job->arms.count + 1, sizeof *w->doses);
    w->names = calloc((size_t)job->arms.treatments + 1, sizeof *w->names);
    if (!w->keys || !w->doses || !w->names)
        return false;
    for (int k = 0; k < job->arms.count; k++) {
        const uf_arm *arm = &job->arms.list[k];
        uf_map_frame frame = arm->role == UF_ROLE_CONTROL    ? UF_MAP_HEAVY
                             : arm->role == UF_ROLE_POSITIVE ? UF_MAP_DOUBLE
                                                             : UF_MAP_THIN;
        uf_text *name = &w->names[arm->treatment_index];
        name->length = 0;
        uf_text_printf(name, "%s%s%s", arm->treatment, *arm->treatment && *arm->coating ? " on " : "", arm->coating);
        w->keys[arm->treatment_index] = (uf_map_key){name->bytes ? name->bytes : "", frame};
        uf_arm_dose(arm, true, &w->doses[k]);
    }
    for (int r = 0; r < UF_MOST_ROWS; r++) {
        uf_well_name(w->rows[r], (uf_well){r, 0});
        w->rows[r][strlen(w->rows[r]) - 2] = '\0';
        w->row_names[r] = w->rows[r];
    }
    return true;
}

static void free_words(const layout_job *job, map_words *w)
{
    for (int k = 0; w->doses && k < job->arms.count; k++)
        uf_text_free(&w->doses[k]);
    for (int k = 0; w->names && k < job->arms.treatments; k++)
        uf_text_free(&w->names[k]);
    free(w->names);
    free(w->doses);
    free(w->keys);
    uf_text_free(&w->title);
    uf_text_free(&w->note);
    free(w);
}

static uf_status draw_map(layout_job *job, map_words *w, int plate, uf_text *png)
{
    const uf_drawing *d = &job->plates[plate];
    uf_plate_map map = {.rows = d->vessel.rows,
                        .columns = d->vessel.columns,
                        .row_names = w->row_names,
                        .wells = w->wells,
                        .keys = w->keys,
                        .key_count = job->arms.treatments};
    uf_work work = {0};
    uf_indexed picture;
    uf_text name = {0};
    for (int r = 0; r < map.rows; r++)
        for (int c = 0; c < map.columns; c++) {
            int arm = d->arm[r][c];
            w->wells[r * map.columns + c] =
                (uf_map_well){arm < 0 ? -1 : job->arms.list[arm].treatment_index,
                              arm >= 0 && w->doses[arm].length ? w->doses[arm].bytes : ""};
        }
    plate_name(job, plate, &name);
    w->title.length = w->note.length = 0;
    uf_text_printf(&w->title, "%s", name.bytes ? name.bytes : "");
    uf_text_printf(&w->note,
                   "Randomised in %d block%s with seed %" PRIu64
                   ". Heavy frame: control; double frame: positive control.",
                   d->blocks, d->blocks == 1 ? "" : "s", job->request->seed);
    map.title = w->title.bytes ? w->title.bytes : "";
    map.note = w->note.bytes ? w->note.bytes : "";
    uf_status status = uf_plate_map_draw(&work, &map, &picture, job->error);
    if (status == UF_OK)
        status = uf_encode_indexed_png(png, &picture, job->error);
    uf_arena_free(&work.arena);
    uf_text_free(&name);
    return status;
}

static uf_status write_maps(layout_job *job)
{
    map_words *w = calloc(1, sizeof *w);
    uf_text ending = {0};
    uf_status status = w && start_words(job, w) ? UF_OK : uf_fail_memory(job->error, "a plate's map");
    for (int p = 0; status == UF_OK && p < job->request->plates; p++) {
        uf_text png = {0};
        ending.length = 0;
        if (job->request->plates > 1)
            uf_text_printf(&ending, "_map%d.png", p + 1);
        else
            uf_text_add(&ending, "_map.png");
        status = draw_map(job, w, p, &png);
        if (status == UF_OK)
            status = write_file(job, ending.bytes ? ending.bytes : "_map.png", &png);
        uf_text_free(&png);
    }
    uf_text_free(&ending);
    if (w)
        free_words(job, w);
    return status;
}

/* ---- all of it ------------------------------------------------------------------------------- */

static uf_status check_request(layout_job *job)
{
    const uf_sheet_layout_request *r = job->request;
    if (uf_vessel_parse(r->vessel, &job->vessel) && job->vessel.wells)
        return UF_OK;
    return uf_fail(job->error, UF_USAGE, "--vessel %.40s: expected 6, 12, 24, 48, 96, 384 or 1536 (wells)",
                   r->vessel);
}

static uf_status write_all(layout_job *job)
{
    uf_status status = write_layout(job);
    if (status == UF_OK)
        status = write_plates(job);
    if (status == UF_OK)
        status = write_pipetting(job);
    return status == UF_OK ? write_maps(job) : status;
}

uf_status uf_sheet_layout(const uf_sheet_layout_request *request, uf_sheet_layout_summary *summary, uf_error *error)
{
    *summary = (uf_sheet_layout_summary){0};
    layout_job job = {.request = request, .summary = summary, .error = error};
    uf_status status = check_request(&job);
    if (status == UF_OK)
        status = take_arms(&job);
    bool good = status == UF_OK && !summary->faults.faults;
    if (good)
        status = draw_plates(&job);
    if (good && status == UF_OK) {
        summary->arms = job.arms.count;
        summary->treatments = job.arms.treatments;
        summary->wells_used = uf_arms_wells(&job.arms);
        summary->vessel_wells = job.vessel.wells;
        summary->blocks = job.plates[0].blocks;
        summary->edge_used = job.plates[0].edge_used;
        status = write_all(&job);
    }
    free(job.plates);
    uf_arms_free(&job.arms);
    return status;
}

void uf_sheet_layout_free(uf_sheet_layout_summary *summary)
{
    uf_text_free(&summary->files);
    uf_faults_free(&summary->faults);
}
