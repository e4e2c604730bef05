/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Text and numbers: a growing buffer, numbers that ignore the locale, and "did you mean". */
#ifndef UF_BASE_TEXT_H
#define UF_BASE_TEXT_H

#include <stdbool.h>
#include <stddef.h>

#include "base/status.h"

/* A growing run of bytes, always followed by a NUL. Zeroed it is empty and may be freed. A failed
 * append sets `failed` and later appends do nothing, so that a writer checks once, at the end. */
typedef struct uf_text {
    char *bytes;
    size_t length;
    size_t capacity;
    bool failed;
} uf_text;

void uf_text_free(uf_text *text);
void uf_text_bytes(uf_text *text, const void *bytes, size_t count);
void uf_text_add(uf_text *text, const char *string);
void uf_text_printf(uf_text *text, const char *format, ...) UF_PRINTF(2, 3);

/* UF_MEMORY when any append failed; `what` names the thing being written. */
UF_MUST_USE uf_status uf_text_check(const uf_text *text, const char *what, uf_error *error);

enum { UF_NUMBER_TEXT = 40 };

/* Writes `value` with at most `digits` significant digits (1 to 17), a '.' whatever the locale, no
 * trailing zeros, and an exponent only outside 1e-5 .. 1e15. NaN and infinities give an empty string.
 * `out` holds UF_NUMBER_TEXT bytes. Minus zero is written 0. */
void uf_format_number(char *out, double value, int digits);

/* Appends what uf_format_number writes. */
void uf_text_number(uf_text *text, double value, int digits);

/* Reads all of `string` (surrounding blanks allowed) as a finite decimal number with '.', whatever the
 * locale. False for anything else: hexadecimal, nan, inf, a decimal comma, trailing text, emptiness. */
bool uf_parse_number(const char *string, double *value);

/* `value` rounded to `digits` significant decimal digits. Per-run scalars go through this with 12, so
 * that the last bits of one machine's libm never reach a table. */
double uf_round_digits(double value, int digits);

/* Number of single-letter edits (insert, delete, replace, swap of neighbours) between two words. */
int uf_edit_distance(const char *a, const char *b);

/* A copy of `string` made with malloc, NULL when there is no memory. */
char *uf_copy_string(const char *string);

/* `name` relative to the folder that `beside` lies in, as a new string; an absolute name is copied. */
char *uf_path_beside(const char *beside, const char *name);

/* The part of a path after its last '/'. */
const char *uf_base_name(const char *path);

#endif
