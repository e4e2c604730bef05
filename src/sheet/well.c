/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/well.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>

/* ANSI SLAS 4-2004 (R2012) for 96, 384 and 1536 wells; the smaller ones by common practice. */
static const uf_vessel plates[] = {{6, 2, 3},   {12, 3, 4},    {24, 4, 6},    {48, 6, 8},
                                   {96, 8, 12}, {384, 16, 24}, {1536, 32, 48}};
enum { PLATES = sizeof plates / sizeof plates[0] };

static int letter(char c)
{
    return c >= 'A' && c <= 'Z' ? c - 'A' : c >= 'a' && c <= 'z' ? c - 'a' : -1;
}

static int row_of(const char *letters, size_t count)
{
    int first = count ? letter(letters[0]) : -1;
    if (count == 1)
        return first;
    int second = count == 2 ? letter(letters[1]) : -1;
    return first == 0 && second >= 0 && 26 + second < UF_MOST_ROWS ? 26 + second : -1;
}

int uf_row_parse(const char *text)
{
    return row_of(text, strlen(text));
}

bool uf_well_parse(const char *text, uf_well *well)
{
    text += strspn(text, " \t");
    size_t letters = 0, digits;
    while (letter(text[letters]) >= 0)
        letters++;
    *well = (uf_well){row_of(text, letters), -1};
    text += letters;
    digits = strspn(text, "0123456789");
    int column = digits >= 1 && digits <= 3 ? atoi(text) : 0;
    text += digits;
    bool good = well->row >= 0 && column >= 1 && column <= UF_MOST_COLUMNS && !text[strspn(text, " \t")];
    *well = good ? (uf_well){well->row, column - 1} : (uf_well){-1, -1};
    return good;
}

void uf_well_name(char name[UF_WELL_NAME], uf_well well)
{
    if (well.row < 0 || well.row >= UF_MOST_ROWS || well.column < 0 || well.column >= UF_MOST_COLUMNS)
        name[0] = '\0';
    else if (well.row < 26)
        (void)snprintf(name, UF_WELL_NAME, "%c%02d", 'A' + well.row, well.column + 1);
    else
        (void)snprintf(name, UF_WELL_NAME, "A%c%02d", 'A' + well.row - 26, well.column + 1);
}

bool uf_vessel_parse(const char *text, uf_vessel *vessel)
{
    *vessel = (uf_vessel){0};
    text += strspn(text, " \t");
    if (strcasecmp(text, "coverslip") == 0 || strcasecmp(text, "dish") == 0)
        return true;
    size_t digits = strspn(text, "0123456789");
    const char *rest = text + digits;
    rest += strspn(rest, " -");
    if (digits < 1 || digits > 4 || (*rest && strcasecmp(rest, "well") != 0 && strcasecmp(rest, "wells") != 0))
        return false;
    for (int k = 0; k < PLATES; k++)
        if (plates[k].wells == atoi(text)) {
            *vessel = plates[k];
            return true;
        }
    return false;
}

uf_vessel uf_vessel_holding(uf_well well)
{
    for (int k = 0; k < PLATES; k++)
        if (uf_well_on(plates[k], well))
            return plates[k];
    return plates[PLATES - 1];
}
