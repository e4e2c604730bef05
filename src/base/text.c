/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/text.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

void uf_text_free(uf_text *text)
{
    free(text->bytes);
    *text = (uf_text){0};
}

static bool make_room(uf_text *text, size_t more)
{
    if (text->failed)
        return false;
    size_t needed = text->length + more + 1;
    if (needed <= text->capacity)
        return true;
    size_t capacity = text->capacity ? text->capacity : 256;
    while (capacity < needed)
        capacity *= 2;
    char *bytes = realloc(text->bytes, capacity);
    if (!bytes) {
        text->failed = true;
        return false;
    }
    text->bytes = bytes;
    text->capacity = capacity;
    return true;
}

void uf_text_bytes(uf_text *text, const void *bytes, size_t count)
{
    if (!make_room(text, count))
        return;
    if (count)
        memcpy(text->bytes + text->length, bytes, count);
    text->length += count;
    text->bytes[text->length] = '\0';
}

void uf_text_add(uf_text *text, const char *string)
{
    uf_text_bytes(text, string, strlen(string));
}

void uf_text_printf(uf_text *text, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    va_list again;
    va_copy(again, arguments);
    int count = vsnprintf(NULL, 0, format, arguments);
    va_end(arguments);
    if (count < 0)
        text->failed = true;
    else if (make_room(text, (size_t)count)) {
        (void)vsnprintf(text->bytes + text->length, (size_t)count + 1, format, again);
        text->length += (size_t)count;
    }
    va_end(again);
}

uf_status uf_text_check(const uf_text *text, const char *what, uf_error *error)
{
    return text->failed ? uf_fail_memory(error, what) : UF_OK;
}

/*
 * A number without the locale: "%.*e" gives sign, digits and exponent; whatever stands between the first
 * and the second digit is the locale's decimal point and is skipped. The layout is then ours.
 */
typedef struct decimal {
    bool negative;
    char digits[20];
    int count;    /* significant digits, trailing zeros dropped */
    int exponent; /* of the first digit */
} decimal;

static decimal split_decimal(double value, int digits)
{
    char raw[64];
    (void)snprintf(raw, sizeof raw, "%.*e", digits - 1, value);
    decimal d = {0};
    const char *p = raw;
    if (*p == '-') {
        d.negative = true;
        p++;
    }
    for (; *p && *p != 'e'; p++)
        if (*p >= '0' && *p <= '9' && d.count < 18)
            d.digits[d.count++] = *p;
    d.exponent = *p == 'e' ? (int)strtol(p + 1, NULL, 10) : 0;
    while (d.count > 1 && d.digits[d.count - 1] == '0')
        d.count--;
    return d;
}

static char *put_plain(char *out, const decimal *d)
{
    if (d->exponent < 0) {
        *out++ = '0';
        *out++ = '.';
        for (int k = d->exponent + 1; k < 0; k++)
            *out++ = '0';
        for (int k = 0; k < d->count; k++)
            *out++ = d->digits[k];
        return out;
    }
    for (int k = 0; k < d->count || k <= d->exponent; k++) {
        if (k == d->exponent + 1)
            *out++ = '.';
        *out++ = k < d->count ? d->digits[k] : '0';
    }
    return out;
}

static char *put_scientific(char *out, const decimal *d)
{
    *out++ = d->digits[0];
    if (d->count > 1)
        *out++ = '.';
    for (int k = 1; k < d->count; k++)
        *out++ = d->digits[k];
    return out + sprintf(out, "e%d", d->exponent);
}

void uf_format_number(char *out, double value, int digits)
{
    if (!isfinite(value)) {
        *out = '\0';
        return;
    }
    digits = digits < 1 ? 1 : digits > 17 ? 17 : digits;
    decimal d = split_decimal(value, digits);
    if (d.negative && !(d.count == 1 && d.digits[0] == '0'))
        *out++ = '-';
    bool plain = d.exponent >= -5 && d.exponent < 15;
    out = plain ? put_plain(out, &d) : put_scientific(out, &d);
    *out = '\0';
}

void uf_text_number(uf_text *text, double value, int digits)
{
    char number[UF_NUMBER_TEXT];
    uf_format_number(number, value, digits);
    uf_text_add(text, number);
}

/*
 * Reading: the text is checked letter by letter, then its digits are handed to strtod as an integer with
 * an exponent ("12.5e3" becomes "125e2"), which has no decimal point for a locale to change.
 */
bool uf_parse_number(const char *string, double *value)
{
    char plain[64];
    size_t used = 0;
    int exponent = 0, digits = 0;
    const char *p = string + strspn(string, " \t");
    if (*p == '+' || *p == '-')
        plain[used++] = *p++;
    for (bool after_point = false; (*p >= '0' && *p <= '9') || (*p == '.' && !after_point); p++) {
        if (*p == '.') {
            after_point = true;
            continue;
        }
        if (used >= 40)
            return false;
        plain[used++] = *p;
        digits++;
        exponent -= after_point;
    }
    if (!digits)
        return false;
    if (*p == 'e' || *p == 'E') {
        char *end;
        if (!strchr("+-0123456789", p[1]) || !p[1])
            return false;
        long typed = strtol(p + 1, &end, 10);
        if (end == p + 1 || typed < -400 || typed > 400)
            return false;
        exponent += (int)typed;
        p = end;
    }
    if (p[strspn(p, " \t")] != '\0')
        return false;
    (void)snprintf(plain + used, sizeof plain - used, "e%d", exponent);
    *value = strtod(plain, NULL);
    return isfinite(*value);
}

double uf_round_digits(double value, int digits)
{
    char text[UF_NUMBER_TEXT];
    double rounded;
    uf_format_number(text, value, digits);
    return uf_parse_number(text, &rounded) ? rounded : value;
}

static int least(int a, int b)
{
    return a < b ? a : b;
}

int uf_edit_distance(const char *a, const char *b)
{
    enum { LONGEST = 63 };
    int rows[3][LONGEST + 1];
    int la = (int)strnlen(a, LONGEST), lb = (int)strnlen(b, LONGEST);
    int *before = rows[0], *above = rows[1], *row = rows[2];
    for (int j = 0; j <= lb; j++)
        above[j] = before[j] = j;
    for (int i = 1; i <= la; i++) {
        row[0] = i;
        for (int j = 1; j <= lb; j++) {
            int best = least(above[j] + 1, row[j - 1] + 1);
            best = least(best, above[j - 1] + (a[i - 1] != b[j - 1]));
            if (i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1])
                best = least(best, before[j - 2] + 1);
            row[j] = best;
        }
        int *spare = before;
        before = above;
        above = row;
        row = spare;
    }
    return above[lb];
}

char *uf_copy_string(const char *string)
{
    size_t size = strlen(string) + 1;
    char *copy = malloc(size);
    if (copy)
        memcpy(copy, string, size);
    return copy;
}

char *uf_path_beside(const char *beside, const char *name)
{
    const char *slash = strrchr(beside, '/');
    if (name[0] == '/' || !slash)
        return uf_copy_string(name);
    uf_text path = {0};
    uf_text_bytes(&path, beside, (size_t)(slash - beside) + 1);
    uf_text_add(&path, name);
    if (path.failed)
        uf_text_free(&path);
    return path.bytes;
}

const char *uf_base_name(const char *path)
{
    const char *slash = strrchr(path, '/');
    return slash ? slash + 1 : path;
}
