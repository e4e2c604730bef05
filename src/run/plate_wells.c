/* SPDX-License-Identifier: GPL-3.0-or-later */
/* wells.csv and replicates.csv: fields pooled in wells, wells in replicates. */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "fit/robust.h"
#include "io/csv.h"
#include "run/plate_tables.h"
#include "stats/share.h"

/* ---- which cells' columns are metrics -------------------------------------------------------- */

static int is_place(const char *name)
{
    static const char *const places[] = {"x_px", "y_px", "x_um", "y_um", "edge_weight"};
    for (size_t k = 0; k < sizeof places / sizeof *places; k++)
        if (strcmp(places[k], name) == 0)
            return 1;
    return 0;
}

static int find_metrics(const uf_column **metrics)
{
    int count = 0;
    for (int k = 0; k < uf_table_cells.count && count < UF_WELL_METRICS; k++) {
        const uf_column *c = &uf_table_cells.columns[k];
        if ((c->kind == UF_COLUMN_REAL || c->kind == UF_COLUMN_COUNT) && !is_place(c->name))
            metrics[count++] = c;
    }
    return count;
}

/* ---- wells and replicates as lists of rows --------------------------------------------------- */

typedef struct wells_job {
    const uf_output *output;
    const uf_plate_plan *plan;
    uf_plate_summary *summary;
    const uf_column *metrics[UF_WELL_METRICS];
    int metric_count;
    uf_plate_well *wells;
    int well_count, *well_of_row, *members;
    uf_arena arena;
    uf_text table;
} wells_job;

static int well_column(uf_sheet_column c)
{
    switch (c) {
    case UF_SHEET_PLATE:
    case UF_SHEET_WELL:
    case UF_SHEET_VESSEL:
    case UF_SHEET_TREATMENT:
    case UF_SHEET_DOSE:
    case UF_SHEET_DOSE_UNIT:
    case UF_SHEET_COATING:
    case UF_SHEET_REPLICATE:
    case UF_SHEET_SESSION:
    case UF_SHEET_ROLE:
    case UF_SHEET_TIME_MIN:
        return 1;
    default:
        return 0;
    }
}

static int replicate_column(uf_sheet_column c)
{
    return well_column(c) && c != UF_SHEET_PLATE && c != UF_SHEET_WELL && c != UF_SHEET_VESSEL &&
           c != UF_SHEET_SESSION;
}

static int agree(const uf_sheet *sheet, const uf_sheet_row *a, const uf_sheet_row *b, uf_want_column *want)
{
    for (int c = 0; c < UF_SHEET_COLUMNS; c++)
        if (sheet->has[c] && want((uf_sheet_column)c) && strcmp(a->text[c], b->text[c]) != 0)
            return 0;
    return 1;
}

/* A row without a well is a well of its own. */
static int is_of_well(const uf_sheet_row *a, const uf_sheet_row *b)
{
    static const uf_sheet_column key[] = {UF_SHEET_WELL, UF_SHEET_PLATE, UF_SHEET_SESSION, UF_SHEET_TIME_MIN};
    if (!*a->text[UF_SHEET_WELL])
        return a == b;
    for (size_t k = 0; k < sizeof key / sizeof *key; k++)
        if (strcmp(a->text[key[k]], b->text[key[k]]) != 0)
            return 0;
    return 1;
}

static uint64_t well_hash(const uf_sheet_row *row)
{
    uf_text text = {0};
    uf_text_printf(&text, "%s\n%s\n%s\n%s", row->text[UF_SHEET_WELL], row->text[UF_SHEET_PLATE],
                   row->text[UF_SHEET_SESSION], row->text[UF_SHEET_TIME_MIN]);
    uint64_t hash = *row->text[UF_SHEET_WELL] && text.bytes ? uf_fingerprint(text.bytes, text.length)
                                                            : uf_fingerprint(row->field_id, strlen(row->field_id));
    uf_text_free(&text);
    return hash;
}

static uf_status take(wells_job *job, size_t count, size_t size, void *pointer, uf_error *error)
{
    void *memory = uf_arena_take(&job->arena, (count ? count : 1) * size);
    if (!memory)
        return uf_fail_memory(error, "the tables");
    memset(memory, 0, (count ? count : 1) * size);
    memcpy(pointer, &memory, sizeof memory);
    return UF_OK;
}

/* Wells in the order they are first named, by a table of hashes. */
static uf_status sort_into_wells(wells_job *job, uf_error *error)
{
    const uf_plate_plan *plan = job->plan;
    size_t rows = (size_t)plan->sheet.count, places = 4;
    int *table = NULL;
    while (places < 2 * rows)
        places *= 2;
    uf_status status = take(job, rows, sizeof *job->wells, &job->wells, error);
    if (status == UF_OK)
        status = take(job, rows, sizeof *job->well_of_row, &job->well_of_row, error);
    if (status == UF_OK)
        status = take(job, rows, sizeof *job->members, &job->members, error);
    if (status == UF_OK)
        status = take(job, places, sizeof *table, &table, error);
    for (int k = 0; status == UF_OK && k < plan->sheet.count; k++) {
        const uf_sheet_row *row = plan->rows[k].row;
        size_t at = (size_t)well_hash(row) & (places - 1);
        while (table[at] && !is_of_well(plan->rows[job->wells[table[at] - 1].first_row].row, row))
            at = (at + 1) & (places - 1);
        if (!table[at]) {
            job->wells[job->well_count++].first_row = k;
            table[at] = job->well_count;
        }
        job->well_of_row[k] = table[at] - 1;
        job->wells[table[at] - 1].row_count++;
    }
    int next = 0;
    for (int w = 0; status == UF_OK && w < job->well_count; w++) {
        job->wells[w].next_member = next;
        next += job->wells[w].row_count;
        job->wells[w].row_count = 0;
    }
    for (int k = 0; status == UF_OK && k < plan->sheet.count; k++) {
        uf_plate_well *w = &job->wells[job->well_of_row[k]];
        job->members[w->next_member + w->row_count++] = k;
    }
    return status;
}

/* ---- one well -------------------------------------------------------------------------------- */

typedef struct well_sums {
    int fields, failed, not_imaged, cells, used, reported, attached;
    double area_mm2, counted, contact_um2;
    const uf_cell **rows; /* used cells of all fields */
    int row_count;
} well_sums;

static int has_images(const uf_plate_record *r)
{
    for (int k = 0; k < r->input_count; k++)
        if (r->inputs[k].facts.bytes < 0)
            return 0;
    return 1;
}

static void add_field(well_sums *sums, const uf_plate_record *r, double threshold)
{
    sums->fields++;
    if (r->field.status == UF_FIELD_FAILED) {
        sums->failed++;
        sums->not_imaged += !has_images(r);
        return;
    }
    sums->area_mm2 += r->field.field_area_mm2;
    sums->counted += r->field.cells_counted;
    sums->contact_um2 += r->field.contact_um2_per_mm2 * r->field.field_area_mm2;
    sums->cells += r->field.cells;
    for (int k = 0; k < r->field.cells; k++) {
        const uf_cell *cell = &r->cells[k];
        if (!cell->used)
            continue;
        sums->rows[sums->row_count++] = cell;
        sums->used++;
        sums->reported += !isnan(cell->attachment_fraction);
        sums->attached += cell->attachment_fraction >= threshold;
    }
}

/* All fields of a well, their cells in the arena. */
static uf_status read_well(wells_job *job, const uf_plate_well *w, well_sums *sums, uf_error *error)
{
    uf_plate_record *records = NULL;
    int most = 0, found = 1;
    *sums = (well_sums){0};
    uf_status status = take(job, (size_t)w->row_count, sizeof *records, &records, error);
    for (int k = 0; status == UF_OK && found && k < w->row_count; k++) {
        status = uf_plate_record_of(job->output, job->plan, job->members[w->next_member + k], &job->arena,
                                    &records[k], &found, error);
        most += records[k].field.cells;
    }
    if (status == UF_OK && !found)
        return uf_fail(error, UF_INPUT, "a record vanished while the tables were made; run the same command again");
    if (status == UF_OK)
        status = take(job, (size_t)most, sizeof *sums->rows, &sums->rows, error);
    double threshold = job->plan->all.settings[job->plan->rows[w->first_row].settings]->contact.attached_threshold;
    for (int k = 0; status == UF_OK && k < w->row_count; k++)
        add_field(sums, &records[k], threshold);
    return status;
}

const char *const uf_well_state_words[UF_WELL_STATES] = {[UF_WELL_ABSENT] = "",
                                                         [UF_WELL_MEASURED] = "ok",
                                                         [UF_WELL_EMPTY] = "empty",
                                                         [UF_WELL_FAILED] = "failed",
                                                         [UF_WELL_NOT_IMAGED] = "not_imaged"};

static uf_well_state state_of(const well_sums *s)
{
    if (s->not_imaged == s->fields)
        return UF_WELL_NOT_IMAGED;
    if (s->failed == s->fields)
        return UF_WELL_FAILED;
    return s->cells ? UF_WELL_MEASURED : UF_WELL_EMPTY;
}

static void put_real(uf_text *out, double value)
{
    uf_text_add(out, ",");
    uf_text_number(out, value, 6);
}

static void put_share(uf_text *out, int attached, int n)
{
    uf_share share = uf_wilson(attached, n, 0.95);
    put_real(out, share.share);
    put_real(out, share.low);
    put_real(out, share.high);
}

/* Mean with the cells' edge weights; median, sd and MAD (as it is, not scaled) without. */
static double put_metric(wells_job *job, const uf_column *metric, const well_sums *s, double *values)
{
    double weight = 0, sum = 0, plain = 0, squares = 0;
    size_t n = 0;
    for (int k = 0; k < s->row_count; k++) {
        double value = *(const double *)(const void *)((const char *)s->rows[k] + metric->offset);
        if (isnan(value))
            continue;
        double w = isnan(s->rows[k]->edge_weight) ? 1 : s->rows[k]->edge_weight;
        weight += w;
        sum += w * value;
        plain += value;
        values[n++] = value;
    }
    for (size_t k = 0; k < n; k++)
        squares += (values[k] - plain / (double)n) * (values[k] - plain / (double)n);
    double median = uf_median(values, n);
    for (size_t k = 0; k < n; k++)
        values[k] = fabs(values[k] - median);
    put_real(&job->table, n ? sum / weight : (double)NAN);
    put_real(&job->table, median);
    put_real(&job->table, n > 1 ? sqrt(squares / (double)(n - 1)) : (double)NAN);
    put_real(&job->table, uf_median(values, n));
    return n ? sum / weight : (double)NAN;
}

static uf_status put_well(wells_job *job, uf_plate_well *w, uf_error *error)
{
    well_sums s;
    double *values = NULL;
    const uf_sheet_row *row = job->plan->rows[w->first_row].row;
    uf_status status = take(job, (size_t)job->metric_count, sizeof *w->means, &w->means, error);
    uf_arena_mark mark = uf_arena_now(&job->arena);
    if (status == UF_OK)
        status = read_well(job, w, &s, error);
    if (status == UF_OK)
        status = take(job, (size_t)s.row_count, sizeof *values, &values, error);
    if (status != UF_OK)
        return status;
    w->used = s.used;
    w->state = state_of(&s);
    uf_put_sheet_cells(&job->table, &job->plan->sheet, row, well_column);
    uf_text_printf(&job->table, "%s,%d,%d,", uf_well_state_words[w->state], s.fields, s.failed);
    int measured = s.fields > s.failed;
    w->cells_per_mm2 = measured ? s.counted / s.area_mm2 : (double)NAN;
    if (measured)
        uf_text_printf(&job->table, "%d,%d", s.cells, s.used);
    else
        uf_text_add(&job->table, ",");
    put_real(&job->table, w->cells_per_mm2);
    put_real(&job->table, measured ? s.contact_um2 / s.area_mm2 : (double)NAN);
    put_share(&job->table, s.attached, s.reported);
    for (int k = 0; k < job->metric_count; k++)
        w->means[k] = put_metric(job, job->metrics[k], &s, values);
    uf_text_add(&job->table, "\n");
    uf_arena_back(&job->arena, mark);
    return UF_OK;
}

static uf_status finish(wells_job *job, const char *name, uf_error *error)
{
    uf_status status = uf_text_check(&job->table, name, error);
    if (status == UF_OK)
        status = uf_output_write(job->output, NULL, name, job->table.bytes, job->table.length, error);
    uf_text_free(&job->table);
    return status;
}

static uf_status put_wells(wells_job *job, uf_error *error)
{
    uf_status status = UF_OK;
    uf_put_sheet_header(&job->table, &job->plan->sheet, well_column);
    uf_text_add(&job->table,
                "state,fields,fields_failed,cells,cells_used,cells_per_mm2,contact_um2_per_mm2,cells_attached_share,"
                "cells_attached_share_low,cells_attached_share_high");
    for (int k = 0; k < job->metric_count; k++) {
        const char *name = job->metrics[k]->name;
        uf_text_printf(&job->table, ",%s_mean,%s_median,%s_sd,%s_mad", name, name, name, name);
    }
    uf_text_add(&job->table, "\n");
    for (int k = 0; status == UF_OK && k < job->well_count; k++)
        status = put_well(job, &job->wells[k], error);
    return status == UF_OK ? finish(job, "wells.csv", error) : status;
}

/* ---- replicates ------------------------------------------------------------------------------ */

static int sort_into_replicates(wells_job *job)
{
    int count = 0;
    for (int w = 0; w < job->well_count; w++) {
        const uf_sheet_row *row = job->plan->rows[job->wells[w].first_row].row;
        int same = 0;
        while (same < w &&
               !agree(&job->plan->sheet, job->plan->rows[job->wells[same].first_row].row, row, replicate_column))
            same++;
        job->wells[w].replicate = same < w ? job->wells[same].replicate : count++;
    }
    return count;
}

/* Unweighted mean of wells' means; wells with too few cells are left out of it. */
static void put_replicate(wells_job *job, int replicate)
{
    const uf_plate_well *first = NULL;
    double cells = 0;
    int wells = 0, used = 0;
    for (int w = 0; w < job->well_count; w++) {
        const uf_plate_well *here = &job->wells[w];
        if (here->replicate != replicate)
            continue;
        first = first ? first : here;
        wells++;
        cells += here->used;
    }
    const uf_plate_row *row = &job->plan->rows[first->first_row];
    double least = job->plan->all.settings[row->settings]->compare.min_cells_per_well;
    for (int w = 0; w < job->well_count; w++)
        used += job->wells[w].replicate == replicate && job->wells[w].used >= least;
    uf_put_sheet_cells(&job->table, &job->plan->sheet, row->row, replicate_column);
    uf_text_printf(&job->table, "%d,%d,%.0f", wells, used, cells);
    for (int k = 0; k < job->metric_count; k++) {
        double sum = 0;
        int n = 0;
        for (int w = 0; w < job->well_count; w++) {
            const uf_plate_well *here = &job->wells[w];
            if (here->replicate != replicate || here->used < least || isnan(here->means[k]))
                continue;
            sum += here->means[k];
            n++;
        }
        put_real(&job->table, n ? sum / n : (double)NAN);
    }
    uf_text_add(&job->table, "\n");
}

static uf_status put_replicates(wells_job *job, uf_error *error)
{
    int count = sort_into_replicates(job);
    uf_put_sheet_header(&job->table, &job->plan->sheet, replicate_column);
    uf_text_add(&job->table, "wells,wells_used,cells_used");
    for (int k = 0; k < job->metric_count; k++)
        uf_text_printf(&job->table, ",%s", job->metrics[k]->name);
    uf_text_add(&job->table, "\n");
    for (int k = 0; k < count; k++)
        put_replicate(job, k);
    return finish(job, "replicates.csv", error);
}

/* Hands over what pictures of wells are made of. */
static void keep_wells(wells_job *job, uf_plate_well_list *list)
{
    *list = (uf_plate_well_list){.wells = job->wells,
                                 .count = job->well_count,
                                 .members = job->members,
                                 .metric_count = job->metric_count,
                                 .arena = job->arena};
    memcpy(list->metrics, job->metrics, sizeof list->metrics);
}

uf_status uf_plate_wells(const uf_output *output, const uf_plate_plan *plan, uf_plate_summary *summary,
                         uf_plate_well_list *list, uf_error *error)
{
    wells_job job = {.output = output, .plan = plan, .summary = summary};
    job.metric_count = find_metrics(job.metrics);
    uf_status status = sort_into_wells(&job, error);
    if (status == UF_OK)
        status = put_wells(&job, error);
    if (status == UF_OK)
        status = put_replicates(&job, error);
    summary->wells = job.well_count;
    uf_text_free(&job.table);
    keep_wells(&job, list);
    return status;
}

void uf_plate_well_list_free(uf_plate_well_list *list)
{
    uf_arena_free(&list->arena);
    *list = (uf_plate_well_list){0};
}
