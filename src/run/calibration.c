/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/calibration.h"

#include <string.h>

#include "io/output.h"

enum { INPUTS_NAMED = 200 };

void uf_fragment_start(uf_fragment *fragment, const char *kind, const uf_reader *reader)
{
    *fragment = (uf_fragment){0};
    uf_text_printf(&fragment->text,
                   "# underfoot %s, calibrate %s. Give it after the bench's own file, whose values it overrides:\n"
                   "#   -i bench.ini -i THIS_FILE\n",
                   UF_VERSION, kind);
    for (int k = 0; k < reader->count && k < INPUTS_NAMED; k++)
        uf_text_printf(&fragment->text, "# from %s: %s (%016llx)\n", reader->inputs[k].role, reader->inputs[k].path,
                       (unsigned long long)reader->inputs[k].fingerprint);
}

void uf_fragment_note(uf_fragment *fragment, const char *note)
{
    uf_text_printf(&fragment->text, "# %s\n", note);
}

static void open_section(uf_fragment *fragment, const char *section)
{
    if (!fragment->section || strcmp(fragment->section, section) != 0)
        uf_text_printf(&fragment->text, "\n[%s]\n", section);
    fragment->section = section;
}

void uf_fragment_number(uf_fragment *fragment, const char *section, const char *key, double value, int digits)
{
    open_section(fragment, section);
    uf_text_printf(&fragment->text, "%s = ", key);
    uf_text_number(&fragment->text, value, digits);
    uf_text_add(&fragment->text, "\n");
}

void uf_fragment_word(uf_fragment *fragment, const char *section, const char *key, const char *word)
{
    open_section(fragment, section);
    uf_text_printf(&fragment->text, "%s = %s\n", key, word);
}

uf_status uf_fragment_write(uf_fragment *fragment, const char *path, uf_error *error)
{
    uf_status status = uf_text_check(&fragment->text, "a fragment", error);
    if (status == UF_OK)
        status = uf_output_file(path, fragment->text.bytes, fragment->text.length, error);
    uf_fragment_free(fragment);
    return status;
}

void uf_fragment_free(uf_fragment *fragment)
{
    uf_text_free(&fragment->text);
    fragment->section = NULL;
}

void uf_fragment_beside(uf_text *out, const char *out_path, const char *ending)
{
    size_t length = strlen(out_path);
    const char *name = uf_base_name(out_path), *dot = strrchr(name, '.');
    if (dot && dot != name)
        length = (size_t)(dot - out_path);
    uf_text_bytes(out, out_path, length);
    uf_text_add(out, ending);
}
