/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/amount.h"

#include <stdlib.h>
#include <string.h>

/* ---- units ----------------------------------------------------------------------------------- */

/* Units of one family differ by powers of ten. `also` are other spellings, joined by blanks. */
typedef struct unit {
    const char *name;
    char family;
    int exponent;
    const char *also;
} unit;

static const unit units[] = {
    {"M", 'c', 0, "mol/l"},
    {"mM", 'c', -3, "mmol/l mol/m3"},
    {"uM", 'c', -6, "umol/l"},
    {"nM", 'c', -9, "nmol/l"},
    {"pM", 'c', -12, "pmol/l"},
    {"fM", 'c', -15, "fmol/l"},
    {"g/ml", 'm', 3, ""},
    {"mg/ml", 'm', 0, "g/l ug/ul"},
    {"ug/ml", 'm', -3, "mg/l ng/ul"},
    {"ng/ml", 'm', -6, "ug/l"},
    {"pg/ml", 'm', -9, "ng/l"},
    {"kU/ml", 'a', 3, "U/ul"},
    {"U/ml", 'a', 0, ""},
    {"mU/ml", 'a', -3, "U/l"},
    {"mg/cm2", 's', 3, ""},
    {"ug/cm2", 's', 0, ""},
    {"ng/mm2", 's', -1, ""},
    {"ng/cm2", 's', -3, ""},
    {"pg/mm2", 's', -4, ""},
    {"MPa", 'p', 6, ""},
    {"kPa", 'p', 3, ""},
    {"Pa", 'p', 0, ""},
    {"%", '%', 0, ""},
    {"% v/v", 'v', 0, "%(v/v)"},
    {"% w/v", 'w', 0, "%(w/v)"},
};
enum { UNITS = sizeof units / sizeof units[0] };

/* Equal but for blanks, and for the litre's letter, which may be a capital. */
static bool same_spelling(const char *a, size_t length, const char *b)
{
    size_t i = 0;
    for (;; i++, b++) {
        while (i < length && a[i] == ' ')
            i++;
        while (*b == ' ')
            b++;
        if (i == length || !*b)
            return i == length && !*b;
        if (a[i] != (*b == 'L' ? 'l' : *b))
            return false;
    }
}

static const unit *find_unit(const char *text)
{
    for (int k = 0; k < UNITS; k++) {
        if (same_spelling(units[k].name, strlen(units[k].name), text))
            return &units[k];
        for (const char *word = units[k].also; *word;) {
            size_t length = strcspn(word, " ");
            if (same_spelling(word, length, text))
                return &units[k];
            word += length + (word[length] == ' ');
        }
    }
    return NULL;
}

/* Signs of UTF-8 that have a plain letter: both signs for micro, the superscript two, the no-break space. */
static const struct {
    const char *sign, *letter;
} plain_letters[] = {{"\xC2\xB5", "u"}, {"\xCE\xBC", "u"}, {"\xC2\xB2", "2"}, {"^2", "2"}, {"\xC2\xA0", " "}};

static size_t plain_letter(const char *text, const char **letter)
{
    for (size_t k = 0; k < sizeof plain_letters / sizeof plain_letters[0]; k++) {
        size_t length = strlen(plain_letters[k].sign);
        if (strncmp(text, plain_letters[k].sign, length) == 0) {
            *letter = plain_letters[k].letter;
            return length;
        }
    }
    return 0;
}

bool uf_unit_plain(char plain[UF_UNIT_TEXT], const char *text)
{
    size_t used = 0;
    const char *letter;
    while (*text && used + 1 < UF_UNIT_TEXT) {
        size_t count = plain_letter(text, &letter);
        plain[used++] = count ? *letter : *text;
        text += count ? count : 1;
        used -= used == 1 && plain[0] == ' ';
    }
    while (used && plain[used - 1] == ' ')
        used--;
    plain[used] = '\0';
    const unit *known = find_unit(plain);
    if (known)
        strcpy(plain, known->name); /* none is longer than UF_UNIT_TEXT */
    return !*text;
}

bool uf_unit_known(const char *plain)
{
    return find_unit(plain) != NULL;
}

bool uf_unit_convert(double *value, const char *from, const char *to)
{
    if (strcmp(from, to) == 0)
        return true;
    const unit *one = find_unit(from), *other = find_unit(to);
    if (!one || !other || one->family != other->family)
        return false;
    double power = 1;
    for (int k = abs(one->exponent - other->exponent); k > 0; k--)
        power *= 10;
    *value = uf_round_digits(one->exponent > other->exponent ? *value * power : *value / power, 12);
    return true;
}

/* ---- numbers --------------------------------------------------------------------------------- */

static size_t number_length(const char *text)
{
    size_t count = strspn(text, "+-");
    count += strspn(text + count, "0123456789.,");
    if ((text[count] == 'e' || text[count] == 'E') && text[count + 1]) {
        size_t sign = strspn(text + count + 1, "+-"), digits = strspn(text + count + 1 + sign, "0123456789");
        count += digits && sign <= 1 ? 1 + sign + digits : 0;
    }
    return count;
}

/* A comma before exactly three digits may part thousands; after a lone 0 it cannot. */
static bool is_unclear(const char *number, const char *comma)
{
    size_t after = strspn(comma + 1, "0123456789");
    const char *first = number + strspn(number, "+-");
    return after == 3 && comma > first && !(first[0] == '0' && comma == first + 1);
}

uf_amount_kind uf_amount_parse(const char *text, uf_amount *amount)
{
    char number[64];
    *amount = (uf_amount){0};
    text += strspn(text, " \t");
    size_t length = number_length(text);
    if (length == 0 || length >= sizeof number)
        return UF_AMOUNT_NONE;
    memcpy(number, text, length);
    number[length] = '\0';
    char *comma = strchr(number, ',');
    if (comma) {
        if (strchr(number, '.') || strchr(comma + 1, ',') || is_unclear(number, comma))
            return strspn(number, "+-0123456789.,") == length ? UF_AMOUNT_UNCLEAR : UF_AMOUNT_NONE;
        *comma = '.';
        amount->comma = true;
    }
    if (!uf_parse_number(number, &amount->value) || !uf_unit_plain(amount->unit, text + length))
        return UF_AMOUNT_NONE;
    /* "1 000" is no amount of 000, and "10-20" none of -20. */
    if (strchr("0123456789+-.,", amount->unit[0]) && amount->unit[0])
        return UF_AMOUNT_UNCLEAR;
    return UF_AMOUNT_GOOD;
}
