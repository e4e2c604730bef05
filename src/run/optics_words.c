/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The report of `optics` in words. */
#include <math.h>
#include <stdio.h>

#include "run/optics_numbers.h"

static void put_choice_word(uf_text *out, const uf_settings *s, size_t member)
{
    int k = (int)(uf_setting_at(member) - uf_setting_table);
    uf_setting_value(out, s, k);
}

#define MEMBER(member) offsetof(struct uf_settings, member)

static void put_setup(uf_text *out, const uf_optics_numbers *n)
{
    const uf_settings *s = n->settings;
    const uf_bench *b = &n->bench;
    uf_text_printf(out, "%.4g nm, ", b->wavelength_nm);
    put_choice_word(out, s, MEMBER(interface.geometry));
    if (!isnan(b->objective_na))
        uf_text_printf(out, " of NA %.4g", b->objective_na);
    uf_text_printf(out, "; substrate %.4f", b->substrate_n);
    if (s->interface.substrate != UF_SETTING_NOT_GIVEN) {
        uf_text_add(out, " (");
        put_choice_word(out, s, MEMBER(interface.substrate));
        uf_text_add(out, ")");
    }
    if (b->coating_nm > 0)
        uf_text_printf(out, ", coated with %.4g nm of %.4g", b->coating_nm, b->coating_n);
    uf_text_printf(out, ", medium %.4f", b->medium_n);
    if (s->interface.medium != UF_SETTING_NOT_GIVEN) {
        uf_text_add(out, " (");
        put_choice_word(out, s, MEMBER(interface.medium));
        uf_text_printf(out, " at %.4g deg C)", s->interface.temperature_c);
    }
    uf_text_printf(out, ", cell %.4g\n\n", b->cell_n);
}

/* ---- wishes ---------------------------------------------------------------------------------- */

static void put_wishes(uf_text *out, const uf_optics_numbers *n)
{
    const uf_optics_wish *depth = &n->for_depth, *agreement = &n->for_agreement;
    double safe_na = n->bench.cell_n + 2 * n->bench.cell_n_sd;
    if (depth->asked)
        uf_text_printf(out, "For a depth of %.4g nm set %.2f deg in the substrate: n sin(angle) %.4f%s.\n",
                       depth->depth_nm, depth->angle_low_deg, depth->na_low,
                       depth->na_low <= safe_na ? ", too little for cells (below)" : "");
    if (agreement->asked)
        uf_text_printf(out,
                       "An exponential agrees with the layered field within %.3g nm, at gaps of %.4g and %.4g nm,\n"
                       "from %.2f to %.2f deg: n sin(angle) %.4f to %.4f.\n",
                       agreement->within_nm, n->cutoff_nm, 2 * n->cutoff_nm, agreement->angle_low_deg,
                       agreement->angle_high_deg, agreement->na_low, agreement->na_high);
    if (n->series_angles && !n->angle_from_wish)
        uf_text_printf(out, "A series of %d angles; the numbers below are those of its smallest.\n\n",
                       n->series_angles);
    if (n->angle_from_wish)
        uf_text_printf(out, "The numbers below are those of %.2f deg.\n", n->angle_deg);
    else if (depth->asked || agreement->asked)
        uf_text_printf(out, "The numbers below are those of the bench as it stands, %.2f deg.\n", n->angle_deg);
    if (depth->asked || agreement->asked)
        uf_text_add(out, "\n");
}

/* ---- angles and field ------------------------------------------------------------------------ */

static void put_limit(uf_text *out, const uf_optics_numbers *n, const char *what, double limit_deg, double limit_na)
{
    if (!isnan(limit_deg))
        uf_text_printf(out, "%-38s%9.2f%9.2f%14.4f\n", what, limit_deg, fabs(n->angle_deg - limit_deg), limit_na);
}

static void put_angles(uf_text *out, const uf_optics_numbers *n)
{
    const uf_bench *b = &n->bench;
    uf_text_printf(out, "%-38s%9s%9s%14s\n", "", "deg", "margin", "n sin(angle)");
    uf_text_printf(out, "%-38s%9.2f%9s%14.4f\n", "angle of incidence, in the substrate", n->angle_deg, "",
                   b->na_effective);
    if (!isnan(n->quoted_deg))
        uf_text_printf(out, "  as quoted in an index of %-13.4g%9.2f\n", n->settings->interface.angle_n,
                       n->quoted_deg);
    put_limit(out, n, "critical angle against the medium", n->critical_medium_deg, b->medium_n);
    put_limit(out, n, "critical angle against the cell", n->critical_cell_deg, b->cell_n);
    put_limit(out, n, "steepest angle the objective sends", n->objective_limit_deg,
              fmin(b->objective_na, b->substrate_n));
}

/* Measured beside computed, where a later file overrode an earlier one. */
static void put_earlier(uf_text *out, const uf_optics_numbers *n)
{
    for (int k = 0; k < UF_OPTICS_EARLIER; k++) {
        const uf_optics_earlier *e = &n->earlier[k];
        if (!e->entry)
            continue;
        if (isnan(e->depth_nm))
            uf_text_printf(out, "  overridden: %s = %s\n", e->entry->key, e->said);
        else
            uf_text_printf(out, "%-38s%9.1f nm (%+.1f %%): %s = %s\n", "  by what was overridden it would be",
                           e->depth_nm, 100 * (e->depth_nm / n->depth_nm - 1), e->entry->key, e->said);
    }
}

static void put_field(uf_text *out, const uf_optics_numbers *n)
{
    uf_text_printf(out, "\n%-38s%9.1f nm", "depth: 1/e of the intensity, in medium", n->depth_nm);
    if (n->depth_sd_nm > 0)
        uf_text_printf(out, " (1 sd %.1f nm)", n->depth_sd_nm);
    uf_text_add(out, "\n");
    put_earlier(out, n);
    if (!isnan(n->depth_with_cell_n_nm))
        uf_text_printf(out, "%-38s%9.1f nm (a frequent slip: medium fills the gap)\n",
                       "  with the cell's index it would be", n->depth_with_cell_n_nm);
    uf_text_printf(out, "%-38ss %.3f, p %.3f, mixed %.3f of the incident\n",
                   n->bench.coating_nm > 0 ? "intensity on top of the coating" : "intensity at the interface",
                   n->interface_s, n->interface_p, n->interface_mixed);
}

static void put_curve(uf_text *out, const char *what, const double *values)
{
    uf_text_printf(out, "  %-36s", what);
    for (int k = 0; k < UF_OPTICS_GAPS; k++)
        uf_text_printf(out, "%8.3f", values[k]);
    uf_text_add(out, "\n");
}

static void put_decays(uf_text *out, const uf_optics_numbers *n)
{
    const uf_stray *stray = n->law.stray.fraction > 0 ? &n->law.stray : &uf_usual_stray;
    int stray_in_force = n->law.stray.fraction > 0;
    char what[80];
    uf_text_printf(out, "\n%-38s", "relative excitation at a gap of, nm");
    for (int k = 0; k < UF_OPTICS_GAPS; k++)
        uf_text_printf(out, "%8.0f", uf_optics_gaps_nm[k]);
    uf_text_add(out, "\n");
    put_curve(out, "exponential", n->exponential);
    put_curve(out, "layered: medium under a cell", n->layered);
    if (n->law.model == UF_FIELD_TABLE && !stray_in_force)
        put_curve(out, "in force: the measured table", n->in_force);
    (void)snprintf(what, sizeof what, "%s %.3g %% stray light", stray_in_force ? "in force: with" : "with, say,",
                   100 * stray->fraction);
    if (stray_in_force || !isnan(n->bench.objective_na))
        put_curve(out, what, n->with_stray);
    uf_text_printf(out, "\nAn exponential reads a layered 50 nm as %.1f nm, and 100 nm as %.1f nm.\n", n->reads_50_nm,
                   n->reads_100_nm);
}

/* ---- what one sd does ------------------------------------------------------------------------ */

static void put_change(uf_text *out, double change)
{
    if (isnan(change))
        uf_text_printf(out, "%12s", "no field");
    else
        uf_text_printf(out, "%+9.1f nm", fabs(change) < 0.05 ? 0.0 : change);
}

static void put_moves(uf_text *out, const uf_optics_numbers *n)
{
    int steps = 0;
    char cutoff[48];
    (void)snprintf(cutoff, sizeof cutoff, "a gap of %.4g nm", n->cutoff_nm);
    uf_text_printf(out, "\n%-38s%12s%22s\n", "if the truth is larger by", "depth", cutoff);
    for (int k = 0; k < UF_OPTICS_MOVES; k++) {
        const uf_optics_move *m = &n->moves[k];
        char what[80];
        if (!m->what)
            continue;
        (void)snprintf(what, sizeof what, "  %s %.3g%s%s%s", m->what, m->step, *m->unit ? " " : "", m->unit,
                       m->is_sd ? " (1 sd)" : " *");
        uf_text_printf(out, "%-38s", what);
        put_change(out, m->depth_nm);
        uf_text_add(out, "     reads");
        put_change(out, m->reading_nm);
        uf_text_add(out, k == 3 ? " (layered)\n" : "\n");
        steps += !m->is_sd;
    }
    if (steps)
        uf_text_add(out, "  * no sd is given for it: a customary step\n");
}

/* ---- verdict --------------------------------------------------------------------------------- */

static void put_verdict(uf_text *out, const uf_optics_numbers *n)
{
    const uf_bench *b = &n->bench;
    double needed = b->cell_n + 2 * b->cell_n_sd, needed_deg = uf_angle_from_na(needed, b->substrate_n);
    uf_text_add(out, "\n");
    if (b->na_effective <= b->cell_n)
        uf_text_printf(
            out,
            "NOT FOR CELLS. Over bare medium the light stays at the surface, but where a cell touches it runs\n"
            "on into the cell: n sin(angle) %.4f is not above the cell's index %.4g. Gaps mean nothing "
            "there.\n",
            b->na_effective, b->cell_n);
    else if (uf_bench_leaks_into_cell(b))
        uf_text_printf(
            out,
            "BARELY. n sin(angle) %.4f exceeds the cell's index %.4g by less than 2 sd (of %.3g each): dense\n"
            "parts of a cell may let light through and look closer than they are.\n",
            b->na_effective, b->cell_n, b->cell_n_sd);
    else
        uf_text_add(out, "GOOD. The light stays at the surface, under medium and under cells.\n");
    if (uf_bench_leaks_into_cell(b) && !isnan(needed_deg))
        uf_text_printf(out, "Go beyond %.2f deg (n sin(angle) %.4f).\n", needed_deg, needed);
    if (isnan(b->objective_na) && n->settings->interface.geometry == UF_GEOMETRY_OBJECTIVE)
        uf_text_printf(out, "objective_na is not given: only an objective of NA above %.4f can send this angle.\n",
                       b->na_effective);
    else if (b->objective_na <= needed)
        uf_text_printf(out, "This objective (NA %.4g) cannot go there; 1.45 or more is usual for cells.\n",
                       b->objective_na);
    if (fabs(n->layered_effect_nm) > 3 && n->law.model == UF_FIELD_EXPONENTIAL && b->na_effective > b->cell_n)
        uf_text_printf(out,
                       "At the cutoff of %.4g nm an exponential is off by %+.1f nm: use model = layered, or ask\n"
                       "--for-agreement-nm 2 for the angles where it is not.\n",
                       n->cutoff_nm, n->layered_effect_nm);
}

void uf_optics_put_words(uf_text *out, const uf_optics_numbers *numbers)
{
    put_setup(out, numbers);
    put_wishes(out, numbers);
    put_angles(out, numbers);
    put_field(out, numbers);
    put_decays(out, numbers);
    put_moves(out, numbers);
    put_verdict(out, numbers);
    uf_text_add(
        out, "\nLaser caution: near the critical angle the beam can leave the objective towards a face; follow the "
             "local\nlaser safety officer (classes by IEC 60825-1). These numbers do not make a beam safe.\n");
}
