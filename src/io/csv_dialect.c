/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "io/csv_dialect.h"

#include <string.h>
#include <strings.h>

/* ---- what is no text ------------------------------------------------------------------------- */

static bool begins(const char *text, size_t length, const char *with, size_t count)
{
    return length >= count && memcmp(text, with, count) == 0;
}

static uf_status refuse_other_kinds(const char *text, size_t length, const char *path, uf_error *error)
{
    /* Workbooks are ZIP archives or compound files; both have their signature at the very front. */
    if (begins(text, length, "PK\x03\x04", 4) || begins(text, length, "\xD0\xCF\x11\xE0", 4))
        return uf_fail(error, UF_INPUT,
                       "%s: is a spreadsheet's workbook, expected CSV text; open it in the spreadsheet and save the "
                       "sheet as CSV UTF-8",
                       path);
    if (begins(text, length, "\xFF\xFE", 2) || begins(text, length, "\xFE\xFF", 2))
        return uf_fail(error, UF_INPUT, "%s: is UTF-16 text, expected UTF-8; save it as CSV UTF-8", path);
    if (memchr(text, '\0', length))
        return uf_fail(error, UF_INPUT, "%s: a zero byte; expected CSV text", path);
    return UF_OK;
}

/* ---- letters --------------------------------------------------------------------------------- */

/* Bytes of the UTF-8 letter at `text`, 0 when there is none (RFC 3629, section 4: no overlong forms, no surrogates,
 * nothing beyond U+10FFFF). */
static size_t utf8_letter(const unsigned char *text, size_t left)
{
    unsigned char first = text[0];
    if (first < 0x80)
        return 1;
    size_t count = first >= 0xC2 && first <= 0xDF ? 2 : first >= 0xE0 && first <= 0xEF ? 3 : 0;
    count = first >= 0xF0 && first <= 0xF4 ? 4 : count;
    if (count == 0 || count > left)
        return 0;
    unsigned char low = first == 0xE0 ? 0xA0 : first == 0xF0 ? 0x90 : 0x80;
    unsigned char high = first == 0xED ? 0x9F : first == 0xF4 ? 0x8F : 0xBF;
    if (text[1] < low || text[1] > high)
        return 0;
    for (size_t k = 2; k < count; k++)
        if (text[k] < 0x80 || text[k] > 0xBF)
            return 0;
    return count;
}

static bool is_utf8(const char *text, size_t length)
{
    for (size_t at = 0; at < length;) {
        size_t count = utf8_letter((const unsigned char *)text + at, length - at);
        if (count == 0)
            return false;
        at += count;
    }
    return true;
}

static void put_code(uf_text *out, unsigned code)
{
    const char two[2] = {(char)(0xC0 | code >> 6), (char)(0x80 | (code & 0x3F))};
    const char three[3] = {(char)(0xE0 | code >> 12), (char)(0x80 | (code >> 6 & 0x3F)),
                           (char)(0x80 | (code & 0x3F))};
    const char one = (char)code;
    if (code < 0x80)
        uf_text_bytes(out, &one, 1);
    else if (code < 0x800)
        uf_text_bytes(out, two, 2);
    else
        uf_text_bytes(out, three, 3);
}

/* Windows-1252 is Latin-1 but for 0x80 to 0x9F (the code page as registered with IANA); 0: not assigned. */
static const unsigned short windows_1252[32] = {0x20AC, 0,      0x201A, 0x0192, 0x201E, 0x2026, 0x2020, 0x2021,
                                                0x02C6, 0x2030, 0x0160, 0x2039, 0x0152, 0,      0x017D, 0,
                                                0,      0x2018, 0x2019, 0x201C, 0x201D, 0x2022, 0x2013, 0x2014,
                                                0x02DC, 0x2122, 0x0161, 0x203A, 0x0153, 0,      0x017E, 0x0178};

static void put_latin1(uf_text *out, const char *text, size_t length)
{
    for (size_t k = 0; k < length; k++) {
        unsigned code = (unsigned char)text[k];
        if (code >= 0x80 && code < 0xA0)
            code = windows_1252[code - 0x80] ? windows_1252[code - 0x80] : 0xFFFD;
        put_code(out, code);
    }
}

/* ---- lines ----------------------------------------------------------------------------------- */

/* A carriage return, with its line feed or alone, becomes a line feed. */
static void mend_line_ends(uf_text *text, uf_csv_dialect *dialect)
{
    size_t to = 0;
    for (size_t from = 0; from < text->length; from++) {
        char c = text->bytes[from];
        if (c == '\r') {
            bool pair = from + 1 < text->length && text->bytes[from + 1] == '\n';
            dialect->lone_return |= !pair;
            from += pair;
            c = '\n';
        }
        text->bytes[to++] = c;
    }
    text->length = to;
    text->bytes[to] = '\0';
}

/* A first line "sep=;" is no data. */
static void take_said_separator(uf_text *text, uf_csv_dialect *dialect)
{
    const char *t = text->bytes;
    size_t quoted = t[0] == '"';
    if (strncasecmp(t + quoted, "sep=", 4) != 0 || !t[quoted + 4] || !strchr(",;\t", t[quoted + 4]))
        return;
    size_t length = strcspn(t, "\n");
    if (length != 5 + 2 * quoted)
        return;
    dialect->separator = t[quoted + 4];
    dialect->said = true;
    length += t[length] == '\n';
    memmove(text->bytes, text->bytes + length, text->length - length + 1);
    text->length -= length;
}

/* ---- which separator ------------------------------------------------------------------------- */

typedef struct counts {
    int commas, semicolons, tabs;
    int decimal_commas; /* of the commas, those between two digits */
} counts;

static bool is_digit(char c)
{
    return c >= '0' && c <= '9';
}

/* Counts up to the line's end, which a quote may hide. */
static size_t count_line(const char *text, counts *c)
{
    bool quoted = false;
    size_t k = 0;
    *c = (counts){0};
    for (; text[k] && (quoted || text[k] != '\n'); k++) {
        quoted ^= text[k] == '"';
        if (quoted)
            continue;
        c->semicolons += text[k] == ';';
        c->tabs += text[k] == '\t';
        c->commas += text[k] == ',';
        c->decimal_commas += text[k] == ',' && k && is_digit(text[k - 1]) && is_digit(text[k + 1]);
    }
    return k + (text[k] == '\n');
}

/* Each line votes for what it holds most of. Beside semicolons or tabs a comma between digits is a decimal comma. */
static char elect_separator(const char *text)
{
    int commas = 0, semicolons = 0, tabs = 0;
    while (*text) {
        counts c;
        text += count_line(text, &c);
        int plain = c.semicolons || c.tabs ? c.commas - c.decimal_commas : c.commas;
        if (c.tabs > plain && c.tabs >= c.semicolons)
            tabs++;
        else if (c.semicolons > plain)
            semicolons++;
        else if (plain)
            commas++;
    }
    return tabs > semicolons && tabs > commas ? '\t' : semicolons > commas ? ';' : ',';
}

uf_status uf_csv_plain(uf_text *plain, const char *text, size_t length, const char *path, uf_csv_dialect *dialect,
                       uf_error *error)
{
    *dialect = (uf_csv_dialect){.separator = ','};
    uf_status status = refuse_other_kinds(text, length, path, error);
    if (status != UF_OK)
        return status;
    dialect->mark = begins(text, length, "\xEF\xBB\xBF", 3);
    text += dialect->mark ? 3 : 0;
    length -= dialect->mark ? 3 : 0;
    dialect->latin1 = !is_utf8(text, length);
    if (dialect->latin1)
        put_latin1(plain, text, length);
    else
        uf_text_bytes(plain, text, length);
    status = uf_text_check(plain, path, error);
    if (status != UF_OK)
        return status;
    mend_line_ends(plain, dialect);
    take_said_separator(plain, dialect);
    if (!dialect->said)
        dialect->separator = elect_separator(plain->bytes);
    return UF_OK;
}
