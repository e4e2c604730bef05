/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/outlines.h"

#include "image/outlines.h"

/* Written as text from here: a tree of JSON values would take some hundred bytes a corner. */

/* A string in quotes. What is not plain ASCII is written as U+00XX, byte by byte: names made by uf_output_key hold
 * none of it. */
static void put_string(uf_text *out, const char *string)
{
    uf_text_add(out, "\"");
    for (const char *p = string; *p; p++) {
        unsigned char c = (unsigned char)*p;
        if (c < 0x20 || c > 0x7e || c == '"' || c == '\\')
            uf_text_printf(out, "\\u%04x", c);
        else
            uf_text_bytes(out, p, 1);
    }
    uf_text_add(out, "\"");
}

static void put_panel(uf_text *out, const char *name, int x, int y)
{
    uf_text_printf(out, ",\n    \"%s\": {\"x\": %d, \"y\": %d}", name, x, y);
}

static void put_head(uf_text *out, const uf_outlines_input *input)
{
    const uf_overlay_layout *at = &input->layout;
    uf_text_printf(out,
                   "{\n  \"image\": {\"width\": %d, \"height\": %d},\n  \"pixel_size_um\": ", input->labels.width,
                   input->labels.height);
    if (input->pixel_size_um > 0.0)
        uf_text_number(out, input->pixel_size_um, 12);
    else
        uf_text_add(out, "null");
    uf_text_add(out, ",\n  \"overlay\": ");
    put_string(out, input->overlay_name);
    uf_text_printf(out, ",\n  \"panels\": {\n    \"reduction\": %d,\n    \"width\": %d,\n    \"height\": %d",
                   at->reduction, at->panel_width, at->panel_height);
    put_panel(out, "near", at->near_x, at->near_y);
    put_panel(out, "gap", at->gap_x, at->gap_y);
    uf_text_add(out, "\n  },\n"
                     "  \"coordinates\": \"rings are x, y, x, y ... along pixel edges, in pixels of the image, "
                     "pixel centres at whole numbers; fill by the even-odd rule; "
                     "overlay pixel = panel x or y + (x or y + 0.5) / reduction - 0.5\",\n");
}

/* Corner k lies at k - 0.5. */
static void put_coordinate(uf_text *out, int32_t corner)
{
    if (corner > 0)
        uf_text_printf(out, "%d.5", (int)corner - 1);
    else
        uf_text_add(out, "-0.5");
}

static void put_ring(uf_text *out, const uf_corner *corners, size_t count)
{
    uf_text_add(out, "[");
    for (size_t k = 0; k < count; k++) {
        if (k)
            uf_text_add(out, ",");
        put_coordinate(out, corners[k].x);
        uf_text_add(out, ",");
        put_coordinate(out, corners[k].y);
    }
    uf_text_add(out, "]");
}

static void put_cell(uf_text *out, int cell, const uf_rings *rings)
{
    uf_text_printf(out, "%s\n    {\"cell\": %d, \"rings\": [", cell > 1 ? "," : "", cell);
    for (size_t k = 0, from = 0; k < rings->count; from = rings->ends[k++]) {
        uf_text_add(out, k ? ",\n      " : "\n      ");
        put_ring(out, rings->corners + from, rings->ends[k] - from);
    }
    uf_text_add(out, "]}");
}

uf_status uf_outlines_json(uf_work *work, const uf_outlines_input *input, uf_text *out, uf_error *error)
{
    const uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_box *boxes;
    uf_status status = uf_take(work, (size_t)input->labels.count + 1, sizeof *boxes, "outlines", &boxes, error);
    if (status != UF_OK)
        return status;
    uf_label_boxes(input->labels, boxes);
    put_head(out, input);
    uf_text_add(out, "  \"cells\": [");
    const uf_arena_mark cell_mark = uf_arena_now(&work->arena);
    for (int cell = 1; status == UF_OK && cell <= input->labels.count; cell++) {
        uf_rings rings;
        status = uf_outline_trace(work, input->labels, cell, boxes[cell], &rings, error);
        if (status == UF_OK)
            put_cell(out, cell, &rings);
        uf_arena_back(&work->arena, cell_mark);
    }
    uf_text_add(out, input->labels.count ? "\n  ]\n}\n" : "]\n}\n");
    uf_arena_back(&work->arena, mark);
    return status == UF_OK ? uf_text_check(out, "outlines", error) : status;
}
