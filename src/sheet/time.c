/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/time.h"

#include <math.h>
#include <string.h>

/* Days since 1970-01-01 in the Gregorian calendar; years begin in March here, so that a leap day is the last. */
static double days(int year, int month, int day)
{
    year -= month <= 2;
    int month_from_march = (month + 9) % 12, day_of_year = (153 * month_from_march + 2) / 5 + day - 1;
    return 365.0 * year + year / 4 - year / 100 + year / 400 + day_of_year - 719468;
}

static int number(const char *text, int digits, int *value)
{
    *value = 0;
    for (int k = 0; k < digits; k++) {
        if (text[k] < '0' || text[k] > '9')
            return 0;
        *value = 10 * *value + (text[k] - '0');
    }
    return 1;
}

/* ":30.25": seconds and their fraction, where there are any. */
static double take_seconds(const char **text)
{
    double seconds = 0, unit = 1;
    if (**text != ':')
        return 0;
    for ((*text)++; **text >= '0' && **text <= '9'; (*text)++)
        seconds = 10 * seconds + (**text - '0');
    if (**text == '.')
        for ((*text)++; **text >= '0' && **text <= '9'; (*text)++)
            seconds += (unit /= 10) * (**text - '0');
    return seconds;
}

/* "Z", "+02:00", "-0730", or nothing. */
static int take_offset(const char *text, double *seconds)
{
    int hours, minutes = 0;
    *seconds = 0;
    if (!*text || strcmp(text, "Z") == 0)
        return 1;
    if ((*text != '+' && *text != '-') || !number(text + 1, 2, &hours))
        return 0;
    const char *rest = text + 3 + (text[3] == ':');
    if (*rest && (!number(rest, 2, &minutes) || rest[2]))
        return 0;
    *seconds = (*text == '-' ? -60.0 : 60.0) * (60 * hours + minutes);
    return 1;
}

double uf_time_seconds(const char *text)
{
    int year, month, day, hour, minute;
    double offset;
    if (!text || strlen(text) < 16 || !number(text, 4, &year) || !number(text + 5, 2, &month) ||
        !number(text + 8, 2, &day) || !number(text + 11, 2, &hour) || !number(text + 14, 2, &minute))
        return (double)NAN;
    if (text[4] != '-' || text[7] != '-' || (text[10] != 'T' && text[10] != ' ') || text[13] != ':' || month < 1 ||
        month > 12 || day < 1 || day > 31)
        return (double)NAN;
    const char *rest = text + 16;
    double seconds = take_seconds(&rest);
    if (!take_offset(rest, &offset))
        return (double)NAN;
    return 86400 * days(year, month, day) + 3600.0 * hour + 60.0 * minute + seconds - offset;
}
