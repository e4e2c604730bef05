/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The overlay and what it is drawn with. Pictures are read back and compared with what the definitions in the
 * headers say, worked out here pixel by pixel; luminance by IEC 61966-2-1. Where a check rests on something
 * else, it says so.
 */
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#include "report/canvas.h"
#include "report/font.h"
#include "report/overlay.h"
#include "report/palette.h"

/* ---- canvas ---------------------------------------------------------------------------------------- */

enum { SIDE = 61, HOLE_X = 13, HOLE_Y = 17, HOLE_W = 29, HOLE_H = 23, CANARY = 0xc5 };

static uint8_t sheet[SIDE * SIDE];

/* A canvas in the middle of a sheet of canaries. */
static uf_canvas fresh_hole(void)
{
    memset(sheet, CANARY, sizeof sheet);
    uf_indexed picture = {.data = sheet, .width = SIDE, .height = SIDE};
    return uf_canvas_part(uf_canvas_of(&picture), (uf_box){HOLE_X, HOLE_Y, HOLE_X + HOLE_W, HOLE_Y + HOLE_H});
}

static int canaries_dead(void)
{
    int dead = 0;
    for (int y = 0; y < SIDE; y++)
        for (int x = 0; x < SIDE; x++) {
            bool inside = x >= HOLE_X && x < HOLE_X + HOLE_W && y >= HOLE_Y && y < HOLE_Y + HOLE_H;
            dead += !inside && sheet[y * SIDE + x] != CANARY;
        }
    return dead;
}

static int inked(uf_canvas canvas, uint8_t index)
{
    int count = 0;
    for (int y = 0; y < canvas.height; y++)
        for (int x = 0; x < canvas.width; x++)
            count += uf_canvas_row(canvas, y)[x] == index;
    return count;
}

static void draws_nothing_outside_its_canvas(void **state)
{
    (void)state;
    uint8_t run[97];
    memset(run, 7, sizeof run);
    uf_canvas hole = fresh_hole();
    assert_int_equal(hole.width, HOLE_W);
    assert_int_equal(hole.height, HOLE_H);
    for (int y = -40; y <= 60; y += 7)
        for (int x = -40; x <= 60; x += 7) {
            uf_canvas_fill(hole, (uf_box){x, y, x + 31, y + 19}, 1);
            uf_canvas_frame(hole, (uf_box){x, y, x + 31, y + 19}, 2);
            uf_canvas_line(hole, x, y, 45 - y, x - 11, 3);
            uf_canvas_diamond(hole, x, y, 17.3, 5.9, 31.0, 4);
            uf_canvas_blit_row(hole, x, y, run, (int)sizeof run);
            uf_canvas_put(hole, x, y, 5);
            uf_font_halo(hole, UF_FONT_LARGE, x, y, "Wq(12)\xc2\xb5", 6);
            uf_font_draw(hole, UF_FONT_LARGE, x, y, "Wq(12)\xc2\xb5", 8);
        }
    assert_int_equal(canaries_dead(), 0);
    assert_true(inked(hole, CANARY) < HOLE_W * HOLE_H);
}

static void nonsense_draws_nothing(void **state)
{
    (void)state;
    uf_canvas hole = fresh_hole();
    uf_canvas_diamond(hole, NAN, 3.0, 5.0, 5.0, 0.0, 1);
    uf_canvas_diamond(hole, 3.0, 3.0, NAN, 5.0, 0.0, 1);
    uf_canvas_diamond(hole, 3.0, 3.0, INFINITY, 5.0, 0.0, 1);
    uf_canvas_diamond(hole, 1e300, 3.0, 1e300, 5.0, 0.0, 1);
    uf_canvas_fill(hole, (uf_box){9, 9, 4, 4}, 1);
    uf_canvas_line(hole, -2000000000, -5, 2000000000, -3, 1);
    assert_int_equal(inked(hole, CANARY), HOLE_W * HOLE_H);
    uf_canvas none = uf_canvas_part(hole, (uf_box){HOLE_W, 2, HOLE_W + 5, 9});
    uf_canvas_fill(none, (uf_box){0, 0, 5, 5}, 1);
    uf_canvas_put(none, 0, 0, 1);
    assert_int_equal(inked(hole, CANARY), HOLE_W * HOLE_H);
}

static void lines_are_4_connected(void **state)
{
    (void)state;
    static const int end[][4] = {{1, 2, 23, 9}, {23, 9, 1, 2},   {3, 20, 7, 1},
                                 {5, 5, 5, 5},  {2, 11, 19, 11}, {8, 1, 8, 21}};
    for (size_t k = 0; k < sizeof end / sizeof end[0]; k++) {
        uf_canvas hole = fresh_hole();
        uf_canvas_line(hole, end[k][0], end[k][1], end[k][2], end[k][3], 9);
        /* A 4-connected path without detours visits one pixel a step. */
        assert_int_equal(inked(hole, 9), abs(end[k][2] - end[k][0]) + abs(end[k][3] - end[k][1]) + 1);
        assert_int_equal(uf_canvas_row(hole, end[k][1])[end[k][0]], 9);
        assert_int_equal(uf_canvas_row(hole, end[k][3])[end[k][2]], 9);
    }
}

/* Colours everything that can be reached from (x, y) without crossing another index. */
static void flood(uf_canvas canvas, int x, int y, uint8_t from, uint8_t to)
{
    if (x < 0 || y < 0 || x >= canvas.width || y >= canvas.height || uf_canvas_row(canvas, y)[x] != from)
        return;
    uf_canvas_row(canvas, y)[x] = to;
    flood(canvas, x - 1, y, from, to);
    flood(canvas, x + 1, y, from, to);
    flood(canvas, x, y - 1, from, to);
    flood(canvas, x, y + 1, from, to);
}

static void diamonds_are_closed_and_turned(void **state)
{
    (void)state;
    for (int angle = -85; angle <= 90; angle += 25) {
        uf_canvas hole = fresh_hole();
        uf_canvas_diamond(hole, 14.0, 11.0, 9.0, 4.0, angle, 9);
        flood(hole, 0, 0, CANARY, 1);
        assert_int_equal(uf_canvas_row(hole, 11)[14], CANARY); /* the spot itself stays visible */
        /* Counter-clockwise as seen: y runs down. */
        int x = (int)lround(14.0 + 9.0 * cos(angle * acos(-1.0) / 180.0));
        int y = (int)lround(11.0 - 9.0 * sin(angle * acos(-1.0) / 180.0));
        assert_int_equal(uf_canvas_row(hole, y)[x], 9);
    }
}

/* ---- font ------------------------------------------------------------------------------------------- */

static void text_is_as_wide_as_it_says(void **state)
{
    (void)state;
    uf_canvas hole = fresh_hole();
    for (int font = 0; font < UF_FONT_SIZES; font++) {
        assert_int_equal(uf_font_width((uf_font)font, ""), 0);
        int whole = uf_font_width((uf_font)font, "gap 2.385 nm");
        assert_int_equal(whole,
                         uf_font_width((uf_font)font, "gap 2.3") + uf_font_width((uf_font)font, "85 nm"));
        assert_int_equal(uf_font_draw(hole, (uf_font)font, 5, 20, "gap 2.385 nm", 1), 5 + whole);
    }
}

static void ink_stays_near_the_pen(void **state)
{
    (void)state;
    for (int font = 0; font < UF_FONT_SIZES; font++)
        for (int code = 32; code < 127; code++) {
            const char text[2] = {(char)code, '\0'};
            const uf_font_face *face = &uf_font_faces[font];
            uf_canvas hole = fresh_hole();
            uf_font_draw(hole, (uf_font)font, 6, 17, text, 1);
            int width = uf_font_width((uf_font)font, text), dark = 0;
            for (int y = 0; y < hole.height; y++)
                for (int x = 0; x < hole.width; x++)
                    if (uf_canvas_row(hole, y)[x] != CANARY) {
                        dark++;
                        assert_in_range(uf_canvas_row(hole, y)[x], 1, UF_FONT_LEVELS);
                        assert_in_range(x, 6 - 2, 6 + width + 1);
                        assert_in_range(y, 17 - face->ascent, 17 + face->descent);
                    }
            assert_int_equal(dark == 0, code == ' ');
        }
}

static void signs_of_units_exist_and_others_are_boxes(void **state)
{
    (void)state;
    static const char *known[] = {"µ", "²", "°", "±", "−", "×", "–", "…", "≤", "≥"};
    /* Not in the font; and no UTF-8: a lone continuation, an overlong form, a cut sequence, a byte never
     * used. */
    static const char *unknown[] = {"é", "漢", "\xf0\x9f\x94\xac", "\x80", "\xc3", "\xff", "\t"};
    uint8_t box[sizeof sheet];
    uf_canvas hole = fresh_hole();
    uf_font_draw(hole, UF_FONT_SMALL, 3, 15, unknown[0], 1);
    memcpy(box, sheet, sizeof sheet);
    for (size_t k = 0; k < sizeof unknown / sizeof unknown[0]; k++) {
        hole = fresh_hole();
        uf_font_draw(hole, UF_FONT_SMALL, 3, 15, unknown[k], 1);
        assert_memory_equal(sheet, box, sizeof sheet);
    }
    for (size_t k = 0; k < sizeof known / sizeof known[0]; k++) {
        hole = fresh_hole();
        uf_font_draw(hole, UF_FONT_SMALL, 3, 15, known[k], 1);
        assert_memory_not_equal(sheet, box, sizeof sheet);
    }
    assert_int_equal(uf_font_width(UF_FONT_SMALL, "\xce\xbc"), uf_font_width(UF_FONT_SMALL, "µ"));
}

static void fit_takes_whole_characters(void **state)
{
    (void)state;
    const char *text = "5 µm²";
    for (int width = 0; width < 60; width++) {
        size_t fits = uf_font_fit(UF_FONT_SMALL, text, width);
        assert_int_not_equal((unsigned char)text[fits] & 0xc0, 0x80);
        char head[16];
        memcpy(head, text, fits);
        head[fits] = '\0';
        assert_true(uf_font_width(UF_FONT_SMALL, head) <= width);
    }
    assert_int_equal(uf_font_fit(UF_FONT_SMALL, text, 1000), strlen(text));
}

static void halo_surrounds_every_stroke(void **state)
{
    (void)state;
    uf_canvas hole = fresh_hole();
    uf_font_halo(hole, UF_FONT_SMALL, 4, 15, "(17)", 200);
    uf_font_draw(hole, UF_FONT_SMALL, 4, 15, "(17)", 1);
    for (int y = 0; y < hole.height; y++)
        for (int x = 0; x < hole.width; x++)
            if (uf_canvas_row(hole, y)[x] == UF_FONT_LEVELS)
                for (int k = 0; k < 9; k++)
                    assert_int_not_equal(uf_canvas_row(hole, y + k / 3 - 1)[x + k % 3 - 1], CANARY);
}

/* ---- palette ------------------------------------------------------------------------------------------ */

static double linear(uint8_t value)
{
    double v = value / 255.0;
    return v <= 0.04045 ? v / 12.92 : pow((v + 0.055) / 1.055, 2.4);
}

static double luminance(const double rgb[3])
{
    return 0.2126 * rgb[0] + 0.7152 * rgb[1] + 0.0722 * rgb[2];
}

typedef enum eye { ALL_CONES, NO_RED_CONES, NO_GREEN_CONES, EYES } eye;

/* Linear sRGB as a dichromat sees it. The matrices are those of Viénot, Brettel and Mollon 1999 (Color Res.
 * Appl. 24:243) for sRGB primaries; values from memory, their rows checked to add up to 1 (white stays
 * white). */
static const double dichromat[EYES][3][3] = {
    {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}},
    {{0.11238, 0.88762, 0}, {0.11238, 0.88762, 0}, {0.00401, -0.00401, 1}},
    {{0.29275, 0.70725, 0}, {0.29275, 0.70725, 0}, {-0.02234, 0.02234, 1}},
};

static double seen_luminance(const uf_indexed *picture, int index, eye who)
{
    double rgb[3];
    for (int row = 0; row < 3; row++) {
        rgb[row] = 0.0;
        for (int k = 0; k < 3; k++)
            rgb[row] += dichromat[who][row][k] * linear(picture->palette[index][k]);
    }
    return luminance(rgb);
}

/* CIE lightness L*, 0 to 100. */
static double lightness(double y)
{
    return y > 0.008856 ? 116.0 * cbrt(y) - 16.0 : 903.3 * y;
}

static void ramps_are_monotone_in_lightness(void **state)
{
    (void)state;
    uf_indexed picture;
    uf_palette_fill(&picture);
    assert_int_equal(picture.colours, UF_INK_COUNT);
    assert_true(picture.colours <= 256);
    for (int k = 1; k < UF_NEAR_LEVELS; k++) {
        assert_true(seen_luminance(&picture, UF_INK_NEAR + k, ALL_CONES) >
                    seen_luminance(&picture, UF_INK_NEAR + k - 1, ALL_CONES));
        assert_true(seen_luminance(&picture, UF_INK_CONTACT + k, ALL_CONES) >
                    seen_luminance(&picture, UF_INK_CONTACT + k - 1, ALL_CONES));
    }
}

static void gap_ramp_keeps_its_order_for_every_eye(void **state)
{
    (void)state;
    uf_indexed picture;
    uf_palette_fill(&picture);
    for (int who = 0; who < EYES; who++) {
        for (int row = 0; row < 3; row++)
            assert_true(fabs(dichromat[who][row][0] + dichromat[who][row][1] + dichromat[who][row][2] - 1.0) <
                        1e-9);
        double first = lightness(seen_luminance(&picture, UF_INK_GAP, (eye)who)), last = first;
        for (int k = 1; k < UF_GAP_LEVELS; k++) {
            double here = lightness(seen_luminance(&picture, UF_INK_GAP + k, (eye)who));
            assert_true(here < last);
            /* Even enough to judge by: no step of 1/79 takes more than 3 % of the range. */
            assert_true(last - here < 3.0);
            last = here;
        }
        assert_true(first > 90.0 && last < 15.0);
    }
}

static int apart(const uf_indexed *picture, int a, int b)
{
    int sum = 0;
    for (int k = 0; k < 3; k++)
        sum += abs(picture->palette[a][k] - picture->palette[b][k]);
    return sum;
}

static void marks_differ_from_what_they_lie_on(void **state)
{
    (void)state;
    const int clear = 80; /* summed over red, green, blue; common practice, no source */
    uf_indexed picture;
    uf_palette_fill(&picture);
    for (int k = UF_INK_NEAR; k < UF_INK_PAGE; k++) {
        assert_true(apart(&picture, UF_INK_OUTLINE, k) > clear);
        assert_true(k >= UF_INK_GAP || apart(&picture, UF_INK_SPOT, k) > clear);
        assert_true(k < UF_INK_GAP || apart(&picture, UF_INK_OUTSIDE, k) > clear);
    }
    assert_true(apart(&picture, UF_INK_OUTLINE, UF_INK_OUTSIDE) > clear);
    assert_true(apart(&picture, UF_INK_OUTLINE, UF_INK_SPOT) > clear);
}

/* ---- overlay: a scene --------------------------------------------------------------------------------- */

enum { CELLS = 5 };

typedef struct scene {
    uf_work work;
    uf_overlay_input input;
    uf_cell cells[CELLS];
    uf_spot spots[3];
    uf_indexed picture;
    uf_overlay_layout layout;
} scene;

/* Discs and a strip that touch, overlap and are cut by the border, on an image whose rows have a pad. */
static int32_t label_at(int x, int y, int width, int height)
{
    static const double disc[CELLS][3] = {
        {0.21, 0.24, 0.17}, {0.52, 0.31, 0.155}, {0.97, 0.71, 0.22}, {0.44, 0.78, 0.19}, {0.63, 0.58, 0.13}};
    for (int k = 0; k < CELLS; k++) {
        double dx = (x + 0.5) / width - disc[k][0], dy = (y + 0.5) / height - disc[k][1];
        if (dx * dx + dy * dy < disc[k][2] * disc[k][2])
            return k + 1;
    }
    return 0;
}

static void fill_scene(scene *s, int width, int height)
{
    uf_overlay_input *in = &s->input;
    for (int y = 0; y < height; y++)
        for (int x = 0; x < width; x++) {
            int32_t label = label_at(x, y, width, height);
            float gap = label ? (float)(20 * label) + (float)((7 * x + 3 * y) % 41) - 20.5f : NAN;
            uf_labels_row(in->labels, y)[x] = label;
            uf_plane_row(in->gap_nm, y)[x] = (x + y) % 53 == 0 ? NAN : gap;
            uf_plane_row(in->near_adu, y)[x] = label ? 900.0f + (float)((5 * x + 11 * y) % 731) : 211.5f;
            uf_mask_row(in->contact, y)[x] = label && gap <= 50.0f;
        }
}

static void *memory(size_t count, size_t size)
{
    void *taken = calloc(count, size);
    assert_non_null(taken);
    return taken;
}

static scene *new_scene(int width, int height)
{
    enum { PAD = 3 };
    scene *s = memory(1, sizeof *s);
    ptrdiff_t stride = width + PAD;
    size_t pixels = (size_t)stride * (size_t)height;
    s->input = (uf_overlay_input){
        .near_adu = {memory(pixels, sizeof(float)), width, height, stride},
        .labels = {memory(pixels, sizeof(int32_t)), width, height, stride, CELLS},
        .gap_nm = {memory(pixels, sizeof(float)), width, height, stride},
        .contact = {memory(pixels, 1), width, height, stride},
        .cells = s->cells,
        .spots = s->spots,
        .spot_count = 3,
        .pixel_size_um = 0.1065,
        .near_background_adu = 211.5,
        .cutoff_nm = 50.0,
        .title = "day2_B07_field03_near.tif",
        .settings =
            "membrane label; 488 nm, depth 86.4 ± 2.1 nm; cutoff 50 nm; edge cells weighted by what is seen",
        .flags = "touching",
    };
    fill_scene(s, width, height);
    for (int k = 0; k < CELLS; k++)
        s->cells[k] =
            (uf_cell){.cell = k + 1, .x_px = 0.2 * (k + 1) * width, .y_px = 0.5 * height, .used = k != 2};
    for (int k = 0; k < 3; k++)
        s->spots[k] = (uf_spot){.x_px = 0.3 * width + 9 * k,
                                .y_px = 0.25 * height,
                                .length_um = 1.3,
                                .width_um = 0.4,
                                .orientation_deg = 33.0 * k};
    return s;
}

static void draw(scene *s)
{
    uf_error error = {0};
    assert_int_equal(uf_overlay_draw(&s->work, &s->input, &s->picture, &s->layout, &error), UF_OK);
}

static void bare(scene *s)
{
    s->input.cells = NULL;
    s->input.spot_count = 0;
}

static void free_scene(scene *s)
{
    uf_arena_free(&s->work.arena);
    free(s->input.near_adu.data);
    free(s->input.labels.data);
    free(s->input.gap_nm.data);
    free(s->input.contact.data);
    free(s);
}

static int ink_at(const scene *s, int x, int y)
{
    return s->picture.data[(ptrdiff_t)y * s->picture.width + x];
}

static int near_ink(const scene *s, int x, int y)
{
    return ink_at(s, s->layout.near_x + x, s->layout.near_y + y);
}

static int gap_ink(const scene *s, int x, int y)
{
    return ink_at(s, s->layout.gap_x + x, s->layout.gap_y + y);
}

/* ---- overlay: layout ------------------------------------------------------------------------------------
 */

static const int sizes[][2] = {{1, 1},       {17, 17},     {128, 128}, {512, 512},
                               {1025, 1025}, {2048, 2048}, {640, 37},  {31, 1301}};

enum { SIZES = sizeof sizes / sizeof sizes[0] };

/* Every pixel of the half-open box is bare page. */
static bool is_page(const scene *s, uf_box box)
{
    for (int y = box.y0; y < box.y1; y++)
        for (int x = box.x0; x < box.x1; x++)
            if (ink_at(s, x, y) != UF_INK_PAGE)
                return false;
    return true;
}

static void check_layout(const scene *s, int width, int height)
{
    enum { MARGIN = 10, GUTTER = 10, ABOVE_PANEL = 4 };
    const uf_overlay_layout *at = &s->layout;
    int w = s->picture.width, h = s->picture.height;
    int reduction = !s->input.full && (width > 1024 || height > 1024) ? 2 : 1;
    assert_int_equal(at->reduction, reduction);
    assert_int_equal(at->panel_width, (width + reduction - 1) / reduction);
    assert_int_equal(at->panel_height, (height + reduction - 1) / reduction);
    int near_end = at->near_x + at->panel_width, bottom = at->near_y + at->panel_height;
    assert_true(at->near_x >= MARGIN && near_end + GUTTER <= at->gap_x);
    assert_true(at->gap_x + at->panel_width + MARGIN <= w && bottom + MARGIN <= h);
    assert_int_equal(at->near_y, at->gap_y);
    /* Nothing runs off the page, from panel to panel, or from the words above into a panel. */
    assert_true(is_page(s, (uf_box){0, 0, MARGIN, h}) && is_page(s, (uf_box){w - MARGIN, 0, w, h}));
    assert_true(is_page(s, (uf_box){0, 0, w, MARGIN}) && is_page(s, (uf_box){0, h - MARGIN, w, h}));
    assert_true(is_page(s, (uf_box){near_end, at->near_y, near_end + GUTTER, bottom}));
    assert_true(is_page(s, (uf_box){0, at->near_y - ABOVE_PANEL, at->gap_x + at->panel_width, at->near_y}));
    assert_true(is_page(s, (uf_box){0, bottom, at->gap_x + at->panel_width, bottom + ABOVE_PANEL}));
}

static void layout_holds_for_all_sizes(void **state)
{
    (void)state;
    for (int k = 0; k < SIZES; k++)
        for (int full = 0; full < 2; full++) {
            scene *s = new_scene(sizes[k][0], sizes[k][1]);
            s->input.full = full;
            draw(s);
            check_layout(s, sizes[k][0], sizes[k][1]);
            free_scene(s);
        }
}

static void long_words_stay_on_the_page(void **state)
{
    (void)state;
    char title[301], word[601];
    memset(title, 'W', sizeof title - 1);
    memset(word, 'm', sizeof word - 1);
    title[300] = word[600] = '\0';
    scene *s = new_scene(128, 131);
    s->input.title = title;
    s->input.settings = word;
    s->input.flags = "";
    free(s->input.contact.data);
    s->input.contact.data = NULL;
    s->input.cutoff_nm = NAN;
    s->input.pixel_size_um = NAN;
    draw(s);
    check_layout(s, 128, 131);
    free_scene(s);
}

/* The middle goes, and what differs at the end still shows. */
static void titles_keep_both_ends(void **state)
{
    (void)state;
    char title[200];
    memset(title, 'a', sizeof title);
    scene *s = new_scene(128, 128);
    s->input.title = title;
    strcpy(title + 180, "_f01_near.tif");
    draw(s);
    int above = s->layout.near_y - 30;
    size_t bytes = (size_t)s->picture.width * (size_t)above;
    uint8_t *before = memory(bytes, 1);
    memcpy(before, s->picture.data, bytes);
    strcpy(title + 180, "_f02_near.tif");
    draw(s);
    assert_memory_not_equal(before, s->picture.data, bytes);
    free(before);
    free_scene(s);
}

static void the_same_input_gives_the_same_bytes(void **state)
{
    (void)state;
    scene *s = new_scene(257, 131);
    draw(s);
    uf_indexed first = s->picture;
    draw(s);
    assert_ptr_not_equal(first.data, s->picture.data);
    assert_memory_equal(first.palette, s->picture.palette, sizeof first.palette);
    assert_memory_equal(first.data, s->picture.data, (size_t)first.width * (size_t)first.height);
    free_scene(s);
}

/* ---- overlay: outlines, numbers, spots -------------------------------------------------------------------
 */

/* Label of panel pixel (x, y); that of (cx, cy) beyond the panel. */
static int32_t shown_label(const scene *s, int x, int y, int cx, int cy)
{
    bool inside = x >= 0 && y >= 0 && x < s->layout.panel_width && y < s->layout.panel_height;
    int r = s->layout.reduction;
    return uf_labels_row(s->input.labels, (inside ? y : cy) * r)[(inside ? x : cx) * r];
}

static bool on_outline(const scene *s, int x, int y)
{
    static const int step[4][2] = {{1, 0}, {-1, 0}, {0, 1}, {0, -1}};
    int32_t label = shown_label(s, x, y, x, y);
    bool differs = false;
    for (int k = 0; k < 4; k++)
        differs = differs || shown_label(s, x + step[k][0], y + step[k][1], x, y) != label;
    return label > 0 && differs;
}

static bool is_number_ink(int ink)
{
    return ink >= UF_INK_HALO && ink < UF_INK_NUMBER + UF_FONT_LEVELS;
}

static void outlines_lie_where_the_labels_say(void **state)
{
    (void)state;
    for (int k = 0; k < SIZES; k++) {
        scene *s = new_scene(sizes[k][0], sizes[k][1]);
        bare(s);
        draw(s);
        int wrong = 0;
        for (int y = 0; y < s->layout.panel_height; y++)
            for (int x = 0; x < s->layout.panel_width; x++) {
                bool expected = on_outline(s, x, y);
                wrong += (near_ink(s, x, y) == UF_INK_OUTLINE) != expected;
                wrong += (gap_ink(s, x, y) == UF_INK_OUTLINE) != expected;
            }
        assert_int_equal(wrong, 0);
        free_scene(s);
    }
}

static void only_marks_cover_outlines(void **state)
{
    (void)state;
    scene *s = new_scene(512, 389);
    draw(s);
    int spots = 0, numbers = 0;
    for (int y = 0; y < s->layout.panel_height; y++)
        for (int x = 0; x < s->layout.panel_width; x++) {
            int near = near_ink(s, x, y), gap = gap_ink(s, x, y);
            bool near_mark = is_number_ink(near) || near == UF_INK_SPOT;
            spots += near == UF_INK_SPOT;
            numbers += is_number_ink(near);
            assert_true(near_mark || (near == UF_INK_OUTLINE) == on_outline(s, x, y));
            assert_true(is_number_ink(gap) || (gap == UF_INK_OUTLINE) == on_outline(s, x, y));
            assert_int_equal(is_number_ink(near), is_number_ink(gap));
        }
    assert_true(spots >= 3 * 12 && numbers >= CELLS * 20);
    free_scene(s);
}

static int count_number_ink(const scene *s)
{
    int count = 0;
    for (int y = 0; y < s->layout.panel_height; y++)
        for (int x = 0; x < s->layout.panel_width; x++)
            count += is_number_ink(near_ink(s, x, y));
    return count;
}

/* Cells as stripes of `stripe` pixels with all centroids in one row, so that "(3)" reaches into its
 * neighbours. */
static scene *striped_scene(int stripe)
{
    scene *s = new_scene(300, 200);
    s->input.spot_count = 0;
    for (int y = 0; y < 200; y++)
        for (int x = 0; x < 300; x++) {
            int32_t k = x / stripe + 1;
            uf_labels_row(s->input.labels, y)[x] = k <= CELLS ? k : 0;
        }
    for (int k = 0; k < CELLS; k++) {
        s->cells[k].x_px = (k + 0.5) * stripe;
        s->cells[k].y_px = 100.0;
    }
    return s;
}

static void numbers_make_way_for_each_other(void **state)
{
    (void)state;
    int ink[3];
    static const int stripe[3] = {50, 12, 3}; /* room beside each other; above each other; not for all */
    for (int k = 0; k < 3; k++) {
        scene *s = striped_scene(stripe[k]);
        draw(s);
        ink[k] = count_number_ink(s);
        free_scene(s);
    }
    assert_int_equal(ink[0], ink[1]);
    assert_true(ink[2] > 0 && ink[2] < ink[0]);
}

static void cells_without_a_place_have_no_number(void **state)
{
    (void)state;
    scene *s = new_scene(300, 200);
    for (int k = 0; k < CELLS; k++)
        s->cells[k].x_px = k % 2 ? NAN : -1e9 * k - 500.0;
    draw(s);
    assert_int_equal(count_number_ink(s), 0);
    free_scene(s);
}

/* ---- overlay: values
 * ---------------------------------------------------------------------------------------- */

/* Everything is one cell, so that the gap panel shows gaps only. */
static scene *blank_scene(int width, int height)
{
    scene *s = new_scene(width, height);
    bare(s);
    for (int y = 0; y < height; y++)
        for (int x = 0; x < width; x++) {
            uf_labels_row(s->input.labels, y)[x] = 1;
            uf_plane_row(s->input.gap_nm, y)[x] = 73.0f;
            uf_plane_row(s->input.near_adu, y)[x] = 0.0f;
            uf_mask_row(s->input.contact, y)[x] = 0;
        }
    return s;
}

static void gaps_clamp_at_both_ends(void **state)
{
    (void)state;
    static const float gap[] = {-31.7f, 0.0f, 23.85f, 50.0f, 199.0f, 201.0f, 1e6f, INFINITY, NAN};
    scene *s = blank_scene(9, 4);
    for (int x = 0; x < 9; x++)
        for (int y = 0; y < 4; y++)
            uf_plane_row(s->input.gap_nm, y)[x] = gap[x];
    uf_labels_row(s->input.labels, 0)[0] = 0;
    draw(s);
    assert_int_equal(gap_ink(s, 0, 0), UF_INK_OUTSIDE);
    for (int x = 1; x < 8; x++) { /* the ramp of a 50 nm cutoff ends at 200 nm */
        double share = fmin(1.0, fmax(0.0, (double)gap[x] / 200.0));
        assert_int_equal(gap_ink(s, x, 3), UF_INK_GAP + (int)(share * (UF_GAP_LEVELS - 1) + 0.5));
    }
    assert_int_equal(gap_ink(s, 0, 3), UF_INK_GAP);
    for (int y = 0; y < 4; y++)
        assert_true(gap_ink(s, 8, y) == UF_INK_OUTSIDE || gap_ink(s, 8, y) == UF_INK_NO_GAP);
    free_scene(s);
}

static void near_is_the_square_root_up_to_the_percentile(void **state)
{
    (void)state;
    scene *s = blank_scene(1000, 10);
    s->input.near_background_adu = 100.0;
    for (int y = 0; y < 10; y++)
        for (int x = 0; x < 1000; x++) /* 100 .. 10099, mixed: 7919 and 10000 share no factor */
            uf_plane_row(s->input.near_adu, y)[x] = 100.0f + (float)((y * 1000 + x) * 7919 % 10000);
    uf_plane_row(s->input.near_adu, 0)[0] = NAN;
    draw(s);
    assert_int_equal(near_ink(s, 0, 0), UF_INK_NEAR);
    const double white = 9970.0; /* above background; 0.4 % is the bins' width */
    for (int y = 0; y < 10; y++)
        for (int x = 1; x < 1000; x++) {
            double share = (double)((y * 1000 + x) * 7919 % 10000) / white;
            double level = (UF_NEAR_LEVELS - 1) * sqrt(fmin(share, 1.0));
            assert_true(fabs(near_ink(s, x, y) - UF_INK_NEAR - level) < 0.5 + 0.004 * level);
        }
    free_scene(s);
}

static void contact_is_tinted_and_keeps_its_grey(void **state)
{
    (void)state;
    scene *s = blank_scene(400, 2);
    for (int x = 0; x < 400; x++) {
        uf_plane_row(s->input.near_adu, 0)[x] = uf_plane_row(s->input.near_adu, 1)[x] =
            300.0f + 13.0f * (float)x;
        uf_mask_row(s->input.contact, 1)[x] = 1;
    }
    draw(s);
    for (int x = 0; x < 400; x++)
        assert_int_equal(near_ink(s, x, 1) - UF_INK_CONTACT, near_ink(s, x, 0) - UF_INK_NEAR);
    free_scene(s);
}

/* Blocks of 2 x 2, and the odd column and row at the border, each by its rule. */
static void reduction_follows_its_rules(void **state)
{
    (void)state;
    scene *s = blank_scene(1025, 3);
    float *gap[3], *near[3];
    uint8_t *contact[3];
    for (int y = 0; y < 3; y++) {
        gap[y] = uf_plane_row(s->input.gap_nm, y);
        near[y] = uf_plane_row(s->input.near_adu, y);
        contact[y] = uf_mask_row(s->input.contact, y);
    }
    gap[0][0] = 10.0f, gap[0][1] = NAN, gap[1][0] = NAN, gap[1][1] = 40.0f; /* mean of two: 25 */
    gap[0][2] = gap[0][3] = gap[1][2] = gap[1][3] = NAN;
    gap[0][4] = 10.0f, gap[0][5] = 20.0f, gap[1][4] = 60.0f, gap[1][5] = 102.0f; /* 48 */
    gap[0][1024] = 100.0f, gap[1][1024] = 140.0f;                                /* 120 */
    gap[2][1024] = 180.0f;
    contact[0][0] = 1;
    contact[0][2] = contact[1][3] = 1;
    contact[0][1024] = 1;
    contact[2][4] = 1; /* half of the lower border's block */
    contact[0][7] = contact[1][6] = 1;                  /* the other half: upper left is off */
    contact[0][9] = contact[1][8] = contact[1][9] = 1;  /* three quarters */
    contact[2][7] = 1;
    for (int x = 512; x < 1025; x++)
        near[0][x] = near[1][x] = near[2][x] = 4211.5f;
    near[0][0] = 2211.5f, near[0][1] = 211.5f, near[1][0] = 1211.5f,
    near[1][1] = 411.5f; /* 800 over background */
    draw(s);
    assert_int_equal(s->layout.panel_width, 513);
    assert_int_equal(s->layout.panel_height, 2);
    assert_int_equal(gap_ink(s, 0, 0), uf_gap_ink(25.0f, 200.0f));
    assert_true(gap_ink(s, 1, 0) == UF_INK_OUTSIDE || gap_ink(s, 1, 0) == UF_INK_NO_GAP);
    assert_int_equal(gap_ink(s, 2, 0), uf_gap_ink(48.0f, 200.0f));
    assert_int_equal(gap_ink(s, 512, 0), uf_gap_ink(120.0f, 200.0f));
    assert_int_equal(gap_ink(s, 512, 1), uf_gap_ink(180.0f, 200.0f));
    assert_true(near_ink(s, 0, 0) < UF_INK_CONTACT);
    assert_true(near_ink(s, 1, 0) >= UF_INK_CONTACT);
    assert_true(near_ink(s, 512, 0) >= UF_INK_CONTACT);
    assert_true(near_ink(s, 2, 1) >= UF_INK_CONTACT);
    assert_true(near_ink(s, 3, 0) < UF_INK_CONTACT);
    assert_true(near_ink(s, 4, 0) >= UF_INK_CONTACT);
    assert_true(near_ink(s, 3, 1) < UF_INK_CONTACT);
    double level = (UF_NEAR_LEVELS - 1) * sqrt(800.0 / 4000.0);
    assert_true(fabs(near_ink(s, 0, 0) - UF_INK_NEAR - level) < 0.8);
    free_scene(s);
}

/* ---- overlay: colour bar
 * ------------------------------------------------------------------------------------- */

/* The first column right of the gap panel that shows the ramp from end to end. */
static int find_bar(const scene *s)
{
    int x = s->layout.gap_x + s->layout.panel_width;
    while (x < s->picture.width && ink_at(s, x, s->layout.gap_y) != UF_INK_GAP + UF_GAP_LEVELS - 1)
        x++;
    assert_true(x < s->picture.width);
    return x;
}

/* Ticks between the bar's lower and upper end must stand where the bar has the colour of their value. */
static void check_bar(double cutoff_nm, double end_nm, double step_nm, int height)
{
    enum { BAR = 16, TICK_AT = 2 };
    scene *s = new_scene(300, height);
    s->input.cutoff_nm = cutoff_nm;
    draw(s);
    int x = find_bar(s), top = s->layout.gap_y, bottom = top, ticks = 0, cutoffs = 0;
    while (ink_at(s, x, bottom + 1) != UF_INK_LINE)
        bottom++;
    assert_int_equal(ink_at(s, x, bottom), UF_INK_GAP);
    for (int y = top + 1; y <= bottom; y++)
        assert_true(ink_at(s, x, y) <= ink_at(s, x, y - 1));
    for (int y = bottom; y >= top; y--) {
        int ink = ink_at(s, x + BAR + TICK_AT, y);
        if (ink == UF_INK_CUTOFF) {
            cutoffs++;
            assert_true(abs(ink_at(s, x, y) - uf_gap_ink((float)cutoff_nm, (float)end_nm)) <= 1);
            assert_true(fabs(end_nm * (bottom - y) / (bottom - top) - cutoff_nm) <=
                        0.51 * end_nm / (bottom - top));
        }
        bool tick = ink == UF_INK_LINE || (ink == UF_INK_CUTOFF && fmod(cutoff_nm, step_nm) < 1e-9);
        if (tick) {
            double value = step_nm * ticks++;
            assert_true(fabs(end_nm * (bottom - y) / (bottom - top) - value) <=
                        0.51 * end_nm / (bottom - top));
            assert_true(abs(ink_at(s, x, y) - uf_gap_ink((float)value, (float)end_nm)) <= 1);
        }
    }
    assert_int_equal(ticks, (int)(end_nm / step_nm + 1.5));
    assert_int_equal(cutoffs, isfinite(cutoff_nm));
    free_scene(s);
}

static void colour_bar_tells_the_truth(void **state)
{
    (void)state;
    for (int height = 100; height <= 900; height += 397) {
        check_bar(50.0, 200.0, 50.0, height);
        check_bar(38.5, 200.0, 50.0, height);
        check_bar(61.3, 300.0, 100.0, height);
        check_bar(2.385, 10.0, 2.0, height < 120 ? 150 : height);
        check_bar(NAN, 200.0, 50.0, height);
    }
}

/* The black bar is as long as the round length it is said to be, near a fifth of the panel. */
static void scale_bar_has_a_round_length(void **state)
{
    (void)state;
    for (int width = 128; width <= 2048; width += 213) {
        scene *s = new_scene(width, 64);
        draw(s);
        int y = s->layout.near_y + 120; /* the panels' slot is no lower than the colour bar */
        int x0 = s->layout.near_x;
        while (ink_at(s, x0, y) != UF_INK_LINE)
            y++;
        int length = 0;
        while (ink_at(s, x0 + length, y) == UF_INK_LINE)
            length++;
        double pixel_um = 0.1065 * s->layout.reduction, um = length * pixel_um;
        double share = (double)length / s->layout.panel_width, power = pow(10.0, floor(log10(um * 1.03)));
        double mantissa = um / power, half_px = 0.51 * pixel_um / power;
        assert_true(share > 0.12 && share < 0.33);
        assert_true(fabs(mantissa - 1) < half_px || fabs(mantissa - 2) < half_px ||
                    fabs(mantissa - 5) < half_px);
        free_scene(s);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(draws_nothing_outside_its_canvas),
        cmocka_unit_test(nonsense_draws_nothing),
        cmocka_unit_test(lines_are_4_connected),
        cmocka_unit_test(diamonds_are_closed_and_turned),
        cmocka_unit_test(text_is_as_wide_as_it_says),
        cmocka_unit_test(ink_stays_near_the_pen),
        cmocka_unit_test(signs_of_units_exist_and_others_are_boxes),
        cmocka_unit_test(fit_takes_whole_characters),
        cmocka_unit_test(halo_surrounds_every_stroke),
        cmocka_unit_test(ramps_are_monotone_in_lightness),
        cmocka_unit_test(gap_ramp_keeps_its_order_for_every_eye),
        cmocka_unit_test(marks_differ_from_what_they_lie_on),
        cmocka_unit_test(layout_holds_for_all_sizes),
        cmocka_unit_test(long_words_stay_on_the_page),
        cmocka_unit_test(titles_keep_both_ends),
        cmocka_unit_test(the_same_input_gives_the_same_bytes),
        cmocka_unit_test(outlines_lie_where_the_labels_say),
        cmocka_unit_test(only_marks_cover_outlines),
        cmocka_unit_test(numbers_make_way_for_each_other),
        cmocka_unit_test(cells_without_a_place_have_no_number),
        cmocka_unit_test(gaps_clamp_at_both_ends),
        cmocka_unit_test(near_is_the_square_root_up_to_the_percentile),
        cmocka_unit_test(contact_is_tinted_and_keeps_its_grey),
        cmocka_unit_test(reduction_follows_its_rules),
        cmocka_unit_test(colour_bar_tells_the_truth),
        cmocka_unit_test(scale_bar_has_a_round_length),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
