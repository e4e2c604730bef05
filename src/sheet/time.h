/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Times of a sheet as numbers. */
#ifndef UF_SHEET_TIME_TEXT_H
#define UF_SHEET_TIME_TEXT_H

/* Seconds since 1970-01-01T00:00 (UTC where the text says its offset, else the bench's own clock) of a text in the form of ISO
 * 8601 that sheets take; NaN for anything else. */
double uf_time_seconds(const char *text);

#endif
