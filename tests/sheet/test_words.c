/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Wells, amounts, name templates and the order of words, against what is written by hand here; sources are named. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "near.h"
#include "sheet/amount.h"
#include "sheet/checks.h"
#include "sheet/sheet.h"
#include "sheet/template.h"

/* ---- wells: ANSI SLAS 4-2004 ----------------------------------------------------------------- */

static void well_is(const char *text, int row, int column, const char *name)
{
    uf_well well;
    char made[UF_WELL_NAME];
    assert_true(uf_well_parse(text, &well));
    assert_int_equal(well.row, row);
    assert_int_equal(well.column, column);
    uf_well_name(made, well);
    assert_string_equal(made, name);
}

static void test_wells(void **state)
{
    static const char *const none[] = {"", "A", "1", "A0", "A49", "AG1", "BA1", "A1B", "1A", "A-1", "A 1", "AAA1", "A0001", "A1.5", "É1"};
    uf_well well;
    (void)state;
    well_is("A1", 0, 0, "A01");
    well_is("a01", 0, 0, "A01");
    well_is(" A001 ", 0, 0, "A01");
    well_is("H12", 7, 11, "H12");     /* the last of 96 */
    well_is("P24", 15, 23, "P24");    /* of 384 */
    well_is("AF48", 31, 47, "AF48");  /* of 1536 */
    well_is("Z3", 25, 2, "Z03");
    well_is("aa3", 26, 2, "AA03");
    for (size_t k = 0; k < sizeof none / sizeof none[0]; k++)
        assert_false(uf_well_parse(none[k], &well));
}

/* Every well of the largest plate comes back from its name. */
static void test_every_well_comes_back(void **state)
{
    (void)state;
    for (int r = 0; r < 32; r++)
        for (int c = 0; c < 48; c++) {
            char name[UF_WELL_NAME];
            uf_well well;
            uf_well_name(name, (uf_well){r, c});
            assert_true(uf_well_parse(name, &well));
            assert_int_equal(well.row, r);
            assert_int_equal(well.column, c);
        }
}

static void test_vessels(void **state)
{
    static const int sizes[][3] = {{6, 2, 3}, {12, 3, 4}, {24, 4, 6}, {48, 6, 8}, {96, 8, 12}, {384, 16, 24}, {1536, 32, 48}};
    uf_vessel vessel;
    (void)state;
    for (size_t k = 0; k < sizeof sizes / sizeof sizes[0]; k++) {
        char text[16];
        (void)snprintf(text, sizeof text, "%d-well", sizes[k][0]);
        assert_true(uf_vessel_parse(text, &vessel));
        assert_int_equal(vessel.rows, sizes[k][1]);
        assert_int_equal(vessel.columns, sizes[k][2]);
        assert_int_equal(vessel.rows * vessel.columns, sizes[k][0]);
    }
    assert_true(uf_vessel_parse("Coverslip", &vessel) && vessel.wells == 0);
    assert_true(uf_vessel_parse("dish", &vessel) && vessel.wells == 0);
    assert_false(uf_vessel_parse("97", &vessel) || uf_vessel_parse("96x", &vessel) || uf_vessel_parse("", &vessel));
    assert_int_equal(uf_vessel_holding((uf_well){7, 11}).wells, 96);
    assert_int_equal(uf_vessel_holding((uf_well){8, 0}).wells, 384);
}

/* ---- amounts --------------------------------------------------------------------------------- */

static void amount_is(const char *text, double value, const char *unit)
{
    uf_amount amount;
    assert_int_equal(uf_amount_parse(text, &amount), UF_AMOUNT_GOOD);
    assert_near_rel(amount.value, value, 1e-15);
    assert_string_equal(amount.unit, unit);
}

static void test_amounts(void **state)
{
    uf_amount amount;
    (void)state;
    amount_is("10", 10, "");
    amount_is("10 uM", 10, "uM");
    amount_is("10\xC2\xB5M", 10, "uM");         /* U+00B5, the micro sign */
    amount_is("10 \xCE\xBCM", 10, "uM");        /* U+03BC, the Greek letter */
    amount_is("2.5e-3 mol/L", 0.0025, "M");
    amount_is("0,3 nM", 0.3, "nM");
    amount_is("12,50 mg/mL", 12.5, "mg/ml");
    amount_is("0.5%", 0.5, "%");
    amount_is("3 \xC2\xB5g/cm\xC2\xB2", 3, "ug/cm2"); /* superscript two */
    amount_is("0,125 uM", 0.125, "uM");         /* three decimals after a lone 0 */
    amount_is("7 sniffs", 7, "sniffs");
    assert_int_equal(uf_amount_parse("1,000", &amount), UF_AMOUNT_UNCLEAR);
    assert_int_equal(uf_amount_parse("1.000,5", &amount), UF_AMOUNT_UNCLEAR);
    assert_int_equal(uf_amount_parse("1,5,5", &amount), UF_AMOUNT_UNCLEAR);
    assert_int_equal(uf_amount_parse("1 000", &amount), UF_AMOUNT_UNCLEAR);
    assert_int_equal(uf_amount_parse("uM", &amount), UF_AMOUNT_NONE);
    assert_int_equal(uf_amount_parse("", &amount), UF_AMOUNT_NONE);
    assert_int_equal(uf_amount_parse("--3", &amount), UF_AMOUNT_NONE);
    assert_int_equal(uf_amount_parse("3 a unit that is far too long for one", &amount), UF_AMOUNT_NONE);
}

static void converts(double value, const char *from, const char *to, double expected)
{
    assert_true(uf_unit_convert(&value, from, to));
    assert_near_rel(value, expected, 1e-15);
}

/* The SI's prefixes. */
static void test_conversions(void **state)
{
    double value = 1;
    (void)state;
    converts(500, "nM", "uM", 0.5);
    converts(0.03, "uM", "nM", 30);
    converts(2, "mM", "pM", 2e9);
    converts(5, "ug/ml", "ng/ml", 5000);
    converts(1, "g/l", "ug/ul", 1);
    converts(1, "ug/cm2", "ng/mm2", 10); /* 1000 ng in 100 mm2 */
    converts(1.5, "kPa", "Pa", 1500);
    converts(7, "sniffs", "sniffs", 7);
    assert_false(uf_unit_convert(&value, "uM", "ug/ml"));
    assert_false(uf_unit_convert(&value, "%", "% v/v"));
    assert_false(uf_unit_convert(&value, "sniffs", "uM"));
    assert_near_rel(value, 1, 0);
}

/* ---- templates ------------------------------------------------------------------------------- */

static int ways(const char *template, const char *name)
{
    uf_template t;
    uf_span spans[UF_TEMPLATE_FIELDS];
    assert_int_equal(uf_template_parse(&t, template, NULL), UF_OK);
    return uf_template_match(&t, name, NULL, NULL, spans, NULL);
}

static void test_templates(void **state)
{
    (void)state;
    assert_int_equal(ways("{a}_{b}.tif", "x_y.tif"), 1);
    assert_int_equal(ways("{a}_{b}.tif", "x_y_z.tif"), 2);
    assert_int_equal(ways("{a}_{a}.tif", "xy_xy.tif"), 1); /* the same value twice */
    assert_int_equal(ways("{a}_{a}.tif", "xy_yx.tif"), 0);
    assert_int_equal(ways("{*}_{b}.tif", "_y.tif"), 1);    /* anything may be nothing */
    assert_int_equal(ways("{a}.tif", ".tif"), 0);          /* a field may not */
    assert_int_equal(ways("{a}.tif", "x/y.tif"), 0);       /* nor hold a folder */
    assert_int_equal(ways("{a}/{b}.tif", "x/y.TIF"), 1);
    assert_int_equal(ways("{a}/{b}.tif", "x/y.tiff"), 0);
    assert_int_equal(ways("IMG_{a}.tif", "img_1.tif"), 0); /* only the extension is case-blind */
    assert_int_equal(ways("{*}a{*}.tif", "aaaa.tif"), 1);  /* one reading of no field */
}

static void test_filling(void **state)
{
    static const char *const values[] = {"p1", "B02"};
    uf_template t;
    uf_text out = {0};
    (void)state;
    assert_int_equal(uf_template_parse(&t, "{plate}/{well}_{plate}.tif", NULL), UF_OK);
    assert_true(uf_template_fill(&t, values, &out));
    assert_string_equal(out.bytes, "p1/B02_p1.tif");
    assert_int_equal(uf_template_field(&t, "well"), 1);
    assert_int_equal(uf_template_parse(&t, "{plate}{*}", NULL), UF_USAGE);
    assert_int_equal(uf_template_parse(&t, "{plate}_{*}", NULL), UF_OK);
    assert_false(uf_template_fill(&t, values, &out));
    uf_text_free(&out);
}

/* Many {*} over a long name of one letter: bounded, not exponential; it simply ends. */
static void test_many_stars_end(void **state)
{
    char name[901];
    (void)state;
    memset(name, 'a', 900);
    name[900] = '\0';
    assert_int_equal(ways("{*}a{*}a{*}a{*}a{*}a{*}a{*}a{*}a{*}a{*}b", name), 0);
    assert_true(ways("{*}a{*}a{*}a{*}a{*}a{*}a{*}a{*}a{*}a{*}a", name) >= 1);
}

/* ---- order and damage -------------------------------------------------------------------------- */

static void test_natural_order(void **state)
{
    static const char *const sorted[] = {"", "A1", "A2", "A02b", "A10", "a2", "a10", "a10b", "a10b2", "b", "b1"};
    (void)state;
    for (int a = 0; a < 11; a++)
        for (int b = 0; b < 11; b++) {
            int order = uf_natural_compare(sorted[a], sorted[b]);
            assert_true((order < 0) == (a < b) && (order == 0) == (a == b));
        }
    assert_true(uf_natural_compare("7", "07") != 0); /* an order needs a last word */
}

static void test_spreadsheet_damage(void **state)
{
    static const char *const damaged[] = {"1-Sep", "Sep-01", "10-Mar-2024", "1/9/2024", "2024-09-01", "2024-09-01 00:00:00",
                                          "1.2E+05", "#REF!", "#NAME?", "######"};
    static const char *const sound[] = {"", "thrift", "t01", "4-AP", "KX-3", "sep", "sept-7", "12-15-X", "1/2", "E-64", "#3"};
    (void)state;
    for (size_t k = 0; k < sizeof damaged / sizeof damaged[0]; k++)
        assert_non_null(uf_spreadsheet_damage(damaged[k]));
    for (size_t k = 0; k < sizeof sound / sizeof sound[0]; k++)
        assert_null(uf_spreadsheet_damage(sound[k]));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_wells),          cmocka_unit_test(test_every_well_comes_back),
        cmocka_unit_test(test_vessels),        cmocka_unit_test(test_amounts),
        cmocka_unit_test(test_conversions),    cmocka_unit_test(test_templates),
        cmocka_unit_test(test_filling),        cmocka_unit_test(test_many_stars_end),
        cmocka_unit_test(test_natural_order),  cmocka_unit_test(test_spreadsheet_damage)};
    return cmocka_run_group_tests_name("words of a sheet", tests, NULL, NULL);
}
