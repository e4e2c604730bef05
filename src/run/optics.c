/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/optics.h"

#include <jansson.h>
#include <math.h>
#include <stdlib.h>

#include "optics/decay.h"
#include "run/plan.h"

static const double gaps_nm[] = {0, 10, 20, 50, 100, 200};
enum { GAPS = sizeof gaps_nm / sizeof gaps_nm[0] };

typedef struct optics_numbers {
    uf_bench bench;
    double angle_deg, critical_medium_deg, critical_cell_deg;
    double depth_nm, depth_sd_nm, depth_with_cell_n_nm;
    double interface_s, interface_p;
    double cutoff_nm, layered_effect_nm;
    double exponential[GAPS], layered[GAPS], in_force[GAPS];
    int has_own; /* in force is neither of the two */
} optics_numbers;

static void find_numbers(const uf_settings *s, optics_numbers *o)
{
    const uf_bench *b = &o->bench;
    o->angle_deg = uf_angle_from_na(b->na_effective, b->substrate_n);
    o->critical_medium_deg = uf_critical_angle_deg(b->substrate_n, b->medium_n);
    o->critical_cell_deg = uf_critical_angle_deg(b->substrate_n, b->cell_n);
    o->depth_nm = uf_depth_nm(b->wavelength_nm, b->na_effective, b->medium_n);
    o->depth_sd_nm = uf_depth_sd(b);
    o->depth_with_cell_n_nm = uf_depth_nm(b->wavelength_nm, b->na_effective, b->cell_n);
    o->interface_s = uf_interface_s(b->na_effective, b->substrate_n, b->medium_n);
    o->interface_p = uf_interface_p(b->na_effective, b->substrate_n, b->medium_n);
    o->cutoff_nm = s->contact.cutoff_nm;
    o->layered_effect_nm = uf_layered_effect_nm(b, o->cutoff_nm);
    o->has_own = s->decay.scattered_fraction > 0;
    double at_contact = uf_layered_intensity(b, 0);
    for (int k = 0; k < GAPS; k++) {
        o->exponential[k] = exp(-gaps_nm[k] / o->depth_nm);
        o->layered[k] = uf_layered_intensity(b, gaps_nm[k]) / at_contact;
        o->in_force[k] = uf_relative_excitation(b, uf_field_of(s), uf_stray_of(s), gaps_nm[k]);
    }
}

/* ---- in words -------------------------------------------------------------------------------- */

static void put_verdict(uf_text *out, const optics_numbers *o)
{
    const uf_bench *b = &o->bench;
    double needed = b->cell_n + 2 * b->cell_n_sd;
    if (b->na_effective <= b->cell_n)
        uf_text_printf(
            out,
            "Where a cell touches, light leaves the surface and runs into the cell: n sin(angle) %.4f is not "
            "above cell_n %.4f. Gaps would be meaningless there. Go beyond %.2f deg.\n",
            b->na_effective, b->cell_n, uf_angle_from_na(needed, b->substrate_n));
    else if (uf_bench_leaks_into_cell(b))
        uf_text_printf(
            out,
            "Barely: n sin(angle) %.4f exceeds cell_n %.4f by less than 2 sd (%.3f); parts of the cell may "
            "let light through. Beyond %.2f deg they would not.\n",
            b->na_effective, b->cell_n, b->cell_n_sd, uf_angle_from_na(needed, b->substrate_n));
    else
        uf_text_add(out, "Totally reflected against the medium and against the cell.\n");
    if (fabs(o->layered_effect_nm) > 3)
        uf_text_printf(
            out,
            "An exponential reads a layered %.4g nm gap as %.1f nm; the two agree best around n sin(angle) "
            "1.44.\n",
            o->cutoff_nm, o->cutoff_nm + o->layered_effect_nm);
}

static void put_words(uf_text *out, const optics_numbers *o)
{
    const uf_bench *b = &o->bench;
    uf_text_printf(out, "n sin(angle)                        %.4f (%.2f deg in the substrate)\n", b->na_effective,
                   o->angle_deg);
    uf_text_printf(out, "critical angle against the medium   %.2f deg (margin %.2f deg)\n", o->critical_medium_deg,
                   o->angle_deg - o->critical_medium_deg);
    uf_text_printf(out, "critical angle against the cell     %.2f deg (margin %.2f deg)\n", o->critical_cell_deg,
                   o->angle_deg - o->critical_cell_deg);
    uf_text_printf(out, "1/e depth of the intensity          %.1f nm (1 sd %.1f nm)\n", o->depth_nm, o->depth_sd_nm);
    if (!isnan(o->depth_with_cell_n_nm))
        uf_text_printf(
            out, "  (with the cell's index it would come out as %.1f nm, a frequent slip: medium fills the gap)\n",
            o->depth_with_cell_n_nm);
    uf_text_printf(out, "intensity at the interface          s %.3f, p %.3f of the incident\n\n", o->interface_s,
                   o->interface_p);
    uf_text_add(out, "relative excitation at a gap of     ");
    for (int k = 0; k < GAPS; k++)
        uf_text_printf(out, "%7.0f", gaps_nm[k]);
    uf_text_add(out, " nm\n  exponential                       ");
    for (int k = 0; k < GAPS; k++)
        uf_text_printf(out, "%7.3f", o->exponential[k]);
    uf_text_add(out, "\n  layered (medium under the cell)   ");
    for (int k = 0; k < GAPS; k++)
        uf_text_printf(out, "%7.3f", o->layered[k]);
    uf_text_add(out, o->has_own ? "\n  in force, with stray light        " : "");
    for (int k = 0; k < GAPS && o->has_own; k++)
        uf_text_printf(out, "%7.3f", o->in_force[k]);
    uf_text_add(out, "\n\n");
    put_verdict(out, o);
    uf_text_add(out,
                "Laser caution: near the critical angle the beam can leave the objective towards a face; follow the "
                "local laser safety officer (classes by IEC 60825-1). These numbers do not make a beam safe.\n");
}

/* ---- as JSON --------------------------------------------------------------------------------- */

static json_t *number(double value)
{
    return isfinite(value) ? json_real(uf_round_digits(value, 10)) : json_null();
}

static json_t *decay_json(const optics_numbers *o)
{
    json_t *list = json_array();
    for (int k = 0; k < GAPS; k++) {
        json_t *row = json_object();
        json_object_set_new(row, "gap_nm", number(gaps_nm[k]));
        json_object_set_new(row, "exponential", number(o->exponential[k]));
        json_object_set_new(row, "layered", number(o->layered[k]));
        json_object_set_new(row, "in_force", number(o->in_force[k]));
        json_array_append_new(list, row);
    }
    return list;
}

static uf_status put_json(uf_text *out, const optics_numbers *o, uf_error *error)
{
    json_t *j = json_object();
    json_object_set_new(j, "na_effective", number(o->bench.na_effective));
    json_object_set_new(j, "angle_deg", number(o->angle_deg));
    json_object_set_new(j, "critical_angle_medium_deg", number(o->critical_medium_deg));
    json_object_set_new(j, "critical_angle_cell_deg", number(o->critical_cell_deg));
    json_object_set_new(j, "depth_nm", number(o->depth_nm));
    json_object_set_new(j, "depth_sd_nm", number(o->depth_sd_nm));
    json_object_set_new(j, "depth_with_cell_n_nm", number(o->depth_with_cell_n_nm));
    json_object_set_new(j, "interface_s", number(o->interface_s));
    json_object_set_new(j, "interface_p", number(o->interface_p));
    json_object_set_new(j, "layered_effect_at_cutoff_nm", number(o->layered_effect_nm));
    json_object_set_new(j, "decay", decay_json(o));
    char *text = json_dumps(j, JSON_INDENT(2) | JSON_REAL_PRECISION(10));
    json_decref(j);
    if (!text)
        return uf_fail_memory(error, "the report");
    uf_text_add(out, text);
    uf_text_add(out, "\n");
    free(text);
    return UF_OK;
}

/* ---- all of it ------------------------------------------------------------------------------- */

static uf_status need(double value, const char *what, uf_error *error)
{
    return isnan(value) ? uf_fail(error, UF_INPUT, "optics needs %s, from -i INSTRUMENT or as an option", what)
                        : UF_OK;
}

uf_status uf_optics_report(const uf_settings *s, int as_json, uf_text *out, uf_error *error)
{
    optics_numbers o;
    double angle_or_like = s->interface.angle_deg;
    if (isnan(angle_or_like))
        angle_or_like = isnan(s->interface.na_effective) ? s->interface.depth_nm : s->interface.na_effective;
    uf_status status = need(s->light.wavelength_nm, "wavelength_nm", error);
    if (status == UF_OK)
        status = need(s->interface.substrate_n, "substrate_n", error);
    if (status == UF_OK)
        status = need(s->interface.medium_n, "medium_n", error);
    if (status == UF_OK)
        status = need(angle_or_like, "angle_deg, na_effective or depth_nm", error);
    if (status == UF_OK)
        status = uf_bench_make(s, &o.bench, error);
    if (status != UF_OK)
        return status;
    find_numbers(s, &o);
    if (as_json)
        status = put_json(out, &o, error);
    else
        put_words(out, &o);
    return status == UF_OK ? uf_text_check(out, "the report", error) : status;
}
