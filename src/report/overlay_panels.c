/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The two panels. Images are reduced row by row while they are drawn, so a picture needs a few rows of
 * scratch and no reduced copies: near values are averaged, a pixel counts as contact when more than
 * half of what it shows is (the upper left pixel decides between halves, so that the tint is as large as the contact),
 * labels are taken from the upper left pixel, and gaps are averaged where there are any.
 */
#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <string.h>

#include "report/overlay_parts.h"

/* ---- rows of the reduced images -------------------------------------------------------------- */

/* The image rows behind row y of the panel: one and the same at 1:1 and at an odd lower border. */
typedef struct row_pair {
    int y0, y1;
} row_pair;

static row_pair rows_behind(const overlay_scene *scene, int y)
{
    int y0 = y * scene->reduction, y1 = y0 + scene->reduction - 1, last = scene->input->near_adu.height - 1;
    return (row_pair){y0, y1 < last ? y1 : last};
}

static const float *near_row(const overlay_scene *scene, int y, float *scratch)
{
    uf_plane near = scene->input->near_adu;
    row_pair pair = rows_behind(scene, y);
    const float *a = uf_plane_row(near, pair.y0), *b = uf_plane_row(near, pair.y1);
    if (scene->reduction == 1)
        return a;
    for (int x = 0; x < near.width / 2; x++)
        scratch[x] = 0.25f * ((a[2 * x] + a[2 * x + 1]) + (b[2 * x] + b[2 * x + 1]));
    if (near.width % 2)
        scratch[near.width / 2] = 0.5f * (a[near.width - 1] + b[near.width - 1]);
    return scratch;
}

static float finite_mean(float a, float b, float c, float d)
{
    float sum = (a - b) + (c - d); /* NaN as soon as one is */
    if (sum == sum)
        return 0.25f * ((a + b) + (c + d));
    const float value[4] = {a, b, c, d};
    int count = 0;
    sum = 0.0f;
    for (int k = 0; k < 4; k++)
        if (isfinite(value[k])) {
            sum += value[k];
            count++;
        }
    return count ? sum / (float)count : NAN;
}

static const float *gap_row(const overlay_scene *scene, int y, float *scratch)
{
    uf_plane gap = scene->input->gap_nm;
    row_pair pair = rows_behind(scene, y);
    const float *a = uf_plane_row(gap, pair.y0), *b = uf_plane_row(gap, pair.y1);
    if (scene->reduction == 1)
        return a;
    for (int x = 0; x < gap.width / 2; x++)
        scratch[x] = finite_mean(a[2 * x], a[2 * x + 1], b[2 * x], b[2 * x + 1]);
    if (gap.width % 2) {
        float right = a[gap.width - 1], below = b[gap.width - 1];
        scratch[gap.width / 2] = finite_mean(right, right, below, below);
    }
    return scratch;
}

static void contact_row(const overlay_scene *scene, int y, uint8_t *out)
{
    uf_mask contact = scene->input->contact;
    if (!contact.data) {
        memset(out, 0, (size_t)scene->width);
        return;
    }
    row_pair pair = rows_behind(scene, y);
    const uint8_t *a = uf_mask_row(contact, pair.y0), *b = uf_mask_row(contact, pair.y1);
    if (scene->reduction == 1) {
        memcpy(out, a, (size_t)scene->width);
        return;
    }
    for (int x = 0; x < contact.width / 2; x++) /* the upper left pixel twice: it decides between halves */
        out[x] = 2 * a[2 * x] + a[2 * x + 1] + b[2 * x] + b[2 * x + 1] >= 3;
    if (contact.width % 2)
        out[contact.width / 2] = a[contact.width - 1];
}

/* A pixel of a cell is on its outline when one of its four neighbours is not of that cell. What lies beyond
 * the image is unknown, so that a cell cut by the edge stays open there. */
static void outline_row(const overlay_scene *scene, int y, int32_t *label, uint8_t *outline)
{
    uf_labels labels = scene->input->labels;
    const int r = scene->reduction, n = scene->width;
    const int32_t *here = uf_labels_row(labels, y * r);
    const int32_t *above = y > 0 ? uf_labels_row(labels, (y - 1) * r) : here;
    const int32_t *below = y + 1 < scene->height ? uf_labels_row(labels, (y + 1) * r) : here;
    for (int x = 0; x < n; x++) {
        label[x] = here[x * r];
        outline[x] = (uint8_t)((label[x] > 0) & ((above[x * r] != label[x]) | (below[x * r] != label[x])));
    }
    for (int x = 1; x < n; x++) {
        bool differ = label[x - 1] != label[x];
        outline[x - 1] |= (uint8_t)(differ & (label[x - 1] > 0));
        outline[x] |= (uint8_t)(differ & (label[x] > 0));
    }
}

/* ---- how bright white is --------------------------------------------------------------------- */

/*
 * Percentile in one pass without sorting: positive floats order like their bits, so the upper 16 bits of a
 * value above black number its bin. Bins are 0.4 % wide, finer than a grey level.
 */
enum { BINS = 1 << 16, BIN_SHIFT = 15 };

static void count_row(const float *row, int n, float black, uint32_t *bins)
{
    for (int x = 0; x < n; x++) {
        float above = row[x] - black;
        above = above > 0.0f ? above : 0.0f; /* also for NaN */
        uint32_t bits;
        memcpy(&bits, &above, sizeof bits);
        bins[bits >> BIN_SHIFT]++;
    }
}

static float bin_end(uint32_t bin)
{
    uint32_t bits = (bin + 1) << BIN_SHIFT;
    float value;
    memcpy(&value, &bits, sizeof value);
    return value;
}

uf_status overlay_measure_near(uf_work *work, overlay_scene *scene, uf_error *error)
{
    const double white_share = 0.997;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uint32_t *bins;
    float *scratch;
    uf_status status = uf_take(work, BINS, sizeof *bins, "the overlay", &bins, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)scene->width, sizeof *scratch, "the overlay", &scratch, error);
    if (status != UF_OK)
        return status;
    memset(bins, 0, BINS * sizeof *bins);
    scene->black = isfinite(scene->input->near_background_adu) ? (float)scene->input->near_background_adu : 0.0f;
    for (int y = 0; y < scene->height; y++)
        count_row(near_row(scene, y, scratch), scene->width, scene->black, bins);
    double wanted = white_share * scene->width * scene->height, seen = 0.0;
    uint32_t bin = 0;
    for (; bin < BINS - 1; bin++) {
        seen += bins[bin];
        if (seen >= wanted)
            break;
    }
    float span = bin ? bin_end(bin) : 0.0f;
    scene->white = scene->black + (span > 0.0f && isfinite(span) ? span : 1.0f);
    uf_arena_back(&work->arena, mark);
    return UF_OK;
}

/* ---- pixels ---------------------------------------------------------------------------------- */

void overlay_near_inks(const overlay_scene *scene, const float *near, const uint8_t *contact, uint8_t *out)
{
    const float scale = 1.0f / (scene->white - scene->black), top = (float)(UF_NEAR_LEVELS - 1);
    for (int x = 0; x < scene->width; x++) {
        float share = (near[x] - scene->black) * scale;
        share = share > 0.0f ? share : 0.0f; /* also for NaN */
        share = share < 1.0f ? share : 1.0f;
        int level = (int)(top * sqrtf(share) + 0.5f);
        out[x] = (uint8_t)((contact && contact[x] ? UF_INK_CONTACT : UF_INK_NEAR) + level);
    }
}

static void gap_inks(const overlay_scene *scene, const float *gap, const int32_t *label, int y, uint8_t *out)
{
    for (int x = 0; x < scene->width; x++) {
        if (label[x] <= 0)
            out[x] = UF_INK_OUTSIDE;
        else if (gap[x] != gap[x])
            out[x] = (x + y) % 4 == 0 ? UF_INK_NO_GAP : UF_INK_OUTSIDE;
        else
            out[x] = uf_gap_ink(gap[x], scene->gap_max_nm);
    }
}

typedef struct row_scratch {
    float *values;
    int32_t *label;
    uint8_t *contact, *outline;
} row_scratch;

static uf_status take_scratch(uf_work *work, int width, row_scratch *rows, uf_error *error)
{
    size_t n = (size_t)width;
    uf_status status = uf_take(work, n, sizeof *rows->values, "the overlay", &rows->values, error);
    if (status == UF_OK)
        status = uf_take(work, n, sizeof *rows->label, "the overlay", &rows->label, error);
    if (status == UF_OK)
        status = uf_take(work, n, 1, "the overlay", &rows->contact, error);
    if (status == UF_OK)
        status = uf_take(work, n, 1, "the overlay", &rows->outline, error);
    return status;
}

static void draw_row(const overlay_scene *scene, const row_scratch *rows, uf_canvas near, uf_canvas gap, int y)
{
    uint8_t *near_out = uf_canvas_row(near, y), *gap_out = uf_canvas_row(gap, y);
    outline_row(scene, y, rows->label, rows->outline);
    contact_row(scene, y, rows->contact);
    overlay_near_inks(scene, near_row(scene, y, rows->values), rows->contact, near_out);
    gap_inks(scene, gap_row(scene, y, rows->values), rows->label, y, gap_out);
    for (int x = 0; x < scene->width; x++)
        if (rows->outline[x])
            near_out[x] = gap_out[x] = UF_INK_OUTLINE;
}

/* ---- marks ----------------------------------------------------------------------------------- */

/* Half a diagonal of the mark around a spot, one of whose axes is `axis_um` long. The rhombus around an
 * ellipse has diagonals sqrt(2) times its axes; one pixel more keeps the line off the spot. */
static double half_diagonal(const overlay_scene *scene, double axis_um)
{
    const double least = 3.0, root_two = 1.4142135623730951;
    double half = 0.5 * root_two * axis_um / (scene->input->pixel_size_um * scene->reduction) + 1.0;
    return half > least ? half : least;
}

static void draw_spots(const overlay_scene *scene, uf_canvas near)
{
    for (int k = 0; k < scene->input->spot_count; k++) {
        const uf_spot *spot = &scene->input->spots[k];
        double angle = isfinite(spot->orientation_deg) ? spot->orientation_deg : 0.0;
        uf_canvas_diamond(near, overlay_at(scene, spot->x_px), overlay_at(scene, spot->y_px),
                          half_diagonal(scene, spot->length_um), half_diagonal(scene, spot->width_um), angle,
                          UF_INK_SPOT);
    }
}

static bool has_number(uf_canvas panel, uf_box box)
{
    uf_canvas part = uf_canvas_part(panel, box);
    for (int y = 0; y < part.height; y++) {
        const uint8_t *row = uf_canvas_row(part, y);
        for (int x = 0; x < part.width; x++)
            if (row[x] >= UF_INK_HALO && row[x] < UF_INK_NUMBER + UF_FONT_LEVELS)
                return true;
    }
    return false;
}

/* The label shown at a panel pixel, 0 beyond the panel. */
static int32_t label_at(const overlay_scene *scene, int x, int y)
{
    if (x < 0 || y < 0 || x >= scene->width || y >= scene->height)
        return 0;
    return uf_labels_row(scene->input->labels, y * scene->reduction)[x * scene->reduction];
}

static int within(int value, int low, int high)
{
    return value > high ? (high < low ? low : high) : value < low ? low : value;
}

/* Finds where the number of `cell`, `width` x `height` pixels, goes: as near its centroid as other numbers
 * allow, wholly inside the panel. Away from the centroid its middle must lie on the cell, or it would name
 * another one. False where there is no such place: a number left out can be looked up, a heap of them cannot
 * be read. */
static bool number_place(const overlay_scene *scene, uf_canvas panel, const uf_cell *cell, int width, int height,
                         uf_box *place)
{
    /* In half widths and whole heights. */
    static const int step[][2] = {{0, 0}, {0, -1}, {0, 1},  {-1, 0}, {1, 0}, {-1, -1},
                                  {1, 1}, {1, -1}, {-1, 1}, {0, -2}, {0, 2}};
    const int centre_x = (int)lround(overlay_at(scene, cell->x_px)),
              centre_y = (int)lround(overlay_at(scene, cell->y_px));
    for (size_t k = 0; k < sizeof step / sizeof step[0]; k++) {
        int x = within(centre_x - width / 2 + step[k][0] * (width / 2 + 1), 0, panel.width - width);
        int y = within(centre_y - height / 2 + step[k][1] * height, 0, panel.height - height);
        *place = (uf_box){x, y, x + width, y + height};
        if ((k == 0 || label_at(scene, x + width / 2, y + height / 2) == cell->cell) && !has_number(panel, *place))
            return true;
    }
    return false;
}

/* Cells that do not count have their number in brackets. */
static void number_text(char *out, size_t size, const uf_cell *cell)
{
    (void)snprintf(out, size, cell->used ? "%d" : "(%d)", cell->cell);
}

static void draw_number(uf_canvas panel, int x, int y, const char *text)
{
    uf_font_halo(panel, UF_FONT_SMALL, x, y, text, UF_INK_HALO);
    uf_font_draw(panel, UF_FONT_SMALL, x, y, text, UF_INK_NUMBER);
}

static void draw_numbers(const overlay_scene *scene, uf_canvas near, uf_canvas gap)
{
    enum { HALO = 1, BRACKET = 2 }; /* brackets reach below the baseline */
    const int height = uf_font_faces[UF_FONT_SMALL].cap_height + BRACKET + 2 * HALO;
    for (int k = 0; scene->input->cells && k < scene->input->labels.count; k++) {
        const uf_cell *cell = &scene->input->cells[k];
        double x = overlay_at(scene, cell->x_px), y = overlay_at(scene, cell->y_px);
        if (!(x >= -1.0 && y >= -1.0 && x <= scene->width && y <= scene->height))
            continue;
        char text[24];
        number_text(text, sizeof text, cell);
        int width = uf_font_width(UF_FONT_SMALL, text) + 2 * HALO;
        uf_box box;
        if (!number_place(scene, near, cell, width, height, &box))
            continue;
        draw_number(near, box.x0 + HALO, box.y1 - HALO - BRACKET, text);
        draw_number(gap, box.x0 + HALO, box.y1 - HALO - BRACKET, text);
    }
}

uf_status overlay_draw_panels(uf_work *work, const overlay_scene *scene, uf_canvas near, uf_canvas gap,
                              uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&work->arena);
    row_scratch rows;
    uf_status status = take_scratch(work, scene->width, &rows, error);
    if (status != UF_OK)
        return status;
    for (int y = 0; y < scene->height; y++)
        draw_row(scene, &rows, near, gap, y);
    draw_spots(scene, near);
    draw_numbers(scene, near, gap);
    uf_arena_back(&work->arena, mark);
    return UF_OK;
}
