/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Numbers without the locale, memory, threads, words. */
#include <locale.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "base/arena.h"
#include "base/text.h"
#include "base/work.h"
#include "near.h"

static double any_double(void)
{
    uint64_t bits = 0;
    for (int k = 0; k < 8; k++)
        bits = bits << 8 | (uint64_t)(rand() & 255);
    double value;
    memcpy(&value, &bits, sizeof value);
    return value;
}

/* 17 digits name every double: out and back again is the same bits (IEEE 754, Goldberg 1991). */
static void test_numbers_survive(void **state)
{
    (void)state;
    srand(1);
    for (int round = 0; round < 100000; round++) {
        double value = any_double(), back;
        char text[UF_NUMBER_TEXT];
        if (!isfinite(value) || fabs(value) < 1e-290 || fabs(value) > 1e290)
            continue;
        uf_format_number(text, value, 17);
        assert_true(uf_parse_number(text, &back));
        assert_true(memcmp(&value, &back, sizeof value) == 0);
        assert_true(strtod(text, NULL) == value); /* and the C library reads the same */
    }
}

static void formats_as(double value, int digits, const char *expected)
{
    char text[UF_NUMBER_TEXT];
    uf_format_number(text, value, digits);
    assert_string_equal(text, expected);
}

static void test_how_numbers_look(void **state)
{
    (void)state;
    formats_as(0, 6, "0");
    formats_as(-0.0, 6, "0");
    formats_as(1, 6, "1");
    formats_as(-2.385, 6, "-2.385");
    formats_as(1234567, 6, "1234570");
    formats_as(0.000123456789, 6, "0.000123457");
    formats_as(9.9999999, 6, "10");
    formats_as(1e-7, 6, "1e-7");
    formats_as(-1.5e21, 6, "-1.5e21");
    formats_as(100000, 3, "100000");
    formats_as((double)NAN, 6, "");
    formats_as((double)INFINITY, 6, "");
}

static void test_what_is_no_number(void **state)
{
    (void)state;
    static const char *const words[] = {"", " ", "nan", "inf", "0x10", "1,5", "1.5.2", "1 2", "1e", "e5", "--1", "1e999", ".",
                                        "+", "1e5x", "one"};
    double value;
    for (size_t k = 0; k < sizeof words / sizeof words[0]; k++)
        assert_false(uf_parse_number(words[k], &value));
    assert_true(uf_parse_number("  +1.50e-2\t", &value));
    assert_near_abs(value, 0.015, 0);
    assert_true(uf_parse_number(".5", &value) && value == 0.5);
    assert_true(uf_parse_number("5.", &value) && value == 5);
}

/* In a locale with a decimal comma nothing changes; skipped where the machine has none. */
static void test_decimal_comma_does_not_matter(void **state)
{
    (void)state;
    static const char *const names[] = {"de_DE.UTF-8", "de_DE.utf8", "fr_FR.UTF-8", "de_DE"};
    for (size_t k = 0; k < sizeof names / sizeof names[0]; k++)
        if (setlocale(LC_ALL, names[k])) {
            double value;
            formats_as(2.385, 6, "2.385");
            assert_true(uf_parse_number("2.385", &value) && value == 2.385);
            (void)setlocale(LC_ALL, "C");
            return;
        }
    skip();
}

static void test_rounding(void **state)
{
    (void)state;
    assert_true(uf_round_digits(78.10619175312345678, 12) == 78.1061917531);
    assert_true(uf_round_digits(-1e300 / 3, 3) == -3.33e299);
    assert_true(isnan(uf_round_digits((double)NAN, 12)));
}

/* Levenshtein's classic pairs, and a swap of neighbours as one edit (Damerau 1964). */
static void test_edit_distance(void **state)
{
    (void)state;
    assert_int_equal(uf_edit_distance("kitten", "sitting"), 3);
    assert_int_equal(uf_edit_distance("flaw", "lawn"), 2);
    assert_int_equal(uf_edit_distance("wavelenght_nm", "wavelength_nm"), 1);
    assert_int_equal(uf_edit_distance("", "abc"), 3);
    assert_int_equal(uf_edit_distance("same", "same"), 0);
}

static void test_paths(void **state)
{
    (void)state;
    char *path = uf_path_beside("/a/b/c.ini", "d/e.tif");
    assert_string_equal(path, "/a/b/d/e.tif");
    free(path);
    path = uf_path_beside("c.ini", "e.tif");
    assert_string_equal(path, "e.tif");
    free(path);
    path = uf_path_beside("/a/c.ini", "/e.tif");
    assert_string_equal(path, "/e.tif");
    free(path);
    assert_string_equal(uf_base_name("/a/b.tif"), "b.tif");
    assert_string_equal(uf_base_name("b.tif"), "b.tif");
}

static void test_errors_never_overflow(void **state)
{
    (void)state;
    uf_error error;
    char *word = malloc(5000);
    memset(word, 'x', 4999);
    word[4999] = '\0';
    assert_int_equal(uf_fail(&error, UF_INPUT, "%s", word), UF_INPUT);
    assert_true(strlen(error.text) == sizeof error.text - 1);
    assert_int_equal(uf_fail_in(&error, UF_INPUT, word), UF_INPUT);
    assert_true(strlen(error.text) < sizeof error.text);
    assert_int_equal(uf_fail(NULL, UF_OUTPUT, "nobody listens"), UF_OUTPUT);
    free(word);
}

static void test_arena(void **state)
{
    (void)state;
    uf_arena arena = {0};
    unsigned char *first = uf_arena_take(&arena, 100);
    assert_true((uintptr_t)first % 64 == 0);
    memset(first, 1, 100);
    uf_arena_mark mark = uf_arena_now(&arena);
    for (int round = 0; round < 3; round++) {
        unsigned char *a = uf_arena_take(&arena, (size_t)50 << 20), *b = uf_arena_take(&arena, (size_t)50 << 20);
        assert_non_null(a);
        assert_non_null(b);
        assert_true(a + ((size_t)50 << 20) <= b || b + ((size_t)50 << 20) <= a);
        a[0] = b[0] = 2;
        assert_true(first[0] == 1 && first[99] == 1);
        uf_arena_back(&arena, mark);
    }
    assert_non_null(uf_arena_take(&arena, 0));
    assert_null(uf_arena_take(&arena, SIZE_MAX - 10));
    uf_arena_free(&arena);
    uf_arena_free(&arena);
}

typedef struct tally {
    int done[1000];
    int hands;
} tally;

static void count_task(void *context, int hand, int index)
{
    tally *t = context;
    if (hand < 0 || hand >= t->hands)
        abort();
    t->done[index]++;
}

static void test_pool_does_every_task_once(void **state)
{
    (void)state;
    static const int threads[] = {1, 2, 7}, counts[] = {0, 1, 2, 1000};
    for (int j = 0; j < 3; j++) {
        uf_pool *pool;
        assert_int_equal(uf_pool_new(&pool, threads[j], NULL), UF_OK);
        for (int round = 0; round < 200; round++) {
            tally t = {.hands = threads[j]};
            int count = counts[round % 4];
            uf_pool_run(pool, count, count_task, &t);
            for (int k = 0; k < 1000; k++)
                assert_int_equal(t.done[k], k < count);
        }
        uf_pool_free(&pool);
        uf_pool_free(&pool);
        assert_null(pool);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_numbers_survive), cmocka_unit_test(test_how_numbers_look),
        cmocka_unit_test(test_what_is_no_number), cmocka_unit_test(test_decimal_comma_does_not_matter),
        cmocka_unit_test(test_rounding), cmocka_unit_test(test_edit_distance), cmocka_unit_test(test_paths),
        cmocka_unit_test(test_errors_never_overflow), cmocka_unit_test(test_arena),
        cmocka_unit_test(test_pool_does_every_task_once)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
