/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/plate_follow.h"

#include <stdlib.h>

uf_status uf_follow_start(uf_follow *follow, const uf_plate_plan *plan, double now, uf_error *error)
{
    follow->count = plan->sheet.count;
    follow->changed = now;
    follow->rows = calloc((size_t)follow->count + 1, sizeof *follow->rows);
    if (!follow->rows)
        return uf_fail_memory(error, "the run");
    uf_watch_open(&follow->watch);
    for (int k = 0; k < follow->count; k++) {
        const uf_sheet_row *row = plan->rows[k].row;
        const char *const paths[UF_FOLLOW_FILES] = {row->near_path, row->wide_path, row->mask_path, row->nuclei_path};
        for (int j = 0; j < UF_FOLLOW_FILES; j++) {
            follow->rows[k].files[j] = (uf_follow_file){.path = paths[j], .facts = {-1, 0}, .since = now};
            if (paths[j])
                uf_watch_folder_of(&follow->watch, paths[j]);
        }
    }
    return UF_OK;
}

void uf_follow_free(uf_follow *follow)
{
    if (follow->rows)
        uf_watch_close(&follow->watch);
    free(follow->rows);
    follow->rows = NULL;
    follow->count = 0;
}

static int is_still(uf_follow *follow, uf_follow_file *file, double now)
{
    uf_input_facts facts = uf_input_facts_of(file->path);
    if (facts.bytes != file->facts.bytes || facts.changed_ns != file->facts.changed_ns) {
        file->facts = facts;
        file->since = now;
        follow->changed = now;
    }
    return facts.bytes > 0 && now - file->since >= UF_FOLLOW_STILL_S;
}

int uf_follow_is_complete(uf_follow *follow, int row, double now)
{
    int complete = 1;
    for (int j = 0; j < UF_FOLLOW_FILES; j++) {
        uf_follow_file *file = &follow->rows[row].files[j];
        if (file->path && !is_still(follow, file, now))
            complete = 0;
    }
    return complete;
}
