/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Rows survive being packed, to the last bit; cut or spoilt bytes are noticed. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "near.h"
#include "record/pack.h"

static uf_cell a_cell(void)
{
    uf_cell cell = {.cell = 7, .x_px = 12.25, .edge = 1, .edge_weight = 1.0 / 3, .used = -0, .used_reason = "edge",
                    .gap_median_nm = -17.123456789012345, .gap_p95_nm = (double)NAN, .gap_kind = UF_GAP_RELATIVE,
                    .flags = 1u << UF_FLAG_EDGE | 1u << UF_FLAG_MOVED};
    cell.gap_histogram[0] = 3;
    cell.gap_histogram[UF_GAP_BINS - 1] = 4000000000u;
    return cell;
}

static void text_of(const uf_cell *cell, uf_text *out)
{
    for (int k = 0; k < uf_table_cells.count; k++) {
        uf_column_value(out, &uf_table_cells.columns[k], cell);
        uf_text_add(out, ",");
    }
}

static void test_a_cell_comes_back(void **state)
{
    (void)state;
    uf_cell cell = a_cell(), back = {0};
    uf_arena arena = {0};
    uf_text packed = {0}, before = {0}, after = {0};
    uf_pack_cell(&packed, &cell);
    uf_packed in = {packed.bytes, packed.bytes + packed.length, &arena, 0};
    uf_unpack_cell(&in, &back);
    assert_false(in.broken);
    assert_ptr_equal(in.at, in.end);
    text_of(&cell, &before);
    text_of(&back, &after);
    assert_string_equal(before.bytes, after.bytes);
    assert_memory_equal(&cell.gap_median_nm, &back.gap_median_nm, sizeof(double));
    assert_memory_equal(cell.gap_histogram, back.gap_histogram, sizeof cell.gap_histogram);
    assert_true(isnan(back.gap_p95_nm));
    uf_text_free(&packed);
    uf_text_free(&before);
    uf_text_free(&after);
    uf_arena_free(&arena);
}

static void test_every_cut_is_noticed(void **state)
{
    (void)state;
    uf_cell cell = a_cell(), back;
    uf_arena arena = {0};
    uf_text packed = {0};
    uf_pack_cell(&packed, &cell);
    for (size_t length = 0; length < packed.length; length++) {
        uf_packed in = {packed.bytes, packed.bytes + length, &arena, 0};
        uf_unpack_cell(&in, &back);
        assert_true(in.broken);
    }
    memset(packed.bytes, 0xff, packed.length); /* lengths and bins out of any range */
    uf_packed in = {packed.bytes, packed.bytes + packed.length, &arena, 0};
    uf_unpack_cell(&in, &back);
    assert_true(in.broken);
    uf_text_free(&packed);
    uf_arena_free(&arena);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_a_cell_comes_back),
                                       cmocka_unit_test(test_every_cut_is_noticed)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
