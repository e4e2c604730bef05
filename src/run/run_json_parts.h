/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the run.json of one field and that of a plate share. */
#ifndef UF_RUN_RUN_JSON_PARTS_H
#define UF_RUN_RUN_JSON_PARTS_H

#include <jansson.h>

#include "settings/settings.h"

/* A string of any bytes: what is not UTF-8 becomes '?'. */
json_t *uf_json_text(const char *text);

/* Settings in force with where they came from; what earlier files said and later ones overrode. */
json_t *uf_settings_json(const uf_settings *settings);
json_t *uf_overridden_json(const uf_settings *settings);

/* Lines of a text as a list. */
json_t *uf_lines_json(const char *lines);

/* Versions of the libraries in use. */
json_t *uf_libraries_json(void);

#endif
