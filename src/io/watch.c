/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "io/watch.h"

#include <poll.h>
#include <stdlib.h>
#include <string.h>
#include <sys/inotify.h>
#include <unistd.h>

#include "base/text.h"

void uf_watch_open(uf_watch *watch)
{
    watch->descriptor = inotify_init1(IN_NONBLOCK | IN_CLOEXEC);
}

void uf_watch_close(uf_watch *watch)
{
    if (watch->descriptor >= 0)
        (void)close(watch->descriptor);
    watch->descriptor = -1;
}

void uf_watch_folder_of(uf_watch *watch, const char *path)
{
    char *folder = watch->descriptor >= 0 ? uf_copy_string(path) : NULL;
    if (!folder)
        return;
    char *slash = strrchr(folder, '/');
    if (slash == folder)
        slash[1] = '\0';
    else if (slash)
        *slash = '\0';
    (void)inotify_add_watch(watch->descriptor, slash ? folder : ".", IN_CLOSE_WRITE | IN_MOVED_TO | IN_CREATE);
    free(folder);
}

void uf_watch_wait(uf_watch *watch, double seconds)
{
    char events[4096];
    struct pollfd what = {.fd = watch->descriptor, .events = POLLIN};
    if (poll(&what, 1, (int)(seconds * 1000)) <= 0)
        return;
    /* What happened does not matter, that something did is enough. */
    while (read(watch->descriptor, events, sizeof events) > 0)
        continue;
}
