/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/sheet_build.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "io/csv.h"
#include "io/csv_read.h"
#include "io/output.h"
#include "run/sheet_parts.h"
#include "run/sheet_read.h"
#include "sheet/checks.h"

static const size_t most_layout_bytes = (size_t)32 << 20;

/* ---- what is asked --------------------------------------------------------------------------- */

static uf_status take_fields(build_job *job)
{
    job->channel = uf_template_field(&job->name, "channel");
    for (int k = 0; k < job->name.field_count; k++) {
        uf_error error = {0};
        job->columns[k] = k == job->channel ? -1 : uf_draft_column(&job->draft, job->name.fields[k], &error);
        if (k != job->channel && job->columns[k] < 0)
            return uf_fail(job->error, UF_USAGE, "--name: %.400s (and {channel} and {*} are not)", error.text);
        if (k != job->channel)
            job->draft.given[job->columns[k]] = true;
    }
    return UF_OK;
}

static uf_status check_channels(const build_job *job)
{
    const uf_sheet_build_request *r = job->request;
    if (r->near_page)
        return job->channel < 0
                   ? UF_OK
                   : uf_fail(job->error, UF_USAGE,
                             "--near-page is for files that hold both images, but --name has {channel}; drop one");
    if (r->near_channel && r->wide_channel && strcmp(r->near_channel, r->wide_channel) == 0)
        return uf_fail(job->error, UF_USAGE, "--near-channel and --wide-channel are both '%.60s'", r->near_channel);
    if (r->near_channel)
        return UF_OK;
    return uf_fail(
        job->error, UF_USAGE,
        "which image is the near one? give --near-channel X and --wide-channel Y (what {channel} stands for in the "
        "names, or a channel's name in OME-TIFF), or --near-page 1 --wide-page 2");
}

static const char *set_value(const uf_sheet_build_request *r, const char *column)
{
    size_t length = strlen(column);
    for (int k = 0; k < r->set_count; k++)
        if (strncmp(r->sets[k], column, length) == 0 && r->sets[k][length] == '=')
            return r->sets[k] + length + 1;
    return NULL;
}

const char *build_vessel(const build_job *job)
{
    return job->request->vessel ? job->request->vessel : set_value(job->request, "vessel");
}

static uf_status check_request(build_job *job)
{
    const uf_sheet_build_request *r = job->request;
    const char *vessel_text = build_vessel(job);
    uf_vessel vessel;
    if (!r->dir_count && !r->expect)
        return uf_fail(job->error, UF_USAGE,
                       "sheet build needs a folder of images (or --expect, when they are yet to be made)");
    for (int k = 0; k < r->dir_count; k++)
        if (!*r->dirs[k])
            return uf_fail(job->error, UF_USAGE, "the name of a folder is empty");
    if (vessel_text && !uf_vessel_parse(vessel_text, &vessel))
        return uf_fail(
            job->error, UF_USAGE,
            "vessel %.40s is not known; expected 6, 12, 24, 48, 96, 384 or 1536 (wells), coverslip or dish",
            vessel_text);
    job->any_well = vessel_text && vessel.wells == 0;
    uf_status status = uf_template_parse(&job->name, r->name, job->error);
    if (status == UF_OK)
        status = take_fields(job);
    return status == UF_OK ? check_channels(job) : status;
}

/* ---- paths ----------------------------------------------------------------------------------- */

/* The folder that the sheet's paths are relative to. */
static void find_base(build_job *job)
{
    uf_text folder = {0};
    const char *out = job->request->out, *name = uf_base_name(out);
    if (job->request->root)
        uf_text_add(&folder, job->request->root);
    else
        uf_text_bytes(&folder, name == out ? "." : out, name - out < 2 ? 1 : (size_t)(name - out) - 1);
    job->base = folder.failed ? NULL : uf_path_plain(folder.bytes);
    uf_text_free(&folder);
}

/* Folders are made plain, names are kept: a link to an image keeps the name that says what it is. */
static const char *plain_folder(build_job *job, const char *path, size_t length)
{
    if (job->folder && strlen(job->folder) == length && memcmp(job->folder, path, length) == 0)
        return job->plain;
    uf_text folder = {0};
    uf_text_bytes(&folder, length ? path : ".", length ? length : 1);
    free(job->plain);
    free(job->folder);
    job->plain = folder.failed ? NULL : uf_path_plain(folder.bytes);
    job->folder = folder.failed ? NULL : uf_copy_string(length ? folder.bytes : "");
    uf_text_free(&folder);
    return job->plain;
}

const char *build_path(build_job *job, const char *path)
{
    const char *name = uf_base_name(path), *folder = plain_folder(job, path, (size_t)(name - path));
    uf_text whole = {0};
    uf_text_printf(&whole, "%s%s%s", folder ? folder : "", folder && strcmp(folder, "/") != 0 ? "/" : "", name);
    char *seen = folder && job->base && !whole.failed ? uf_path_from(job->base, whole.bytes) : NULL;
    const char *text = seen ? seen : folder ? whole.bytes : path;
    const char *kept = whole.failed ? NULL : uf_draft_keep(&job->draft, text, strlen(text));
    uf_text_free(&whole);
    free(seen);
    return kept;
}

/* Files named beside a layout (or where the command runs) as the sheet has to name them. */
static const char *path_beside(build_job *job, const char *beside, const char *value)
{
    char *path = uf_path_beside(beside, value);
    const char *kept = path && uf_path_exists(path) ? build_path(job, path) : value;
    free(path);
    return kept ? kept : value;
}

static bool is_path_column(const char *name)
{
    int column = uf_sheet_column_find(name);
    return column == UF_SHEET_INSTRUMENT || column == UF_SHEET_NUCLEI || column == UF_SHEET_MASK;
}

static void mend_paths(build_job *job, int first_list, int first_block)
{
    for (int l = first_list; l < job->layout.list_count; l++) {
        uf_list *list = &job->layout.lists[l];
        for (int k = 0; k < list->columns; k++)
            for (int r = 0; is_path_column(list->names[k]) && r < list->rows; r++) {
                const char **cell = &list->cells[(size_t)r * (size_t)list->columns + (size_t)k];
                *cell = **cell ? path_beside(job, list->file, *cell) : *cell;
            }
    }
    for (int b = first_block; b < job->layout.block_count; b++) {
        uf_block *block = &job->layout.blocks[b];
        for (int r = 0; is_path_column(block->property) && r < UF_MOST_ROWS; r++)
            for (int c = 0; block->rows[r] && c < block->columns; c++)
                if (*block->rows[r][c])
                    block->rows[r][c] = path_beside(job, block->file, block->rows[r][c]);
    }
}

/* ---- layouts --------------------------------------------------------------------------------- */

/* "P1=FILE" is the layout of plate P1, unless there is a file of that whole name. */
static const char *split_plate(const char *text, char *plate, size_t size)
{
    const char *equals = strchr(text, '=');
    if (!equals || equals == text || (size_t)(equals - text) >= size || uf_path_exists(text))
        return text;
    memcpy(plate, text, (size_t)(equals - text));
    plate[equals - text] = '\0';
    return equals + 1;
}

static uf_status read_layout(build_job *job, const char *argument)
{
    char plate[UF_DRAFT_NAME] = "";
    const char *path = split_plate(argument, plate, sizeof plate);
    uf_csv_table table;
    int lists = job->layout.list_count, blocks = job->layout.block_count;
    uf_status status = uf_csv_read_loose(&table, path, most_layout_bytes, job->error);
    if (status == UF_OK)
        status = uf_layout_take(&job->layout, &table, path, *plate ? plate : NULL, &job->summary->faults, job->error);
    uf_csv_free(&table);
    if (status == UF_OK)
        mend_paths(job, lists, blocks);
    return status;
}

static uf_status read_layouts(build_job *job)
{
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < job->request->layout_count; k++)
        status = read_layout(job, job->request->layouts[k]);
    return status;
}

/* ---- columns that options set ---------------------------------------------------------------- */

static uf_status set_column(build_job *job, int column, const char *name, const char *value)
{
    if (job->draft.given[column])
        return uf_fail(job->error, UF_USAGE, "--set %.60s: the files' names (or the layout's places) say it already",
                       name);
    for (int k = 0; k < job->draft.count; k++)
        job->draft.rows[k].cells[column] = value;
    job->draft.given[column] = true;
    return UF_OK;
}

static uf_status apply_sets(build_job *job)
{
    const uf_sheet_build_request *r = job->request;
    uf_status status = UF_OK;
    if (r->vessel)
        status = set_column(job, UF_SHEET_VESSEL, "vessel", r->vessel);
    for (int k = 0; status == UF_OK && k < r->set_count; k++) {
        const char *equals = strchr(r->sets[k], '=');
        char name[UF_DRAFT_NAME];
        uf_error error = {0};
        if (!equals || equals == r->sets[k] || (size_t)(equals - r->sets[k]) >= sizeof name)
            return uf_fail(job->error, UF_USAGE, "--set %.60s: expected COLUMN=VALUE, like replicate=day1",
                           r->sets[k]);
        memcpy(name, r->sets[k], (size_t)(equals - r->sets[k]));
        name[equals - r->sets[k]] = '\0';
        int column = uf_draft_column(&job->draft, name, &error);
        if (column < 0)
            return uf_fail(job->error, UF_USAGE, "--set %.400s", error.text);
        const char *value = is_path_column(name) ? path_beside(job, "", equals + 1) : equals + 1;
        status = set_column(job, column, name, value);
    }
    return status;
}

/* ---- images yet to be made ------------------------------------------------------------------- */

static const char *fill_name(build_job *job, const uf_draft_row *row, const char *channel, bool *whole)
{
    const char *values[UF_TEMPLATE_FIELDS];
    uf_text name = {0}, path = {0};
    for (int k = 0; k < job->name.field_count; k++) {
        values[k] = k == job->channel ? channel : row->cells[job->columns[k]];
        if (!values[k] || !*values[k]) {
            uf_fault_add(&job->summary->faults, UF_FAULT, "expect", (uf_place){NULL, 0, NULL},
                         "nothing says {%s}, which --name needs; say it in the layout, or by --set %s=...",
                         job->name.fields[k], job->name.fields[k]);
            *whole = false;
            return "";
        }
    }
    const char *dir = job->request->dir_count ? job->request->dirs[0] : "";
    if (!uf_template_fill(&job->name, values, &name)) {
        uf_fault_add(&job->summary->faults, UF_FAULT, "expect", (uf_place){NULL, 0, NULL},
                     "--expect makes names from --name, which must not hold {*}");
        *whole = false;
    }
    uf_text_printf(&path, "%s%s%s", dir, *dir && dir[strlen(dir) - 1] != '/' ? "/" : "",
                   name.bytes ? name.bytes : "");
    const char *kept = path.failed || name.failed ? NULL
                       : *dir                     ? build_path(job, path.bytes)
                                                  : uf_draft_keep(&job->draft, path.bytes, path.length);
    uf_text_free(&name);
    uf_text_free(&path);
    return kept;
}

static uf_status name_images(build_job *job)
{
    const uf_sheet_build_request *r = job->request;
    const struct {
        int column;
        const char *channel;
    } roles[] = {{UF_SHEET_NEAR, r->near_channel},
                 {UF_SHEET_WIDE, r->wide_channel},
                 {UF_SHEET_NUCLEI, r->nuclei_channel},
                 {UF_SHEET_MASK, r->mask_channel}};
    bool whole = true;
    char pages[2][16];
    (void)snprintf(pages[0], sizeof pages[0], "%d", r->near_page);
    (void)snprintf(pages[1], sizeof pages[1], "%d", r->wide_page);
    if (job->channel < 0 && !r->near_page)
        return uf_fail(job->error, UF_USAGE, "--expect needs {channel} in --name, or --near-page and --wide-page");
    for (int k = 0; whole && k < job->draft.count; k++) {
        uf_draft_row *row = &job->draft.rows[k];
        for (size_t i = 0; whole && i < sizeof roles / sizeof roles[0]; i++) {
            bool paged = r->near_page && (i == 0 || (i == 1 && r->wide_page));
            if (!paged && !roles[i].channel)
                continue;
            row->cells[roles[i].column] = fill_name(job, row, roles[i].channel, &whole);
            if (!row->cells[roles[i].column])
                return uf_fail_memory(job->error, "rows of a sheet");
            if (paged)
                row->cells[i ? UF_SHEET_WIDE_PAGE : UF_SHEET_NEAR_PAGE] =
                    uf_draft_keep(&job->draft, pages[i], strlen(pages[i]));
        }
    }
    return UF_OK;
}

static uf_status expect_rows(build_job *job)
{
    int fields = job->request->fields_per_well ? job->request->fields_per_well : 1;
    if (!job->request->layout_count)
        return uf_fail(job->error, UF_USAGE, "--expect needs a layout: --layout FILE says which wells there will be");
    /* What the names hold is not said by them now. */
    for (int k = 0; k < UF_DRAFT_COLUMNS; k++)
        job->draft.given[k] = false;
    job->draft.given[UF_SHEET_FIELD] = uf_template_field(&job->name, "field") >= 0;
    uf_status status = uf_layout_expect(&job->layout, fields, &job->draft, &job->summary->faults, job->error);
    if (status == UF_OK && job->draft.count == 0 && !job->summary->faults.faults)
        status = uf_fail(job->error, UF_INPUT, "%.400s: says nothing about any well", job->request->layouts[0]);
    for (int k = 0; k < job->draft.count; k++)
        if (!job->draft.rows[k].cells[UF_SHEET_FIELD])
            job->draft.given[UF_SHEET_FIELD] = false;
    return status;
}

/* ---- writing --------------------------------------------------------------------------------- */

static bool any_cell(const uf_draft *draft, int column)
{
    for (int k = 0; k < draft->count; k++)
        if (draft->rows[k].cells[column] && *draft->rows[k].cells[column])
            return true;
    return false;
}

static void put_draft(uf_text *out, const uf_draft *draft)
{
    bool shown[UF_DRAFT_COLUMNS];
    for (int k = 0; k < draft->columns; k++)
        shown[k] = k <= UF_SHEET_WIDE || any_cell(draft, k);
    for (int r = -1; r < draft->count; r++) {
        for (int k = 0; k < draft->columns; k++) {
            const char *cell = r < 0 ? uf_draft_column_name(draft, k) : draft->rows[r].cells[k];
            if (!shown[k])
                continue;
            uf_text_add(out, k ? "," : "");
            uf_csv_field(out, cell ? cell : "");
        }
        uf_text_add(out, "\n");
    }
}

/* A fault of a sheet that is not written yet has no line; its field says where. */
static void name_fields(uf_faults *faults, int from, const uf_sheet *sheet)
{
    for (int k = from; k < faults->count; k++) {
        uf_fault *f = &faults->list[k];
        const uf_sheet_row *row = NULL;
        for (int r = 0; f->severity == UF_FAULT && f->line > 1 && r < sheet->count && !row; r++)
            row = sheet->rows[r].line == f->line ? &sheet->rows[r] : NULL;
        uf_text text = {0};
        if (row)
            uf_text_printf(&text, "(field %s) %s", row->field_id, f->text);
        if (row && !text.failed) {
            free(f->text);
            f->text = text.bytes;
            f->line = 0;
        } else
            uf_text_free(&text);
    }
}

static void count_sheet(const uf_sheet *sheet, uf_sheet_build_summary *s)
{
    int fields = 0;
    s->rows = sheet->count;
    for (int k = 0; k < sheet->count; k++) {
        const char *const *text = sheet->rows[k].text, *const *before = k ? sheet->rows[k - 1].text : NULL;
        bool new_plate = !before || strcmp(text[UF_SHEET_PLATE], before[UF_SHEET_PLATE]) != 0;
        bool new_well = new_plate || strcmp(text[UF_SHEET_WELL], before[UF_SHEET_WELL]) != 0;
        s->plates += new_plate && *text[UF_SHEET_PLATE];
        s->wells += new_well && *text[UF_SHEET_WELL];
        fields = new_well ? 1 : fields + (strcmp(text[UF_SHEET_FIELD], before[UF_SHEET_FIELD]) != 0);
        bool last = k + 1 == sheet->count ||
                    strcmp(text[UF_SHEET_WELL], sheet->rows[k + 1].text[UF_SHEET_WELL]) != 0 ||
                    strcmp(text[UF_SHEET_PLATE], sheet->rows[k + 1].text[UF_SHEET_PLATE]) != 0;
        if (last && (!s->least_fields || fields < s->least_fields))
            s->least_fields = fields;
        if (last && fields > s->most_fields)
            s->most_fields = fields;
    }
    for (int k = 0; k < UF_SHEET_COLUMNS; k++)
        if (sheet->has[k])
            uf_text_printf(&s->columns, "%s%s", s->columns.length ? " " : "", uf_sheet_columns[k].name);
    for (int k = 0; k < sheet->extra_count; k++)
        uf_text_printf(&s->columns, " %s", sheet->extra[k]);
}

static uf_status write_sheet(build_job *job, const uf_sheet *sheet)
{
    uf_text out = {0};
    uf_status status = uf_sheet_put(&out, sheet, job->error);
    if (status == UF_OK)
        status = uf_output_file(job->request->out, out.bytes, out.length, job->error);
    job->summary->written = status == UF_OK;
    uf_text_free(&out);
    return status;
}

/* Rows that the sheet has already, from another folder or day. They are taken as they stand: their paths are relative to the
 * same place, and what they say was said by other layouts. */
static uf_status add_old_rows(build_job *job)
{
    uf_sheet old;
    uf_faults ignored = {0}; /* all of it is read again with the new rows */
    int extra[UF_DRAFT_COLUMNS] = {0};
    uf_status status = uf_sheet_read(&old, job->request->out, job->request->root, &ignored, job->error);
    for (int k = 0; status == UF_OK && k < old.extra_count && k < UF_DRAFT_COLUMNS; k++) {
        extra[k] = uf_draft_column(&job->draft, old.extra[k], job->error);
        status = extra[k] < 0 ? UF_INPUT : UF_OK;
    }
    for (int r = 0; status == UF_OK && r < old.count; r++) {
        uf_draft_row *row = uf_draft_add(&job->draft);
        bool whole = row != NULL;
        for (int k = 0; whole && k < UF_SHEET_COLUMNS; k++) {
            const char *text = old.rows[r].text[k];
            row->cells[k] = *text ? uf_draft_keep(&job->draft, text, strlen(text)) : NULL;
            whole = !*text || row->cells[k];
        }
        for (int k = 0; whole && k < old.extra_count; k++) {
            row->cells[extra[k]] = uf_draft_keep(&job->draft, old.rows[r].extra[k], strlen(old.rows[r].extra[k]));
            whole = row->cells[extra[k]] != NULL;
        }
        status = whole ? UF_OK : uf_fail_memory(job->error, "a sheet");
    }
    uf_faults_free(&ignored);
    uf_sheet_free(&old);
    return status;
}

/* The draft becomes a sheet by the reader that all commands use, so that what is written is what they will read. */
static uf_status finish(build_job *job)
{
    uf_text text = {0};
    uf_csv_table table = {0};
    uf_sheet sheet = {0};
    uf_faults *faults = &job->summary->faults;
    int before = faults->count;
    uf_draft_sort(&job->draft);
    put_draft(&text, &job->draft);
    uf_status status = uf_text_check(&text, "a sheet", job->error);
    if (status == UF_OK)
        status = uf_csv_parse(&table, text.bytes, text.length, job->request->out, job->error);
    if (status == UF_OK)
        status = uf_sheet_take(&sheet, &table, job->request->out, job->request->root, faults, job->error);
    /* What is missing because of a fault would only be said a second time. */
    if (status == UF_OK && !faults->faults)
        status = uf_sheet_check_design(&sheet, false, faults, job->error);
    if (status == UF_OK) {
        name_fields(faults, before, &sheet);
        count_sheet(&sheet, job->summary);
    }
    if (status == UF_OK && !faults->faults)
        status = write_sheet(job, &sheet);
    uf_sheet_free(&sheet);
    uf_csv_free(&table);
    uf_text_free(&text);
    return status;
}

/* ---- all of it ------------------------------------------------------------------------------- */

static uf_status build_rows(build_job *job)
{
    const uf_sheet_build_request *r = job->request;
    uf_status status = read_layouts(job);
    if (status == UF_OK)
        status = r->expect ? expect_rows(job) : build_from_files(job);
    if (status == UF_OK && r->positions)
        status = build_positions(job);
    if (status == UF_OK)
        status = apply_sets(job);
    if (status == UF_OK && r->order)
        status = build_order(job);
    /* OME-TIFFs may know wells, fields and times that no name holds. */
    for (int k = 0; k < UF_SHEET_COLUMNS; k++)
        job->draft.given[k] |= !r->expect && any_cell(&job->draft, k) && k != UF_SHEET_NEAR && k != UF_SHEET_WIDE;
    if (status == UF_OK)
        status = uf_layout_apply(&job->layout, &job->draft, &job->summary->faults, job->error);
    if (status == UF_OK && r->expect)
        status = name_images(job);
    /* A sheet that is not there yet has no rows to keep. */
    return status == UF_OK && r->append && uf_path_exists(r->out) ? add_old_rows(job) : status;
}

uf_status uf_sheet_build(const uf_sheet_build_request *request, uf_sheet_build_summary *summary, uf_error *error)
{
    *summary = (uf_sheet_build_summary){0};
    build_job *job = calloc(1, sizeof *job);
    if (!job)
        return uf_fail_memory(error, "a sheet");
    job->request = request;
    job->summary = summary;
    job->error = error;
    uf_draft_start(&job->draft);
    find_base(job);
    uf_status status = check_request(job);
    if (status == UF_OK)
        status = build_rows(job);
    /* With nothing left there is no sheet to look at, only what went wrong. */
    if (status == UF_OK && job->draft.count)
        status = finish(job);
    else if (status == UF_OK && !summary->faults.faults)
        status = uf_fail(error, UF_INPUT, "no field is left for the sheet");
    uf_faults_sort(&summary->faults);
    uf_draft_free(&job->draft);
    uf_layout_free(&job->layout);
    uf_layout_free(&job->positions);
    free(job->base);
    free(job->folder);
    free(job->plain);
    free(job);
    return status;
}

void uf_sheet_build_free(uf_sheet_build_summary *summary)
{
    uf_text_free(&summary->columns);
    uf_faults_free(&summary->faults);
}
