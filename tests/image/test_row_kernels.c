/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Every row kernel against a slow, obvious twin written here, for both builds of the kernels, and the two builds
 * against each other bit for bit. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "image/kernels.h"
#include "near.h"
#include "optics/decay.h"

enum { LONGEST = 521, REACH = 40 };
static const int lengths[] = {1, 2, 3, 7, 31, 32, 33, 64, 97, 256, 257, 521};
enum { LENGTHS = sizeof lengths / sizeof lengths[0] };

static float irregular(float scale)
{
    return scale * ((float)rand() / (float)RAND_MAX - 0.31f);
}

static void fill(float *values, int n, float scale)
{
    for (int k = 0; k < n; k++)
        values[k] = irregular(scale);
}

static const uf_kernels *tables[2];
static int table_count;

static int set_up(void **state)
{
    (void)state;
    srand(2385);
    tables[table_count++] = &uf_kernels_baseline;
#if defined(__x86_64__)
    if (__builtin_cpu_supports("avx2") && __builtin_cpu_supports("fma") && __builtin_cpu_supports("bmi2"))
        tables[table_count++] = &uf_kernels_v3;
#endif
    return 0;
}

static void test_convolutions(void **state)
{
    (void)state;
    float in[LONGEST + 2 * REACH], rows_data[2 * REACH + 1][LONGEST], taps[REACH + 1], out[2][LONGEST];
    const float *rows[2 * REACH + 1];
    fill(in, LONGEST + 2 * REACH, 100);
    for (int k = 0; k < 2 * REACH + 1; k++) {
        fill(rows_data[k], LONGEST, 100);
        rows[k] = rows_data[k];
    }
    fill(taps, REACH + 1, 1);
    for (int j = 0; j < LENGTHS; j++)
        for (int radius = 0; radius <= REACH; radius += 13) {
            int n = lengths[j];
            for (int t = 0; t < table_count; t++) {
                tables[t]->convolve_row(out[t], in + REACH, taps, radius, n);
                for (int x = 0; x < n; x++) {
                    double sum = (double)taps[0] * (double)in[REACH + x];
                    for (int k = 1; k <= radius; k++)
                        sum += (double)taps[k] * ((double)in[REACH + x - k] + (double)in[REACH + x + k]);
                    assert_near_abs((double)out[t][x], sum, 2e-2);
                }
            }
            assert_memory_equal(out[0], out[table_count - 1], (size_t)n * sizeof(float));
            for (int t = 0; t < table_count; t++) {
                tables[t]->convolve_column(out[t], rows, taps, radius, n);
                for (int x = 0; x < n; x++) {
                    double sum = (double)taps[0] * (double)rows[radius][x];
                    for (int k = 1; k <= radius; k++)
                        sum += (double)taps[k] * ((double)rows[radius - k][x] + (double)rows[radius + k][x]);
                    assert_near_abs((double)out[t][x], sum, 2e-2);
                }
            }
            assert_memory_equal(out[0], out[table_count - 1], (size_t)n * sizeof(float));
        }
}

static void test_six(void **state)
{
    (void)state;
    float in[LONGEST + 6], data[6][LONGEST], taps[6], out[2][LONGEST];
    const float *rows[6];
    fill(in, LONGEST + 6, 50);
    fill(taps, 6, 1);
    for (int k = 0; k < 6; k++) {
        fill(data[k], LONGEST, 50);
        rows[k] = data[k];
    }
    for (int t = 0; t < table_count; t++) {
        tables[t]->six_taps(out[t], in, taps, LONGEST);
        for (int x = 0; x < LONGEST; x++) {
            double sum = 0;
            for (int k = 0; k < 6; k++)
                sum += (double)taps[k] * (double)in[x + k];
            assert_near_abs((double)out[t][x], sum, 1e-3);
        }
    }
    assert_memory_equal(out[0], out[table_count - 1], sizeof out[0]);
    for (int t = 0; t < table_count; t++) {
        tables[t]->six_rows(out[t], rows, taps, LONGEST);
        for (int x = 0; x < LONGEST; x++) {
            double sum = 0;
            for (int k = 0; k < 6; k++)
                sum += (double)taps[k] * (double)rows[k][x];
            assert_near_abs((double)out[t][x], sum, 1e-3);
        }
    }
    assert_memory_equal(out[0], out[table_count - 1], sizeof out[0]);
}

/* Against libm's log in double and the closed form of the exponential. */
static void test_gap(void **state)
{
    (void)state;
    static uf_decay decay;
    float near[LONGEST], wide[LONGEST], out[2][LONGEST];
    double depth = 78.1, ln_reference = log(1.531);
    uf_decay_exponential(&decay, depth);
    for (int round = 0; round < 50; round++) {
        for (int x = 0; x < LONGEST; x++) {
            near[x] = (float)exp(-6 + 15.0 * rand() / (double)RAND_MAX);
            wide[x] = (float)exp(9.0 * rand() / (double)RAND_MAX);
        }
        near[3] = 0;
        near[4] = -2.385f;
        wide[5] = 0;
        wide[6] = NAN;
        near[7] = NAN;
        for (int t = 0; t < table_count; t++) {
            tables[t]->gap(out[t], near, wide, (float)ln_reference, &decay.lookup, LONGEST);
            for (int x = 0; x < LONGEST; x++) {
                if (x >= 3 && x <= 7) {
                    assert_true(isnan(out[t][x]));
                    continue;
                }
                double truth = -depth * (log((double)near[x] / (double)wide[x]) - ln_reference);
                assert_near_abs((double)out[t][x], truth, 2e-4 + 3e-6 * fabs(truth)); /* a few ulp of a float */
            }
        }
        assert_memory_equal(out[0], out[table_count - 1], sizeof out[0]);
    }
}

static void test_sides_and_cut(void **state)
{
    (void)state;
    float here[LONGEST], before[LONGEST], after[LONGEST], best[2][LONGEST], closed[2][LONGEST], level[LONGEST];
    uint8_t on[2][LONGEST];
    fill(here, LONGEST, 100);
    fill(before, LONGEST, 100);
    fill(after, LONGEST, 100);
    fill(level, LONGEST, 100);
    before[5] = after[9] = -1e6f;
    before[11] = after[11] = -1e6f;
    for (int t = 0; t < table_count; t++) {
        for (int x = 0; x < LONGEST; x++)
            best[t][x] = closed[t][x] = 3.5f;
        tables[t]->two_sided(best[t], here, before, after, LONGEST);
        tables[t]->closed_sides(closed[t], here, before, after, -5e5f, LONGEST);
        tables[t]->above(on[t], here, level, LONGEST);
        for (int x = 0; x < LONGEST; x++) {
            float side = fminf(before[x], after[x]) - here[x];
            assert_true(best[t][x] == fmaxf(3.5f, side));
            float b = before[x] > -5e5f ? before[x] : 1e6f, a = after[x] > -5e5f ? after[x] : 1e6f;
            assert_true(closed[t][x] == fmaxf(3.5f, fminf(a, b) - here[x]));
            assert_int_equal(on[t][x], here[x] > level[x]);
        }
    }
    assert_memory_equal(best[0], best[table_count - 1], sizeof best[0]);
    assert_memory_equal(closed[0], closed[table_count - 1], sizeof closed[0]);
    assert_memory_equal(on[0], on[table_count - 1], sizeof on[0]);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_convolutions), cmocka_unit_test(test_six),
                                       cmocka_unit_test(test_gap), cmocka_unit_test(test_sides_and_cut)};
    return cmocka_run_group_tests(tests, set_up, NULL);
}
