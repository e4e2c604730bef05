/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cli/findings.h"

#include <stdio.h>
#include <string.h>

enum { SHOWN = 12 };

static void put_one(uf_text *out, const uf_fault *f)
{
    if (f->file)
        uf_text_add(out, f->file);
    if (f->line)
        uf_text_printf(out, ":%d", f->line);
    uf_text_add(out, f->file ? ": " : "");
    if (f->severity != UF_FAULT)
        uf_text_printf(out, "%s: ", uf_severity_word(f->severity));
    if (f->column)
        uf_text_printf(out, "%s: ", f->column);
    uf_text_printf(out, "%s\n", f->text);
}

static bool alike(const uf_fault *a, const uf_fault *b)
{
    return a->severity == b->severity && strcmp(a->kind, b->kind) == 0;
}

/* How many of its kind come before number `index`, no more than SHOWN. */
static int rank(const uf_faults *faults, int index)
{
    int before = 0;
    for (int k = index - 1; k >= 0 && before < SHOWN; k--)
        before += alike(&faults->list[k], &faults->list[index]);
    return before;
}

/* After the last that is shown: how many follow, and on which lines. */
static void put_rest(uf_text *out, const uf_faults *faults, int index)
{
    const uf_fault *f = &faults->list[index];
    int more = 0, first = 0, last = 0;
    for (int k = index + 1; k < faults->count; k++)
        if (alike(&faults->list[k], f)) {
            more++;
            first = first ? first : faults->list[k].line;
            last = faults->list[k].line ? faults->list[k].line : last;
        }
    if (!more)
        return;
    uf_text_printf(out, "  and %d more %ss of this kind (%s)", more, uf_severity_word(f->severity), f->kind);
    if (first)
        uf_text_printf(out, ", on lines %d to %d", first, last);
    uf_text_add(out, "; --json lists all\n");
}

void uf_findings_put(uf_text *out, const uf_faults *faults, uf_severity least)
{
    for (int k = 0; k < faults->count; k++) {
        const uf_fault *f = &faults->list[k];
        if (f->severity < least)
            continue;
        int before = rank(faults, k);
        if (before >= SHOWN)
            continue;
        put_one(out, f);
        if (before == SHOWN - 1)
            put_rest(out, faults, k);
    }
}

void uf_findings_print(const uf_faults *faults, uf_severity least)
{
    uf_text out = {0};
    uf_findings_put(&out, faults, least);
    if (out.length)
        (void)fwrite(out.bytes, 1, out.length, stderr);
    uf_text_free(&out);
}
