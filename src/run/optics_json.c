/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The report of `optics` as one JSON object. */
#include <jansson.h>
#include <math.h>
#include <stdlib.h>

#include "run/optics_numbers.h"

static json_t *number(double value)
{
    return isfinite(value) ? json_real(uf_round_digits(value, 10)) : json_null();
}

static void put(json_t *object, const char *name, double value)
{
    json_object_set_new(object, name, number(value));
}

static json_t *decay_json(const uf_optics_numbers *n)
{
    json_t *list = json_array();
    for (int k = 0; k < UF_OPTICS_GAPS; k++) {
        json_t *row = json_object();
        put(row, "gap_nm", uf_optics_gaps_nm[k]);
        put(row, "exponential", n->exponential[k]);
        put(row, "layered", n->layered[k]);
        put(row, "in_force", n->in_force[k]);
        put(row, "with_stray_light", n->with_stray[k]);
        json_array_append_new(list, row);
    }
    return list;
}

static json_t *moves_json(const uf_optics_numbers *n)
{
    json_t *list = json_array();
    for (int k = 0; k < UF_OPTICS_MOVES; k++) {
        const uf_optics_move *m = &n->moves[k];
        if (!m->what)
            continue;
        json_t *row = json_object();
        json_object_set_new(row, "input", json_string(m->what));
        put(row, "step", m->step);
        json_object_set_new(row, "step_is_sd", json_boolean(m->is_sd));
        put(row, "depth_change_nm", m->depth_nm);
        put(row, "gap_at_cutoff_change_nm", m->reading_nm);
        json_array_append_new(list, row);
    }
    return list;
}

static json_t *earlier_json(const uf_optics_numbers *n)
{
    json_t *list = json_array();
    for (int k = 0; k < UF_OPTICS_EARLIER; k++) {
        if (!n->earlier[k].entry)
            continue;
        json_t *row = json_object();
        json_object_set_new(row, "key", json_string(n->earlier[k].entry->key));
        json_object_set_new(row, "was", json_string(n->earlier[k].said));
        put(row, "depth_nm", n->earlier[k].depth_nm);
        json_array_append_new(list, row);
    }
    return list;
}

static json_t *wish_json(const uf_optics_wish *wish)
{
    json_t *o = json_object();
    put(o, "na_effective_low", wish->na_low);
    put(o, "na_effective_high", wish->na_high);
    put(o, "angle_low_deg", wish->angle_low_deg);
    put(o, "angle_high_deg", wish->angle_high_deg);
    return o;
}

static const char *verdict_word(const uf_bench *b)
{
    return b->na_effective <= b->cell_n ? "not_for_cells" : uf_bench_leaks_into_cell(b) ? "barely" : "good";
}

static void put_setup(json_t *o, const uf_optics_numbers *n)
{
    const uf_bench *b = &n->bench;
    put(o, "wavelength_nm", b->wavelength_nm);
    put(o, "substrate_n", b->substrate_n);
    put(o, "medium_n", b->medium_n);
    put(o, "cell_n", b->cell_n);
    put(o, "na_effective", b->na_effective);
    put(o, "angle_deg", n->angle_deg);
    put(o, "angle_quoted_deg", n->quoted_deg);
    put(o, "critical_angle_medium_deg", n->critical_medium_deg);
    put(o, "critical_angle_cell_deg", n->critical_cell_deg);
    put(o, "objective_limit_deg", n->objective_limit_deg);
}

uf_status uf_optics_put_json(uf_text *out, const uf_optics_numbers *n, uf_error *error)
{
    json_t *o = json_object();
    put_setup(o, n);
    put(o, "depth_nm", n->depth_nm);
    json_object_set_new(o, "overridden", earlier_json(n));
    put(o, "depth_sd_nm", n->depth_sd_nm);
    put(o, "depth_with_cell_n_nm", n->depth_with_cell_n_nm);
    put(o, "interface_s", n->interface_s);
    put(o, "interface_p", n->interface_p);
    put(o, "interface_mixed", n->interface_mixed);
    put(o, "layered_effect_at_cutoff_nm", n->layered_effect_nm);
    put(o, "exponential_reads_layered_50_nm", n->reads_50_nm);
    put(o, "exponential_reads_layered_100_nm", n->reads_100_nm);
    json_object_set_new(o, "verdict", json_string(verdict_word(&n->bench)));
    if (n->for_depth.asked)
        json_object_set_new(o, "for_depth", wish_json(&n->for_depth));
    if (n->for_agreement.asked)
        json_object_set_new(o, "for_agreement", wish_json(&n->for_agreement));
    json_object_set_new(o, "changes", moves_json(n));
    json_object_set_new(o, "decay", decay_json(n));
    char *text = json_dumps(o, JSON_INDENT(2) | JSON_REAL_PRECISION(10));
    json_decref(o);
    if (!text)
        return uf_fail_memory(error, "the report");
    uf_text_add(out, text);
    uf_text_add(out, "\n");
    free(text);
    return UF_OK;
}
