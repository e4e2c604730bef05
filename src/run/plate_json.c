/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/plate_json.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "run/plan.h"
#include "run/plate_record.h"
#include "run/plate_tables.h"
#include "run/report_parts.h"
#include "run/run_json.h"
#include "run/run_json_parts.h"

/* ---- what records say together ---------------------------------------------------------------- */

/* A warning and how many fields it concerns. */
typedef struct counted_line {
    char *text;
    int fields;
} counted_line;

typedef struct gathering {
    json_t *inputs, *seen; /* seen: path -> true */
    counted_line *lines;
    int line_count;
} gathering;

static int add_line(gathering *g, const char *text, size_t length)
{
    for (int k = 0; k < g->line_count; k++)
        if (strlen(g->lines[k].text) == length && strncmp(g->lines[k].text, text, length) == 0) {
            g->lines[k].fields++;
            return 1;
        }
    counted_line *grown = realloc(g->lines, (size_t)(g->line_count + 1) * sizeof *grown);
    char *copy = malloc(length + 1);
    if (grown)
        g->lines = grown;
    if (!grown || !copy) {
        free(copy);
        return 0;
    }
    memcpy(copy, text, length);
    copy[length] = '\0';
    g->lines[g->line_count++] = (counted_line){copy, 1};
    return 1;
}

static void add_input(gathering *g, const uf_record_input *in)
{
    char fingerprint[24];
    if (json_object_get(g->seen, in->path) || in->facts.bytes < 0)
        return;
    (void)snprintf(fingerprint, sizeof fingerprint, "%016llx", (unsigned long long)in->fingerprint);
    json_t *o = json_object();
    json_object_set_new(o, "role", uf_json_text(in->role));
    json_object_set_new(o, "path", uf_json_text(in->path));
    json_object_set_new(o, "bytes", json_integer((json_int_t)in->facts.bytes));
    if (in->fingerprint)
        json_object_set_new(o, "xxh3_64", json_string(fingerprint));
    json_array_append_new(g->inputs, o);
    json_object_set_new(g->seen, in->path, json_true());
}

static uf_status gather(gathering *g, const uf_output *output, const uf_plate_plan *plan, uf_error *error)
{
    uf_arena arena = {0};
    uf_status status = UF_OK;
    int fits = 1;
    for (int k = 0; status == UF_OK && fits && k < plan->sheet.count; k++) {
        uf_plate_record r;
        int found;
        uf_arena_mark mark = uf_arena_now(&arena);
        status = uf_plate_record_of(output, plan, k, &arena, &r, &found, error);
        for (int j = 0; status == UF_OK && found && j < r.input_count; j++)
            add_input(g, &r.inputs[j]);
        for (const char *line = found && r.warnings ? r.warnings : ""; fits && *line;) {
            size_t length = strcspn(line, "\n");
            fits = add_line(g, line, length);
            line += length + (line[length] == '\n');
        }
        uf_arena_back(&arena, mark);
    }
    uf_arena_free(&arena);
    return status == UF_OK && !fits ? uf_fail_memory(error, "run.json") : status;
}

static json_t *warnings_json(const gathering *g)
{
    json_t *list = json_array();
    for (int k = 0; k < g->line_count; k++) {
        json_t *o = json_object();
        json_object_set_new(o, "warning", uf_json_text(g->lines[k].text));
        json_object_set_new(o, "fields", json_integer(g->lines[k].fields));
        json_array_append_new(list, o);
    }
    return list;
}

/* ---- settings and references ------------------------------------------------------------------ */

static json_t *benches_json(const uf_plate_plan *plan)
{
    json_t *list = json_array();
    for (int k = 0; k < plan->all.count; k++) {
        json_t *o = json_object();
        json_object_set_new(o, "instrument", plan->all.paths[k] ? uf_json_text(plan->all.paths[k]) : json_null());
        json_object_set_new(o, "settings", uf_settings_json(plan->all.settings[k]));
        json_object_set_new(o, "overridden", uf_overridden_json(plan->all.settings[k]));
        json_array_append_new(list, o);
    }
    return list;
}

/* Of the first row: one paragraph for the paper; sessions differ in their numbers only. */
static json_t *methods_json(const uf_plate_plan *plan)
{
    uf_text text = {0};
    uf_plan first;
    if (!plan->sheet.count)
        return json_string("");
    struct uf_settings settings = uf_plate_settings(plan, 0);
    if (uf_plan_make(&settings, 1, &first, NULL) == UF_OK)
        uf_methods_paragraph(&text, &settings, &first);
    json_t *methods = uf_json_text(text.bytes ? text.bytes : "");
    uf_text_free(&text);
    return methods;
}

static json_t *counts_json(const uf_plate_summary *s, const uf_plate_plan *plan)
{
    json_t *o = json_object();
    json_object_set_new(o, "fields", json_integer(plan->sheet.count));
    json_object_set_new(o, "failed", json_integer(s->failed));
    json_object_set_new(o, "flagged", json_integer(s->flagged));
    json_object_set_new(o, "empty", json_integer(s->empty));
    json_object_set_new(o, "wells", json_integer(s->wells));
    json_object_set_new(o, "cells", json_integer(s->cells));
    json_object_set_new(o, "cells_used", json_integer(s->cells_used));
    return o;
}

uf_status uf_plate_json(uf_text *out, const uf_output *output, const uf_plate_plan *plan,
                        const uf_plate_summary *summary, const char *command, uf_error *error)
{
    gathering g = {.inputs = json_array(), .seen = json_object()};
    json_t *o = json_object(), *varies = json_object();
    uf_status status = gather(&g, output, plan, error);
    json_object_set_new(o, "program", json_string("underfoot"));
    json_object_set_new(o, "version", json_string(UF_VERSION));
    json_object_set_new(o, "sheet", uf_json_text(plan->sheet.path));
    json_object_set_new(o, "plan", json_string(plan->hash));
    json_object_set_new(o, "counts", counts_json(summary, plan));
    json_object_set_new(o, "benches", benches_json(plan));
    json_object_set_new(o, "inputs", g.inputs);
    json_object_set_new(o, "warnings", warnings_json(&g));
    json_object_set_new(o, "methods", methods_json(plan));
    json_object_set_new(varies, "command", command ? uf_json_text(command) : json_null());
    json_object_set_new(varies, "libraries", uf_libraries_json());
    json_object_set_new(o, "varies_between_runs", varies);
    json_decref(g.seen);
    for (int k = 0; k < g.line_count; k++)
        free(g.lines[k].text);
    free(g.lines);
    if (status != UF_OK) {
        json_decref(o);
        return status;
    }
    return uf_json_finish(out, o, error);
}
