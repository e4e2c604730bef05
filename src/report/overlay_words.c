/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What stands around the panels: colour bar, scale bar, legend, and the lines of text. */
#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/text.h"
#include "report/overlay_parts.h"

/* ---- round numbers --------------------------------------------------------------------------- */

/* The smallest of the given mantissas (1 first, 10 last) times a power of ten that is at least `value` > 0.
 */
static double round_up(double value, const double *mantissas)
{
    const double slack = 1.0 - 1e-9; /* 0.3 / 0.1 is not quite 3 */
    double power = pow(10.0, floor(log10(value)));
    while (*mantissas * power < value * slack)
        mantissas++;
    return *mantissas * power;
}

static const double one_two_five[] = {1, 2, 5, 10, 100};
static const double ramp_ends[] = {1, 2, 3, 4, 5, 6, 8, 10, 100};

/* The 1-2-5 number that is nearest to `value` > 0 as a ratio. */
static double round_near(double value)
{
    const double power = pow(10.0, floor(log10(value)));
    int k = 0; /* up one step where the value lies above the geometric mean of this step and the next */
    while (k < 3 && value * value > one_two_five[k] * one_two_five[k + 1] * power * power)
        k++;
    return one_two_five[k] * power;
}

double overlay_gap_end_nm(double cutoff_nm, bool has_cutoff)
{
    const double usual_nm = 200.0, cutoffs = 4.0;
    return has_cutoff ? round_up(cutoffs * cutoff_nm, ramp_ends) : usual_nm;
}

/* ---- text ------------------------------------------------------------------------------------ */

void overlay_draw_line(uf_canvas canvas, uf_font font, int x, int y, int width, const char *text)
{
    static const char ellipsis[] = "…";
    if (uf_font_width(font, text) <= width) {
        uf_font_draw(canvas, font, x, y, text, UF_INK_TEXT);
        return;
    }
    int room = width - uf_font_width(font, ellipsis);
    size_t head = uf_font_fit(font, text, room / 2);
    x = uf_font_draw_bytes(canvas, font, x, y, text, head, UF_INK_TEXT);
    x = uf_font_draw(canvas, font, x, y, ellipsis, UF_INK_TEXT);
    /* The end of a file name tells fields apart, so the middle goes. */
    const char *tail = text + head;
    while (*tail && (uf_font_width(font, tail) > room - room / 2 || ((unsigned char)*tail & 0xc0) == 0x80))
        tail++;
    uf_font_draw(canvas, font, x, y, tail, UF_INK_TEXT);
}

/* Draws text below row y, broken at spaces, and returns the row below it. */
int overlay_draw_wrapped(uf_canvas canvas, int x, int y, int width, const char *text)
{
    const uf_font font = UF_FONT_SMALL;
    while (*text) {
        size_t count = uf_font_fit(font, text, width);
        if (text[count]) {
            size_t at = count;
            while (at > 0 && text[at] != ' ')
                at--;
            count = at > 0 ? at : count;
        }
        if (count == 0) /* not one character is this narrow */
            break;
        y += uf_font_line_height(font);
        uf_font_draw_bytes(canvas, font, x, y - uf_font_faces[font].descent - 2, text, count, UF_INK_TEXT);
        text += count;
        text += strspn(text, " ");
    }
    return y;
}

/* ---- colour bar ------------------------------------------------------------------------------ */

enum { BAR = 16, TICK = 5, AFTER_TICK = 4, LABEL_APART = 13, ARROW = 8 };

static void cutoff_label(const overlay_scene *scene, char *out, size_t size)
{
    char number[UF_NUMBER_TEXT];
    uf_format_number(number, scene->input->cutoff_nm, 4);
    (void)snprintf(out, size, "%s cutoff", number);
}

/* The ends stand for all that lies beyond them, and say so. */
static void tick_label(const overlay_scene *scene, double value, char *out, size_t size)
{
    char number[UF_NUMBER_TEXT];
    uf_format_number(number, value, 6);
    const char *sign = value <= 0.0 ? "≤ " : value >= (double)scene->gap_max_nm ? "≥ " : "";
    (void)snprintf(out, size, "%s%s", sign, number);
}

int overlay_bar_width(const overlay_scene *scene)
{
    char label[80];
    tick_label(scene, (double)scene->gap_max_nm, label, sizeof label);
    int widest = uf_font_width(UF_FONT_SMALL, label);
    if (scene->has_cutoff) {
        cutoff_label(scene, label, sizeof label);
        int width = uf_font_width(UF_FONT_SMALL, label);
        widest = width > widest ? width : widest;
    }
    return BAR + TICK + AFTER_TICK + widest;
}

static int bar_row(const overlay_scene *scene, double gap_nm, int top, int bottom)
{
    return bottom - (int)lround(gap_nm / (double)scene->gap_max_nm * (bottom - top));
}

static void draw_label(uf_canvas canvas, int x, int row, const char *label)
{
    int middle = uf_font_faces[UF_FONT_SMALL].cap_height / 2;
    uf_font_draw(canvas, UF_FONT_SMALL, x + TICK + AFTER_TICK, row + middle + 1, label, UF_INK_TEXT);
}

/* A tick like the others, with its word, and an arrow from the other side. */
static void draw_cutoff(uf_canvas canvas, const overlay_scene *scene, int x, int row)
{
    char label[80];
    cutoff_label(scene, label, sizeof label);
    uf_canvas_fill(canvas, (uf_box){x + BAR, row, x + BAR + TICK, row + 1}, UF_INK_CUTOFF);
    draw_label(canvas, x + BAR, row, label);
    for (int k = 0; k < ARROW; k++)
        uf_canvas_fill(canvas, (uf_box){x - 2 - k, row - k / 2, x - 1 - k, row + k / 2 + 1}, UF_INK_CUTOFF);
}

void overlay_draw_bar(uf_canvas canvas, const overlay_scene *scene, int x, int top, int bottom)
{
    const double most_ticks = 5.0, rows_a_tick = 24.0, max_nm = (double)scene->gap_max_nm;
    const int rows = bottom - top;
    for (int y = top; y <= bottom; y++) {
        float gap_nm = (float)(max_nm * (bottom - y) / rows);
        uf_canvas_fill(canvas, (uf_box){x, y, x + BAR, y + 1}, uf_gap_ink(gap_nm, scene->gap_max_nm));
    }
    uf_canvas_frame(canvas, (uf_box){x - 1, top - 1, x + BAR + 1, bottom + 2}, UF_INK_LINE);
    int cutoff_row = scene->has_cutoff ? bar_row(scene, scene->input->cutoff_nm, top, bottom) : -LABEL_APART;
    double step = round_up(max_nm * fmax(1.0 / most_ticks, rows_a_tick / rows), one_two_five);
    for (int k = 0; k <= (int)(max_nm / step + 0.5); k++) {
        char label[80];
        int row = bar_row(scene, k * step, top, bottom);
        uf_canvas_fill(canvas, (uf_box){x + BAR, row, x + BAR + TICK, row + 1}, UF_INK_LINE);
        tick_label(scene, k * step, label, sizeof label);
        if (abs(row - cutoff_row) >= LABEL_APART)
            draw_label(canvas, x + BAR, row, label);
    }
    if (scene->has_cutoff)
        draw_cutoff(canvas, scene, x, cutoff_row);
}

/* ---- scale bar and legend -------------------------------------------------------------------- */

/* A line of samples, each with its words, that goes on in the next line when it is full. */
typedef struct legend {
    uf_canvas canvas;
    int left, right; /* columns to stay between */
    int x, y;        /* where the next sample starts; y is the baseline */
} legend;

enum { SAMPLE = 18, AFTER_SAMPLE = 6, BETWEEN = 20, LEGEND_LINE = 20 };

/* Makes room for a sample `width` pixels wide and its words, draws the words, and returns the sample's box.
 */
static uf_box legend_entry(legend *at, int width, const char *words)
{
    int whole = width + (width ? AFTER_SAMPLE : 0) + uf_font_width(UF_FONT_SMALL, words);
    if (at->x > at->left && at->x + whole > at->right) {
        at->x = at->left;
        at->y += LEGEND_LINE;
    }
    uf_box sample = {at->x, at->y - uf_font_faces[UF_FONT_SMALL].cap_height - 1, at->x + width, at->y + 1};
    uf_font_draw(at->canvas, UF_FONT_SMALL, at->x + whole - uf_font_width(UF_FONT_SMALL, words), at->y, words,
                 UF_INK_TEXT);
    at->x += whole + BETWEEN;
    return sample;
}

/* A bar of a round length of about a fifth of the panel. */
static void scale_entry(legend *at, const overlay_scene *scene)
{
    const double pixel_um = scene->input->pixel_size_um * scene->reduction, share = 0.2;
    if (!(pixel_um > 0.0) || !isfinite(pixel_um))
        return;
    double length_um = round_near(share * scene->width * pixel_um);
    int length = (int)lround(length_um / pixel_um);
    length = length < 1 ? 1 : length;
    char number[UF_NUMBER_TEXT], words[UF_NUMBER_TEXT + 8];
    uf_format_number(number, length_um, 6);
    (void)snprintf(words, sizeof words, "%s µm", number);
    uf_box box = legend_entry(at, length, words);
    int middle = (box.y0 + box.y1) / 2;
    uf_canvas_fill(at->canvas, (uf_box){box.x0, middle - 1, box.x1, middle + 2}, UF_INK_LINE);
}

static void outline_entry(legend *at, const overlay_scene *scene)
{
    bool all_used = true;
    for (int k = 0; scene->input->cells && k < scene->input->labels.count; k++)
        all_used = all_used && scene->input->cells[k].used;
    uf_box box = legend_entry(
        at, SAMPLE, all_used ? "cell outline and number" : "cell outline and number, (in brackets): not counted");
    uf_canvas_fill(at->canvas, box, UF_INK_OUTSIDE);
    uf_canvas_frame(at->canvas, box, UF_INK_OUTLINE);
}

static void contact_entry(legend *at, const overlay_scene *scene)
{
    if (!scene->input->contact.data) {
        (void)legend_entry(at, 0, "contact not reported");
        return;
    }
    char number[UF_NUMBER_TEXT], words[UF_NUMBER_TEXT + 32];
    uf_format_number(number, scene->input->cutoff_nm, 4);
    (void)snprintf(words, sizeof words, scene->has_cutoff ? "contact: gap ≤ %s nm" : "contact", number);
    uf_box box = legend_entry(at, 2 * SAMPLE, words);
    for (int x = box.x0; x < box.x1; x++) {
        int level = (x - box.x0) * (UF_NEAR_LEVELS - 1) / (2 * SAMPLE - 1);
        uf_canvas_fill(at->canvas, (uf_box){x, box.y0, x + 1, box.y1}, (uint8_t)(UF_INK_CONTACT + level));
    }
}

static void spot_entry(legend *at, const overlay_scene *scene)
{
    char words[48];
    (void)snprintf(words, sizeof words, scene->input->spot_count == 1 ? "%d focal spot" : "%d focal spots",
                   scene->input->spot_count);
    uf_box box = legend_entry(at, SAMPLE, words);
    uf_canvas_fill(at->canvas, box, UF_INK_NEAR + UF_NEAR_LEVELS / 3);
    uf_canvas_diamond(at->canvas, box.x0 + SAMPLE / 2, box.y0 + (box.y1 - box.y0) / 2, 6, 4, 0, UF_INK_SPOT);
}

static void gap_entries(legend *at)
{
    uf_box box = legend_entry(at, SAMPLE, "outside cells");
    uf_canvas_fill(at->canvas, box, UF_INK_OUTSIDE);
    box = legend_entry(at, SAMPLE, "no gap measurable");
    uf_canvas_fill(at->canvas, box, UF_INK_OUTSIDE);
    for (int y = box.y0; y < box.y1; y++)
        for (int x = box.x0; x < box.x1; x++)
            if ((x + y) % 4 == 0)
                uf_canvas_put(at->canvas, x, y, UF_INK_NO_GAP);
}

static int draw_near_words(uf_canvas canvas, const overlay_scene *scene, int x, int y, int width)
{
    char black[UF_NUMBER_TEXT], white[UF_NUMBER_TEXT], words[300];
    uf_format_number(black, (double)scene->black, 3);
    uf_format_number(white, (double)scene->white, 3);
    (void)snprintf(
        words, sizeof words,
        "Near image, square-root scale: black at %s ADU (background), white at %s ADU (99.7th percentile).%s", black,
        white, scene->reduction == 2 ? " Drawn 2:1, one pixel for 2 × 2 of the image." : "");
    return overlay_draw_wrapped(canvas, x, y, width, words);
}

int overlay_draw_footer(uf_canvas canvas, const overlay_scene *scene, int x, int y, int width)
{
    enum { PARAGRAPH = 8 };
    legend at = {canvas, x, x + width, x, y + uf_font_faces[UF_FONT_SMALL].cap_height};
    scale_entry(&at, scene);
    outline_entry(&at, scene);
    contact_entry(&at, scene);
    spot_entry(&at, scene);
    gap_entries(&at);
    y = at.y + uf_font_faces[UF_FONT_SMALL].descent + PARAGRAPH;
    y = draw_near_words(canvas, scene, x, y, width);
    y = overlay_draw_wrapped(canvas, x, y, width, scene->input->settings);
    const char *flags = scene->input->flags;
    char words[1024];
    (void)snprintf(words, sizeof words, "Flags: %s", flags[0] ? flags : "none");
    return overlay_draw_wrapped(canvas, x, y, width, words);
}
