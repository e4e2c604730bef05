/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Layouts onto rows. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>

#include "sheet/amount.h"
#include "sheet/layout.h"

enum { KEY_TEXT = 256 };

typedef struct apply_job {
    const uf_layout *layout;
    uf_draft *draft;
    uf_faults *faults;
    bool failed;         /* no memory */
    uf_draft_row **rows; /* by plate, while blocks are applied */
} apply_job;

/* ---- one cell -------------------------------------------------------------------------------- */

/* A dose with the unit of its corner or header, unless it has its own. */
static const char *with_unit(apply_job *job, const char *value, const char *unit)
{
    uf_amount amount;
    uf_text text = {0};
    if (!unit || uf_amount_parse(value, &amount) != UF_AMOUNT_GOOD || *amount.unit)
        return value;
    uf_text_printf(&text, "%s %s", value, unit);
    const char *kept = text.failed ? NULL : uf_draft_keep(job->draft, text.bytes, text.length);
    uf_text_free(&text);
    job->failed |= !kept;
    return kept ? kept : value;
}

/* Puts a value of the layout into a row; what is there already was said twice. */
static void put(apply_job *job, uf_draft_row *row, int column, const char *value, const char *unit, uf_place at)
{
    const char **cell = &row->cells[column];
    if (!*value)
        return;
    value = with_unit(job, value, unit);
    if (!*cell || strcmp(*cell, value) == 0) {
        *cell = value;
        return;
    }
    uf_text where = {0};
    uf_draft_describe(row, &where);
    uf_fault_add(
        job->faults, UF_FAULT, "layout_conflict", at,
        "'%.60s' for %.200s, where '%.60s' was said before; say it once (for blocks of several plates write a "
        "line plate,NAME above each)",
        value, where.bytes ? where.bytes : "", *cell);
    uf_text_free(&where);
}

static int column_of(apply_job *job, const char *name, uf_place at)
{
    uf_error error = {0};
    int column = uf_draft_column(job->draft, name, &error);
    if (column < 0)
        uf_fault_add(job->faults, UF_FAULT, "layout", at, "%.400s", error.text);
    return column;
}

/* ---- blocks ---------------------------------------------------------------------------------- */

static const char *plate_of(const uf_draft_row *row)
{
    return row->cells[UF_SHEET_PLATE] ? row->cells[UF_SHEET_PLATE] : "";
}

static int by_plate(const void *a, const void *b)
{
    return strcmp(plate_of(*(uf_draft_row *const *)a), plate_of(*(uf_draft_row *const *)b));
}

/* First row, in the order of plates, of a plate that is not before `name`. */
static int first_of(const apply_job *job, const char *name)
{
    int low = 0, high = job->draft->count;
    while (low < high) {
        int middle = low + (high - low) / 2;
        if (strcmp(plate_of(job->rows[middle]), name) < 0)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}

static bool is_plate(const apply_job *job, const char *name)
{
    int first = first_of(job, name);
    return first < job->draft->count && strcmp(plate_of(job->rows[first]), name) == 0;
}

/* The plate of each block: said, or the nearest title above it that is a plate's name. NULL: of all plates. */
static void find_plates(const apply_job *job, const char **plates)
{
    const char *file = "", *plate = NULL, *said = NULL;
    for (int k = 0; k < job->layout->block_count; k++) {
        const uf_block *block = &job->layout->blocks[k];
        if (strcmp(block->file, file) != 0) {
            plate = said = NULL;
            file = block->file;
        }
        if (block->plate != said)
            plate = said = block->plate;
        if (block->title && is_plate(job, block->title))
            plate = block->title;
        plates[k] = plate;
    }
}

static const char *block_cell(const uf_block *block, uf_well well)
{
    int column = well.column - block->first_column;
    if (!block->rows[well.row] || column < 0 || column >= block->columns)
        return NULL;
    return block->rows[well.row][column];
}

/* Which wells of a block have images. */
typedef struct imaged {
    bool well[UF_MOST_ROWS][UF_MOST_COLUMNS];
} imaged;

static void say_not_imaged(apply_job *job, const uf_block *block, const char *plate, const imaged *seen)
{
    int count = 0;
    uf_text names = {0};
    for (int r = 0; r < UF_MOST_ROWS; r++)
        for (int c = 0; block->rows[r] && c < block->columns; c++) {
            char name[UF_WELL_NAME];
            if (!*block->rows[r][c] || seen->well[r][c + block->first_column] || count++ >= 8)
                continue;
            uf_well_name(name, (uf_well){r, block->first_column + c});
            uf_text_printf(&names, "%s%s", count > 1 ? ", " : "", name);
        }
    if (count)
        uf_fault_add(job->faults, UF_WARNING, "not_imaged", (uf_place){block->file, block->line, block->property},
                     "%d wells of the drawing%s%.60s have no images: %s%s", count, plate ? " of " : "",
                     plate ? plate : "", names.bytes ? names.bytes : "", count > 8 ? ", ..." : "");
    uf_text_free(&names);
}

/* Blank wells are said, whether imaged or not; what a merged cell left blank is never filled in. */
static void say_blank(apply_job *job, const uf_block *block, const imaged *seen)
{
    uf_text names = {0};
    int imaged_count = 0;
    for (int r = 0; block->blank && r < UF_MOST_ROWS; r++)
        for (int c = 0; block->rows[r] && c < block->columns; c++) {
            char name[UF_WELL_NAME];
            if (*block->rows[r][c] || !seen->well[r][c + block->first_column] || imaged_count++ >= 8)
                continue;
            uf_well_name(name, (uf_well){r, block->first_column + c});
            uf_text_printf(&names, "%s%s", imaged_count > 1 ? ", " : "", name);
        }
    /* A control needs no dose, a sample no role; but each well has a treatment. */
    bool wanted = strcasecmp(block->property, "treatment") == 0 || strcasecmp(block->property, "coating") == 0;
    if (imaged_count)
        uf_fault_add(
            job->faults, wanted ? UF_WARNING : UF_NOTE, "blank",
            (uf_place){block->file, block->line, block->property},
            "blank: %d wells, %d of them with images (%s%s), which stay without a %.40s; where cells were merged, "
            "write the value into each",
            block->blank, imaged_count, names.bytes ? names.bytes : "", imaged_count > 8 ? ", ..." : "",
            block->property);
    else if (block->blank)
        uf_fault_add(job->faults, UF_NOTE, "blank", (uf_place){block->file, block->line, block->property},
                     "blank: %d wells, none of them with images", block->blank);
    uf_text_free(&names);
}

static void apply_block(apply_job *job, const uf_block *block, const char *plate)
{
    imaged *seen = calloc(1, sizeof *seen);
    int column = column_of(job, block->property, (uf_place){block->file, block->line, NULL});
    int beyond = 0, covered = 0;
    const uf_draft_row *first = NULL;
    job->failed |= !seen;
    for (int k = plate ? first_of(job, plate) : 0; seen && column >= 0 && k < job->draft->count; k++) {
        uf_draft_row *row = job->rows[k];
        uf_well well;
        if (plate && strcmp(plate_of(row), plate) != 0)
            break;
        if (!row->cells[UF_SHEET_WELL] || !uf_well_parse(row->cells[UF_SHEET_WELL], &well))
            continue;
        covered++;
        const char *cell = block_cell(block, well);
        if (!cell && !beyond++)
            first = row;
        if (!cell)
            continue;
        seen->well[well.row][well.column] = true;
        put(job, row, column, cell, block->unit, (uf_place){block->file, block->lines[well.row], block->property});
    }
    if (beyond)
        uf_fault_add(
            job->faults, UF_FAULT, "layout", (uf_place){block->file, block->line, block->property},
            "%d images are of wells that the block does not draw (first: %.20s); draw the whole plate, blank "
            "where nothing was done",
            beyond, first->cells[UF_SHEET_WELL]);
    if (seen && column >= 0 && !covered)
        uf_fault_add(job->faults, UF_WARNING, "not_imaged", (uf_place){block->file, block->line, block->property},
                     "no image is of %s%.60s; compare the plates' names with those in the files' names",
                     plate ? "plate " : "a well", plate ? plate : "");
    else if (seen && column >= 0) {
        say_blank(job, block, seen);
        say_not_imaged(job, block, plate, seen);
    }
    free(seen);
}

static void apply_blocks(apply_job *job)
{
    size_t count = (size_t)job->layout->block_count;
    const char **plates = calloc(count + 1, sizeof *plates);
    job->rows = malloc(((size_t)job->draft->count + 1) * sizeof *job->rows);
    job->failed |= !plates || !job->rows;
    for (int k = 0; job->rows && k < job->draft->count; k++)
        job->rows[k] = &job->draft->rows[k];
    if (job->rows && job->draft->count)
        qsort(job->rows, (size_t)job->draft->count, sizeof *job->rows, by_plate);
    if (!job->failed)
        find_plates(job, plates);
    for (size_t k = 0; !job->failed && k < count; k++)
        apply_block(job, &job->layout->blocks[k], plates[k]);
    free(plates);
    free(job->rows);
    job->rows = NULL;
}

/* ---- lists ----------------------------------------------------------------------------------- */

/* A list's line by what it is found by. */
typedef struct list_key {
    char text[KEY_TEXT];
    int row;
    bool used;
} list_key;

static int by_key(const void *a, const void *b)
{
    const list_key *one = a, *other = b;
    return strcmp(one->text, other->text);
}

static int by_key_and_row(const void *a, const void *b)
{
    int order = by_key(a, b);
    return order ? order : ((const list_key *)a)->row - ((const list_key *)b)->row;
}

static void add_to_key(char *key, int column, const char *cell)
{
    size_t used = strlen(key);
    if (used + 2 >= KEY_TEXT)
        return;
    key[used] = '\x1f';
    uf_cell_key(column, cell, key + used + 1, KEY_TEXT - used - 1);
}

static void name_keys(const apply_job *job, const int *columns, const bool *is_key, int count, uf_text *out)
{
    for (int k = 0; k < count; k++)
        if (is_key[k])
            uf_text_printf(out, "%s%s", out->length ? " and " : "", uf_draft_column_name(job->draft, columns[k]));
}

static void sort_keys(apply_job *job, const uf_list *list, const int *columns, const bool *is_key, list_key *keys)
{
    for (int r = 0; r < list->rows; r++) {
        keys[r] = (list_key){.row = r};
        for (int k = 0; k < list->columns; k++)
            if (is_key[k])
                add_to_key(keys[r].text, columns[k], list->cells[(size_t)r * (size_t)list->columns + (size_t)k]);
    }
    if (list->rows)
        qsort(keys, (size_t)list->rows, sizeof *keys, by_key_and_row);
    for (int r = 1; r < list->rows; r++)
        if (by_key(&keys[r - 1], &keys[r]) == 0)
            uf_fault_add(job->faults, UF_FAULT, "layout", (uf_place){list->file, list->lines[keys[r].row], NULL},
                         "says the same place as line %d; keep one of them", list->lines[keys[r - 1].row]);
}

static void fill_row(apply_job *job, const uf_list *list, const int *columns, const bool *is_key, int from,
                     uf_draft_row *row)
{
    for (int k = 0; k < list->columns; k++)
        if (!is_key[k])
            put(job, row, columns[k], list->cells[(size_t)from * (size_t)list->columns + (size_t)k], list->units[k],
                (uf_place){list->file, list->lines[from], list->names[k]});
}

static void report_list(apply_job *job, const uf_list *list, const list_key *keys, int lost,
                        const uf_draft_row *first, const char *by)
{
    int unused = 0, line = 0;
    for (int r = 0; r < list->rows; r++)
        if (!keys[r].used) {
            unused++;
            line = line && line < list->lines[keys[r].row] ? line : list->lines[keys[r].row];
        }
    uf_text where = {0};
    if (lost) {
        uf_draft_describe(first, &where);
        uf_fault_add(job->faults, UF_FAULT, "layout", (uf_place){list->file, 0, NULL},
                     "no line for %d of %d images (first: %.200s), looked up by %.100s; add lines, or leave these "
                     "images out by "
                     "--exclude",
                     lost, job->draft->count, where.bytes ? where.bytes : "", by);
    }
    if (unused)
        uf_fault_add(job->faults, UF_WARNING, "not_imaged", (uf_place){list->file, line, NULL},
                     "%d of %d lines match no image (this is the first), looked up by %.100s", unused, list->rows,
                     by);
    uf_text_free(&where);
}

static void look_up(apply_job *job, const uf_list *list, const int *columns, const bool *is_key, list_key *keys)
{
    int lost = 0;
    const uf_draft_row *first = NULL;
    uf_text by = {0};
    sort_keys(job, list, columns, is_key, keys);
    for (int r = 0; r < job->draft->count; r++) {
        uf_draft_row *row = &job->draft->rows[r];
        list_key wanted = {.row = 0};
        if (list->plate && !(row->cells[UF_SHEET_PLATE] && strcmp(row->cells[UF_SHEET_PLATE], list->plate) == 0))
            continue;
        for (int k = 0; k < list->columns; k++)
            if (is_key[k])
                add_to_key(wanted.text, columns[k], row->cells[columns[k]] ? row->cells[columns[k]] : "");
        list_key *found = bsearch(&wanted, keys, (size_t)list->rows, sizeof *keys, by_key);
        if (!found && !lost++)
            first = row;
        if (!found)
            continue;
        found->used = true;
        fill_row(job, list, columns, is_key, found->row, row);
    }
    name_keys(job, columns, is_key, list->columns, &by);
    report_list(job, list, keys, lost, first, by.bytes ? by.bytes : "");
    uf_text_free(&by);
}

static void apply_list(apply_job *job, const uf_list *list)
{
    int columns[UF_DRAFT_COLUMNS];
    bool is_key[UF_DRAFT_COLUMNS] = {false}, any = false;
    if (list->columns > UF_DRAFT_COLUMNS) {
        uf_fault_add(job->faults, UF_FAULT, "layout", (uf_place){list->file, 1, NULL},
                     "has %d columns; expected at most %d", list->columns, UF_DRAFT_COLUMNS);
        return;
    }
    for (int k = 0; k < list->columns; k++) {
        columns[k] = column_of(job, list->names[k], (uf_place){list->file, 1, NULL});
        if (columns[k] < 0)
            return;
        is_key[k] = job->draft->given[columns[k]];
        any |= is_key[k];
    }
    if (!any) {
        uf_fault_add(
            job->faults, UF_FAULT, "layout", (uf_place){list->file, 1, NULL},
            "nothing to find its lines by: none of its columns is in the files' names; name the files' parts in "
            "--name as the list names its columns (well, plate, session, position)");
        return;
    }
    list_key *keys = calloc((size_t)list->rows + 1, sizeof *keys);
    job->failed |= !keys;
    if (keys)
        look_up(job, list, columns, is_key, keys);
    free(keys);
}

uf_status uf_layout_apply(const uf_layout *layout, uf_draft *draft, uf_faults *faults, uf_error *error)
{
    apply_job job = {.layout = layout, .draft = draft, .faults = faults};
    /* Lists may name plates and wells (by position, say) that blocks are found by. */
    for (int k = 0; k < layout->list_count; k++)
        apply_list(&job, &layout->lists[k]);
    apply_blocks(&job);
    return job.failed ? uf_fail_memory(error, "a layout") : uf_faults_check(faults, error);
}

/* ---- images yet to be made ------------------------------------------------------------------- */

static void add_fields(apply_job *job, const uf_draft_row *like, int fields)
{
    for (int f = 1; f <= fields; f++) {
        char number[16];
        (void)snprintf(number, sizeof number, "%d", f);
        const char *field = uf_draft_keep(job->draft, number, strlen(number));
        uf_draft_row copy = *like; /* adding may move it */
        uf_draft_row *row = uf_draft_add(job->draft);
        if (!field || !row) {
            job->failed = true;
            return;
        }
        *row = copy;
        if (!row->cells[UF_SHEET_FIELD] && (fields > 1 || job->draft->given[UF_SHEET_FIELD]))
            row->cells[UF_SHEET_FIELD] = field;
    }
}

/* Wells that any block of the plate says something about. */
static void find_said(const apply_job *job, const char *plate, imaged *said)
{
    memset(said, 0, sizeof *said);
    for (int k = 0; k < job->layout->block_count; k++) {
        const uf_block *block = &job->layout->blocks[k];
        if (plate && block->plate && strcmp(block->plate, plate) != 0)
            continue;
        for (int r = 0; r < UF_MOST_ROWS; r++)
            for (int c = 0; block->rows[r] && c < block->columns; c++)
                said->well[r][c + block->first_column] |= *block->rows[r][c] != '\0';
    }
}

static void expect_plate(apply_job *job, const char *plate, int fields)
{
    imaged said;
    find_said(job, plate, &said);
    for (int r = 0; r < UF_MOST_ROWS && !job->failed; r++)
        for (int c = 0; c < UF_MOST_COLUMNS && !job->failed; c++) {
            char name[UF_WELL_NAME];
            if (!said.well[r][c])
                continue;
            uf_well_name(name, (uf_well){r, c});
            uf_draft_row like = {{0}};
            like.cells[UF_SHEET_WELL] = uf_draft_keep(job->draft, name, strlen(name));
            like.cells[UF_SHEET_PLATE] = plate;
            job->failed |= !like.cells[UF_SHEET_WELL];
            add_fields(job, &like, fields);
        }
}

static void expect_blocks(apply_job *job, int fields)
{
    const uf_layout *layout = job->layout;
    bool any = false;
    for (int k = 0; k < layout->block_count; k++) {
        const char *plate = layout->blocks[k].plate;
        bool before = !plate;
        for (int i = 0; i < k && !before; i++)
            before = layout->blocks[i].plate && strcmp(layout->blocks[i].plate, plate) == 0;
        any |= plate != NULL;
        if (!before)
            expect_plate(job, plate, fields);
    }
    if (!any && layout->block_count)
        expect_plate(job, NULL, fields);
}

static void expect_list(apply_job *job, const uf_list *list, int fields)
{
    for (int r = 0; r < list->rows && !job->failed; r++) {
        uf_draft_row like = {{0}};
        for (int k = 0; k < list->columns; k++) {
            const char *cell = list->cells[(size_t)r * (size_t)list->columns + (size_t)k];
            int column = uf_sheet_column_find(list->names[k]);
            bool place = column == UF_SHEET_WELL || column == UF_SHEET_PLATE || column == UF_SHEET_SESSION ||
                         column == UF_SHEET_FIELD || column == UF_SHEET_POSITION;
            if (place && *cell)
                like.cells[column] = cell;
        }
        if (list->plate)
            like.cells[UF_SHEET_PLATE] = list->plate;
        add_fields(job, &like, like.cells[UF_SHEET_FIELD] ? 1 : fields);
    }
}

uf_status uf_layout_expect(const uf_layout *layout, int fields, uf_draft *draft, uf_faults *faults, uf_error *error)
{
    static const int places[] = {UF_SHEET_WELL, UF_SHEET_PLATE, UF_SHEET_SESSION, UF_SHEET_FIELD, UF_SHEET_POSITION};
    apply_job job = {.layout = layout, .draft = draft, .faults = faults};
    /* The first list says which places there are; others (of sessions, say) tell more about them. */
    if (layout->block_count)
        expect_blocks(&job, fields);
    else if (layout->list_count)
        expect_list(&job, &layout->lists[0], fields);
    for (size_t k = 0; k < sizeof places / sizeof places[0]; k++)
        for (int r = 0; r < draft->count; r++)
            draft->given[places[k]] |= draft->rows[r].cells[places[k]] != NULL;
    return job.failed ? uf_fail_memory(error, "a layout") : UF_OK;
}
