/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * An experiment is looked at in groups: rows with the same words in some columns. A list of rows is sorted by these
 * words, and what lies together is a group.
 */
#include "sheet/checks.h"

#include <stdlib.h>
#include <string.h>
#include <strings.h>

#include "sheet/amount.h"

/* ---- groups ---------------------------------------------------------------------------------- */

enum { MOST_KEYS = 6 };

typedef struct grouping {
    const uf_sheet_row **rows;
    int count;
    uf_sheet_column keys[MOST_KEYS];
    int key_count;
} grouping;

/* A row with what orders it: qsort has no context. */
typedef struct keyed {
    const uf_sheet_row *row;
    const grouping *by;
} keyed;

static int compare_rows(const uf_sheet_row *a, const uf_sheet_row *b, const uf_sheet_column *keys, int count)
{
    for (int k = 0; k < count; k++) {
        int order = strcmp(a->text[keys[k]], b->text[keys[k]]);
        if (order)
            return order;
    }
    return 0;
}

static int by_keys(const void *a, const void *b)
{
    const keyed *one = a, *other = b;
    int order = compare_rows(one->row, other->row, one->by->keys, one->by->key_count);
    return order ? order : one->row->line - other->row->line;
}

static uf_status sort_rows(const uf_sheet *sheet, grouping *by, uf_error *error)
{
    size_t count = (size_t)sheet->count + 1;
    keyed *list = malloc(count * sizeof *list);
    by->rows = malloc(count * sizeof *by->rows);
    by->count = sheet->count;
    if (list && by->rows) {
        for (int k = 0; k < sheet->count; k++)
            list[k] = (keyed){&sheet->rows[k], by};
        qsort(list, (size_t)sheet->count, sizeof *list, by_keys);
        for (int k = 0; k < sheet->count; k++)
            by->rows[k] = list[k].row;
    }
    free(list);
    return list && by->rows ? UF_OK : uf_fail_memory(error, "the checks of a sheet");
}

/* Where the group that begins at `from` ends, by the first `keys` of its columns. */
static int group_end(const grouping *by, int from, int keys)
{
    int to = from + 1;
    while (to < by->count && compare_rows(by->rows[from], by->rows[to], by->keys, keys) == 0)
        to++;
    return to;
}

/* How many different words column number `keys` has in the group. */
static int distinct(const grouping *by, int from, int to, int keys)
{
    int count = 0;
    for (int at = from; at < to; at = group_end(by, at, keys + 1))
        count++;
    return count;
}

/* "t01 (2)", a handful of them, then "and 7 more". */
typedef struct name_list {
    uf_text text;
    int count;
} name_list;

enum { NAMES_SHOWN = 6 };

static void add_name(name_list *list, const char *first, const char *second, const char *third)
{
    bool none = !*first && !*second && !*third;
    if (list->count++ < NAMES_SHOWN && none && list->text.length)
        uf_text_add(&list->text, ", rows without a treatment");
    else if (list->count <= NAMES_SHOWN && !none)
        uf_text_printf(&list->text, "%s%.60s%s%.60s%s%.40s", list->text.length ? ", " : "", first,
                       *second && *first ? " on " : "", second, *third ? " " : "", third);
}

static const char *close_list(name_list *list)
{
    if (list->count > NAMES_SHOWN)
        uf_text_printf(&list->text, " and %d more", list->count - NAMES_SHOWN);
    return list->text.bytes ? list->text.bytes : "";
}

/* ---- controls -------------------------------------------------------------------------------- */

static uf_status check_controls(const uf_sheet *sheet, uf_faults *faults, uf_error *error)
{
    grouping by = {.keys = {UF_SHEET_PLATE}, .key_count = 1};
    name_list without = {0};
    int plates = 0;
    uf_status status = sort_rows(sheet, &by, error);
    for (int from = 0, to; status == UF_OK && from < by.count; from = to, plates++) {
        bool control = false;
        to = group_end(&by, from, 1);
        for (int k = from; k < to; k++)
            control |= by.rows[k]->role == UF_ROLE_CONTROL;
        if (!control)
            add_name(&without, *by.rows[from]->text[UF_SHEET_PLATE] ? by.rows[from]->text[UF_SHEET_PLATE] : "?", "",
                     "");
    }
    if (without.count == plates && plates)
        uf_fault_add(faults, UF_WARNING, "no_control", (uf_place){sheet->path, 0, "role"},
                     "no row has role = control; comparisons need to know what treatments are compared to");
    else if (without.count)
        uf_fault_add(faults, UF_WARNING, "no_control", (uf_place){sheet->path, 0, "role"},
                     "no control on plate %s; treatments there have nothing on their own plate to be compared to",
                     close_list(&without));
    uf_text_free(&without.text);
    free(by.rows);
    return status;
}

/* ---- replicates ------------------------------------------------------------------------------ */

static bool counts_as_arm(const uf_sheet_row *row)
{
    return row->role != UF_ROLE_BLANK && row->role != UF_ROLE_REFERENCE;
}

static uf_status check_replicates(const uf_sheet *sheet, uf_faults *faults, uf_error *error)
{
    enum { ENOUGH = 3, KEYS = 4 };
    grouping by = {
        .keys = {UF_SHEET_TREATMENT, UF_SHEET_COATING, UF_SHEET_DOSE, UF_SHEET_DOSE_UNIT, UF_SHEET_REPLICATE},
        .key_count = KEYS + 1};
    name_list few = {0};
    if (!sheet->has[UF_SHEET_REPLICATE]) {
        uf_fault_add(
            faults, UF_WARNING, "replicates", (uf_place){sheet->path, 0, "replicate"},
            "no column replicate; without it plates stand for repeats, and a single plate gives no p-values");
        return UF_OK;
    }
    uf_status status = sort_rows(sheet, &by, error);
    for (int from = 0, to; status == UF_OK && from < by.count; from = to) {
        const uf_sheet_row *row = by.rows[from];
        to = group_end(&by, from, KEYS);
        if (counts_as_arm(row) && distinct(&by, from, to, KEYS) < ENOUGH)
            add_name(&few, row->text[UF_SHEET_TREATMENT], row->text[UF_SHEET_COATING], row->text[UF_SHEET_DOSE]);
    }
    if (few.count == 1 && few.text.length == 0)
        uf_fault_add(faults, UF_WARNING, "replicates", (uf_place){sheet->path, 0, "replicate"},
                     "fewer than three replicates: intervals and p-values will be empty");
    else if (few.count)
        uf_fault_add(faults, UF_WARNING, "replicates", (uf_place){sheet->path, 0, "replicate"},
                     "fewer than three replicates of %s: intervals and p-values will be empty", close_list(&few));
    uf_text_free(&few.text);
    free(by.rows);
    return status;
}

/*
 * Wells of one treatment on one plate and in one session that are numbered 1, 2, 3 are parallel wells. Donors on one
 * plate look alike only where each has a single well, and then it is worth asking, too.
 */
static uf_status check_numbered_wells(const uf_sheet *sheet, uf_faults *faults, uf_error *error)
{
    enum { GROUP = 6, TREATMENT = 2 };
    const grouping wells = {.keys = {UF_SHEET_PLATE, UF_SHEET_SESSION, UF_SHEET_TREATMENT, UF_SHEET_DOSE,
                                     UF_SHEET_WELL, UF_SHEET_REPLICATE},
                            .key_count = GROUP};
    grouping by_well = wells, by_replicate = wells;
    int arms = 0, numbered = 0;
    const uf_sheet_row *example = NULL;
    by_replicate.keys[4] = UF_SHEET_REPLICATE;
    by_replicate.keys[5] = UF_SHEET_WELL;
    if (!sheet->has[UF_SHEET_REPLICATE] || !sheet->has[UF_SHEET_WELL])
        return UF_OK;
    uf_status status = sort_rows(sheet, &by_well, error);
    if (status == UF_OK)
        status = sort_rows(sheet, &by_replicate, error);
    for (int from = 0, to; status == UF_OK && from < by_well.count; from = to) {
        to = group_end(&by_well, from, 4);
        int well_count = distinct(&by_well, from, to, 4), replicates = distinct(&by_replicate, from, to, 4);
        arms += well_count > 1;
        if (well_count > 1 && replicates == well_count && !numbered++)
            example = by_well.rows[from];
    }
    if (numbered && 2 * numbered >= arms)
        uf_fault_add(
            faults, UF_WARNING, "numbered_wells", (uf_place){sheet->path, example->line, "replicate"},
            "each well of '%.60s' on one plate in one session has a replicate of its own: parallel wells are "
            "no replicates; write the day, passage or donor there",
            example->text[UF_SHEET_TREATMENT]);
    free(by_well.rows);
    free(by_replicate.rows);
    return status;
}

/* ---- one well, one treatment ----------------------------------------------------------------- */

/* Fields of one well got the same, unless they are of different times. */
static uf_status check_wells(const uf_sheet *sheet, uf_faults *faults, uf_error *error)
{
    enum { WELL = 4 };
    static const uf_sheet_column same[] = {UF_SHEET_TREATMENT, UF_SHEET_DOSE, UF_SHEET_COATING, UF_SHEET_ROLE,
                                           UF_SHEET_REPLICATE};
    grouping by = {.keys = {UF_SHEET_SESSION, UF_SHEET_PLATE, UF_SHEET_WELL, UF_SHEET_TIME_MIN}, .key_count = WELL};
    uf_status status = sort_rows(sheet, &by, error);
    for (int from = 0, to; status == UF_OK && from < by.count; from = to) {
        const uf_sheet_row *first = by.rows[from];
        to = group_end(&by, from, WELL);
        for (int k = from + 1; *first->text[UF_SHEET_WELL] && k < to; k++)
            for (size_t i = 0; i < sizeof same / sizeof same[0]; i++)
                if (strcmp(first->text[same[i]], by.rows[k]->text[same[i]]) != 0)
                    uf_fault_add(
                        faults, UF_FAULT, "two_in_one_well",
                        (uf_place){sheet->path, by.rows[k]->line, uf_sheet_columns[same[i]].name},
                        "'%.60s', but line %d, of the same well, says '%.60s'; fields of one well share what was "
                        "done to it",
                        by.rows[k]->text[same[i]], first->line, first->text[same[i]]);
    }
    free(by.rows);
    return status;
}

static uf_status check_vessels(const uf_sheet *sheet, uf_faults *faults, uf_error *error)
{
    grouping by = {.keys = {UF_SHEET_SESSION, UF_SHEET_PLATE, UF_SHEET_VESSEL}, .key_count = 3};
    uf_status status = sort_rows(sheet, &by, error);
    for (int from = 0, to; status == UF_OK && from < by.count; from = to) {
        const uf_sheet_row *row = by.rows[from];
        to = group_end(&by, from, 2);
        int other = group_end(&by, from, 3);
        if (*row->text[UF_SHEET_PLATE] && other < to)
            uf_fault_add(faults, UF_FAULT, "vessel", (uf_place){sheet->path, by.rows[other]->line, "vessel"},
                         "'%.60s', but line %d, of the same plate, says '%.60s'",
                         by.rows[other]->text[UF_SHEET_VESSEL], row->line, row->text[UF_SHEET_VESSEL]);
    }
    free(by.rows);
    return status;
}

/* ---- pooled references ----------------------------------------------------------------------- */

static uf_status check_pooling(const uf_sheet *sheet, uf_faults *faults, uf_error *error)
{
    grouping by = {.keys = {UF_SHEET_PLATE, UF_SHEET_SESSION, UF_SHEET_COATING, UF_SHEET_TREATMENT}, .key_count = 4};
    uf_status status = sort_rows(sheet, &by, error);
    for (int from = 0, to; status == UF_OK && from < by.count; from = to) {
        const uf_sheet_row *row = by.rows[from];
        to = group_end(&by, from, 2);
        int coatings = distinct(&by, from, to, 2);
        const char *plate = row->text[UF_SHEET_PLATE], *session = row->text[UF_SHEET_SESSION];
        const char *where = *plate ? plate : session;
        if (coatings == 1 && group_end(&by, from, 4) == to)
            uf_fault_add(
                faults, UF_FAULT, "pooling", (uf_place){sheet->path, row->line, "coating"},
                "a pooled reference on '%.60s' would hold a single treatment and coating, and hide what they "
                "do; measure the reference, or take it from control wells",
                where);
        else if (coatings == 1 && sheet->has[UF_SHEET_COATING])
            uf_fault_add(
                faults, UF_WARNING, "pooling", (uf_place){sheet->path, row->line, "coating"},
                "a pooled reference on '%.60s' holds one coating only (%.60s): coatings can then not be compared",
                where, row->text[UF_SHEET_COATING]);
    }
    free(by.rows);
    return status;
}

/* ---- names ----------------------------------------------------------------------------------- */

static bool is_month(const char *text, size_t length)
{
    static const char months[] = "jan feb mar apr may jun jul aug sep oct nov dec";
    for (const char *m = months; length == 3 && strlen(m) >= 3; m += m[3] ? 4 : 3)
        if (strncasecmp(m, text, 3) == 0)
            return true;
    return false;
}

/* "1-Sep", "Sep-01", "01-Sep-2024". */
static bool is_month_date(const char *word)
{
    size_t first = strcspn(word, "-"), second = word[first] ? strcspn(word + first + 1, "-") : 0;
    const char *two = word + first + 1;
    if (!word[first] || first == 0 || second == 0)
        return false;
    bool day_first = strspn(word, "0123456789") == first && first <= 2 && is_month(two, second);
    bool month_first = is_month(word, first) && strspn(two, "0123456789") == second && !two[second];
    size_t rest = strspn(two + second + (two[second] == '-'), "0123456789");
    return month_first || (day_first && !two[second + (two[second] == '-') + rest]);
}

/* "1/9/2024", "2024-09-01 00:00:00". */
static bool is_number_date(const char *word)
{
    size_t one = strspn(word, "0123456789"), two = 0, three = 0;
    char mark = word[one];
    if (one && (mark == '/' || mark == '-'))
        two = strspn(word + one + 1, "0123456789");
    if (two && word[one + 1 + two] == mark)
        three = strspn(word + one + two + 2, "0123456789");
    const char *rest = three ? word + one + two + three + 2 : word;
    return three && (one == 4 || three == 4 || (mark == '/' && three == 2)) &&
           (!*rest || *rest == ' ' || *rest == 'T');
}

/* "1.20E+05", as a label like 12E4 ends up. */
static bool is_scientific(const char *word)
{
    size_t whole = strspn(word, "0123456789"), places = 0;
    if (word[whole] == '.')
        places = 1 + strspn(word + whole + 1, "0123456789");
    const char *e = word + whole + places;
    return whole == 1 && e[0] == 'E' && (e[1] == '+' || e[1] == '-') && e[2] && !e[2 + strspn(e + 2, "0123456789")];
}

const char *uf_spreadsheet_damage(const char *word)
{
    if (is_month_date(word) || is_number_date(word))
        return "a date";
    if (is_scientific(word))
        return "a number in scientific notation";
    if (word[0] == '#' && (word[1] == '#' || strchr(word, '!') || strchr(word, '?') || strcmp(word, "#N/A") == 0))
        return "an error of a formula";
    return NULL;
}

static void check_words(const uf_sheet *sheet, uf_sheet_column column, uf_faults *faults)
{
    int count = 0;
    const uf_sheet_row *first = NULL;
    for (int k = 0; k < sheet->count; k++)
        if (uf_spreadsheet_damage(sheet->rows[k].text[column]) && !count++)
            first = &sheet->rows[k];
    if (count)
        uf_fault_add(
            faults, UF_WARNING, "spreadsheet", (uf_place){sheet->path, first->line, uf_sheet_columns[column].name},
            "'%.60s' looks like %s that a spreadsheet made of a name (%d rows); type the name again into a cell "
            "formatted as text",
            first->text[column], uf_spreadsheet_damage(first->text[column]), count);
}

/* "thrift 10 uM": a word of its own that is an amount in a unit we know. */
static bool holds_amount(const char *word)
{
    for (const char *p = word; *p; p++) {
        uf_amount amount;
        bool starts = p == word || p[-1] == ' ' || p[-1] == '_' || p[-1] == '(';
        size_t length = strcspn(p, ")");
        char rest[80];
        if (!starts || length >= sizeof rest)
            continue;
        memcpy(rest, p, length);
        rest[length] = '\0';
        if (uf_amount_parse(rest, &amount) == UF_AMOUNT_GOOD && *amount.unit && uf_unit_known(amount.unit))
            return true;
    }
    return false;
}

static void check_amounts(const uf_sheet *sheet, uf_faults *faults)
{
    int count = 0;
    const uf_sheet_row *first = NULL;
    for (int k = 0; k < sheet->count; k++)
        if (holds_amount(sheet->rows[k].text[UF_SHEET_TREATMENT]) && !count++)
            first = &sheet->rows[k];
    if (count)
        uf_fault_add(
            faults, UF_WARNING, "dose_in_name", (uf_place){sheet->path, first->line, "treatment"},
            "'%.60s' holds a dose (%d rows); written so, each dose is a treatment of its own and no curve can be "
            "fitted: give it in the column dose",
            first->text[UF_SHEET_TREATMENT], count);
}

/* Names that differ in capitals or blanks only are most likely one. */
static uf_status check_twin_names(const uf_sheet *sheet, uf_sheet_column column, uf_faults *faults, uf_error *error)
{
    grouping by = {.keys = {column}, .key_count = 1};
    uf_status status = sort_rows(sheet, &by, error);
    for (int a = 0; status == UF_OK && a < by.count; a = group_end(&by, a, 1))
        for (int b = group_end(&by, a, 1), tries = 0; b < by.count && tries < 400; b = group_end(&by, b, 1), tries++)
            if (strcasecmp(by.rows[a]->text[column], by.rows[b]->text[column]) == 0)
                uf_fault_add(faults, UF_WARNING, "twin_names",
                             (uf_place){sheet->path, by.rows[b]->line, uf_sheet_columns[column].name},
                             "'%.60s' and '%.60s' (line %d) differ in capitals only and count as two",
                             by.rows[b]->text[column], by.rows[a]->text[column], by.rows[a]->line);
    free(by.rows);
    return status;
}

static void check_blanks(const uf_sheet *sheet, uf_sheet_column column, uf_faults *faults)
{
    int count = 0;
    const uf_sheet_row *first = NULL;
    for (int k = 0; k < sheet->count; k++)
        if (!*sheet->rows[k].text[column] && counts_as_arm(&sheet->rows[k]) && !count++)
            first = &sheet->rows[k];
    if (count && sheet->has[column])
        uf_fault_add(
            faults, UF_WARNING, "blank", (uf_place){sheet->path, first->line, uf_sheet_columns[column].name},
            "empty in %d of %d rows (first: %.200s); empty cells are not filled in from their neighbours, they "
            "count as a group of their own",
            count, sheet->count, first->field_id);
}

/* ---- all of it ------------------------------------------------------------------------------- */

uf_status uf_sheet_check_design(const uf_sheet *sheet, bool pooled, uf_faults *faults, uf_error *error)
{
    static const uf_sheet_column names[] = {UF_SHEET_TREATMENT, UF_SHEET_COATING};
    uf_status status = check_controls(sheet, faults, error);
    if (status == UF_OK)
        status = check_replicates(sheet, faults, error);
    if (status == UF_OK)
        status = check_numbered_wells(sheet, faults, error);
    if (status == UF_OK)
        status = check_wells(sheet, faults, error);
    if (status == UF_OK)
        status = check_vessels(sheet, faults, error);
    if (status == UF_OK && pooled)
        status = check_pooling(sheet, faults, error);
    for (size_t k = 0; status == UF_OK && k < sizeof names / sizeof names[0]; k++) {
        check_words(sheet, names[k], faults);
        check_blanks(sheet, names[k], faults);
        status = check_twin_names(sheet, names[k], faults, error);
    }
    check_amounts(sheet, faults);
    check_words(sheet, UF_SHEET_PLATE, faults);
    check_blanks(sheet, UF_SHEET_INSTRUMENT, faults);
    check_blanks(sheet, UF_SHEET_REPLICATE, faults);
    return status == UF_OK ? uf_faults_check(faults, error) : status;
}
