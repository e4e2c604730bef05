/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Amounts as people write them: "10 uM", "0,3", "5 ug/mL", with either sign for micro. */
#ifndef UF_SHEET_AMOUNT_H
#define UF_SHEET_AMOUNT_H

#include <stdbool.h>

#include "base/text.h"

enum { UF_UNIT_TEXT = 24 };

typedef struct uf_amount {
    double value;
    char unit[UF_UNIT_TEXT]; /* as uf_unit_plain writes it; empty when none was given */
    bool comma;              /* it had a decimal comma */
} uf_amount;

typedef enum uf_amount_kind {
    UF_AMOUNT_GOOD,
    UF_AMOUNT_UNCLEAR, /* "1,000": a thousand, or one with three decimals? */
    UF_AMOUNT_NONE     /* no number at its start, or a unit that is too long */
} uf_amount_kind;

/* Reads all of `text`. */
uf_amount_kind uf_amount_parse(const char *text, uf_amount *amount);

/* The unit as it is compared and written: "µM" and "umol/l" are "uM", "mg/mL" is "mg/ml"; one that is not known stays
 * but for its micro sign and outer blanks. False when it is too long. */
bool uf_unit_plain(char plain[UF_UNIT_TEXT], const char *unit);

/* Whether the unit is one that this program can convert. */
bool uf_unit_known(const char *plain);

/* Turns a value from one plain unit into another. False when they measure different things, or one is not known and
 * they differ. The result is rounded to 12 digits. */
bool uf_unit_convert(double *value, const char *from, const char *to);

#endif
