/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/sheet_json.h"

#include <jansson.h>
#include <stdlib.h>

/* Null for no text; bytes that are no UTF-8 (of a file's name) become '?'. */
static json_t *text_or_null(const char *text)
{
    json_t *value = text ? json_string(text) : json_null();
    if (value)
        return value;
    char *copy = uf_copy_string(text);
    for (char *p = copy; p && *p; p++)
        if ((unsigned char)*p > 127)
            *p = '?';
    value = copy ? json_string(copy) : NULL;
    free(copy);
    return value;
}

static json_t *finding(const uf_fault *f)
{
    json_t *o = json_object();
    json_object_set_new(o, "severity", json_string(uf_severity_word(f->severity)));
    json_object_set_new(o, "kind", json_string(f->kind));
    json_object_set_new(o, "file", text_or_null(f->file));
    json_object_set_new(o, "line", f->line ? json_integer(f->line) : json_null());
    json_object_set_new(o, "column", text_or_null(f->column));
    json_object_set_new(o, "text", text_or_null(f->text));
    return o;
}

uf_status uf_sheet_json(uf_text *out, const char *sheet, const uf_named_number *numbers, int number_count,
                        const uf_faults *faults, uf_error *error)
{
    json_t *o = json_object(), *list = json_array();
    json_object_set_new(o, "sheet", text_or_null(sheet));
    for (int k = 0; k < number_count; k++)
        json_object_set_new(o, numbers[k].name, json_integer((json_int_t)numbers[k].value));
    json_object_set_new(o, "faults", json_integer(faults->faults));
    json_object_set_new(o, "warnings", json_integer(faults->warnings));
    for (int k = 0; k < faults->count; k++)
        json_array_append_new(list, finding(&faults->list[k]));
    json_object_set_new(o, "findings", list);
    char *text = json_dumps(o, JSON_INDENT(2));
    json_decref(o);
    if (!text)
        return uf_fail_memory(error, "JSON");
    uf_text_add(out, text);
    uf_text_add(out, "\n");
    free(text);
    return uf_text_check(out, "JSON", error);
}
