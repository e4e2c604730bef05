/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Waiting until something happens in folders. */
#ifndef UF_IO_WATCH_H
#define UF_IO_WATCH_H

/* Zeroed but for the descriptor, which is -1 where folders cannot be watched: waiting is then only waiting. */
typedef struct uf_watch {
    int descriptor;
} uf_watch;

void uf_watch_open(uf_watch *watch);
void uf_watch_close(uf_watch *watch);

/* Watches the folder that `path` lies in. A folder that is watched already, or is not there, is no matter. */
void uf_watch_folder_of(uf_watch *watch, const char *path);

/* Returns when something was written, moved or made in a watched folder, a signal came, or so many seconds have passed.
 * Network file systems do not always tell: callers look again from time to time whatever this says. */
void uf_watch_wait(uf_watch *watch, double seconds);

#endif
