/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>
#include <stdbool.h>

#include "report/overlay_parts.h"

enum {
    MARGIN = 14,
    GUTTER = 16,          /* between the panels, and between gap panel and colour bar */
    SLOT_LEAST = 120,     /* room for caption and colour bar, however small the panel */
    CONTENT_LEAST = 400,  /* room for a word of the legend */
    CAPTION_GAP = 8,      /* between a caption's baseline and its panel */
    LARGEST_1_TO_1 = 1024 /* longer sides are drawn 2:1 */
};

/* Where the parts of the page lie. */
typedef struct page {
    int width, height, content_width;
    int title_y, caption_y, panels_y;
    int near_x, gap_x, bar_x, bar_bottom;
    int slot_width, footer_y;
} page;

static int larger(int a, int b)
{
    return a > b ? a : b;
}

static overlay_scene make_scene(const uf_overlay_input *input)
{
    int width = input->near_adu.width, height = input->near_adu.height;
    int reduction = !input->full && larger(width, height) > LARGEST_1_TO_1 ? 2 : 1;
    bool has_cutoff = isfinite(input->cutoff_nm) && input->cutoff_nm > 0.0;
    return (overlay_scene){
        .input = input,
        .reduction = reduction,
        .width = (width + reduction - 1) / reduction,
        .height = (height + reduction - 1) / reduction,
        .gap_max_nm = (float)overlay_gap_end_nm(input->cutoff_nm, has_cutoff),
        .has_cutoff = has_cutoff,
        .gap_kind = input->cells && input->labels.count > 0 ? input->cells[0].gap_kind : UF_GAP_ABSOLUTE,
    };
}

static page make_page(const overlay_scene *scene)
{
    page p = {.slot_width = larger(scene->width, SLOT_LEAST)};
    int slot_height = larger(scene->height, SLOT_LEAST);
    p.near_x = MARGIN;
    p.gap_x = p.near_x + p.slot_width + GUTTER;
    p.bar_x = p.gap_x + p.slot_width + GUTTER;
    p.content_width = larger(p.bar_x + overlay_bar_width(scene) - MARGIN, CONTENT_LEAST);
    p.width = p.content_width + 2 * MARGIN;
    p.title_y = MARGIN + uf_font_faces[UF_FONT_LARGE].cap_height;
    p.caption_y = p.title_y + uf_font_line_height(UF_FONT_LARGE);
    p.panels_y = p.caption_y + CAPTION_GAP;
    p.bar_bottom = p.panels_y + slot_height - 1;
    p.footer_y = p.panels_y + slot_height + MARGIN;
    p.height = overlay_draw_footer((uf_canvas){0}, scene, MARGIN, p.footer_y, p.content_width) + MARGIN;
    return p;
}

static const char *gap_caption(const overlay_scene *scene)
{
    switch (scene->gap_kind) {
    case UF_GAP_NONE:
        return "no gap reported";
    case UF_GAP_RELATIVE:
        return "gap (relative)";
    default:
        return "gap";
    }
}

static void draw_page(uf_canvas canvas, const overlay_scene *scene, const page *p)
{
    uf_canvas_fill(canvas, (uf_box){0, 0, canvas.width, canvas.height}, UF_INK_PAGE);
    overlay_draw_line(canvas, UF_FONT_LARGE, MARGIN, p->title_y, p->content_width, scene->input->title);
    overlay_draw_line(canvas, UF_FONT_SMALL, p->near_x, p->caption_y, p->slot_width, "near image");
    overlay_draw_line(canvas, UF_FONT_SMALL, p->gap_x, p->caption_y, p->slot_width, gap_caption(scene));
    overlay_draw_bar(canvas, scene, p->bar_x, p->panels_y, p->bar_bottom);
    uf_font_draw(canvas, UF_FONT_SMALL, p->bar_x, p->caption_y, "nm", UF_INK_TEXT);
    (void)overlay_draw_footer(canvas, scene, MARGIN, p->footer_y, p->content_width);
}

static uf_canvas panel_at(uf_canvas canvas, const overlay_scene *scene, int x, int y)
{
    return uf_canvas_part(canvas, (uf_box){x, y, x + scene->width, y + scene->height});
}

uf_status uf_overlay_draw(uf_work *work, const uf_overlay_input *input, uf_indexed *picture,
                          uf_overlay_layout *layout, uf_error *error)
{
    overlay_scene scene = make_scene(input);
    uf_status status = overlay_measure_near(work, &scene, error);
    if (status != UF_OK)
        return status;
    page p = make_page(&scene);
    *picture = (uf_indexed){.width = p.width, .height = p.height};
    uf_palette_fill(picture);
    status = uf_take(work, (size_t)p.width * (size_t)p.height, 1, "the overlay", &picture->data, error);
    if (status != UF_OK)
        return status;
    uf_canvas canvas = uf_canvas_of(picture);
    draw_page(canvas, &scene, &p);
    *layout = (uf_overlay_layout){.reduction = scene.reduction,
                                  .near_x = p.near_x,
                                  .near_y = p.panels_y,
                                  .gap_x = p.gap_x,
                                  .gap_y = p.panels_y,
                                  .panel_width = scene.width,
                                  .panel_height = scene.height};
    return overlay_draw_panels(work, &scene, panel_at(canvas, &scene, p.near_x, p.panels_y),
                               panel_at(canvas, &scene, p.gap_x, p.panels_y), error);
}
