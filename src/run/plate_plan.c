/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/plate_plan.h"

#include <jansson.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "io/csv_read.h"
#include "io/input.h"
#include "io/output.h"
#include "run/report_parts.h"

static uf_status take(uf_plate_plan *plan, size_t count, size_t size, void *pointer, uf_error *error)
{
    void *memory = uf_arena_take(&plan->arena, (count ? count : 1) * size);
    if (!memory)
        return uf_fail_memory(error, "the plan");
    memset(memory, 0, (count ? count : 1) * size);
    memcpy(pointer, &memory, sizeof memory);
    return UF_OK;
}

/* ---- rows and groups ------------------------------------------------------------------------- */

static int is_estimated(const uf_settings *s)
{
    return s->reference.from == UF_FROM_WELLS || s->reference.from == UF_FROM_POOLED;
}

static uf_status find_group(uf_plate_plan *plan, const uf_sheet_row *row, int settings, int *index, uf_error *error)
{
    const char *plate = row->text[UF_SHEET_PLATE], *session = row->text[UF_SHEET_SESSION];
    for (*index = 0; *index < plan->group_count; (*index)++) {
        uf_plate_group *g = &plan->groups[*index];
        if (strcmp(g->plate, plate) != 0 || strcmp(g->session, session) != 0)
            continue;
        if (g->settings != settings)
            return uf_fail(
                error, UF_INPUT,
                "%s:%d: plate '%s', session '%s' names two instrument files; a session is one sitting at one bench",
                plan->sheet.path, row->line, plate, session);
        return UF_OK;
    }
    plan->groups[plan->group_count++] = (uf_plate_group){.plate = plate,
                                                         .session = session,
                                                         .settings = settings,
                                                         .estimated = is_estimated(plan->all.settings[settings]),
                                                         .exposure_ms = {(double)NAN, (double)NAN},
                                                         .blank_adu = {(double)NAN, (double)NAN},
                                                         .worst_well = ""};
    return UF_OK;
}

static uf_status make_key(uf_plate_plan *plan, const char *field_id, const char **key, uf_error *error)
{
    uf_text text = {0};
    uf_output_key(&text, field_id);
    uf_status status = uf_text_check(&text, "file names", error);
    char *copy = status == UF_OK ? uf_arena_take(&plan->arena, text.length + 1) : NULL;
    if (copy)
        memcpy(copy, text.bytes, text.length + 1);
    uf_text_free(&text);
    *key = copy;
    return copy ? UF_OK : status == UF_OK ? uf_fail_memory(error, "the plan") : status;
}

static uf_status make_row(uf_plate_plan *plan, int k, uf_error *error)
{
    uf_plate_row *r = &plan->rows[k];
    const uf_settings *settings;
    r->row = &plan->sheet.rows[k];
    uf_status status = uf_row_settings_of(&plan->all, r->row->instrument_path, &settings, &r->settings, error);
    if (status == UF_OK)
        status = find_group(plan, r->row, r->settings, &r->group, error);
    return status == UF_OK ? make_key(plan, r->row->field_id, &r->key, error) : status;
}

/* Whole fields only: cells that are thrown out later still were part of what the reference saw. */
static uf_status take_exclusions(uf_plate_plan *plan, const char *path, uf_error *error)
{
    enum { MOST_BYTES = 1 << 26 };
    uf_csv_table table;
    if (!path)
        return UF_OK;
    uf_status status = uf_csv_read(&table, path, MOST_BYTES, error);
    if (status != UF_OK)
        return status;
    int id = uf_csv_column(&table, "field_id"), x = uf_csv_column(&table, "x_um");
    if (id < 0)
        status = uf_fail(error, UF_INPUT, "%s:1: expected a column field_id", path);
    for (int k = 1; status == UF_OK && k < table.rows; k++) {
        int found = 0;
        for (int j = 0; j < plan->sheet.count; j++)
            if (strcmp(plan->rows[j].row->field_id, uf_csv_cell(&table, k, id)) == 0) {
                found = 1;
                plan->rows[j].excluded |= x < 0 || !*uf_csv_cell(&table, k, x);
            }
        if (!found)
            status = uf_fail(error, UF_INPUT, "%s:%d: the sheet has no field '%.200s'", path, table.lines[k],
                             uf_csv_cell(&table, k, id));
    }
    uf_csv_free(&table);
    return status;
}

uf_status uf_plate_plan_read(uf_plate_plan *plan, const char *sheet_path, const char *exclude_path, uf_error *error)
{
    uf_faults faults = {0};
    uf_status status = uf_sheet_read(&plan->sheet, sheet_path, NULL, &faults, error);
    if (status == UF_OK)
        status = uf_sheet_refuse(&faults, error);
    uf_faults_free(&faults);
    if (status == UF_OK)
        status = take(plan, (size_t)plan->sheet.count, sizeof *plan->rows, &plan->rows, error);
    if (status == UF_OK)
        status = take(plan, (size_t)plan->sheet.count, sizeof *plan->groups, &plan->groups, error);
    for (int k = 0; status == UF_OK && k < plan->sheet.count; k++)
        status = make_row(plan, k, error);
    return status == UF_OK ? take_exclusions(plan, exclude_path, error) : status;
}

void uf_plate_plan_free(uf_plate_plan *plan)
{
    uf_row_settings_free(&plan->all);
    uf_sheet_free(&plan->sheet);
    uf_arena_free(&plan->arena);
    plan->rows = NULL;
    plan->groups = NULL;
    plan->group_count = 0;
}

/* ---- references ------------------------------------------------------------------------------ */

int uf_plate_is_blank(const uf_plate_plan *plan, int index)
{
    const uf_plate_row *r = &plan->rows[index];
    return r->row->role == UF_ROLE_BLANK && !r->excluded && r->row->wide_path;
}

int uf_plate_needs_references(const uf_plate_plan *plan)
{
    for (int k = 0; k < plan->group_count; k++)
        if (plan->groups[k].estimated)
            return 1;
    for (int k = 0; k < plan->sheet.count; k++)
        if (uf_plate_is_blank(plan, k))
            return 1;
    return 0;
}

static int group_has_role(const uf_plate_plan *plan, int group, uf_role role)
{
    for (int k = 0; k < plan->sheet.count; k++)
        if (plan->rows[k].group == group && plan->rows[k].row->role == role)
            return 1;
    return 0;
}

/* from = wells: role reference, else control, never all. pooled: all but blanks. */
int uf_plate_is_reference(const uf_plate_plan *plan, int index)
{
    const uf_plate_row *r = &plan->rows[index];
    const uf_settings *s = plan->all.settings[r->settings];
    if (!plan->groups[r->group].estimated || r->excluded || r->row->role == UF_ROLE_BLANK)
        return 0;
    if (s->reference.from == UF_FROM_POOLED)
        return 1;
    return r->row->role == (group_has_role(plan, r->group, UF_ROLE_REFERENCE) ? UF_ROLE_REFERENCE : UF_ROLE_CONTROL);
}

static void set_exposures(const uf_sheet_row *row, struct uf_settings *s)
{
    const double ms[] = {row->exposure_near_ms, row->exposure_wide_ms};
    for (int k = 0; k < UF_CHANNELS; k++)
        if (!isnan(ms[k]))
            s->camera[k].exposure_ms = ms[k];
}

/* Blank wells of the plate are nearer to its fields than what an instrument file says. */
static void set_blanks(const uf_plate_group *g, struct uf_settings *s)
{
    for (int k = 0; k < UF_CHANNELS && g->blanks; k++) {
        s->camera[k].background_adu = g->blank_adu[k];
        s->camera[k].background_sd_adu = g->blank_sd_adu[k];
    }
}

struct uf_settings uf_plate_settings(const uf_plate_plan *plan, int index)
{
    const uf_plate_row *r = &plan->rows[index];
    const uf_plate_group *g = &plan->groups[r->group];
    struct uf_settings s = *plan->all.settings[r->settings];
    set_exposures(r->row, &s);
    set_blanks(g, &s);
    if (!g->estimated)
        return s;
    s.reference.from = UF_SETTING_NOT_GIVEN;
    s.reference.kind = UF_REFERENCE_CELL;
    s.reference.gap_is = UF_GAP_ASSUMED;
    s.reference.ratio = g->pool.ratio;
    s.reference.ratio_sd = isnan(g->pool.ratio_sd) ? 0 : g->pool.ratio_sd;
    s.reference.gap_nm = 0; /* the ratio is that of gap 0, whatever gap it was assumed at */
    for (int k = 0; k < UF_CHANNELS; k++) {
        s.reference.exposure_ms[k] = g->exposure_ms[k];
        s.reference.flat[k] = NULL;
    }
    return s;
}

struct uf_settings uf_plate_reference_settings(const uf_plate_plan *plan, int index)
{
    struct uf_settings s = *plan->all.settings[plan->rows[index].settings];
    set_exposures(plan->rows[index].row, &s);
    set_blanks(&plan->groups[plan->rows[index].group], &s);
    s.reference.from = UF_FROM_CELL;
    s.reference.ratio = (double)NAN;
    return s;
}

uf_field_files uf_plate_files(const uf_plate_plan *plan, int index)
{
    const uf_sheet_row *row = plan->rows[index].row;
    return (uf_field_files){.near_path = row->near_path,
                            .wide_path = row->wide_path,
                            .mask_path = row->mask_path,
                            .nuclei_path = row->nuclei_path,
                            .near_page = plan->sheet.has[UF_SHEET_NEAR_PAGE] ? row->near_page : 0,
                            .wide_page = plan->sheet.has[UF_SHEET_WIDE_PAGE] ? row->wide_page : 0};
}

/* ---- plan.json ------------------------------------------------------------------------------- */

static json_t *text_json(const char *text)
{
    json_t *value = json_string(text);
    return value ? value : json_string("?");
}

static json_t *settings_json(const uf_settings *settings)
{
    json_t *list = json_object();
    for (int k = 0; k < uf_setting_count; k++) {
        uf_text value = {0}, key = {0};
        if (uf_setting_table[k].kind != UF_SETTING_LATER)
            uf_setting_value(&value, settings, k);
        uf_text_printf(&key, "%s.%s", uf_setting_table[k].section, uf_setting_table[k].key);
        if (value.length && !key.failed)
            json_object_set_new(list, key.bytes, text_json(value.bytes));
        uf_text_free(&value);
        uf_text_free(&key);
    }
    return list;
}

static json_t *row_json(const uf_plate_plan *plan, int k)
{
    const uf_plate_row *r = &plan->rows[k];
    json_t *o = json_object(), *cells = json_array();
    json_object_set_new(o, "field_id", text_json(r->row->field_id));
    json_object_set_new(o, "settings", json_integer(r->settings));
    json_object_set_new(o, "reference", json_integer(r->group));
    if (r->excluded)
        json_object_set_new(o, "excluded", json_true());
    for (int c = 0; c < UF_SHEET_COLUMNS; c++)
        if (plan->sheet.has[c])
            json_array_append_new(cells, text_json(r->row->text[c]));
    for (int c = 0; c < plan->sheet.extra_count; c++)
        json_array_append_new(cells, text_json(r->row->extra[c]));
    json_object_set_new(o, "cells", cells);
    return o;
}

static void put_number(json_t *o, const char *name, double value)
{
    json_object_set_new(o, name, isfinite(value) ? json_real(uf_round_digits(value, 12)) : json_null());
}

static json_t *group_json(const uf_plate_group *g, int with_reference)
{
    json_t *o = json_object();
    json_object_set_new(o, "plate", text_json(g->plate));
    json_object_set_new(o, "session", text_json(g->session));
    json_object_set_new(o, "settings", json_integer(g->settings));
    if (with_reference && g->blanks) {
        put_number(o, "near_blank_adu", g->blank_adu[UF_NEAR]);
        put_number(o, "near_blank_sd_adu", g->blank_sd_adu[UF_NEAR]);
        put_number(o, "wide_blank_adu", g->blank_adu[UF_WIDE]);
        put_number(o, "wide_blank_sd_adu", g->blank_sd_adu[UF_WIDE]);
        json_object_set_new(o, "blanks", json_integer(g->blanks));
    }
    if (!g->estimated || !with_reference)
        return o;
    put_number(o, "ratio", g->pool.ratio);
    put_number(o, "ratio_sd", g->pool.ratio_sd);
    put_number(o, "worst_change", g->pool.worst_change);
    put_number(o, "exposure_near_ms", g->exposure_ms[UF_NEAR]);
    put_number(o, "exposure_wide_ms", g->exposure_ms[UF_WIDE]);
    json_object_set_new(o, "fields", json_integer(g->pool.fields));
    json_object_set_new(o, "wells", json_integer(g->pool.wells));
    json_object_set_new(o, "cells", json_integer(g->cells));
    json_object_set_new(o, "worst_well", text_json(g->worst_well));
    return o;
}

static json_t *plan_json(const uf_plate_plan *plan, int with_references)
{
    json_t *o = json_object(), *settings = json_array(), *groups = json_array(), *rows = json_array();
    json_object_set_new(o, "underfoot", json_string(UF_VERSION));
    for (int k = 0; k < plan->all.count; k++)
        json_array_append_new(settings, settings_json(plan->all.settings[k]));
    for (int k = 0; k < plan->group_count; k++)
        json_array_append_new(groups, group_json(&plan->groups[k], with_references));
    for (int k = 0; k < plan->sheet.count; k++)
        json_array_append_new(rows, row_json(plan, k));
    json_object_set_new(o, "settings", settings);
    json_object_set_new(o, "references", groups);
    json_object_set_new(o, "rows", rows);
    return o;
}

static uf_status hash_of(json_t *o, char *hash, uf_error *error)
{
    char *text = json_dumps(o, JSON_COMPACT | JSON_PRESERVE_ORDER);
    if (!text)
        return uf_fail_memory(error, "the plan");
    (void)snprintf(hash, UF_PLATE_HASH, "%016llx", (unsigned long long)uf_fingerprint(text, strlen(text)));
    free(text);
    return UF_OK;
}

uf_status uf_plate_plan_put(uf_plate_plan *plan, uf_text *out, uf_error *error)
{
    json_t *draft = plan_json(plan, 0), *whole = plan_json(plan, 1);
    uf_status status = hash_of(draft, plan->draft, error);
    if (status == UF_OK)
        status = hash_of(whole, plan->hash, error);
    json_decref(draft);
    json_object_set_new(whole, "draft", json_string(plan->draft));
    json_object_set_new(whole, "hash", json_string(plan->hash));
    if (status != UF_OK) {
        json_decref(whole);
        return status;
    }
    return uf_json_finish(out, whole, error);
}

static double number_of(const json_t *o, const char *name)
{
    const json_t *value = json_object_get(o, name);
    return json_is_number(value) ? json_number_value(value) : (double)NAN;
}

static int whole_of(const json_t *o, const char *name)
{
    return (int)json_integer_value(json_object_get(o, name));
}

static int take_group(uf_plate_plan *plan, uf_plate_group *g, const json_t *o)
{
    g->blanks = whole_of(o, "blanks");
    g->blank_adu[UF_NEAR] = number_of(o, "near_blank_adu");
    g->blank_sd_adu[UF_NEAR] = number_of(o, "near_blank_sd_adu");
    g->blank_adu[UF_WIDE] = number_of(o, "wide_blank_adu");
    g->blank_sd_adu[UF_WIDE] = number_of(o, "wide_blank_sd_adu");
    if (!g->estimated)
        return 1;
    const char *worst = json_string_value(json_object_get(o, "worst_well"));
    g->pool = (uf_reference_pool){.ratio = number_of(o, "ratio"),
                                  .ratio_sd = number_of(o, "ratio_sd"),
                                  .worst_change = number_of(o, "worst_change"),
                                  .spread = (double)NAN,
                                  .fields = whole_of(o, "fields"),
                                  .wells = whole_of(o, "wells")};
    g->exposure_ms[UF_NEAR] = number_of(o, "exposure_near_ms");
    g->exposure_ms[UF_WIDE] = number_of(o, "exposure_wide_ms");
    g->cells = whole_of(o, "cells");
    char *copy = uf_arena_take(&plan->arena, strlen(worst ? worst : "") + 1);
    if (!copy)
        return 0;
    g->worst_well = strcpy(copy, worst ? worst : "");
    return g->pool.ratio > 0;
}

int uf_plate_plan_take_references(uf_plate_plan *plan, const uf_text *json)
{
    json_error_t fault;
    json_t *o = json->length ? json_loadb(json->bytes, json->length, 0, &fault) : NULL;
    const char *draft = json_string_value(json_object_get(o, "draft"));
    const json_t *groups = json_object_get(o, "references");
    int taken = draft && strcmp(draft, plan->draft) == 0 && (int)json_array_size(groups) == plan->group_count;
    for (int k = 0; taken && k < plan->group_count; k++)
        taken = take_group(plan, &plan->groups[k], json_array_get(groups, (size_t)k));
    json_decref(o);
    return taken;
}
