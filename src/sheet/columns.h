/* SPDX-License-Identifier: GPL-3.0-or-later */
/* THE table of a sheet's columns: names, kinds, meanings. A new one is a line here and a line in columns.c. */
#ifndef UF_SHEET_COLUMNS_H
#define UF_SHEET_COLUMNS_H

#include "base/text.h"

typedef enum uf_sheet_column {
    UF_SHEET_NEAR,
    UF_SHEET_WIDE,
    UF_SHEET_PLATE,
    UF_SHEET_WELL,
    UF_SHEET_FIELD,
    UF_SHEET_VESSEL,
    UF_SHEET_TREATMENT,
    UF_SHEET_DOSE,
    UF_SHEET_DOSE_UNIT,
    UF_SHEET_COATING,
    UF_SHEET_REPLICATE,
    UF_SHEET_SESSION,
    UF_SHEET_INSTRUMENT,
    UF_SHEET_ROLE,
    UF_SHEET_TIME_MIN,
    UF_SHEET_ACQUIRED,
    UF_SHEET_POSITION,
    UF_SHEET_NEAR_PAGE,
    UF_SHEET_WIDE_PAGE,
    UF_SHEET_NUCLEI,
    UF_SHEET_MASK,
    UF_SHEET_EXPOSURE_NEAR_MS,
    UF_SHEET_EXPOSURE_WIDE_MS,
    UF_SHEET_COLUMNS
} uf_sheet_column;

typedef enum uf_sheet_kind {
    UF_SHEET_WORD,   /* any text */
    UF_SHEET_PATH,   /* of a file */
    UF_SHEET_NAME,   /* a well */
    UF_SHEET_AMOUNT, /* a number, perhaps with its unit */
    UF_SHEET_NUMBER, /* a number */
    UF_SHEET_PAGE,   /* a whole number from 1 */
    UF_SHEET_CHOICE, /* a role */
    UF_SHEET_TIME    /* ISO 8601 */
} uf_sheet_kind;

typedef struct uf_sheet_column_facts {
    const char *name;
    uf_sheet_kind kind;
    const char *meaning; /* one sentence for the docs */
} uf_sheet_column_facts;

extern const uf_sheet_column_facts uf_sheet_columns[UF_SHEET_COLUMNS];

/* Roles of a field. */
typedef enum uf_role {
    UF_ROLE_SAMPLE,
    UF_ROLE_CONTROL,
    UF_ROLE_POSITIVE,
    UF_ROLE_REFERENCE,
    UF_ROLE_BLANK,
    UF_ROLES
} uf_role;

extern const char *const uf_role_words[UF_ROLES];

/* Role of a word, case-blind; -1 for none. */
int uf_role_parse(const char *word);

/* Number of the column called `name`, -1 when there is none. */
int uf_sheet_column_find(const char *name);

/* The known column whose name is a letter or two away from `name`, in any case and with blanks or dashes for
 * underscores; -1 when none is. */
int uf_sheet_column_nearest(const char *name);

/* Name of the table of results that has a column called `name`, NULL when none has. The sheet's own are none. */
const char *uf_result_table_of(const char *name);

/* Appends docs/sheet-columns.md. */
void uf_sheet_columns_page(uf_text *out);

#endif
