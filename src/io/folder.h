/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What lies in a folder. */
#ifndef UF_IO_FOLDER_H
#define UF_IO_FOLDER_H

#include "base/arena.h"
#include "base/text.h"

/* Names of regular files (links to them count), relative to the folder, '/' between parts, in the order of strcmp.
 * Zeroed it is empty and may be freed. */
typedef struct uf_folder {
    char **names;
    int count;
    uf_arena arena;
} uf_folder;

/* Lists the files in `path` and `depth` levels of folders below it (0: none). Folders whose names begin with a dot are
 * left out, files are not. UF_INPUT: a folder that cannot be read, or more than a million files. */
UF_MUST_USE uf_status uf_folder_list(uf_folder *folder, const char *path, int depth, uf_error *error);

void uf_folder_free(uf_folder *folder);

/* Whether there is a file or folder of that name. */
bool uf_path_exists(const char *path);

/* The path without links, "." and "..", as a new string; of a file that is not there yet, its folder's is taken. NULL
 * when the folder is not there or there is no memory. */
char *uf_path_plain(const char *path);

/* How to write `target` seen from the folder `from`, both as uf_path_plain gives them, as a new string: relative where they
 * have more than the root in common, else as it is. */
char *uf_path_from(const char *from, const char *target);

#endif
