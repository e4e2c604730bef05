/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/cells.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "sheet/amount.h"

static uf_place place_of(const sheet_taking *t, const uf_sheet_row *row, uf_sheet_column column)
{
    return (uf_place){t->sheet->path, row->line, uf_sheet_columns[column].name};
}

/* Keeps `text` as the cell's; false without memory. */
static bool set_text(sheet_taking *t, uf_sheet_row *row, uf_sheet_column column, const char *text)
{
    size_t size = strlen(text) + 1;
    char *copy = uf_arena_take(&t->sheet->arena, size);
    if (!copy)
        return false;
    memcpy(copy, text, size);
    row->text[column] = copy;
    return true;
}

static void count_first(int *count, int *first, int line)
{
    if (++*count == 1)
        *first = line;
}

/* ---- numbers --------------------------------------------------------------------------------- */

static void refuse_amount(sheet_taking *t, const uf_sheet_row *row, uf_sheet_column column, uf_amount_kind kind)
{
    const char *text = row->text[column];
    if (kind == UF_AMOUNT_UNCLEAR)
        uf_fault_add(t->faults, UF_FAULT, "number", place_of(t, row, column),
                     "'%.60s' may be thousands or a decimal comma; write it without a separator, or with a decimal "
                     "point",
                     text);
    else
        uf_fault_add(t->faults, UF_FAULT, "number", place_of(t, row, column),
                     "'%.60s' is not a number; write one with a decimal point, like 0.3", text);
}

/* Reads a cell as a number; NaN for an empty cell, and for one that is refused. */
static uf_status take_amount(sheet_taking *t, uf_sheet_row *row, uf_sheet_column column, uf_amount *amount,
                             uf_error *error)
{
    char number[UF_NUMBER_TEXT];
    *amount = (uf_amount){.value = (double)NAN};
    if (!*row->text[column])
        return UF_OK;
    uf_amount_kind kind = uf_amount_parse(row->text[column], amount);
    if (kind != UF_AMOUNT_GOOD) {
        refuse_amount(t, row, column, kind);
        amount->value = (double)NAN;
        return UF_OK;
    }
    if (!amount->comma && !*amount->unit)
        return UF_OK;
    if (amount->comma)
        count_first(&t->decimal_commas, &t->comma_line, row->line);
    uf_format_number(number, amount->value, 15);
    return set_text(t, row, column, number) ? UF_OK : uf_fail_memory(error, "a sheet");
}

static uf_status take_plain_number(sheet_taking *t, uf_sheet_row *row, uf_sheet_column column, double *value,
                                   double least, uf_error *error)
{
    uf_amount amount;
    uf_status status = take_amount(t, row, column, &amount, error);
    *value = amount.value;
    if (status == UF_OK && *amount.unit)
        uf_fault_add(t->faults, UF_FAULT, "number", place_of(t, row, column),
                     "has a unit (%s); the column's name says the unit, so write the number alone", amount.unit);
    if (status == UF_OK && amount.value < least)
        uf_fault_add(t->faults, UF_FAULT, "number", place_of(t, row, column),
                     "%s is out of range; expected at least %g", row->text[column], least);
    return status;
}

static void take_page(sheet_taking *t, const uf_sheet_row *row, uf_sheet_column column, int *page)
{
    double value;
    *page = 1;
    if (!*row->text[column])
        return;
    if (uf_parse_number(row->text[column], &value) && value >= 1 && value <= 1e9 && value == floor(value))
        *page = (int)value;
    else
        uf_fault_add(t->faults, UF_FAULT, "page", place_of(t, row, column),
                     "'%.60s' is no page; pages are whole numbers from 1", row->text[column]);
}

/* ---- dose ------------------------------------------------------------------------------------ */

static uf_status take_dose(sheet_taking *t, uf_sheet_row *row, uf_error *error)
{
    uf_amount amount;
    char unit[UF_UNIT_TEXT], was[UF_UNIT_TEXT];
    uf_status status = take_amount(t, row, UF_SHEET_DOSE, &amount, error);
    row->dose = amount.value;
    if (status == UF_OK && amount.value < 0)
        uf_fault_add(t->faults, UF_FAULT, "number", place_of(t, row, UF_SHEET_DOSE), "%s is less than nothing",
                     row->text[UF_SHEET_DOSE]);
    bool good = uf_unit_plain(was, row->text[UF_SHEET_DOSE_UNIT]);
    if (!good)
        uf_fault_add(t->faults, UF_FAULT, "unit", place_of(t, row, UF_SHEET_DOSE_UNIT), "is too long for a unit");
    (void)snprintf(unit, sizeof unit, "%s", *amount.unit ? amount.unit : was);
    if (*amount.unit) {
        count_first(&t->split_units, &t->unit_line, row->line);
        if (*was && strcmp(was, amount.unit) != 0)
            uf_fault_add(t->faults, UF_FAULT, "unit", place_of(t, row, UF_SHEET_DOSE),
                         "the dose is in %s, but dose_unit says %s; keep one of them", amount.unit, was);
    }
    if (status == UF_OK && good && strcmp(unit, row->text[UF_SHEET_DOSE_UNIT]) != 0)
        status = set_text(t, row, UF_SHEET_DOSE_UNIT, unit) ? UF_OK : uf_fail_memory(error, "a sheet");
    /* The sheet has doses with units, so it has the column too. */
    t->sheet->has[UF_SHEET_DOSE_UNIT] |= *amount.unit != '\0';
    return status;
}

/* A treatment's row with a dose, to find its unit by. */
typedef struct dosed {
    uf_sheet_row *row;
    int index;
} dosed;

static int by_treatment(const void *a, const void *b)
{
    const dosed *one = a, *other = b;
    int order = strcmp(one->row->text[UF_SHEET_TREATMENT], other->row->text[UF_SHEET_TREATMENT]);
    return order ? order : one->index - other->index;
}

/* Zero is zero in every unit, so a vehicle's unit binds nobody. */
static uf_status convert_dose(sheet_taking *t, const uf_sheet_row *first, uf_sheet_row *row, int *converted,
                              uf_error *error)
{
    char number[UF_NUMBER_TEXT];
    const char *to = first->text[UF_SHEET_DOSE_UNIT], *from = row->text[UF_SHEET_DOSE_UNIT];
    double value = row->dose;
    if (strcmp(from, to) == 0 || (value == 0 && !*from))
        return UF_OK;
    if (value != 0 && (!*from || !*to || !uf_unit_convert(&value, from, to))) {
        uf_fault_add(t->faults, UF_FAULT, "unit", place_of(t, row, UF_SHEET_DOSE_UNIT),
                     "'%.60s' has doses in %.24s here and in %.24s on line %d, which do not convert; use one unit",
                     row->text[UF_SHEET_TREATMENT], *from ? from : "no unit", *to ? to : "no unit", first->line);
        return UF_OK;
    }
    row->dose = value;
    row->text[UF_SHEET_DOSE_UNIT] = to;
    uf_format_number(number, value, 12);
    ++*converted;
    return set_text(t, row, UF_SHEET_DOSE, number) ? UF_OK : uf_fail_memory(error, "a sheet");
}

static uf_status unify_treatment(sheet_taking *t, dosed *list, int count, uf_error *error)
{
    const uf_sheet_row *first = list[0].row;
    int converted = 0;
    for (int k = 0; first->dose == 0 && k < count; k++)
        first = list[k].row;
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < count; k++)
        status = convert_dose(t, first, list[k].row, &converted, error);
    if (converted)
        uf_fault_add(t->faults, UF_NOTE, "unit", (uf_place){t->sheet->path, 0, "dose_unit"},
                     "%d doses of '%.60s' converted to %s", converted, first->text[UF_SHEET_TREATMENT],
                     first->text[UF_SHEET_DOSE_UNIT]);
    return status;
}

uf_status uf_sheet_unify_doses(sheet_taking *t, uf_error *error)
{
    uf_sheet *sheet = t->sheet;
    int count = 0;
    dosed *list = uf_arena_take(&sheet->arena, ((size_t)sheet->count + 1) * sizeof *list);
    if (!list)
        return uf_fail_memory(error, "a sheet");
    for (int k = 0; k < sheet->count; k++)
        if (!isnan(sheet->rows[k].dose))
            list[count++] = (dosed){&sheet->rows[k], k};
    qsort(list, (size_t)count, sizeof *list, by_treatment);
    uf_status status = UF_OK;
    for (int from = 0, to; status == UF_OK && from < count; from = to) {
        const char *treatment = list[from].row->text[UF_SHEET_TREATMENT];
        for (to = from + 1; to < count && strcmp(list[to].row->text[UF_SHEET_TREATMENT], treatment) == 0;)
            to++;
        status = unify_treatment(t, list + from, to - from, error);
    }
    return status;
}

/* ---- wells ----------------------------------------------------------------------------------- */

static uf_status take_well(sheet_taking *t, uf_sheet_row *row, uf_error *error)
{
    uf_vessel vessel = {1536, UF_MOST_ROWS, UF_MOST_COLUMNS};
    const char *vessel_text = row->text[UF_SHEET_VESSEL], *text = row->text[UF_SHEET_WELL];
    char name[UF_WELL_NAME];
    row->well = (uf_well){-1, -1};
    if (*vessel_text && !uf_vessel_parse(vessel_text, &vessel)) {
        uf_fault_add(t->faults, UF_FAULT, "vessel", place_of(t, row, UF_SHEET_VESSEL),
                     "'%.60s' is not known; expected 6, 12, 24, 48, 96, 384 or 1536 (wells), coverslip or dish",
                     vessel_text);
        return UF_OK;
    }
    if (!*text || vessel.wells == 0)
        return UF_OK;
    if (!uf_well_parse(text, &row->well)) {
        uf_fault_add(t->faults, UF_FAULT, "well", place_of(t, row, UF_SHEET_WELL),
                     "'%.60s' is no well; expected a row's letter and a column's number, like B07 (with vessel = "
                     "coverslip or dish any name will do)",
                     text);
        return UF_OK;
    }
    if (!uf_well_on(vessel, row->well)) {
        uf_fault_add(t->faults, UF_FAULT, "well", place_of(t, row, UF_SHEET_WELL),
                     "'%.60s' is not on a plate of %d wells (%d rows, %d columns)", text, vessel.wells, vessel.rows,
                     vessel.columns);
        return UF_OK;
    }
    uf_well_name(name, row->well);
    return set_text(t, row, UF_SHEET_WELL, name) ? UF_OK : uf_fail_memory(error, "a sheet");
}

/* ---- paths ----------------------------------------------------------------------------------- */

static bool has_drive(const char *path)
{
    return ((path[0] >= 'A' && path[0] <= 'Z') || (path[0] >= 'a' && path[0] <= 'z')) && path[1] == ':' &&
           (path[2] == '\\' || path[2] == '/');
}

/* The path to open, in the arena: beside the sheet, or below the root. */
static const char *resolve(sheet_taking *t, const char *text)
{
    const char *folder = t->root ? t->root : t->sheet->path, *slash = strrchr(folder, '/');
    size_t before = t->root ? strlen(folder) : slash ? (size_t)(slash - folder) + 1 : 0, length = strlen(text);
    before = text[0] == '/' ? 0 : before;
    char *path = uf_arena_take(&t->sheet->arena, before + length + 2);
    if (!path)
        return NULL;
    memcpy(path, folder, before);
    if (before && folder[before - 1] != '/')
        path[before++] = '/';
    memcpy(path + before, text, length + 1);
    return path;
}

static uf_status take_path(sheet_taking *t, uf_sheet_row *row, uf_sheet_column column, const char **path,
                           uf_error *error)
{
    *path = NULL;
    if (!*row->text[column])
        return UF_OK;
    if (has_drive(row->text[column]) || strncmp(row->text[column], "\\\\", 2) == 0) {
        uf_fault_add(t->faults, UF_FAULT, "path", place_of(t, row, column),
                     "'%.200s' names a drive of another machine; write the path from the images' folder on, and give "
                     "that folder by --root",
                     row->text[column]);
        return UF_OK;
    }
    if (strchr(row->text[column], '\\')) {
        count_first(&t->backslashes, &t->backslash_line, row->line);
        char *copy = uf_copy_string(row->text[column]);
        for (char *p = copy; p && *p; p++)
            *p = *p == '\\' ? '/' : *p;
        bool kept = copy && set_text(t, row, column, copy);
        free(copy);
        if (!kept)
            return uf_fail_memory(error, "a sheet");
    }
    *path = resolve(t, row->text[column]);
    return *path ? UF_OK : uf_fail_memory(error, "a sheet");
}

static uf_status take_paths(sheet_taking *t, uf_sheet_row *row, uf_error *error)
{
    const struct {
        uf_sheet_column column;
        const char **path;
    } paths[] = {{UF_SHEET_NEAR, &row->near_path},
                 {UF_SHEET_WIDE, &row->wide_path},
                 {UF_SHEET_NUCLEI, &row->nuclei_path},
                 {UF_SHEET_MASK, &row->mask_path},
                 {UF_SHEET_INSTRUMENT, &row->instrument_path}};
    uf_status status = UF_OK;
    for (size_t k = 0; status == UF_OK && k < sizeof paths / sizeof paths[0]; k++)
        status = take_path(t, row, paths[k].column, paths[k].path, error);
    take_page(t, row, UF_SHEET_NEAR_PAGE, &row->near_page);
    take_page(t, row, UF_SHEET_WIDE_PAGE, &row->wide_page);
    if (t->sheet->has[UF_SHEET_NEAR] && !*row->text[UF_SHEET_NEAR])
        uf_fault_add(t->faults, UF_FAULT, "no_near", place_of(t, row, UF_SHEET_NEAR),
                     "is empty; every row needs its near image");
    if (row->near_path && row->wide_path && strcmp(row->near_path, row->wide_path) == 0 &&
        row->near_page == row->wide_page)
        uf_fault_add(
            t->faults, UF_FAULT, "same_image", place_of(t, row, UF_SHEET_WIDE),
            "near and wide are the same image ('%.200s' page %d); name the other file, or give near_page and "
            "wide_page",
            row->text[UF_SHEET_WIDE], row->near_page);
    return status;
}

/* ---- words ----------------------------------------------------------------------------------- */

static void take_role(sheet_taking *t, uf_sheet_row *row)
{
    const char *word = row->text[UF_SHEET_ROLE];
    int role = *word ? uf_role_parse(word) : UF_ROLE_SAMPLE;
    row->role = role < 0 ? UF_ROLE_SAMPLE : (uf_role)role;
    if (role >= 0) {
        row->text[UF_SHEET_ROLE] = *word ? uf_role_words[role] : "";
        return;
    }
    const char *nearest = uf_role_words[0];
    for (int k = 1; k < UF_ROLES; k++)
        if (uf_edit_distance(word, uf_role_words[k]) < uf_edit_distance(word, nearest))
            nearest = uf_role_words[k];
    uf_fault_add(t->faults, UF_FAULT, "role", place_of(t, row, UF_SHEET_ROLE),
                 "'%.60s' is no role; expected sample, control, positive, reference or blank (the nearest is '%s')",
                 word, nearest);
}

/* The form of ISO 8601 that sorts as text: date, T or a blank, hours and minutes, perhaps seconds. */
static bool is_time(const char *text)
{
    static const char form[] = "dddd-dd-ddTdd:dd";
    for (size_t k = 0; k < sizeof form - 1; k++) {
        char c = text[k];
        bool good = form[k] == 'd' ? c >= '0' && c <= '9' : form[k] == 'T' ? c == 'T' || c == ' ' : c == form[k];
        if (!good)
            return false;
    }
    if (atoi(text + 5) < 1 || atoi(text + 5) > 12 || atoi(text + 8) < 1 || atoi(text + 8) > 31 ||
        atoi(text + 11) > 23 || atoi(text + 14) > 59)
        return false;
    text += sizeof form - 1;
    if (*text == ':') {
        size_t digits = strspn(text + 1, "0123456789.");
        if (digits < 2)
            return false;
        text += 1 + digits;
    }
    return text[strspn(text, "Z+-:0123456789")] == '\0';
}

static void take_time(sheet_taking *t, const uf_sheet_row *row)
{
    const char *text = row->text[UF_SHEET_ACQUIRED];
    if (*text && !is_time(text))
        uf_fault_add(t->faults, UF_FAULT, "time", place_of(t, row, UF_SHEET_ACQUIRED),
                     "'%.60s' is no time in the form that everybody reads alike; write it like 2030-05-06T14:30:00",
                     text);
}

/* ---- identity -------------------------------------------------------------------------------- */

static uf_status make_id(sheet_taking *t, uf_sheet_row *row, uf_error *error)
{
    /* Coverslips have no plate; what keeps those of one name apart is their session. */
    uf_sheet_column first = *row->text[UF_SHEET_PLATE] ? UF_SHEET_PLATE : UF_SHEET_SESSION;
    const uf_sheet_column parts[] = {first, UF_SHEET_WELL, UF_SHEET_FIELD, UF_SHEET_TIME_MIN};
    uf_text id = {0};
    if (*row->text[UF_SHEET_WELL]) {
        for (size_t k = 0; k < sizeof parts / sizeof parts[0]; k++)
            if (*row->text[parts[k]])
                uf_text_printf(&id, "%s%s", id.length ? "/" : "", row->text[parts[k]]);
    } else {
        uf_text_add(&id, row->text[UF_SHEET_NEAR]);
        if (row->near_page != 1)
            uf_text_printf(&id, "#%d", row->near_page);
    }
    char *copy = id.failed ? NULL : uf_arena_take(&t->sheet->arena, id.length + 1);
    if (copy)
        memcpy(copy, id.bytes ? id.bytes : "", id.length + 1);
    row->field_id = copy;
    uf_text_free(&id);
    return copy ? UF_OK : uf_fail_memory(error, "a sheet");
}

uf_status uf_sheet_take_cells(sheet_taking *t, uf_sheet_row *row, uf_error *error)
{
    take_role(t, row);
    take_time(t, row);
    uf_status status = take_well(t, row, error);
    if (status == UF_OK)
        status = take_dose(t, row, error);
    if (status == UF_OK)
        status = take_plain_number(t, row, UF_SHEET_TIME_MIN, &row->time_min, -1e9, error);
    if (status == UF_OK)
        status = take_plain_number(t, row, UF_SHEET_EXPOSURE_NEAR_MS, &row->exposure_near_ms, 0, error);
    if (status == UF_OK)
        status = take_plain_number(t, row, UF_SHEET_EXPOSURE_WIDE_MS, &row->exposure_wide_ms, 0, error);
    if (status == UF_OK)
        status = take_paths(t, row, error);
    if (status == UF_OK)
        status = make_id(t, row, error);
    return status;
}

/* ---- what was understood --------------------------------------------------------------------- */

void uf_sheet_say_understood(const sheet_taking *t)
{
    const char *path = t->sheet->path;
    const uf_csv_dialect *d = &t->sheet->dialect;
    if (d->separator != ',')
        uf_fault_add(t->faults, UF_NOTE, "dialect", (uf_place){path, 1, NULL}, "read with %s between columns%s",
                     d->separator == ';' ? "semicolons" : "tabs", d->said ? ", as its first line says" : "");
    if (d->latin1)
        uf_fault_add(
            t->faults, UF_NOTE, "dialect", (uf_place){path, 0, NULL},
            "is not UTF-8; read as Windows-1252 (Latin-1): check letters beyond ASCII, or save it as CSV UTF-8");
    if (t->decimal_commas)
        uf_fault_add(t->faults, UF_NOTE, "dialect", (uf_place){path, t->comma_line, NULL},
                     "decimal commas in %d cells, read as decimal points", t->decimal_commas);
    if (t->backslashes)
        uf_fault_add(t->faults, UF_NOTE, "dialect", (uf_place){path, t->backslash_line, NULL},
                     "backslashes in %d paths, read as /", t->backslashes);
    if (t->split_units)
        uf_fault_add(t->faults, UF_NOTE, "dialect", (uf_place){path, t->unit_line, NULL},
                     "%d doses had their unit in the same cell; it goes to dose_unit", t->split_units);
}
