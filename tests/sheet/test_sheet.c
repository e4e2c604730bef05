/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a row of a sheet offers to whoever reads it. Expected values are counted by hand in the sheets here. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "io/csv_read.h"
#include "near.h"
#include "run/sheet_read.h"

static uf_faults take(uf_sheet *sheet, const char *text, const char *path, const char *root)
{
    uf_csv_table table;
    uf_faults faults = {0};
    assert_int_equal(uf_csv_parse_loose(&table, text, strlen(text), path, NULL), UF_OK);
    assert_int_equal(uf_sheet_take(sheet, &table, path, root, &faults, NULL), UF_OK);
    uf_csv_free(&table); /* the sheet owns all it points to */
    return faults;
}

static int faults_of(const char *text)
{
    uf_sheet sheet;
    uf_faults faults = take(&sheet, text, "s.csv", NULL);
    int count = faults.faults;
    uf_sheet_free(&sheet);
    uf_faults_free(&faults);
    return count;
}

static void test_a_row(void **state)
{
    (void)state;
    uf_sheet sheet;
    uf_faults faults = take(&sheet,
                            "well,near,wide,passage,dose,role,time_min,near_page,instrument,plate,field,exposure_near_ms\n"
                            "a1,n.tif,sub\\w.tif, 12 ,10 nM,Control,1.5,3,/i.ini,p,2,30\n",
                            "dir/s.csv", NULL);
    const uf_sheet_row *row = &sheet.rows[0];
    assert_int_equal(faults.faults, 0);
    assert_int_equal(sheet.count, 1);
    assert_int_equal(row->line, 2);
    assert_string_equal(row->field_id, "p/A01/2/1.5");
    assert_string_equal(row->text[UF_SHEET_WELL], "A01");
    assert_int_equal(row->well.row, 0);
    assert_int_equal(row->well.column, 0);
    assert_string_equal(row->near_path, "dir/n.tif");
    assert_string_equal(row->wide_path, "dir/sub/w.tif");
    assert_string_equal(row->text[UF_SHEET_WIDE], "sub/w.tif");
    assert_string_equal(row->instrument_path, "/i.ini");
    assert_null(row->mask_path);
    assert_int_equal(row->near_page, 3);
    assert_int_equal(row->wide_page, 1);
    assert_int_equal(row->role, UF_ROLE_CONTROL);
    assert_near_rel(row->dose, 10, 0);
    assert_string_equal(row->text[UF_SHEET_DOSE], "10");
    assert_string_equal(row->text[UF_SHEET_DOSE_UNIT], "nM");
    assert_true(sheet.has[UF_SHEET_DOSE_UNIT]);
    assert_near_rel(row->time_min, 1.5, 0);
    assert_near_rel(row->exposure_near_ms, 30, 0);
    assert_true(isnan(row->exposure_wide_ms));
    assert_string_equal(row->text[UF_SHEET_COATING], "");
    assert_int_equal(sheet.extra_count, 1);
    assert_string_equal(sheet.extra[0], "passage");
    assert_string_equal(row->extra[0], "12");
    uf_faults_free(&faults);
    uf_sheet_free(&sheet);
    uf_sheet_free(&sheet); /* twice is allowed */
}

static void test_field_ids(void **state)
{
    static const struct {
        const char *header, *row, *id;
    } cases[] = {
        {"near,wide", "a/n.tif,w.tif", "a/n.tif"},
        {"near,wide,near_page", "n.tif,w.tif,4", "n.tif#4"},
        {"near,wide,well", "n.tif,w.tif,B7", "B07"},
        {"near,wide,plate,well", "n.tif,w.tif,p 1,B7", "p 1/B07"},
        {"near,wide,session,well", "n.tif,w.tif,mon,B7", "mon/B07"},
        {"near,wide,session,plate,well", "n.tif,w.tif,mon,p,B7", "p/B07"},
        {"near,wide,field,session", "n.tif,w.tif,3,mon", "n.tif"},
        {"near,wide,well,vessel,field", "n.tif,w.tif,left slip,coverslip,3", "left slip/3"},
    };
    (void)state;
    for (size_t k = 0; k < sizeof cases / sizeof cases[0]; k++) {
        char text[200];
        uf_sheet sheet;
        (void)snprintf(text, sizeof text, "%s\n%s\n", cases[k].header, cases[k].row);
        uf_faults faults = take(&sheet, text, "s.csv", NULL);
        assert_int_equal(faults.faults, 0);
        assert_string_equal(sheet.rows[0].field_id, cases[k].id);
        uf_faults_free(&faults);
        uf_sheet_free(&sheet);
    }
}

static void test_paths(void **state)
{
    static const char *const cases[][3] = {
        {"s.csv", NULL, "n.tif"}, {"/s.csv", NULL, "/n.tif"}, {"d/s.csv", NULL, "d/n.tif"}, {"d/s.csv", "/r", "/r/n.tif"},
        {"d/s.csv", "r/", "r/n.tif"}, {"d/s.csv", ".", "./n.tif"}};
    (void)state;
    for (size_t k = 0; k < sizeof cases / sizeof cases[0]; k++) {
        uf_sheet sheet;
        uf_faults faults = take(&sheet, "near,wide\nn.tif,/w.tif\n", cases[k][0], cases[k][1]);
        assert_string_equal(sheet.rows[0].near_path, cases[k][2]);
        assert_string_equal(sheet.rows[0].wide_path, "/w.tif");
        uf_faults_free(&faults);
        uf_sheet_free(&sheet);
    }
}

/* One unit within a treatment, that of its first dose that is not 0; another treatment has its own. */
static void test_units(void **state)
{
    (void)state;
    uf_sheet sheet;
    uf_faults faults = take(&sheet,
                            "near,wide,well,treatment,dose,dose_unit\n"
                            "1,a,A1,thrift,0,\n2,b,A2,thrift,500,nM\n3,c,A3,thrift,2,\xC2\xB5M\n4,d,A4,sedge,2,mg/mL\n5,e,A5,thrift,,\n",
                            "s.csv", NULL);
    assert_int_equal(faults.faults, 0);
    assert_near_rel(sheet.rows[1].dose, 500, 0);
    assert_near_rel(sheet.rows[2].dose, 2000, 0);
    assert_string_equal(sheet.rows[2].text[UF_SHEET_DOSE], "2000");
    assert_string_equal(sheet.rows[2].text[UF_SHEET_DOSE_UNIT], "nM");
    assert_string_equal(sheet.rows[3].text[UF_SHEET_DOSE_UNIT], "mg/ml");
    assert_true(isnan(sheet.rows[4].dose));
    uf_faults_free(&faults);
    uf_sheet_free(&sheet);
}

/* A sheet with faults is whole, and is refused with its first fault and how many more there are. */
static void test_refusing(void **state)
{
    (void)state;
    uf_sheet sheet;
    uf_error error;
    uf_faults faults = take(&sheet, "near,wide,role\na,b,contol\nc,d,sampel\n", "s.csv", NULL);
    assert_int_equal(sheet.count, 2);
    assert_int_equal(faults.faults, 2);
    assert_int_equal(uf_sheet_refuse(&faults, &error), UF_INPUT);
    assert_non_null(strstr(error.text, "s.csv:2: role: 'contol'"));
    assert_non_null(strstr(error.text, "1 more"));
    uf_faults_free(&faults);
    assert_int_equal(uf_sheet_refuse(&faults, &error), UF_OK);
    uf_sheet_free(&sheet);
    assert_int_equal(uf_sheet_read(&sheet, "tests/no/such.csv", NULL, &faults, &error), UF_INPUT);
    assert_null(sheet.rows);
}

static void test_headers(void **state)
{
    (void)state;
    assert_int_equal(faults_of("near,wide\na,b\n"), 0);
    assert_int_equal(faults_of(" Near , WIDE ,Dose unit\na,b,\n"), 0);
    assert_int_equal(faults_of("near\na\n"), 1);               /* no wide */
    assert_int_equal(faults_of("near,wide,near\na,b,c\n"), 1);  /* twice */
    assert_int_equal(faults_of("near,wide,\na,b,c\n"), 1);      /* cells without a name */
    assert_int_equal(faults_of("near,wide,,\na,b,,\n"), 0);     /* blank columns at the end */
    assert_int_equal(faults_of("near,wide\na,b,c\n"), 2);       /* a field too many; and cells without a name */
    assert_int_equal(faults_of("near,wide,role\na,b\n"), 1);    /* a field too few */
    assert_int_equal(faults_of("near,wide\n"), 1);              /* no rows */
}

/* What is put is what is taken: a sheet written and read again is the same text. */
static void test_put_and_take(void **state)
{
    static const char text[] = "near,wide,plate,well,treatment,dose,dose_unit,role,my note\n"
                               "n 1.tif,w.tif,p,A01,\"a, \"\"b\"\"\",0.3,uM,sample,\n"
                               "n2.tif,w2.tif,p,AF48,c,,,control,\" x\"\n";
    (void)state;
    uf_sheet sheet, again;
    uf_text out = {0}, second = {0};
    uf_faults faults = take(&sheet, text, "s.csv", NULL);
    assert_int_equal(uf_sheet_put(&out, &sheet, NULL), UF_OK);
    uf_faults_free(&faults);
    faults = take(&again, out.bytes, "s.csv", NULL);
    assert_int_equal(uf_sheet_put(&second, &again, NULL), UF_OK);
    assert_string_equal(out.bytes, second.bytes);
    assert_memory_equal(out.bytes, text, 60);
    uf_text_free(&out);
    uf_text_free(&second);
    uf_faults_free(&faults);
    uf_sheet_free(&sheet);
    uf_sheet_free(&again);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_a_row),   cmocka_unit_test(test_field_ids),
                                       cmocka_unit_test(test_paths),   cmocka_unit_test(test_units),
                                       cmocka_unit_test(test_refusing), cmocka_unit_test(test_headers),
                                       cmocka_unit_test(test_put_and_take)};
    return cmocka_run_group_tests_name("sheets", tests, NULL, NULL);
}
