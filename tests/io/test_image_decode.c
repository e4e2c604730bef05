/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Pictures written and read back: what comes out is what went in, and nothing cut, spoilt or too large comes out at all. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "io/image_decode.h"
#include "io/image_encode.h"

enum { WIDTH = 37, HEIGHT = 23, COLOURS = 211 };

static void make(uf_indexed *picture, uint8_t *data)
{
    *picture = (uf_indexed){.data = data, .width = WIDTH, .height = HEIGHT, .colours = COLOURS};
    for (int k = 0; k < WIDTH * HEIGHT; k++)
        data[k] = (uint8_t)(k * 7919 % COLOURS);
    for (int k = 0; k < COLOURS; k++)
        for (int c = 0; c < 3; c++)
            picture->palette[k][c] = (uint8_t)(k * (c + 3) % 256);
}

static void test_round_trip(void **state)
{
    (void)state;
    uint8_t data[WIDTH * HEIGHT];
    uf_indexed from, to;
    uf_text png = {0};
    uf_work work = {0};
    make(&from, data);
    assert_int_equal(uf_encode_indexed_png(&png, &from, NULL), UF_OK);
    assert_int_equal(uf_decode_indexed_png(&work, &png, 64, &to, NULL), UF_OK);
    assert_int_equal(to.width, WIDTH);
    assert_int_equal(to.height, HEIGHT);
    assert_int_equal(to.colours, COLOURS);
    assert_memory_equal(to.data, data, sizeof data);
    assert_memory_equal(to.palette, from.palette, COLOURS * 3);
    uf_text_free(&png);
    uf_arena_free(&work.arena);
}

static void test_cut_anywhere(void **state)
{
    (void)state;
    uint8_t data[WIDTH * HEIGHT];
    uf_indexed from, to;
    uf_text png = {0};
    make(&from, data);
    assert_int_equal(uf_encode_indexed_png(&png, &from, NULL), UF_OK);
    for (size_t length = 0; length < png.length; length++) {
        uf_work work = {0};
        uf_text part = png;
        part.length = length;
        assert_int_equal(uf_decode_indexed_png(&work, &part, 64, &to, NULL), UF_INPUT);
        uf_arena_free(&work.arena);
    }
    uf_text_free(&png);
}

static void test_spoilt_or_too_large(void **state)
{
    (void)state;
    uint8_t data[WIDTH * HEIGHT];
    uf_indexed from, to;
    uf_text png = {0};
    uf_work work = {0};
    make(&from, data);
    assert_int_equal(uf_encode_indexed_png(&png, &from, NULL), UF_OK);
    assert_int_equal(uf_decode_indexed_png(&work, &png, WIDTH - 1, &to, NULL), UF_INPUT);
    png.bytes[png.length / 2] ^= 0x10; /* in the compressed data: checksums notice */
    assert_int_equal(uf_decode_indexed_png(&work, &png, 64, &to, NULL), UF_INPUT);
    uf_text_free(&png);
    uf_arena_free(&work.arena);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_round_trip), cmocka_unit_test(test_cut_anywhere),
                                       cmocka_unit_test(test_spoilt_or_too_large)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
