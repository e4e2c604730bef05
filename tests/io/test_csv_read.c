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

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_rules_of_the_standard),
                                       cmocka_unit_test(test_what_spreadsheets_add),
                                       cmocka_unit_test(test_faults_name_the_line)};
    return cmocka_run_group_tests_name("csv in", tests, NULL, NULL);
}
