/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Times of a sheet. Expected: datetime of Python 3 (proleptic Gregorian, UTC). */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "near.h"
#include "sheet/time.h"

static void test_known_times(void **state)
{
    (void)state;
    static const struct {
        const char *text;
        double seconds;
    } cases[] = {{"1970-01-01T00:00", 0},
                 {"2000-03-01T00:00Z", 951868800},
                 {"2030-05-06T14:30:00", 1904308200},
                 {"1999-12-31 23:59:59", 946684799},
                 {"2024-02-29T12:00:00.25", 1709208000.25},
                 {"1969-12-31T00:00", -86400},
                 {"2100-03-01T00:00", 4107542400},
                 {"2030-05-06T16:30:00+02:00", 1904308200},
                 {"2030-05-06T07:00:00-0730", 1904308200}};
    for (size_t k = 0; k < sizeof cases / sizeof *cases; k++)
        assert_near_abs(uf_time_seconds(cases[k].text), cases[k].seconds, 1e-6);
}

static void test_what_is_none(void **state)
{
    (void)state;
    static const char *const texts[] = {"", "yesterday", "2030-05-06", "06.05.2030 14:30", "2030-13-06T14:30",
                                        "2030-05-06T14:30:00+2", "2030-05-06T14:30 UTC"};
    for (size_t k = 0; k < sizeof texts / sizeof *texts; k++)
        assert_true(isnan(uf_time_seconds(texts[k])));
    assert_true(isnan(uf_time_seconds(NULL)));
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_known_times), cmocka_unit_test(test_what_is_none)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
