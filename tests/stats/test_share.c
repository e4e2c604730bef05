/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Shares and the bootstrap against published intervals and closed forms. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "fit/distribution.h"
#include "near.h"
#include "stats/bootstrap.h"
#include "stats/share.h"

static void check(uf_share s, double share, double low, double high)
{
    assert_near_abs(s.share, share, 1e-12);
    assert_near_abs(s.low, low, 6e-7);
    assert_near_abs(s.high, high, 6e-7);
}

/* The examples of Newcombe 1998, Stat. Med. 17:857, which prints four decimals; here six, computed. */
static void test_newcombe(void **state)
{
    (void)state;
    check(uf_wilson(81, 263, 0.95), 81.0 / 263, 0.255289, 0.366210);
    check(uf_clopper_pearson(81, 263, 0.95), 81.0 / 263, 0.252737, 0.367622);
    check(uf_wilson(15, 148, 0.95), 15.0 / 148, 0.062386, 0.160487);
    check(uf_clopper_pearson(15, 148, 0.95), 15.0 / 148, 0.057844, 0.161650);
    check(uf_wilson(0, 20, 0.95), 0, 0, 0.161125);
    check(uf_clopper_pearson(0, 20, 0.95), 0, 0, 0.168433);
    check(uf_wilson(1, 29, 0.95), 1.0 / 29, 0.006113, 0.171755);
    check(uf_clopper_pearson(1, 29, 0.95), 1.0 / 29, 0.000873, 0.177644);
    assert_true(uf_wilson(20, 20, 0.95).high == 1 && uf_clopper_pearson(20, 20, 0.95).high == 1);
    assert_true(isnan(uf_wilson(0, 0, 0.95).share) && isnan(uf_clopper_pearson(0, 0, 0.95).low));
}

/* Closed form: Clopper and Pearson for none of n ends at 1 - (alpha/2)^(1/n). */
static void test_rule_for_none(void **state)
{
    (void)state;
    assert_near_rel(uf_clopper_pearson(0, 37, 0.9).high, 1 - pow(0.05, 1 / 37.0), 1e-10);
}

/* Rao and Scott 1992's variance written out: wells of like size, so that the design effect is the variance between
 * shares over p (1 - p) / m. */
static void test_wells(void **state)
{
    (void)state;
    const double hits[] = {12, 30, 21, 0, 27}, trials[] = {40, 40, 40, 0, 40};
    uf_wells_share s = uf_share_of_wells(hits, trials, 5, 0.95);
    double p = 90 / 160.0, variance = 0;
    for (int k = 0; k < 5; k++)
        if (trials[k] > 0)
            variance += pow(hits[k] / 40 - p, 2) / 3;
    assert_near_rel(s.share.share, p, 1e-14);
    assert_near_rel(s.design_effect, variance / (p * (1 - p) / 40), 1e-12);
    assert_near_rel(s.effective_n, 160 / s.design_effect, 1e-12);
    uf_share plain = uf_wilson_by(p * s.effective_n, s.effective_n, uf_t_factor(0.95, 3));
    assert_near_rel(s.share.low, plain.low, 1e-12);
    assert_true(s.share.high - s.share.low > 2 * (uf_wilson(90, 160, 0.95).high - uf_wilson(90, 160, 0.95).low));
    assert_int_equal(s.notes, 0);
}

static void test_wells_that_tell_little(void **state)
{
    (void)state;
    const double none[] = {0, 0, 0}, even[] = {10, 20, 30}, trials[] = {20, 40, 60};
    uf_wells_share s = uf_share_of_wells(none, trials, 3, 0.95);
    assert_true(s.notes == UF_NOTE_DISPERSION_UNKNOWN && s.design_effect == 1 && s.share.low == 0);
    s = uf_share_of_wells(even, trials, 3, 0.95);
    assert_true(s.design_effect == 1 && s.notes == 0 && s.share.low == uf_wilson(60, 120, 0.95).low);
    s = uf_share_of_wells(even, trials, 2, 0.95);
    assert_true(s.notes == UF_NOTE_TOO_FEW && isnan(s.share.low) && s.share.share == 0.5);
    s = uf_share_of_wells(even, trials, 0, 0.95);
    assert_true(isnan(s.share.share));
}

/* ---- bootstrap ---------------------------------------------------------------------------------- */

enum { REPLICATES = 16, WELLS = 3 };

static void make_arm(uf_boot_well *wells, double level, double step)
{
    for (int k = 0; k < REPLICATES * WELLS; k++) {
        int r = k / WELLS;
        wells[k] = (uf_boot_well){level + (r * 7 % REPLICATES) * step + 0.01 * (k % WELLS), r};
    }
}

/* The mean of n drawn values has the variance of the values with divisor n, over n (Efron and Tibshirani 1993, ch.
 * 5): with both arms that gives the interval's width, to the normal approximation and 4000 draws. */
static void test_bootstrap_width(void **state)
{
    (void)state;
    uf_boot_well a[REPLICATES * WELLS], b[REPLICATES * WELLS];
    uf_bootstrap r, again;
    make_arm(a, 12, 0.5);
    make_arm(b, 10, 0.25);
    uf_boot_arm treated = {a, REPLICATES * WELLS, REPLICATES}, control = {b, REPLICATES * WELLS, REPLICATES};
    assert_int_equal(uf_bootstrap_effect(treated, control, 0, UF_SCALE_DIFFERENCE, 0.95, 4000, 11, &r, NULL), UF_OK);
    double variance = (REPLICATES * REPLICATES - 1) / 12.0 * (0.25 + 0.0625) / REPLICATES;
    assert_near_rel(r.effect, 2 + 7.5 * 0.25, 1e-12);
    assert_near_rel(r.high - r.low, 2 * 1.96 * sqrt(variance), 0.06);
    assert_int_equal(uf_bootstrap_effect(treated, control, 0, UF_SCALE_DIFFERENCE, 0.95, 4000, 11, &again, NULL),
                     UF_OK);
    assert_true(again.low == r.low && again.high == r.high && r.draws == 4000);
}

/* Blocks take the common part of both arms away: what is left is the spread of the differences, 0.25 steps. */
static void test_bootstrap_of_blocks(void **state)
{
    (void)state;
    uf_boot_well a[REPLICATES * WELLS], b[REPLICATES * WELLS];
    uf_bootstrap r;
    make_arm(a, 12, 0.5);
    make_arm(b, 10, 0.25);
    uf_boot_arm treated = {a, REPLICATES * WELLS, REPLICATES}, control = {b, REPLICATES * WELLS, REPLICATES};
    assert_int_equal(uf_bootstrap_effect(treated, control, 1, UF_SCALE_DIFFERENCE, 0.95, 4000, 11, &r, NULL), UF_OK);
    double variance = (REPLICATES * REPLICATES - 1) / 12.0 * 0.0625 / REPLICATES;
    assert_near_rel(r.high - r.low, 2 * 1.96 * sqrt(variance), 0.06);
    treated.count = 9 * WELLS; /* nine blocks hold both */
    assert_int_equal(uf_bootstrap_effect(treated, control, 1, UF_SCALE_RATIO, 0.95, 400, 11, &r, NULL), UF_OK);
    assert_true(r.notes == UF_NOTE_TOO_FEW && isnan(r.low) && r.effect > 1);
    b[2].value = -100;
    treated.count = control.count;
    assert_int_equal(uf_bootstrap_effect(treated, control, 0, UF_SCALE_RATIO, 0.95, 400, 11, &r, NULL), UF_OK);
    assert_true(r.notes == UF_NOTE_NOT_POSITIVE && isnan(r.low) && isnan(r.effect));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_newcombe),        cmocka_unit_test(test_rule_for_none),
        cmocka_unit_test(test_wells),           cmocka_unit_test(test_wells_that_tell_little),
        cmocka_unit_test(test_bootstrap_width), cmocka_unit_test(test_bootstrap_of_blocks)};
    return cmocka_run_group_tests_name("shares and bootstrap", tests, NULL, NULL);
}
