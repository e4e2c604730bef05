/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The report of `calibrate bead`: in words, as JSON, as a plot. */
#include <math.h>
#include <stdio.h>

#include "run/calibrate_bead_parts.h"
#include "run/report_parts.h"

/* ---- words ------------------------------------------------------------------------------------- */

static void put_left_out(uf_text *out, const uf_bead_set *set)
{
    static const char *const words[UF_BEAD_STATES] = {[UF_BEAD_AT_EDGE] = "cut by the edge",
                                                      [UF_BEAD_SATURATED] = "saturated",
                                                      [UF_BEAD_OVERLAPPING] = "overlapping",
                                                      [UF_BEAD_DIM] = "dim (off the substrate or hardly dyed)",
                                                      [UF_BEAD_OUTLIER] = "unlike the rest"};
    const char *before = "; left out: ";
    for (int k = UF_BEAD_USED + 1; k < UF_BEAD_STATES; k++) {
        int count = uf_beads_in_state(set, (uf_bead_state)k);
        if (!count)
            continue;
        uf_text_printf(out, "%s%d %s", before, count, words[k]);
        before = ", ";
    }
    uf_text_add(out, "\n\n");
}

static void put_row(uf_text *out, const char *what, const char *format, double value)
{
    uf_text_printf(out, "%-40s", what);
    char text[64];
    (void)snprintf(text, sizeof text, format, value); // NOLINT: formats are ours
    uf_text_printf(out, "%12s", text);
}

static void put_stray(uf_text *out, const uf_bead_findings *f)
{
    const uf_bead_figure *share = &f->fit.scattered_fraction, *depth = &f->fit.scattered_depth_nm;
    if (!f->request->with_stray) {
        uf_text_add(out, "stray light: none taken into account (--model scattered fits it)\n");
        return;
    }
    put_row(out, "stray light, share at gap 0", "%.1f %%", 100 * share->value);
    uf_text_printf(out, "  1 sd %.2f %% (95 %%: %.1f to %.1f)\n", 100 * share->sd, 100 * share->low,
                   100 * share->high);
    put_row(out, "  its depth", "%.0f nm", depth->value);
    if (f->fit.scattered_depth_fitted)
        uf_text_printf(out, "  1 sd %.0f nm\n", depth->sd);
    else
        uf_text_add(out, "  (taken from the settings: these beads do not tell it)\n");
}

static void put_comparison(uf_text *out, const uf_bead_findings *f)
{
    if (isnan(f->computed_depth_nm)) {
        uf_text_add(out, "The instrument file names no angle to compare with.\n");
        return;
    }
    put_row(out, "computed from the instrument file", "%.1f nm", f->computed_depth_nm);
    if (f->computed_sd_nm > 0)
        uf_text_printf(out, "  1 sd %.1f nm", f->computed_sd_nm);
    uf_text_printf(out, "  (n sin(angle) %.4f); beads %+.1f %%\n", f->bench.na_effective,
                   100 * (f->fit.depth_nm.value / f->computed_depth_nm - 1));
}

static void put_verdict(uf_text *out, const uf_bead_findings *f)
{
    switch (f->verdict) {
    case UF_BEADS_GOOD:
        uf_text_add(out, "GOOD. The beads tell one depth");
        uf_text_add(out, isnan(f->computed_depth_nm) ? ".\n" : ", and it is the one the instrument file computes.\n");
        break;
    case UF_BEADS_ROUGH:
        uf_text_add(out,
                    "ROUGH. The depth is known to no better than a twentieth: image more beads, or larger ones.\n");
        break;
    case UF_BEADS_MISFIT:
        uf_text_printf(
            out,
            "BARELY. The profile departs from a sphere's (misfit %.1f, 1 is noise alone): sizes may vary, the "
            "label be patchy or the focus off. Look at the plot (--plot).\n",
            f->fit.misfit);
        break;
    case UF_BEADS_DISAGREE:
        uf_text_add(
            out, "DIFFERS from the instrument file's optics. Beads see the field itself: trust them where radius and "
                 "pixel size are sure, and look for the reason (angle, index, focus) before you do.\n");
        break;
    }
    if (isnan(f->request->bead_n))
        uf_text_printf(
            out,
            "--bead-n is not given: beads of an index above %.3f (silica 1.46, polystyrene 1.59) let light run on "
            "into them and make the depth too long.\n",
            f->na_effective);
    if (!(f->request->radius_sd_nm > 0))
        uf_text_add(out,
                    "--radius-sd-nm is not given: an error of the radius goes into the depth in full, percent by "
                    "percent.\n");
}

void uf_bead_words(uf_text *out, const uf_bead_findings *f)
{
    const uf_bead_figure *depth = &f->fit.depth_nm;
    uf_text_printf(out, "%d beads of %.6g nm radius in %d image%s, dye %s", f->fit.used, f->request->radius_nm,
                   f->set.images, f->set.images == 1 ? "" : "s", f->request->immersed ? "around them" : "on them");
    put_left_out(out, &f->set);
    put_row(out, "depth: 1/e of the intensity, in medium", "%.1f nm", depth->value);
    uf_text_printf(out, "  1 sd %.1f nm (beads alone, 95 %%: %.1f to %.1f)\n", f->depth_sd_nm, depth->low,
                   depth->high);
    uf_text_printf(out, "  its sd: beads %.2f nm; point spread function, if a tenth wider, %.2f nm; radius %.2f nm\n",
                   f->by_beads_nm, f->by_psf_nm, f->by_radius_nm);
    put_row(out, "n sin(angle)", "%.4f", f->na_effective);
    uf_text_printf(out, "  1 sd %.4f", f->na_effective_sd);
    double angle = uf_angle_from_na(f->na_effective, f->bench.substrate_n);
    if (!isnan(angle))
        uf_text_printf(out, ", %.2f deg in the substrate", angle);
    uf_text_add(out, "\n");
    put_stray(out, f);
    put_row(out, "depth from bead to bead, 1 sd", "%.1f %%", 100 * f->fit.bead_to_bead);
    put_row(out, "\nmisfit (1 is noise alone)", "%.2f", f->fit.misfit);
    uf_text_add(out, "\n");
    put_comparison(out, f);
    uf_text_add(out, "\n");
    put_verdict(out, f);
    uf_text_printf(out, "Written to %s: give it after the bench's own file, -i bench.ini -i %s\n",
                   f->request->common.out_path, f->request->common.out_path);
    uf_text_add(out,
                "\nLaser caution: beads are set up with the beam near the critical angle, where it can leave the "
                "objective\ntowards a face; follow the local laser safety officer.\n");
}

/* ---- JSON -------------------------------------------------------------------------------------- */

static void put_figure(json_t *o, const char *stem, const char *unit, const uf_bead_figure *f, double sd)
{
    char name[64];
    (void)snprintf(name, sizeof name, "%s%s", stem, unit);
    uf_json_number(o, name, f->value);
    (void)snprintf(name, sizeof name, "%s_sd%s", stem, unit);
    uf_json_number(o, name, sd);
    (void)snprintf(name, sizeof name, "%s_low%s", stem, unit);
    uf_json_number(o, name, f->low);
    (void)snprintf(name, sizeof name, "%s_high%s", stem, unit);
    uf_json_number(o, name, f->high);
}

uf_status uf_bead_json(uf_text *out, const uf_bead_findings *f, uf_error *error)
{
    static const char *const verdicts[] = {"good", "rough", "misfit", "disagrees"};
    static const char *const counts[UF_BEAD_STATES] = {"beads_used",        "beads_at_edge", "beads_saturated",
                                                       "beads_overlapping", "beads_dim",     "beads_unlike"};
    json_t *o = json_object();
    for (int k = 0; k < UF_BEAD_STATES; k++)
        json_object_set_new(o, counts[k], json_integer(uf_beads_in_state(&f->set, (uf_bead_state)k)));
    json_object_set_new(o, "images", json_integer(f->set.images));
    put_figure(o, "depth", "_nm", &f->fit.depth_nm, f->depth_sd_nm);
    uf_json_number(o, "depth_sd_beads_nm", f->by_beads_nm);
    uf_json_number(o, "depth_sd_psf_nm", f->by_psf_nm);
    uf_json_number(o, "depth_sd_radius_nm", f->by_radius_nm);
    uf_json_number(o, "na_effective", f->na_effective);
    uf_json_number(o, "na_effective_sd", f->na_effective_sd);
    put_figure(o, "scattered_fraction", "", &f->fit.scattered_fraction, f->fit.scattered_fraction.sd);
    put_figure(o, "scattered_depth", "_nm", &f->fit.scattered_depth_nm, f->fit.scattered_depth_nm.sd);
    uf_json_number(o, "bead_to_bead", f->fit.bead_to_bead);
    uf_json_number(o, "misfit", f->fit.misfit);
    uf_json_number(o, "computed_depth_nm", f->computed_depth_nm);
    uf_json_number(o, "computed_depth_sd_nm", f->computed_sd_nm);
    json_object_set_new(o, "verdict", json_string(verdicts[f->verdict]));
    return uf_json_finish(out, o, error);
}

/* ---- plot -------------------------------------------------------------------------------------- */

typedef struct plot_data {
    double low[UF_BEAD_PLOT_BINS], high[UF_BEAD_PLOT_BINS], away[UF_BEAD_PLOT_BINS], away_low[UF_BEAD_PLOT_BINS],
        away_high[UF_BEAD_PLOT_BINS], floor[UF_BEAD_PLOT_BINS], stray[UF_BEAD_PLOT_BINS];
} plot_data;

/* The same data twice: as imaged, against the distance from the centre, and what is left of them. */
uf_status uf_bead_plot(const uf_bead_findings *f, const char *path, uf_error *error)
{
    plot_data data, *d = &data;
    const uf_bead_result *r = &f->fit;
    double none = (double)NAN, zero_x[] = {0, r->bin_um[r->bins - 1]}, zero_y[] = {0, 0};
    char title[96];
    for (int k = 0; k < r->bins; k++) {
        d->low[k] = r->bin_value[k] - 2 * r->bin_sd[k];
        d->high[k] = r->bin_value[k] + 2 * r->bin_sd[k];
        d->away[k] = 100 * (r->bin_value[k] - r->bin_model[k]) / r->bin_model[0];
        d->away_low[k] = d->away[k] - 200 * r->bin_sd[k] / fabs(r->bin_model[0]);
        d->away_high[k] = d->away[k] + 200 * r->bin_sd[k] / fabs(r->bin_model[0]);
        d->stray[k] = r->bin_model[k] - r->bin_evanescent[k];
    }
    (void)snprintf(title, sizeof title, "Mean profile of %d beads: depth %.1f nm", r->used, r->depth_nm.value);
    const uf_plot_series profile[] = {{"beads (bars: 2 sd)", r->bins, r->bin_um, r->bin_value, d->low, d->high,
                                       UF_PLOT_DARK, UF_LINE_NONE, UF_MARK_RING, UF_SPREAD_BARS},
                                      {"fit", r->bins, r->bin_um, r->bin_model, NULL, NULL, UF_PLOT_BLUE,
                                       UF_LINE_SOLID, UF_MARK_NONE, UF_SPREAD_NONE},
                                      {"stray part of it", r->bins, r->bin_um, d->stray, NULL, NULL, UF_PLOT_AMBER,
                                       UF_LINE_DASHED, UF_MARK_NONE, UF_SPREAD_NONE}};
    const uf_plot_series residuals[] = {
        {"beads minus fit (bars: 2 sd)", r->bins, r->bin_um, d->away, d->away_low, d->away_high, UF_PLOT_DARK,
         UF_LINE_NONE, UF_MARK_RING, UF_SPREAD_BARS},
        {NULL, 2, zero_x, zero_y, NULL, NULL, UF_PLOT_BLUE, UF_LINE_SOLID, UF_MARK_NONE, UF_SPREAD_NONE}};
    const uf_plot_panel panels[] = {{title,
                                     {"distance from the bead's centre (\u00b5m)", 0, none, 0},
                                     {f->request->immersed ? "light (nm of dyed medium, excited as at gap 0)"
                                                           : "light (flat membrane at gap 0 = 1)",
                                      none, none, 0},
                                     profile,
                                     f->request->with_stray ? 3 : 2,
                                     NULL,
                                     0,
                                     NULL,
                                     0},
                                    {"What the fit leaves",
                                     {"distance from the bead's centre (\u00b5m)", 0, none, 0},
                                     {"difference (% of the centre)", none, none, 0},
                                     residuals,
                                     2,
                                     NULL,
                                     0,
                                     NULL,
                                     0}};
    return uf_plot_file(panels, 2, 1300, 560, path, error);
}
