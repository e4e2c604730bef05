/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Layouts from tables of text. */
#include "sheet/layout.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>

/* A file being taken apart. */
typedef struct layout_job {
    uf_layout *layout;
    const uf_csv_table *table;
    const char *file, *plate, *title; /* in the layout's arena; what was said above */
    const char *given;                /* the plate that the command line names, or NULL */
    bool *read;                       /* cells that belong to a block */
    uf_faults *faults;
    bool failed; /* no memory */
} layout_job;

static const char *keep(layout_job *job, const char *text, size_t length)
{
    while (length && strchr(" \t\n", text[length - 1]))
        length--;
    for (; length && strchr(" \t\n", *text); length--)
        text++;
    char *copy = uf_arena_take(&job->layout->arena, length + 1);
    if (!copy) {
        job->failed = true;
        return "";
    }
    memcpy(copy, text, length);
    copy[length] = '\0';
    return copy;
}

static const char *cell_at(const layout_job *job, int row, int column)
{
    static const char nothing[] = "";
    if (row < 0 || row >= job->table->rows || column < 0 || column >= job->table->columns)
        return nothing;
    const char *cell = uf_csv_cell(job->table, row, column);
    return cell + strspn(cell, " \t");
}

/* A column's number, 1 to 48, zeros in front allowed; 0 for anything else. */
static int column_number(const char *cell)
{
    size_t digits = strspn(cell, "0123456789");
    if (digits < 1 || digits > 3 || cell[digits + strspn(cell + digits, " \t")])
        return 0;
    int number = atoi(cell);
    return number >= 1 && number <= UF_MOST_COLUMNS ? number : 0;
}

/* "dose (uM)" is the property dose in uM. */
static const char *split_unit(layout_job *job, const char *text, const char **unit)
{
    size_t open = strcspn(text, "([");
    const char *end = text[open] ? strpbrk(text + open, ")]") : NULL;
    *unit = NULL;
    if (!end || open == 0 || end[1 + strspn(end + 1, " \t")])
        return keep(job, text, strlen(text));
    *unit = keep(job, text + open + 1, (size_t)(end - text) - open - 1);
    return keep(job, text, open);
}

/* ---- blocks ---------------------------------------------------------------------------------- */

static int row_letter(const char *cell)
{
    char letters[4];
    size_t length = strlen(cell);
    while (length && strchr(" \t", cell[length - 1]))
        length--;
    if (length < 1 || length >= sizeof letters)
        return -1;
    memcpy(letters, cell, length);
    letters[length] = '\0';
    return uf_row_parse(letters);
}

/* How many columns a block has whose corner is here; 0: there is none. One column is too few to be sure. */
static int corner_columns(const layout_job *job, int row, int column)
{
    int first = column_number(cell_at(job, row, column + 1)), count = 0;
    if (first == 0 || column_number(cell_at(job, row, column)) || row_letter(cell_at(job, row, column)) >= 0 ||
        row_letter(cell_at(job, row + 1, column)) < 0)
        return 0;
    while (column_number(cell_at(job, row, column + 1 + count)) == first + count)
        count++;
    return count >= 2 ? count : 0;
}

static uf_block *add_block(layout_job *job)
{
    uf_layout *layout = job->layout;
    if (layout->block_count == layout->block_capacity) {
        int capacity = layout->block_capacity ? 2 * layout->block_capacity : 8;
        uf_block *blocks = realloc(layout->blocks, (size_t)capacity * sizeof *blocks);
        if (!blocks) {
            job->failed = true;
            return NULL;
        }
        layout->blocks = blocks;
        layout->block_capacity = capacity;
    }
    return &layout->blocks[layout->block_count++];
}

static void take_block_row(layout_job *job, uf_block *block, int row, int column, int letter)
{
    const char **cells = uf_arena_take(&job->layout->arena, (size_t)block->columns * sizeof *cells);
    if (!cells) {
        job->failed = true;
        return;
    }
    for (int k = 0; k < block->columns; k++) {
        const char *cell = cell_at(job, row, column + 1 + k);
        cells[k] = keep(job, cell, strlen(cell));
        block->blank += !*cells[k];
    }
    block->rows[letter] = cells;
    block->lines[letter] = job->table->lines[row];
    if (*cell_at(job, row, column + 1 + block->columns))
        uf_fault_add(job->faults, UF_FAULT, "layout", (uf_place){job->file, job->table->lines[row], block->property},
                     "'%.60s' lies right of the block's last column, %d; number that column, or leave a blank column "
                     "before the next block",
                     cell_at(job, row, column + 1 + block->columns), block->first_column + block->columns);
}

static void mark_read(layout_job *job, int row, int column, int columns)
{
    for (int k = 0; k <= columns && column + k < job->table->columns; k++)
        job->read[(size_t)row * (size_t)job->table->columns + (size_t)(column + k)] = true;
}

static void take_block(layout_job *job, int row, int column, int columns)
{
    uf_block block = {.file = job->file, .line = job->table->lines[row], .plate = job->plate, .title = job->title};
    block.columns = columns;
    block.first_column = column_number(cell_at(job, row, column + 1)) - 1;
    block.property = split_unit(job, cell_at(job, row, column), &block.unit);
    mark_read(job, row, column, columns);
    if (!*block.property)
        uf_fault_add(
            job->faults, UF_FAULT, "layout", (uf_place){job->file, block.line, NULL},
            "the corner of the block is empty; write there what the block is of: treatment, dose, coating, ...");
    for (int r = row + 1, letter; (letter = row_letter(cell_at(job, r, column))) >= 0; r++) {
        if (block.rows[letter]) {
            uf_fault_add(job->faults, UF_FAULT, "layout", (uf_place){job->file, job->table->lines[r], block.property},
                         "row %.8s comes twice; the next block needs a line of its own with a corner and columns",
                         cell_at(job, r, column));
            break;
        }
        take_block_row(job, &block, r, column, letter);
        mark_read(job, r, column, columns + 1);
    }
    uf_block *kept = add_block(job);
    if (kept)
        *kept = block;
}

/* "plate,P1", "plate: P1", "Plate P1"; else the row's words are a title. */
static void take_title(layout_job *job, int row)
{
    const char *words[2] = {"", ""};
    int count = 0;
    for (int k = 0; k < job->table->columns && count < 2; k++) {
        bool read = job->read[(size_t)row * (size_t)job->table->columns + (size_t)k];
        const char *cell = cell_at(job, row, k);
        if (*cell && !read)
            words[count++] = keep(job, cell, strlen(cell));
    }
    if (count == 0)
        return;
    job->title = words[0];
    if (strncasecmp(words[0], "plate", 5) != 0)
        return;
    const char *rest = words[0] + 5 + strspn(words[0] + 5, " :=");
    const char *plate = count == 2 && !*rest ? words[1] : *rest && rest > words[0] + 5 ? rest : NULL;
    if (plate && job->given && strcmp(plate, job->given) != 0)
        uf_fault_add(job->faults, UF_FAULT, "layout", (uf_place){job->file, job->table->lines[row], NULL},
                     "names plate '%.60s', but the file was given as that of plate '%.60s'; name it once", plate,
                     job->given);
    job->plate = plate ? plate : job->plate;
}

static void take_blocks(layout_job *job)
{
    const uf_csv_table *table = job->table;
    int before = job->layout->block_count;
    for (int row = 0; row < table->rows && !job->failed; row++) {
        bool any = false;
        for (int column = 0; column < table->columns; column++) {
            bool read = job->read[(size_t)row * (size_t)table->columns + (size_t)column];
            int columns = read ? 0 : corner_columns(job, row, column);
            if (columns)
                take_block(job, row, column, columns);
            any |= columns > 0;
        }
        if (!any)
            take_title(job, row);
        else
            job->title = NULL;
    }
    if (job->layout->block_count == before)
        uf_fault_add(
            job->faults, UF_FAULT, "layout", (uf_place){job->file, 1, NULL},
            "neither a list (a header with a column well, plate, session, field or position) nor a block (a name "
            "in the corner, columns 1, 2, 3 .. beside it, rows A, B, C .. below); docs/sheets.md shows both");
}

/* ---- lists ----------------------------------------------------------------------------------- */

static int header_column(const layout_job *job, const char *name, const char *other)
{
    for (int k = 0; k < job->table->columns; k++) {
        const char *cell = cell_at(job, 0, k);
        size_t length = strcspn(cell, " \t");
        if ((strlen(name) == length && strncasecmp(cell, name, length) == 0) ||
            (other && strlen(other) == length && strncasecmp(cell, other, length) == 0))
            return k;
    }
    return -1;
}

static bool has_corner(const layout_job *job)
{
    for (int row = 0; row < job->table->rows; row++)
        for (int column = 0; column < job->table->columns; column++)
            if (corner_columns(job, row, column))
                return true;
    return false;
}

static bool is_list(const layout_job *job)
{
    static const char *const keys[] = {"well", "plate", "session", "field", "position", "row"};
    bool key = false;
    for (size_t k = 0; k < sizeof keys / sizeof keys[0]; k++)
        key |= header_column(job, keys[k], NULL) >= 0;
    return key && job->table->columns > 1 && job->table->rows > 1 && !has_corner(job);
}

static uf_list *add_list(layout_job *job)
{
    uf_layout *layout = job->layout;
    if (layout->list_count == layout->list_capacity) {
        int capacity = layout->list_capacity ? 2 * layout->list_capacity : 4;
        uf_list *lists = realloc(layout->lists, (size_t)capacity * sizeof *lists);
        if (!lists) {
            job->failed = true;
            return NULL;
        }
        layout->lists = lists;
        layout->list_capacity = capacity;
    }
    return &layout->lists[layout->list_count++];
}

static bool row_is_empty(const layout_job *job, int row)
{
    for (int k = 0; k < job->table->columns; k++)
        if (*cell_at(job, row, k))
            return false;
    return true;
}

/* Where the file has row and column instead of well, the two make one. */
static const char *joined_well(layout_job *job, int row, int row_column, int column_column)
{
    char name[16];
    (void)snprintf(name, sizeof name, "%.6s%.6s", cell_at(job, row, row_column), cell_at(job, row, column_column));
    return keep(job, name, strlen(name));
}

static void take_list_rows(layout_job *job, uf_list *list, const int *from, int row_column, int column_column)
{
    for (int r = 1; r < job->table->rows; r++) {
        if (row_is_empty(job, r))
            continue;
        if (job->table->fields[r] > job->table->fields[0])
            uf_fault_add(job->faults, UF_FAULT, "layout", (uf_place){job->file, job->table->lines[r], NULL},
                         "%d fields, but the header has %d; a cell that holds the separator needs quotes around it",
                         job->table->fields[r], job->table->fields[0]);
        const char **cells = list->cells + (size_t)list->rows * (size_t)list->columns;
        for (int k = 0; k < list->columns; k++) {
            const char *cell = from[k] >= 0 ? cell_at(job, r, from[k]) : "";
            cells[k] = from[k] >= 0 ? keep(job, cell, strlen(cell)) : joined_well(job, r, row_column, column_column);
        }
        list->lines[list->rows++] = job->table->lines[r];
    }
}

static void take_list(layout_job *job)
{
    size_t columns = (size_t)job->table->columns, rows = (size_t)job->table->rows;
    int row_column = header_column(job, "row", NULL), column_column = header_column(job, "column", "col");
    bool join = row_column >= 0 && column_column >= 0 && header_column(job, "well", NULL) < 0;
    uf_arena *arena = &job->layout->arena;
    uf_list list = {.file = job->file, .plate = job->plate};
    int *from = uf_arena_take(arena, (columns + 1) * sizeof *from);
    list.names = uf_arena_take(arena, (columns + 1) * sizeof *list.names);
    list.units = uf_arena_take(arena, (columns + 1) * sizeof *list.units);
    list.cells = uf_arena_take(arena, rows * (columns + 1) * sizeof *list.cells);
    list.lines = uf_arena_take(arena, rows * sizeof *list.lines);
    if (!from || !list.names || !list.units || !list.cells || !list.lines) {
        job->failed = true;
        return;
    }
    for (int k = 0; k < job->table->columns; k++) {
        if (!*cell_at(job, 0, k) || (join && (k == row_column || k == column_column)))
            continue;
        from[list.columns] = k;
        list.names[list.columns] = split_unit(job, cell_at(job, 0, k), &list.units[list.columns]);
        list.columns++;
    }
    if (join) {
        from[list.columns] = -1;
        list.units[list.columns] = NULL;
        list.names[list.columns++] = "well";
    }
    take_list_rows(job, &list, from, row_column, column_column);
    uf_list *kept = add_list(job);
    if (kept)
        *kept = list;
}

/* ---- all of it ------------------------------------------------------------------------------- */

static void say_dialect(const layout_job *job)
{
    const uf_csv_dialect *d = &job->table->dialect;
    if (d->separator != ',')
        uf_fault_add(job->faults, UF_NOTE, "dialect", (uf_place){job->file, 1, NULL},
                     "read with %s between columns%s", d->separator == ';' ? "semicolons" : "tabs",
                     d->said ? ", as its first line says" : "");
    if (d->latin1)
        uf_fault_add(
            job->faults, UF_NOTE, "dialect", (uf_place){job->file, 0, NULL},
            "is not UTF-8; read as Windows-1252 (Latin-1): check letters beyond ASCII, or save it as CSV UTF-8");
}

uf_status uf_layout_take(uf_layout *layout, const uf_csv_table *table, const char *path, const char *plate,
                         uf_faults *faults, uf_error *error)
{
    layout_job job = {.layout = layout, .table = table, .faults = faults};
    job.file = keep(&job, path, strlen(path));
    job.plate = plate ? keep(&job, plate, strlen(plate)) : NULL;
    job.given = job.plate;
    job.read = calloc((size_t)table->rows * (size_t)table->columns + 1, sizeof *job.read);
    job.failed = job.failed || !job.read;
    if (!job.failed)
        say_dialect(&job);
    if (!job.failed && is_list(&job))
        take_list(&job);
    else if (!job.failed)
        take_blocks(&job);
    free(job.read);
    return job.failed ? uf_fail_memory(error, path) : uf_faults_check(faults, error);
}

void uf_layout_free(uf_layout *layout)
{
    free(layout->blocks);
    free(layout->lists);
    uf_arena_free(&layout->arena);
    *layout = (uf_layout){0};
}
