/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The reference assumed from each cell itself, by its definition: the ratio that 1 % of the cell's inner pixels exceed. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "blank.h"
#include "gap/own_reference.h"
#include "near.h"

enum { SIDE = 200 };

typedef struct field {
    uf_work work;
    uf_cell_map cells;
    uf_plane near, dye;
    uf_plan plan;
} field;

/* Three cells side by side; cell k's ratios are k times 0, 1/n .. (n - 1)/n in a scrambled order. Cell 3 is dark. */
static void make(field *f)
{
    *f = (field){.plan = {.psf_sigma_um = 0.1, .pixel_size_um = 0.1, .reference_gap_nm = 15}};
    uf_decay_exponential(&f->plan.decay, 78);
    f->cells.labels = blank(&f->work, SIDE, SIDE);
    f->cells.labels.count = 3;
    uf_plane *planes[] = {&f->near, &f->dye, &f->cells.distance_px};
    for (int k = 0; k < 3; k++)
        assert_int_equal(uf_plane_take(&f->work, SIDE, SIDE, planes[k], NULL), UF_OK);
    for (int y = 0; y < SIDE; y++)
        for (int x = 0; x < SIDE; x++) {
            int k = x < 60 ? 1 : x < 120 ? 2 : x < 180 ? 3 : 0, n = (x % 60 * SIDE + y) * 7919 % (60 * SIDE);
            uf_labels_row(f->cells.labels, y)[x] = k;
            uf_plane_row(f->cells.distance_px, y)[x] = 9;
            uf_plane_row(f->dye, y)[x] = 2.5f;
            uf_plane_row(f->near, y)[x] = k == 3 ? -1.0f : 2.5f * (float)k * (float)n / (60.0f * SIDE);
        }
}

static void test_each_cell_has_its_own(void **state)
{
    (void)state;
    field f;
    float factor[4];
    make(&f);
    assert_int_equal(uf_own_reference(&f.work, &f.plan, f.near, f.dye, &f.cells, factor, NULL), UF_OK);
    /* at gap 0 the ratio is exp(15 / 78) times that at 15 nm; the field's is the median of the two */
    double to_contact = exp(15.0 / 78), first = 0.99 * to_contact, second = 2 * first;
    assert_near_rel(f.plan.reference_ratio, (first + second) / 2, 1e-3);
    assert_near_rel((double)factor[1] * f.plan.reference_ratio, first, 1e-3);
    assert_near_rel((double)factor[2] * f.plan.reference_ratio, second, 1e-3);
    assert_near_abs((double)factor[3], 1, 0); /* no signal: left alone */
    assert_near_abs((double)factor[0], 1, 0);
    uf_arena_free(&f.work.arena);
}

/* The rim, where blur mixes cell and outside, does not count, unless there is nothing else. */
static void test_rims_do_not_count(void **state)
{
    (void)state;
    field f;
    float factor[4];
    make(&f);
    for (int y = 0; y < SIDE; y++)
        for (int x = 0; x < 20; x++) {
            uf_plane_row(f.cells.distance_px, y)[x] = 1;
            uf_plane_row(f.near, y)[x] = 1e6f;
        }
    assert_int_equal(uf_own_reference(&f.work, &f.plan, f.near, f.dye, &f.cells, factor, NULL), UF_OK);
    assert_true((double)factor[1] * f.plan.reference_ratio < 1.3);
    uf_arena_free(&f.work.arena);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_each_cell_has_its_own),
                                       cmocka_unit_test(test_rims_do_not_count)};
    return cmocka_run_group_tests_name("own reference", tests, NULL, NULL);
}
