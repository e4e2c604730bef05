/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/arms.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>

#include "sheet/amount.h"

enum { MOST_ARMS = UF_MOST_ROWS * UF_MOST_COLUMNS };

static const char *keep(uf_arms *arms, const char *text, size_t length)
{
    while (length && strchr(" \t", text[length - 1]))
        length--;
    for (; length && strchr(" \t", *text); length--)
        text++;
    char *copy = uf_arena_take(&arms->arena, length + 1);
    if (copy) {
        memcpy(copy, text, length);
        copy[length] = '\0';
    }
    return copy;
}

static bool same_dose(double a, double b)
{
    return (isnan(a) && isnan(b)) || fabs(a - b) <= 1e-9 * fabs(b);
}

/* Brings the dose into the unit of the treatment's others, and refuses what is there already. */
static uf_status fit_in(const uf_arms *arms, uf_arm *arm, uf_error *error)
{
    arm->treatment_index = arms->treatments;
    for (int k = 0; k < arms->count; k++) {
        const uf_arm *other = &arms->list[k];
        if (strcmp(other->treatment, arm->treatment) != 0 || strcmp(other->coating, arm->coating) != 0)
            continue;
        arm->treatment_index = other->treatment_index;
        if (!isnan(arm->dose) && !isnan(other->dose) && !uf_unit_convert(&arm->dose, arm->unit, other->unit))
            return uf_fail(
                error, UF_INPUT, "%.60s has doses in %.24s and in %.24s, which do not convert; use one unit",
                arm->treatment, *arm->unit ? arm->unit : "no unit", *other->unit ? other->unit : "no unit");
        if (!isnan(arm->dose) && !isnan(other->dose))
            arm->unit = other->unit;
        if (same_dose(arm->dose, other->dose) && strcmp(arm->unit, other->unit) == 0)
            return uf_fail(error, UF_INPUT, "%.60s comes twice at one dose; give it once, with more wells",
                           arm->treatment);
    }
    return UF_OK;
}

static uf_status add_arm(uf_arms *arms, uf_arm arm, uf_error *error)
{
    if (!arm.treatment || !arm.unit || !arm.coating)
        return uf_fail_memory(error, "treatments");
    if (!*arm.treatment && !*arm.coating)
        return uf_fail(error, UF_INPUT, "a treatment without a name");
    if (arm.wells < 1 || arm.wells > MOST_ARMS || arms->count == MOST_ARMS)
        return uf_fail(error, UF_INPUT, "%.60s: %d wells; expected 1 to %d", arm.treatment, arm.wells, MOST_ARMS);
    uf_status status = fit_in(arms, &arm, error);
    if (status != UF_OK)
        return status;
    if (arms->count == arms->capacity) {
        int capacity = arms->capacity ? 2 * arms->capacity : 16;
        uf_arm *list = realloc(arms->list, (size_t)capacity * sizeof *list);
        if (!list)
            return uf_fail_memory(error, "treatments");
        arms->list = list;
        arms->capacity = capacity;
    }
    arms->treatments += arm.treatment_index == arms->treatments;
    arms->list[arms->count++] = arm;
    return UF_OK;
}

/* ---- "NAME: 0.1, 1, 10 uM" ------------------------------------------------------------------- */

static uf_status take_doses(uf_arms *arms, uf_arm arm, const char *doses, uf_error *error)
{
    const char *last = strrchr(doses, ',');
    uf_amount amount, unit;
    char piece[80];
    uf_status status = UF_OK;
    if (uf_amount_parse(last ? last + 1 : doses, &unit) != UF_AMOUNT_GOOD)
        return uf_fail(error, UF_USAGE, "'%.80s': expected doses like 'NAME: 0.1, 1, 10 uM'", doses);
    for (const char *p = doses; status == UF_OK && *p;) {
        size_t length = strcspn(p, ",");
        if (length >= sizeof piece)
            return uf_fail(error, UF_USAGE, "'%.80s': expected doses like 'NAME: 0.1, 1, 10 uM'", p);
        memcpy(piece, p, length);
        piece[length] = '\0';
        if (uf_amount_parse(piece, &amount) != UF_AMOUNT_GOOD || amount.value < 0)
            return uf_fail(error, UF_USAGE, "'%.60s' is no dose; expected doses like 'NAME: 0.1, 1, 10 uM'", piece);
        const char *own = *amount.unit ? amount.unit : unit.unit;
        arm.dose = amount.value;
        arm.unit = keep(arms, own, strlen(own));
        status = add_arm(arms, arm, error);
        p += length + (p[length] == ',');
    }
    return status;
}

uf_status uf_arms_add(uf_arms *arms, const char *text, uf_role role, int wells, uf_error *error)
{
    size_t length = strcspn(text, ":");
    uf_arm arm = {.treatment = keep(arms, text, length),
                  .coating = "",
                  .dose = (double)NAN,
                  .unit = "",
                  .role = role,
                  .wells = wells};
    if (text[length] == ':')
        return take_doses(arms, arm, text + length + 1, error);
    return add_arm(arms, arm, error);
}

/* ---- a list ---------------------------------------------------------------------------------- */

enum { TREATMENT, COATING, DOSE, DOSE_UNIT, ROLE, WELLS, COLUMNS };

static bool find_columns(const uf_csv_table *table, const char *path, int *columns, uf_faults *faults)
{
    static const char *const names[COLUMNS] = {"treatment", "coating", "dose", "dose_unit", "role", "wells"};
    for (int k = 0; k < COLUMNS; k++)
        columns[k] = -1;
    for (int c = 0; c < table->columns; c++) {
        const char *cell = uf_csv_cell(table, 0, c);
        bool known = !*cell;
        for (int k = 0; k < COLUMNS; k++)
            if (strcasecmp(cell, names[k]) == 0) {
                columns[k] = c;
                known = true;
            }
        if (!known)
            uf_fault_add(faults, UF_FAULT, "header", (uf_place){path, table->lines[0], cell},
                         "column '%.60s' is not known; expected treatment, coating, dose, dose_unit, role and wells",
                         cell);
    }
    bool named = columns[TREATMENT] >= 0 || columns[COATING] >= 0;
    if (!named)
        uf_fault_add(faults, UF_FAULT, "header", (uf_place){path, table->lines[0], NULL},
                     "no column treatment, and no coating");
    return named;
}

static const char *cell_of(const uf_csv_table *table, int row, int column)
{
    const char *cell = column < 0 ? "" : uf_csv_cell(table, row, column);
    return cell + strspn(cell, " \t");
}

static uf_status take_line(uf_arms *arms, const uf_csv_table *table, int row, const int *columns, int wells,
                           uf_error *error)
{
    uf_amount amount = {.value = (double)NAN};
    char unit[UF_UNIT_TEXT];
    double number = wells;
    const char *name = cell_of(table, row, columns[TREATMENT]), *dose = cell_of(table, row, columns[DOSE]);
    const char *role_word = cell_of(table, row, columns[ROLE]), *count = cell_of(table, row, columns[WELLS]);
    int role = *role_word ? uf_role_parse(role_word) : UF_ROLE_SAMPLE;
    if (*dose && uf_amount_parse(dose, &amount) != UF_AMOUNT_GOOD)
        return uf_fail(error, UF_INPUT,
                       "'%.60s' is no dose; write a number with a decimal point, perhaps with its unit", dose);
    if (role < 0)
        return uf_fail(error, UF_INPUT, "'%.60s' is no role; expected sample, control, positive, reference or blank",
                       role_word);
    if (*count && (!uf_parse_number(count, &number) || number < 1 || number > MOST_ARMS || number != floor(number)))
        return uf_fail(error, UF_INPUT, "'%.60s' is no number of wells", count);
    if (!uf_unit_plain(unit, *amount.unit ? amount.unit : cell_of(table, row, columns[DOSE_UNIT])))
        return uf_fail(error, UF_INPUT, "the unit is too long");
    uf_arm arm = {.treatment = keep(arms, name, strlen(name)),
                  .dose = amount.value,
                  .role = (uf_role)role,
                  .wells = (int)number};
    const char *coating = cell_of(table, row, columns[COATING]);
    arm.coating = keep(arms, coating, strlen(coating));
    arm.unit = isnan(arm.dose) ? "" : keep(arms, unit, strlen(unit));
    return add_arm(arms, arm, error);
}

uf_status uf_arms_take(uf_arms *arms, const uf_csv_table *table, const char *path, int wells, uf_faults *faults,
                       uf_error *error)
{
    int columns[COLUMNS];
    if (!find_columns(table, path, columns, faults))
        return uf_faults_check(faults, error);
    for (int row = 1; row < table->rows; row++) {
        uf_error why = {0};
        bool empty = true;
        for (int c = 0; c < table->columns; c++)
            empty = empty && !*cell_of(table, row, c);
        if (empty)
            continue;
        uf_status status = take_line(arms, table, row, columns, wells, &why);
        if (status == UF_MEMORY)
            return uf_fail_memory(error, "treatments");
        if (status != UF_OK)
            uf_fault_add(faults, UF_FAULT, "treatment", (uf_place){path, table->lines[row], NULL}, "%.400s",
                         why.text);
    }
    return uf_faults_check(faults, error);
}

/* ---- small things ---------------------------------------------------------------------------- */

int uf_arms_wells(const uf_arms *arms)
{
    int wells = 0;
    for (int k = 0; k < arms->count; k++)
        wells += arms->list[k].wells;
    return wells;
}

void uf_arm_dose(const uf_arm *arm, bool with_unit, uf_text *out)
{
    if (isnan(arm->dose))
        return;
    uf_text_number(out, arm->dose, 12);
    if (with_unit && *arm->unit)
        uf_text_printf(out, " %s", arm->unit);
}

void uf_arms_free(uf_arms *arms)
{
    free(arms->list);
    uf_arena_free(&arms->arena);
    *arms = (uf_arms){0};
}
