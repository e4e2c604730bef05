/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/report_parts.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "io/image_encode.h"
#include "io/output.h"

void uf_report_row(uf_text *out, const char *what, double value, double sd, int digits, const char *unit)
{
    uf_text_printf(out, "%-40s%12.*f%s%s", what, digits, value, *unit ? " " : "", unit);
    if (!isnan(sd))
        uf_text_printf(out, "  1 sd %.*f%s%s", digits, sd, *unit ? " " : "", unit);
    uf_text_add(out, "\n");
}

void uf_json_number(json_t *object, const char *name, double value)
{
    json_object_set_new(object, name, isfinite(value) ? json_real(uf_round_digits(value, 10)) : json_null());
}

uf_status uf_json_finish(uf_text *out, json_t *object, uf_error *error)
{
    char *text = json_dumps(object, JSON_INDENT(2) | JSON_REAL_PRECISION(12));
    json_decref(object);
    if (!text)
        return uf_fail_memory(error, "the report");
    uf_text_add(out, text);
    uf_text_add(out, "\n");
    free(text);
    return UF_OK;
}

uf_status uf_plot_file(const uf_plot_panel *panels, int count, int width, int height, const char *path,
                       uf_error *error)
{
    size_t length = strlen(path);
    if (length && (length < 4 || strcmp(path + length - 4, ".png") != 0))
        return uf_fail(error, UF_USAGE, "--plot %.200s: plots are PNG; give a name that ends in .png", path);
    uf_work work = {0};
    uf_indexed picture;
    uf_text png = {0};
    uf_status status = uf_plot_draw(&work, panels, count, width, height, &picture, NULL, error);
    if (status == UF_OK)
        status = uf_encode_indexed_png(&png, &picture, error);
    if (status == UF_OK)
        status = uf_output_file(path, png.bytes, png.length, error);
    uf_text_free(&png);
    uf_arena_free(&work.arena);
    return status;
}
