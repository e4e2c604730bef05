/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/status.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

const char *uf_version(void)
{
    return UF_VERSION;
}

uf_status uf_fail(uf_error *error, uf_status status, const char *format, ...)
{
    if (error) {
        va_list arguments;
        va_start(arguments, format);
        error->status = status;
        (void)vsnprintf(error->text, sizeof error->text, format, arguments);
        va_end(arguments);
    }
    return status;
}

uf_status uf_fail_memory(uf_error *error, const char *what)
{
    return uf_fail(error, UF_MEMORY, "the machine has no memory left for %s; use fewer --threads or a larger machine",
                   what);
}

uf_status uf_fail_in(uf_error *error, uf_status status, const char *where)
{
    if (error) {
        char text[UF_ERROR_TEXT];
        memcpy(text, error->text, sizeof text);
        (void)snprintf(error->text, sizeof error->text, "%.200s: %.800s", where, text);
        error->status = status;
    }
    return status;
}
