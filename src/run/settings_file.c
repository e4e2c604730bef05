/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Settings from a file: io opens it, settings reads it. */
#include "io/input.h"
#include "settings/settings.h"

/* No INI file is longer; a picture given by mistake is. */
static const size_t most_bytes = (size_t)4 << 20;

uf_status uf_settings_read(uf_settings *settings, const char *path, uf_settings_kind kind, uf_error *error)
{
    uf_text text = {0};
    uf_status status = uf_input_read(&text, path, most_bytes, error);
    if (status == UF_OK)
        status = uf_settings_parse(settings, text.bytes ? text.bytes : "", text.length, path, kind, error);
    uf_text_free(&text);
    return status;
}
