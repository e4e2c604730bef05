/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Name templates: '{plate}_{well}_{channel}.tif'. A field in braces stands for one or more characters, {*} for any
 * number, neither for a '/'; all else stands for itself, the letters after the last '.' in either case. A field that
 * occurs twice has the same value twice.
 */
#ifndef UF_SHEET_TEMPLATE_H
#define UF_SHEET_TEMPLATE_H

#include "base/text.h"

enum { UF_TEMPLATE_PARTS = 32, UF_TEMPLATE_FIELDS = 16, UF_TEMPLATE_NAME = 1024 };

typedef enum uf_part_kind { UF_PART_LITERAL, UF_PART_FIELD, UF_PART_ANYTHING } uf_part_kind;

typedef struct uf_template_part {
    uf_part_kind kind;
    const char *text; /* of a literal, in the template's own text */
    size_t length;
    size_t blind_from; /* letters of a literal from here on in either case */
    int field;         /* of a field: its number */
} uf_template_part;

typedef struct uf_template {
    uf_template_part parts[UF_TEMPLATE_PARTS];
    int part_count;
    char fields[UF_TEMPLATE_FIELDS][32]; /* names, in the order of their first occurrence */
    int field_count;
    bool repeats; /* a field occurs twice */
    int slashes;  /* folders in it */
} uf_template;

/* Where the value of a field lies in a name. */
typedef struct uf_span {
    size_t at, length;
} uf_span;

/* Whether `length` bytes at `value` can be field number `field`: what tells a well from a word. */
typedef bool uf_field_fits(void *context, int field, const char *value, size_t length);

/* Takes a template apart; `text` must outlive it. UF_USAGE: a brace that does not close, two fields side by side. */
UF_MUST_USE uf_status uf_template_parse(uf_template *t, const char *text, uf_error *error);

/* Number of a field, -1 when there is none of that name. */
int uf_template_field(const uf_template *t, const char *name);

/* In how many ways (0, 1, or 2 for more) a name can be read. spans[0 .. field_count-1] get the first of them, and
 * other[] (may be NULL) the second. A name of more than UF_TEMPLATE_NAME bytes cannot. */
int uf_template_match(const uf_template *t, const char *name, uf_field_fits *fits, void *context, uf_span *spans,
                      uf_span *other);

/* Appends the name that the values make; false when the template holds {*}, which nobody can fill in. */
bool uf_template_fill(const uf_template *t, const char *const *values, uf_text *out);

#endif
