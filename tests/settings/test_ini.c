/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The table of settings and the INI reader: every entry through its own table, and every fault once. What is right
 * is the documented behaviour (docs/settings.md). */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "near.h"
#include "settings/settings.h"

static uf_settings *fresh(void)
{
    uf_settings *settings;
    assert_int_equal(uf_settings_new(&settings, NULL), UF_OK);
    return settings;
}

static uf_status parse(uf_settings *settings, const char *text, uf_settings_kind kind, uf_error *error)
{
    return uf_settings_parse(settings, text, strlen(text), "/bench/day1.ini", kind, error);
}

static uf_status parse_instrument(const char *text, uf_error *error)
{
    uf_settings *settings = fresh();
    uf_status status = parse(settings, text, UF_INSTRUMENT_FILE, error);
    uf_settings_free(&settings);
    return status;
}

static void refused(const char *text, const char *where, const char *word)
{
    uf_error error;
    assert_int_equal(parse_instrument(text, &error), UF_INPUT);
    if (strncmp(error.text, where, strlen(where)) != 0 || !strstr(error.text, word)) {
        (void)printf("'%s' should start with '%s' and hold '%s'\n", error.text, where, word);
        fail();
    }
}

/* ---- the table ---------------------------------------------------------------------------- */

static void test_table_is_sound(void **state)
{
    (void)state;
    for (int k = 0; k < uf_setting_count; k++) {
        const uf_setting *a = &uf_setting_table[k];
        assert_true(a->help[strlen(a->help) - 1] == '.');
        assert_true(a->offset < sizeof(struct uf_settings));
        if (a->kind == UF_SETTING_REAL)
            assert_true(a->least < a->most && (isnan(a->initial) || (a->initial >= a->least && a->initial <= a->most)));
        for (int j = 0; j < k; j++)
            assert_true(strcmp(a->section, uf_setting_table[j].section) || strcmp(a->key, uf_setting_table[j].key));
    }
}

static void set_and_read(uf_settings *settings, int k, const char *value, const char *expected)
{
    const uf_setting *entry = &uf_setting_table[k];
    uf_error error;
    uf_text text = {0};
    assert_int_equal(uf_settings_set(settings, entry->section, entry->key, value, &error), UF_OK);
    uf_setting_value(&text, settings, k);
    assert_string_equal(text.bytes, expected);
    uf_text_free(&text);
}

static void check_real(uf_settings *settings, int k)
{
    const uf_setting *entry = &uf_setting_table[k];
    char text[UF_NUMBER_TEXT];
    uf_error error;
    const double ends[] = {entry->least, entry->most};
    for (int j = 0; j < 2; j++) {
        uf_format_number(text, ends[j], 15);
        set_and_read(settings, k, text, text);
        uf_format_number(text, ends[j] + (j ? 1 : -1) * (1 + fabs(ends[j])), 15);
        assert_int_equal(uf_settings_set(settings, entry->section, entry->key, text, &error), UF_INPUT);
        assert_non_null(strstr(error.text, "out of range"));
    }
}

static void check_choices(uf_settings *settings, int k)
{
    const uf_setting *entry = &uf_setting_table[k];
    char words[200];
    uf_error error;
    (void)snprintf(words, sizeof words, "%s", entry->choices);
    for (char *word = strtok(words, "|"); word; word = strtok(NULL, "|")) {
        if (*word != '!') {
            set_and_read(settings, k, word, word);
            continue;
        }
        assert_int_equal(uf_settings_set(settings, entry->section, entry->key, word + 1, &error), UF_INPUT);
        assert_non_null(strstr(error.text, "not in this version"));
    }
    assert_int_equal(uf_settings_set(settings, entry->section, entry->key, "purple", &error), UF_INPUT);
}

static void test_every_setting_can_be_set(void **state)
{
    (void)state;
    uf_settings *settings = fresh();
    uf_error error;
    for (int k = 0; k < uf_setting_count; k++) {
        const uf_setting *entry = &uf_setting_table[k];
        if (entry->kind == UF_SETTING_REAL)
            check_real(settings, k);
        else if (entry->kind == UF_SETTING_CHOICE)
            check_choices(settings, k);
        else if (entry->kind == UF_SETTING_PATH)
            set_and_read(settings, k, "/flats/a.tif", "/flats/a.tif");
        else if (entry->kind == UF_SETTING_WORD)
            set_and_read(settings, k, "5a01", "5a01");
        else if (entry->kind == UF_SETTING_REALS)
            set_and_read(settings, k, "69 ,71.5,\t73", "69, 71.5, 73");
        else {
            assert_int_equal(uf_settings_set(settings, entry->section, entry->key, "1", &error), UF_INPUT);
            assert_non_null(strstr(error.text, "not in this version"));
        }
    }
    uf_settings_free(&settings);
    uf_settings_free(&settings);
}

/* ---- INI text ------------------------------------------------------------------------------ */

static void test_text_as_people_write_it(void **state)
{
    (void)state;
    uf_settings *settings = fresh();
    uf_error error;
    const char text[] = "\xEF\xBB\xBF# bench 2\r\n\r\n[light]\r\n  wavelength_nm=488.5   ; blue\r\n[interface]\n"
                        "\tsubstrate_n = 1.518\n[near.flat]\nfile = flats/near #1.tif\n[pixel]\nsize_um = 1.1e-1";
    assert_int_equal(parse(settings, text, UF_INSTRUMENT_FILE, &error), UF_OK);
    assert_near_abs(settings->light.wavelength_nm, 488.5, 0);
    assert_near_abs(settings->interface.substrate_n, 1.518, 0);
    assert_near_abs(settings->pixel.size_um, 0.11, 1e-17);
    assert_string_equal(settings->flat[UF_NEAR].file, "/bench/flats/near"); /* a comment starts after a blank */
    assert_true(isnan(settings->interface.medium_n));
    assert_near_abs(settings->interface.cell_n, 1.37, 0);
    uf_settings_free(&settings);
}

static void test_faults_name_line_and_mend(void **state)
{
    (void)state;
    refused("[light]\nwavelenght_nm = 488\n", "/bench/day1.ini:2: ", "nearest is wavelength_nm");
    refused("[lihgt]\n", "/bench/day1.ini:1: ", "nearest is [light]");
    refused("[light]\nsize_um = 0.1\n", "/bench/day1.ini:2: ", "size_um in [pixel]");
    refused("\n[contact]\n", "/bench/day1.ini:2: ", "belongs into an assay file");
    refused("wavelength_nm = 488\n", "/bench/day1.ini:1: ", "before any [section]");
    refused("[light]\nwavelength_nm = 488\n\nwavelength_nm = 489\n", "/bench/day1.ini:4: ", "first in line 2");
    refused("[interface]\nangle_deg = 70\ndepth_nm = 90\n", "/bench/day1.ini:3: ", "contradicts angle_deg in line 2");
    refused("[light]\nwavelength_nm = 488,5\n", "/bench/day1.ini:2: ", "decimal point");
    refused("[light]\nwavelength_nm = 0x1e8\n", "/bench/day1.ini:2: ", "not a number");
    refused("[light]\nwavelength_nm =\n", "/bench/day1.ini:2: ", "not a number");
    refused("[near.flat]\nfile =\n", "/bench/day1.ini:2: ", "empty");
    refused("[light]\nblue light\n", "/bench/day1.ini:2: ", "neither");
    refused("[light\n", "/bench/day1.ini:1: ", "no section");
    refused("[light] x\n", "/bench/day1.ini:1: ", "no section");
    refused("[reference]\nfrom = well\n", "/bench/day1.ini:2: ", "wells or pooled or cell");
    refused("[interface]\nmedium_n = 1.33\nmedium = water\n", "/bench/day1.ini:3: ", "contradicts medium_n in line 2");
    refused("[series]\nangles_deg = 69, 71x\n", "/bench/day1.ini:2: ", "number 2 of the list");
    refused("[series]\nangles_deg = 69,, 71\n", "/bench/day1.ini:2: ", "number 2 of the list");
    refused("[series]\nangles_deg = 69, 71,\n", "/bench/day1.ini:2: ", "number 3 of the list");
    refused("[series]\nangles_deg = 69 71\n", "/bench/day1.ini:2: ", "not a number");
    refused("[series]\nangles_deg = 69, 91\n", "/bench/day1.ini:2: ", "out of range");
    refused("[series]\npower = 1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1,1\n", "/bench/day1.ini:2: ",
            "more than 32");
}

static void test_bytes_that_are_no_text(void **state)
{
    (void)state;
    uf_settings *settings = fresh();
    uf_error error;
    assert_int_equal(uf_settings_parse(settings, "[li\0ght]\n", 9, "x.ini", UF_INSTRUMENT_FILE, &error), UF_INPUT);
    assert_non_null(strstr(error.text, "zero byte"));
    char *line = malloc(9000);
    memset(line, 'a', 9000);
    assert_int_equal(uf_settings_parse(settings, line, 9000, "x.ini", UF_INSTRUMENT_FILE, &error), UF_INPUT);
    assert_non_null(strstr(error.text, "longer"));
    free(line);
    uf_settings_free(&settings);
}

static void test_later_files_override(void **state)
{
    (void)state;
    uf_settings *settings = fresh();
    uf_error error;
    assert_int_equal(parse(settings, "[interface]\nangle_deg = 70\nmedium_n = 1.34\n", UF_INSTRUMENT_FILE, &error), UF_OK);
    assert_int_equal(parse(settings, "[interface]\ndepth_nm = 91\n", UF_INSTRUMENT_FILE, &error), UF_OK);
    assert_true(isnan(settings->interface.angle_deg));
    assert_near_abs(settings->interface.depth_nm, 91, 0);
    assert_near_abs(settings->interface.medium_n, 1.34, 0);
    uf_settings_free(&settings);
}

/* Twenty thousand seeded accidents to a good file: an answer each time, never a crash (the harness runs this under
 * the address sanitizer too). */
static void test_fuzz(void **state)
{
    (void)state;
    static const char good[] = "[light]\nwavelength_nm = 488\npolarization = s\n[interface]\nsubstrate_n = 1.518\n"
                               "medium_n = 1.337\nangle_deg = 70 # deg\n[near.flat]\nfile = a.tif\n[reference]\nratio = 1.5\n";
    char text[2 * sizeof good];
    int fine = 0, bad = 0;
    srand(7);
    for (int round = 0; round < 20000; round++) {
        size_t length = sizeof good - 1;
        memcpy(text, good, length);
        for (int k = rand() % 4; k >= 0; k--) {
            size_t at = (size_t)rand() % length;
            if (rand() % 3 == 0)
                length = at + 1;
            else if (rand() % 2)
                text[at] = (char)(rand() % 256);
            else
                text[at] = "[]=\n#;.\r"[rand() % 8];
        }
        uf_settings *settings = fresh();
        uf_error error;
        uf_status status = uf_settings_parse(settings, text, length, "fuzz.ini", UF_INSTRUMENT_FILE, &error);
        assert_true(status == UF_OK || status == UF_INPUT);
        fine += status == UF_OK;
        bad += status == UF_INPUT;
        uf_settings_free(&settings);
    }
    assert_true(fine > 100 && bad > 1000);
}

static void test_what_measuring_needs(void **state)
{
    (void)state;
    uf_settings *settings = fresh();
    uf_error error;
    static const char *const steps[][2] = {{"[light]\nwavelength_nm = 488\n", "wavelength_nm"},
                                           {"[interface]\nsubstrate_n = 1.518\n", "substrate_n"},
                                           {"[interface]\nmedium_n = 1.337\n", "medium_n"},
                                           {"[reference]\nratio = 1.5\n", "ratio"},
                                           {"[interface]\nna_effective = 1.43\n", "angle"}};
    for (int k = 0; k < 5; k++) {
        assert_int_equal(uf_settings_check(settings, &error), UF_INPUT);
        assert_non_null(strstr(error.text, steps[k][1]));
        assert_int_equal(parse(settings, steps[k][0], UF_INSTRUMENT_FILE, &error), UF_OK);
    }
    assert_int_equal(uf_settings_check(settings, &error), UF_OK);
    assert_int_equal(parse(settings, "[contact]\nfocal_nm = 60\n", UF_ASSAY_FILE, &error), UF_OK);
    assert_int_equal(uf_settings_check(settings, &error), UF_INPUT);
    uf_settings_free(&settings);
}

/* A name takes back an index that an earlier file gave, and the other way round; so says the page of settings. */
static void test_name_and_number_exclude_each_other(void **state)
{
    (void)state;
    uf_settings *settings = fresh();
    assert_int_equal(settings->interface.medium, UF_SETTING_NOT_GIVEN);
    assert_int_equal(parse(settings, "[interface]\nmedium_n = 1.335\n", UF_INSTRUMENT_FILE, NULL), UF_OK);
    assert_int_equal(parse(settings, "[interface]\nmedium = pbs\n", UF_INSTRUMENT_FILE, NULL), UF_OK);
    assert_int_equal(settings->interface.medium, UF_PBS);
    assert_true(isnan(settings->interface.medium_n));
    assert_int_equal(parse(settings, "[interface]\nmedium_n = 1.335\n", UF_INSTRUMENT_FILE, NULL), UF_OK);
    assert_int_equal(settings->interface.medium, UF_SETTING_NOT_GIVEN);
    assert_near_abs(settings->interface.medium_n, 1.335, 0);
    uf_settings_free(&settings);
}

/* A series stands for angle and reference; its lists must fit each other. */
static void test_what_a_series_needs(void **state)
{
    (void)state;
    uf_settings *settings = fresh();
    uf_error error;
    static const char good[] = "[light]\nwavelength_nm = 488\n[interface]\nsubstrate_n = 1.518\nmedium_n = 1.337\n"
                               "[series]\nangles_deg = 69, 73\n";
    assert_int_equal(parse(settings, good, UF_INSTRUMENT_FILE, &error), UF_OK);
    assert_int_equal(uf_settings_check(settings, &error), UF_OK);
    assert_int_equal(parse(settings, "[series]\npower = 1, 2, 3\n", UF_INSTRUMENT_FILE, &error), UF_OK);
    assert_int_equal(uf_settings_check(settings, &error), UF_INPUT);
    assert_non_null(strstr(error.text, "power has 3 numbers and angles_deg 2"));
    assert_int_equal(parse(settings, "[series]\nangles_deg = 69, 69, 69\n", UF_INSTRUMENT_FILE, &error), UF_OK);
    assert_int_equal(uf_settings_check(settings, &error), UF_INPUT);
    assert_non_null(strstr(error.text, "two different angles"));
    uf_settings_free(&settings);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_table_is_sound), cmocka_unit_test(test_every_setting_can_be_set),
        cmocka_unit_test(test_name_and_number_exclude_each_other),
        cmocka_unit_test(test_text_as_people_write_it), cmocka_unit_test(test_faults_name_line_and_mend),
        cmocka_unit_test(test_bytes_that_are_no_text), cmocka_unit_test(test_later_files_override),
        cmocka_unit_test(test_fuzz), cmocka_unit_test(test_what_measuring_needs),
        cmocka_unit_test(test_what_a_series_needs)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
