/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/sheet_json.h"

#include <jansson.h>
#include <stdlib.h>

#include "run/run_json_parts.h"

static json_t *text_or_null(const char *text)
{
    return text ? uf_json_text(text) : json_null();
}

/* Without memory a member would be missing in silence: *lost tells. */
static void put(json_t *o, const char *name, json_t *value, bool *lost)
{
    *lost |= json_object_set_new(o, name, value) != 0;
}

static json_t *finding(const uf_fault *f, bool *lost)
{
    json_t *o = json_object();
    put(o, "severity", json_string(uf_severity_word(f->severity)), lost);
    put(o, "kind", json_string(f->kind), lost);
    put(o, "file", text_or_null(f->file), lost);
    put(o, "line", f->line ? json_integer(f->line) : json_null(), lost);
    put(o, "column", text_or_null(f->column), lost);
    put(o, "text", text_or_null(f->text), lost);
    return o;
}

uf_status uf_sheet_json(uf_text *out, const char *sheet, const uf_named_number *numbers, int number_count,
                        const uf_faults *faults, uf_error *error)
{
    json_t *o = json_object(), *list = json_array();
    bool lost = false;
    put(o, "sheet", text_or_null(sheet), &lost);
    for (int k = 0; k < number_count; k++)
        put(o, numbers[k].name, json_integer((json_int_t)numbers[k].value), &lost);
    put(o, "faults", json_integer(faults->faults), &lost);
    put(o, "warnings", json_integer(faults->warnings), &lost);
    for (int k = 0; k < faults->count; k++)
        lost |= json_array_append_new(list, finding(&faults->list[k], &lost)) != 0;
    put(o, "findings", list, &lost);
    char *text = lost ? NULL : json_dumps(o, JSON_INDENT(2));
    json_decref(o);
    if (!text)
        return uf_fail_memory(error, "JSON");
    uf_text_add(out, text);
    uf_text_add(out, "\n");
    free(text);
    return uf_text_check(out, "JSON", error);
}
