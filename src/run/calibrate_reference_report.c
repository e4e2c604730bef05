/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The report of `calibrate reference`: in words, as JSON, and reference.csv. */
#include <math.h>

#include "io/csv.h"
#include "run/calibrate_reference_parts.h"
#include "run/report_parts.h"

static const double rough = 0.05, uneven_film = 0.05;

void uf_reference_path(uf_text *out, const uf_reference_findings *f, int k, const char *ending)
{
    const uf_reference_group *g = &f->groups[k];
    uf_text name = {0};
    if (f->group_count > 1) {
        uf_text_printf(&name, "_%s%s%s", g->plate, *g->plate && *g->session ? "_" : "", g->session);
        /* Names from a sheet become parts of a file name. */
        for (size_t at = 0; at < name.length; at++)
            if (name.bytes[at] == '/' || name.bytes[at] == ' ')
                name.bytes[at] = '-';
    }
    uf_text_add(&name, ending);
    out->failed |= name.failed;
    uf_fragment_beside(out, f->request->common.out_path, name.bytes ? name.bytes : ending);
    uf_text_free(&name);
}

/* ---- words --------------------------------------------------------------------------------------- */

static void put_group(uf_text *out, const uf_reference_findings *f, int k)
{
    const uf_reference_group *g = &f->groups[k];
    const uf_reference_pool *p = &g->pool;
    double none = (double)NAN;
    if (f->request->sheet_path)
        uf_text_printf(out, "%s%s%s%s%s: %d %s wells, %d fields, %d cells\n", *g->plate ? "plate " : "", g->plate,
                       *g->session ? ", session " : "", g->session, *g->plate || *g->session ? "" : "all", p->wells,
                       f->role, p->fields, g->cells);
    else if (f->is_film)
        uf_text_printf(out, "a film of one layer, %d pair%s of images\n", p->fields, p->fields == 1 ? "" : "s");
    else
        uf_text_printf(out, "%d cells in %d pair%s of images\n", g->cells, p->fields, p->fields == 1 ? "" : "s");
    uf_report_row(out, f->request->sheet_path ? "  near/wide ratio at gap 0" : "  near/wide ratio at that gap",
                  p->ratio, p->ratio_sd, 4, "");
    if (f->is_film) {
        uf_report_row(out, "  near light above the background", g->near_adu, none, 0, "ADU");
        uf_report_row(out, "  wide light above the background", g->wide_adu, none, 0, "ADU");
    }
    if (!isnan(p->spread))
        uf_report_row(out, f->is_film ? "  spread over the field" : "  spread from cell to cell", 100 * p->spread,
                      none, 1, "%");
    if (p->worst_well >= 0)
        uf_text_printf(out, "  without %s it would be %+.1f %%, the largest change one %s makes\n",
                       g->well_names[p->worst_well], 100 * p->worst_change, f->request->sheet_path ? "well" : "pair");
}

static int is_rough(const uf_reference_findings *f)
{
    for (int k = 0; k < f->group_count; k++) {
        const uf_reference_pool *p = &f->groups[k].pool;
        if (!(p->ratio_sd <= rough * p->ratio) || fabs(p->worst_change) > 2 * rough)
            return 1;
    }
    return 0;
}

static void put_verdict(uf_text *out, const uf_reference_findings *f)
{
    const uf_reference_group *g = &f->groups[0];
    uf_text_add(out, "\n");
    if (is_rough(f))
        uf_text_add(out,
                    "ROUGH. The ratio is known to no better than a twentieth, or hangs on one of them: add more.\n");
    else
        uf_text_add(out, "GOOD. An error of the ratio of 1 % moves every gap by a hundredth of the depth.\n");
    if (g->pool.sd_from_fields)
        uf_text_printf(out, "Fewer than three %s cannot tell how they differ: the spread within stands for the sd.\n",
                       f->request->sheet_path ? "wells" : "pairs");
    if (f->is_film && g->pool.spread > uneven_film)
        uf_text_printf(
            out, "The ratio varies by %.0f %% over the field: flats are missing or old, or the film is uneven.\n",
            100 * g->pool.spread);
    if (f->is_film && !f->request->blank_near)
        uf_text_add(out, "No blank images: all light above offset or dark is taken to be the film's (--blank-near, "
                         "--blank-wide).\n");
    if (!f->request->sheet_path && !f->is_film && !isnan(g->pool.spread))
        uf_text_printf(out, "If these cells hold on alike, normalisation_sd = %.2g is what they say of it.\n",
                       g->pool.spread);
    if (isnan(g->exposure_ms[UF_NEAR]) || isnan(g->exposure_ms[UF_WIDE]))
        uf_text_add(
            out, "Exposures are not told (--exposure-near-ms, --exposure-wide-ms): runs must use the same ones.\n");
    if (f->request->sheet_path)
        uf_text_add(out, "The gap is assumed: gaps are relative.\n");
}

void uf_reference_words(uf_text *out, const uf_reference_findings *f)
{
    for (int k = 0; k < f->group_count; k++)
        put_group(out, f, k);
    put_verdict(out, f);
    for (int k = 0; k < f->group_count; k++) {
        uf_text path = {0};
        uf_reference_path(&path, f, k, ".ini");
        uf_text_printf(out, "Written to %s: -i bench.ini -i %s\n", path.bytes ? path.bytes : "",
                       path.bytes ? path.bytes : "");
        uf_text_free(&path);
    }
}

/* ---- tables -------------------------------------------------------------------------------------- */

static const char *kind_word(const uf_reference_findings *f)
{
    return f->request->sheet_path ? "wells" : f->is_film ? "film" : "cell";
}

static double gap_of(const uf_reference_findings *f)
{
    return f->request->sheet_path ? 0 : f->request->gap_nm;
}

static void put_number(uf_text *out, double value)
{
    uf_text_add(out, ",");
    uf_text_number(out, value, 6);
}

void uf_reference_csv(uf_text *out, const uf_reference_findings *f)
{
    uf_text_add(
        out, "plate,session,kind,ratio,ratio_sd,gap_nm,fields,wells,cells,worst_well,worst_change,exposure_near_ms,"
             "exposure_wide_ms,near_flat_checksum,wide_flat_checksum\n");
    for (int k = 0; k < f->group_count; k++) {
        const uf_reference_group *g = &f->groups[k];
        const uf_reference_pool *p = &g->pool;
        uf_csv_field(out, g->plate);
        uf_text_add(out, ",");
        uf_csv_field(out, g->session);
        uf_text_printf(out, ",%s", kind_word(f));
        put_number(out, p->ratio);
        put_number(out, p->ratio_sd);
        put_number(out, gap_of(f));
        uf_text_printf(out, ",%d,%d,%d,", p->fields, p->wells, g->cells);
        uf_csv_field(out, p->worst_well >= 0 ? g->well_names[p->worst_well] : "");
        put_number(out, p->worst_well >= 0 ? p->worst_change : (double)NAN);
        put_number(out, g->exposure_ms[UF_NEAR]);
        put_number(out, g->exposure_ms[UF_WIDE]);
        uf_text_printf(out, ",%s,%s\n", g->flat[UF_NEAR], g->flat[UF_WIDE]);
    }
}

static json_t *group_json(const uf_reference_findings *f, const uf_reference_group *g)
{
    const uf_reference_pool *p = &g->pool;
    json_t *o = json_object();
    if (f->request->sheet_path) {
        json_object_set_new(o, "plate", json_string(g->plate));
        json_object_set_new(o, "session", json_string(g->session));
    }
    json_object_set_new(o, "kind", json_string(kind_word(f)));
    uf_json_number(o, "ratio", p->ratio);
    uf_json_number(o, "ratio_sd", p->ratio_sd);
    uf_json_number(o, "gap_nm", gap_of(f));
    uf_json_number(o, "spread", p->spread);
    json_object_set_new(o, "fields", json_integer(p->fields));
    json_object_set_new(o, "wells", json_integer(p->wells));
    json_object_set_new(o, "cells", json_integer(g->cells));
    uf_json_number(o, "worst_change", p->worst_well >= 0 ? p->worst_change : (double)NAN);
    return o;
}

uf_status uf_reference_json(uf_text *out, const uf_reference_findings *f, uf_error *error)
{
    json_t *o = f->group_count == 1 ? group_json(f, &f->groups[0]) : json_object(), *list;
    if (f->group_count > 1) {
        list = json_array();
        for (int k = 0; k < f->group_count; k++)
            json_array_append_new(list, group_json(f, &f->groups[k]));
        json_object_set_new(o, "references", list);
    }
    json_object_set_new(o, "verdict", json_string(is_rough(f) ? "rough" : "good"));
    return uf_json_finish(out, o, error);
}
