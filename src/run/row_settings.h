/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The settings of a sheet's rows: the files given for all, and over them the instrument file a row names. */
#ifndef UF_RUN_ROW_SETTINGS_H
#define UF_RUN_ROW_SETTINGS_H

#include "settings/settings.h"

enum { UF_ROW_SETTINGS_LIMIT = 64 };

/* Zeroed but for the lists of files it is empty and may be freed. One entry a different instrument file, in the order of
 * asking. */
typedef struct uf_row_settings {
    const char *const *instruments, *const *assays;
    int instrument_count, assay_count;
    const char *paths[UF_ROW_SETTINGS_LIMIT]; /* NULL: rows that name none */
    uf_settings *settings[UF_ROW_SETTINGS_LIMIT];
    int count;
} uf_row_settings;

/* The settings of a row whose instrument file is `path` (NULL: none; kept, not copied), read when asked for the first time;
 * *index (may be NULL) is which they are. UF_INPUT as uf_settings_read; more than UF_ROW_SETTINGS_LIMIT files. */
UF_MUST_USE uf_status uf_row_settings_of(uf_row_settings *all, const char *path, const uf_settings **settings,
                                         int *index, uf_error *error);
void uf_row_settings_free(uf_row_settings *all);

#endif
