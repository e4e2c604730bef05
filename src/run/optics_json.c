/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The report of `optics` as one JSON object. */
#include <jansson.h>
#include <math.h>

#include "run/optics_numbers.h"
#include "run/report_parts.h"

static json_t *decay_json(const uf_optics_numbers *n)
{
    json_t *list = json_array();
    for (int k = 0; k < UF_OPTICS_GAPS; k++) {
        json_t *row = json_object();
        uf_json_number(row, "gap_nm", uf_optics_gaps_nm[k]);
        uf_json_number(row, "exponential", n->exponential[k]);
        uf_json_number(row, "layered", n->layered[k]);
        uf_json_number(row, "in_force", n->in_force[k]);
        uf_json_number(row, "with_stray_light", n->with_stray[k]);
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
        uf_json_number(row, "step", m->step);
        json_object_set_new(row, "step_is_sd", json_boolean(m->is_sd));
        uf_json_number(row, "depth_change_nm", m->depth_nm);
        uf_json_number(row, "gap_at_cutoff_change_nm", m->reading_nm);
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
        uf_json_number(row, "depth_nm", n->earlier[k].depth_nm);
        json_array_append_new(list, row);
    }
    return list;
}

static json_t *wish_json(const uf_optics_wish *wish)
{
    json_t *o = json_object();
    uf_json_number(o, "na_effective_low", wish->na_low);
    uf_json_number(o, "na_effective_high", wish->na_high);
    uf_json_number(o, "angle_low_deg", wish->angle_low_deg);
    uf_json_number(o, "angle_high_deg", wish->angle_high_deg);
    return o;
}

static const char *verdict_word(const uf_bench *b)
{
    return b->na_effective <= b->cell_n ? "not_for_cells" : uf_bench_leaks_into_cell(b) ? "barely" : "good";
}

static void put_setup(json_t *o, const uf_optics_numbers *n)
{
    const uf_bench *b = &n->bench;
    uf_json_number(o, "wavelength_nm", b->wavelength_nm);
    uf_json_number(o, "substrate_n", b->substrate_n);
    uf_json_number(o, "medium_n", b->medium_n);
    uf_json_number(o, "cell_n", b->cell_n);
    uf_json_number(o, "na_effective", b->na_effective);
    uf_json_number(o, "angle_deg", n->angle_deg);
    uf_json_number(o, "angle_quoted_deg", n->quoted_deg);
    uf_json_number(o, "critical_angle_medium_deg", n->critical_medium_deg);
    uf_json_number(o, "critical_angle_cell_deg", n->critical_cell_deg);
    uf_json_number(o, "objective_limit_deg", n->objective_limit_deg);
}

uf_status uf_optics_put_json(uf_text *out, const uf_optics_numbers *n, uf_error *error)
{
    json_t *o = json_object();
    put_setup(o, n);
    uf_json_number(o, "depth_nm", n->depth_nm);
    json_object_set_new(o, "overridden", earlier_json(n));
    uf_json_number(o, "depth_sd_nm", n->depth_sd_nm);
    uf_json_number(o, "depth_with_cell_n_nm", n->depth_with_cell_n_nm);
    uf_json_number(o, "interface_s", n->interface_s);
    uf_json_number(o, "interface_p", n->interface_p);
    uf_json_number(o, "interface_mixed", n->interface_mixed);
    uf_json_number(o, "layered_effect_at_cutoff_nm", n->layered_effect_nm);
    uf_json_number(o, "exponential_reads_layered_50_nm", n->reads_50_nm);
    uf_json_number(o, "exponential_reads_layered_100_nm", n->reads_100_nm);
    json_object_set_new(o, "verdict", json_string(verdict_word(&n->bench)));
    if (n->for_depth.asked)
        json_object_set_new(o, "for_depth", wish_json(&n->for_depth));
    if (n->for_agreement.asked)
        json_object_set_new(o, "for_agreement", wish_json(&n->for_agreement));
    json_object_set_new(o, "changes", moves_json(n));
    json_object_set_new(o, "decay", decay_json(n));
    return uf_json_finish(out, o, error);
}
