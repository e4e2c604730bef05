/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Randomised plates: what has to hold for every seed, and that places are indeed random. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include <math.h>

#include "base/random.h"
#include "sheet/draw.h"


enum { MOST_ARMS = 200 };

typedef struct design {
    uf_arm arms[MOST_ARMS];
    int count, wells;
    uf_vessel vessel;
} design;

static void add(design *d, int treatment, double dose, uf_role role, int wells)
{
    d->arms[d->count++] = (uf_arm){"t", "", dose, "", role, wells, treatment};
    d->wells += wells;
}

/* Any experiment that fits: some treatments, some with doses, controls in at least four wells. */
static design random_design(uf_random *random)
{
    static const char *const vessels[] = {"24", "48", "96", "384", "1536"};
    design d = {.count = 0};
    assert_true(uf_vessel_parse(vessels[uf_random_whole(random, 0, 4)], &d.vessel));
    int room = d.vessel.wells, treatment = 0;
    add(&d, treatment++, (double)NAN, UF_ROLE_CONTROL, uf_random_whole(random, 4, room / 5 > 4 ? room / 5 : 4));
    if (room > 24)
        add(&d, treatment++, (double)NAN, UF_ROLE_POSITIVE, uf_random_whole(random, 1, 4));
    int wells = uf_random_whole(random, 2, 5), most = uf_random_whole(random, 2, 40);
    for (int k = 0; k < most; k++, treatment++) {
        int doses = uf_random_whole(random, 1, 8);
        if (d.wells + doses * wells > room || d.count + doses > MOST_ARMS)
            break;
        for (int i = 0; i < doses; i++)
            add(&d, treatment, doses > 1 ? i + 1 : (double)NAN, UF_ROLE_SAMPLE, wells);
    }
    return d;
}

static void count_arm(const uf_drawing *g, int arm, int *wells, int *rows, int *columns)
{
    bool row[UF_MOST_ROWS] = {false}, column[UF_MOST_COLUMNS] = {false};
    *wells = *rows = *columns = 0;
    for (int r = 0; r < g->vessel.rows; r++)
        for (int c = 0; c < g->vessel.columns; c++)
            if (g->arm[r][c] == arm) {
                ++*wells;
                *rows += !row[r];
                *columns += !column[c];
                row[r] = column[c] = true;
            }
}

/* Each arm has its wells; those of one arm are never in one row or one column only; every quarter has a control; each block
 * of a complete design holds each sample. */
static void check_plate(const design *d, const uf_drawing *g)
{
    for (int k = 0; k < d->count; k++) {
        int wells, rows, columns;
        count_arm(g, k, &wells, &rows, &columns);
        assert_int_equal(wells, d->arms[k].wells);
        assert_true(wells < 2 || columns >= 2);
        assert_true(wells < 2 || rows >= 2);
    }
    assert_int_equal(uf_quarters_without(g, d->arms, UF_ROLE_CONTROL), 0);
    for (int k = 0; k < d->count; k++)
        for (int b = 0; b < g->blocks; b++) {
            int inside = 0;
            for (int r = 0; r < g->vessel.rows; r++)
                for (int c = 0; c < g->vessel.columns; c++)
                    inside += g->arm[r][c] == k && g->block[r][c] == b;
            assert_true(inside >= d->arms[k].wells / g->blocks);
            assert_true(inside <= (d->arms[k].wells + g->blocks - 1) / g->blocks);
        }
}

static void test_thousand_plates(void **state)
{
    (void)state;
    uf_random random;
    uf_random_start(&random, 20300506, 0);
    for (int k = 0; k < 1000; k++) {
        design d = random_design(&random);
        uf_drawing g;
        uf_edge_use edge = k % 2 ? UF_EDGE_USE : UF_EDGE_AUTO;
        uf_error error;
        assert_int_equal(uf_draw_plate(d.arms, d.count, d.vessel, edge, (uint64_t)k, k % 3, &g, &error), UF_OK);
        check_plate(&d, &g);
    }
}

/* A plate full to the brim: 60 inside wells and 36 at the edge are shared out in proportion, to a well either way. */
static void test_edges_are_shared_out(void **state)
{
    (void)state;
    design d = {.count = 0};
    uf_vessel_parse("96", &d.vessel);
    for (int k = 0; k < 12; k++)
        add(&d, k, (double)NAN, k ? UF_ROLE_SAMPLE : UF_ROLE_CONTROL, 8);
    for (uint64_t seed = 0; seed < 200; seed++) {
        uf_drawing g;
        int edge[12] = {0};
        assert_int_equal(uf_draw_plate(d.arms, d.count, d.vessel, UF_EDGE_AUTO, seed, 0, &g, NULL), UF_OK);
        assert_true(g.edge_used);
        for (int r = 0; r < 8; r++)
            for (int c = 0; c < 12; c++)
                edge[g.arm[r][c]] += uf_well_at_edge(g.vessel, (uf_well){r, c});
        for (int k = 0; k < 12; k++)
            assert_in_range(edge[k], 2, 4); /* 8 x 36 / 96 = 3 */
    }
}

static void test_edges_are_left_out(void **state)
{
    (void)state;
    design d = {.count = 0};
    uf_vessel_parse("96", &d.vessel);
    add(&d, 0, (double)NAN, UF_ROLE_CONTROL, 10);
    add(&d, 1, (double)NAN, UF_ROLE_SAMPLE, 50);
    uf_drawing g;
    uf_error error;
    assert_int_equal(uf_draw_plate(d.arms, d.count, d.vessel, UF_EDGE_LEAVE, 5, 0, &g, &error), UF_OK);
    for (int r = 0; r < 8; r++)
        for (int c = 0; c < 12; c++)
            assert_int_equal(g.arm[r][c] < 0, uf_well_at_edge(g.vessel, (uf_well){r, c}));
    d.arms[1].wells = 51;
    assert_int_equal(uf_draw_plate(d.arms, d.count, d.vessel, UF_EDGE_LEAVE, 5, 0, &g, &error), UF_USAGE);
    assert_non_null(strstr(error.text, "61 wells"));
    assert_non_null(strstr(error.text, "60 inside"));
    assert_int_equal(uf_draw_plate(d.arms, d.count, d.vessel, UF_EDGE_AUTO, 5, 0, &g, &error), UF_OK);
    assert_true(g.edge_used);
}

/* The same seed draws the same plate, another seed or plate another. */
static void test_seeds(void **state)
{
    (void)state;
    design d = {.count = 0};
    uf_vessel_parse("96", &d.vessel);
    for (int k = 0; k < 12; k++)
        add(&d, k, (double)NAN, k ? UF_ROLE_SAMPLE : UF_ROLE_CONTROL, 4);
    uf_drawing one, again, other;
    assert_int_equal(uf_draw_plate(d.arms, d.count, d.vessel, UF_EDGE_AUTO, 7, 0, &one, NULL), UF_OK);
    assert_int_equal(uf_draw_plate(d.arms, d.count, d.vessel, UF_EDGE_AUTO, 7, 0, &again, NULL), UF_OK);
    assert_memory_equal(one.arm, again.arm, sizeof one.arm);
    assert_int_equal(uf_draw_plate(d.arms, d.count, d.vessel, UF_EDGE_AUTO, 8, 0, &other, NULL), UF_OK);
    assert_memory_not_equal(one.arm, other.arm, sizeof one.arm);
    assert_int_equal(uf_draw_plate(d.arms, d.count, d.vessel, UF_EDGE_AUTO, 7, 1, &other, NULL), UF_OK);
    assert_memory_not_equal(one.arm, other.arm, sizeof one.arm);
}

/* Places are random: over many seeds a treatment lies in each inside well about equally often. Chi-square of 60 wells against
 * equal shares; its mean is at most 59 (less, since wells of one plate exclude each other), its 1e-6 quantile 123 (scipy,
 * chi2.isf(1e-6, 59) = 122.9). */
static void test_every_well_is_as_likely(void **state)
{
    enum { PLATES = 1200, WELLS = 5 };
    (void)state;
    design d = {.count = 0};
    int times[UF_MOST_ROWS][UF_MOST_COLUMNS] = {{0}};
    uf_vessel_parse("96", &d.vessel);
    for (int k = 0; k < 12; k++)
        add(&d, k, (double)NAN, k ? UF_ROLE_SAMPLE : UF_ROLE_CONTROL, WELLS);
    for (uint64_t seed = 0; seed < PLATES; seed++) {
        uf_drawing g;
        assert_int_equal(uf_draw_plate(d.arms, d.count, d.vessel, UF_EDGE_LEAVE, seed, 0, &g, NULL), UF_OK);
        for (int r = 1; r < 7; r++)
            for (int c = 1; c < 11; c++)
                times[r][c] += g.arm[r][c] == 3;
    }
    double expected = PLATES * WELLS / 60.0, chi_square = 0;
    for (int r = 1; r < 7; r++)
        for (int c = 1; c < 11; c++)
            chi_square += (times[r][c] - expected) * (times[r][c] - expected) / expected;
    assert_true(chi_square < 123);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_thousand_plates), cmocka_unit_test(test_edges_are_shared_out),
        cmocka_unit_test(test_edges_are_left_out), cmocka_unit_test(test_seeds),
        cmocka_unit_test(test_every_well_is_as_likely)};
    return cmocka_run_group_tests_name("drawn plates", tests, NULL, NULL);
}
