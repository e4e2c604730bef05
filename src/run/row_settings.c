/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/row_settings.h"

#include <string.h>

static uf_status read_files(uf_settings *settings, const char *const *paths, int count, uf_settings_kind kind,
                            uf_error *error)
{
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < count; k++)
        status = uf_settings_read(settings, paths[k], kind, error);
    return status;
}

static int is_same(const char *a, const char *b)
{
    return a && b ? strcmp(a, b) == 0 : a == b;
}

uf_status uf_row_settings_of(uf_row_settings *all, const char *path, const uf_settings **settings, int *index,
                             uf_error *error)
{
    int k = 0;
    while (k < all->count && !is_same(all->paths[k], path))
        k++;
    uf_status status = UF_OK;
    if (k == all->count) {
        if (k == UF_ROW_SETTINGS_LIMIT)
            return uf_fail(error, UF_INPUT, "%s: more than %d different instrument files", path,
                           UF_ROW_SETTINGS_LIMIT);
        uf_settings *made = NULL;
        status = uf_settings_new(&made, error);
        if (status == UF_OK)
            status = read_files(made, all->instruments, all->instrument_count, UF_INSTRUMENT_FILE, error);
        if (status == UF_OK && path)
            status = uf_settings_read(made, path, UF_INSTRUMENT_FILE, error);
        if (status == UF_OK)
            status = read_files(made, all->assays, all->assay_count, UF_ASSAY_FILE, error);
        if (status != UF_OK) {
            uf_settings_free(&made);
            return status;
        }
        all->paths[k] = path;
        all->settings[k] = made;
        all->count++;
    }
    *settings = all->settings[k];
    if (index)
        *index = k;
    return UF_OK;
}

void uf_row_settings_free(uf_row_settings *all)
{
    for (int k = 0; k < all->count; k++)
        uf_settings_free(&all->settings[k]);
    all->count = 0;
}
