/* SPDX-License-Identifier: GPL-3.0-or-later */
/* CSV in, against RFC 4180 (sections named) and what spreadsheets write. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "io/csv_read.h"

static uf_status parse(uf_csv_table *table, const char *text, uf_error *error)
{
    return uf_csv_parse(table, text, strlen(text), "s.csv", error);
}

static void refused(const char *text, const char *where, const char *word)
{
    uf_csv_table table;
    uf_error error;
    assert_int_equal(parse(&table, text, &error), UF_INPUT);
    assert_non_null(strstr(error.text, where));
    assert_non_null(strstr(error.text, word));
    assert_null(table.cells);
}

/* RFC 4180, section 2: rules 1, 2 (last line end optional), 5, 6 (line ends in quotes) and 7 (doubled quotes). */
static void test_rules_of_the_standard(void **state)
{
    (void)state;
    uf_csv_table table;
    assert_int_equal(parse(&table, "a,b\r\n\"x, \"\"y\"\"\",\"two\nlines\"\r\n1,\r\n,2", NULL), UF_OK);
    assert_int_equal(table.rows, 4);
    assert_int_equal(table.columns, 2);
    assert_string_equal(uf_csv_cell(&table, 1, 0), "x, \"y\"");
    assert_string_equal(uf_csv_cell(&table, 1, 1), "two\nlines");
    assert_string_equal(uf_csv_cell(&table, 2, 1), "");
    assert_string_equal(uf_csv_cell(&table, 3, 0), "");
    assert_int_equal(table.lines[1], 2);
    assert_int_equal(table.lines[2], 4); /* the quoted line end counts */
    assert_int_equal(uf_csv_column(&table, "b"), 1);
    assert_int_equal(uf_csv_column(&table, "c"), -1);
    uf_csv_free(&table);
    uf_csv_free(&table);
}

static void test_what_spreadsheets_add(void **state)
{
    (void)state;
    uf_csv_table table;
    assert_int_equal(parse(&table, "\xEF\xBB\xBFnear,wide\r\n\r\n a , b \r\n\r\n", NULL), UF_OK);
    assert_string_equal(uf_csv_cell(&table, 0, 0), "near");
    assert_int_equal(table.rows, 2);
    assert_int_equal(table.lines[1], 3); /* blank lines are skipped but counted */
    assert_string_equal(uf_csv_cell(&table, 1, 0), "a");
    uf_csv_free(&table);
}

static void test_faults_name_the_line(void **state)
{
    (void)state;
    refused("a,b\n1,2\n\n3\n", "s.csv:4", "1 fields, but the header has 2");
    refused("a,b\n1,2,3\n", "s.csv:2", "3 fields");
    refused("a,b\n1,\"2\n", "s.csv:2", "never closed");
    refused("a,b\n1,x\"y\n", "s.csv:2", "quote inside");
    refused("a;b\n1;2\n", "s.csv:1", "semicolons");
    refused("", "s.csv", "header");
    uf_csv_table table;
    uf_error error;
    assert_int_equal(uf_csv_parse(&table, "a\0b", 3, "s.csv", &error), UF_INPUT);
}

/* ---- as spreadsheets write it ------------------------------------------------------------------ */

static void loose(uf_csv_table *table, const char *text)
{
    uf_error error;
    assert_int_equal(uf_csv_parse_loose(table, text, strlen(text), "s.csv", &error), UF_OK);
}

static void separator_is(const char *text, char separator)
{
    uf_csv_table table;
    loose(&table, text);
    assert_int_equal(table.dialect.separator, separator);
    uf_csv_free(&table);
}

static void test_separators(void **state)
{
    (void)state;
    separator_is("a,b\n1,2\n", ',');
    separator_is("a;b\n1;2\n", ';');
    separator_is("a\tb\n1\t2\n", '\t');
    separator_is("well;dose\nA1;0,1\nA2;0,3\nA3;1,5\n", ';'); /* decimal commas */
    separator_is("well\tdose\nA1\t0,1\nA2\t0,3\n", '\t');
    separator_is("dose;dose 2\n0,1;0,2\n0,3;0,4\n", ';');
    separator_is("a title, with a comma\nx;1;2;3\nA;p;q;r\nB;p;q;r\n", ';');
    separator_is("a,b\n\"x;y;z;w\",2\n", ','); /* quoted */
    separator_is("treatment,1,2,3\nA,1,2,3\n", ',');
    separator_is("sep=,\na;b,c;d\n", ',');
    separator_is("\xEF\xBB\xBFsep=;\r\na,b;c,d\r\n", ';');
    separator_is("\"sep=\t\"\na,b\n", '\t');
    separator_is("one column\nonly\n", ',');
}

static void test_rows_of_any_length(void **state)
{
    (void)state;
    uf_csv_table table;
    loose(&table, "a\n1,2,3\n\n4,5\n");
    assert_int_equal(table.rows, 3);
    assert_int_equal(table.columns, 3);
    assert_int_equal(table.fields[0], 1);
    assert_string_equal(uf_csv_cell(&table, 0, 2), "");
    assert_string_equal(uf_csv_cell(&table, 1, 2), "3");
    assert_string_equal(uf_csv_cell(&table, 2, 1), "5");
    assert_int_equal(table.lines[2], 4);
    uf_csv_free(&table);
}

/* The letters of Windows-1252 and their code points, by the IANA registration of the code page. */
static void test_letters(void **state)
{
    (void)state;
    uf_csv_table table;
    loose(&table, "\xB5M,\x80,\xE9\n");
    assert_true(table.dialect.latin1);
    assert_string_equal(uf_csv_cell(&table, 0, 0), "\xC2\xB5M");
    assert_string_equal(uf_csv_cell(&table, 0, 1), "\xE2\x82\xAC");
    assert_string_equal(uf_csv_cell(&table, 0, 2), "\xC3\xA9");
    uf_csv_free(&table);
    loose(&table, "\xC2\xB5M,\xF0\x9F\x94\xAC\n");
    assert_false(table.dialect.latin1);
    uf_csv_free(&table);
    loose(&table, "\xC0\xAF,\xED\xA0\x80\n"); /* overlong and surrogate: no UTF-8 (RFC 3629) */
    assert_true(table.dialect.latin1);
    uf_csv_free(&table);
}

static void test_line_ends(void **state)
{
    (void)state;
    uf_csv_table table;
    loose(&table, "a,b\r1,2\r3,4");
    assert_int_equal(table.rows, 3);
    assert_true(table.dialect.lone_return);
    assert_int_equal(table.lines[2], 3);
    uf_csv_free(&table);
    loose(&table, "sep=;\r\na;b\r\n1;2\r\n");
    assert_false(table.dialect.lone_return);
    assert_int_equal(table.lines[0], 2); /* the line of the separator counts */
    assert_int_equal(table.lines[1], 3);
    uf_csv_free(&table);
}

static void test_no_text(void **state)
{
    static const struct {
        const char *bytes;
        size_t count;
        const char *word;
    } cases[] = {{"PK\x03\x04xxxx", 8, "workbook"}, {"\xD0\xCF\x11\xE0xx", 6, "workbook"}, {"\xFF\xFE\x61\0", 4, "UTF-16"},
                 {"\xFE\xFF\0a", 4, "UTF-16"}, {"a,\0b", 4, "zero byte"}, {"", 0, "empty"}, {"a,\"b", 4, "never closed"}};
    (void)state;
    for (size_t k = 0; k < sizeof cases / sizeof cases[0]; k++) {
        uf_csv_table table;
        uf_error error;
        assert_int_equal(uf_csv_parse_loose(&table, cases[k].bytes, cases[k].count, "s.csv", &error), UF_INPUT);
        assert_non_null(strstr(error.text, cases[k].word));
        assert_null(table.cells);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_separators),
                                       cmocka_unit_test(test_rows_of_any_length),
                                       cmocka_unit_test(test_letters),
                                       cmocka_unit_test(test_line_ends),
                                       cmocka_unit_test(test_no_text),
                                       cmocka_unit_test(test_rules_of_the_standard),
                                       cmocka_unit_test(test_what_spreadsheets_add),
                                       cmocka_unit_test(test_faults_name_the_line)};
    return cmocka_run_group_tests_name("csv in", tests, NULL, NULL);
}
