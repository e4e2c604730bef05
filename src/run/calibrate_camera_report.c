/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The report of `calibrate camera`: in words, as JSON, as a plot. */
#include <math.h>
#include <stdio.h>

#include "run/calibrate_camera_parts.h"
#include "run/report_parts.h"

/* ---- words ------------------------------------------------------------------------------------- */

typedef struct note {
    unsigned bit;
    int spoils; /* the numbers should not be used before it is mended */
    const char *word, *text;
} note;

static const note notes[] = {
    {UF_CAMERA_DARK_CLIPPED, 1, "dark_clipped", "dark counts pile up at the lowest count: raise the camera's offset"},
    {UF_CAMERA_CORRELATED, 1, "correlated",
     "neighbouring pixels are correlated: images were smoothed, resized or compressed; save raw counts"},
    {UF_CAMERA_LINE_BENDS, 1, "line_bends",
     "the variance is no straight line of the mean: look at the plot; light that changed, or counts that were "
     "processed"},
    {UF_CAMERA_OFFSETS_DISAGREE, 1, "offsets_disagree",
     "the line does not point at the dark frames' offset: were they taken with the same settings, in the dark?"},
    {UF_CAMERA_LOW_SIGNAL, 1, "low_signal", "the read noise hides the light's own: add longer exposures"},
    {UF_CAMERA_NARROW_RANGE, 0, "narrow_range",
     "the exposures span less than a factor of 3: add shorter and longer ones"},
    {UF_CAMERA_FLICKER, 0, "flicker", "the light flickers by more than 5 % within a pair"},
    {UF_CAMERA_FEW_DARKS, 0, "few_darks",
     "fewer than 8 dark frames: single noisy pixels are not told well; take more"},
    {UF_CAMERA_ROUNDING, 0, "rounding", "the dark noise drowns in rounding: the read noise is an upper limit"}};
enum { NOTES = sizeof notes / sizeof notes[0] };

static int is_spoilt(unsigned set)
{
    for (int k = 0; k < NOTES; k++)
        if (set & notes[k].bit && notes[k].spoils)
            return 1;
    return 0;
}

static void put_range(uf_text *out, const uf_camera_findings *f)
{
    const uf_photon_transfer *t = &f->transfer;
    if (t->full_scale_from == UF_FULL_SCALE_UNSEEN)
        uf_text_add(out, "full scale                              not seen: no pair came near it\n");
    else
        uf_text_printf(out, "%-40s%12.0f ADU, %.0f e (%s)\n", "full scale", t->full_scale_adu, t->full_scale_e,
                       t->full_scale_from == UF_FULL_SCALE_PILED_UP ? "pixels pile up there"
                                                                    : "where the variance is largest");
    if (isnan(t->linear_to_adu))
        uf_text_add(out, "linear range                            not told by these exposures\n");
    else
        uf_text_printf(out, "%-40s%12.0f ADU, within %.2f %% (%s)\n", "linear up to", t->linear_to_adu,
                       100 * t->linear_departure,
                       t->linear_from == UF_LINEAR_BY_EXPOSURE ? "mean against exposure" : "variance against mean");
}

static void put_defects(uf_text *out, const uf_defect_counts *c)
{
    uf_text_printf(out, "%-40s%12lld (%lld hot or odd in the dark, %lld noisy, %lld of odd response)\n", "bad pixels",
                   (long long)c->any, (long long)c->dark, (long long)c->noise, (long long)c->response);
}

static void put_verdict(uf_text *out, const uf_camera_findings *f)
{
    const uf_photon_transfer *t = &f->transfer;
    uf_text_add(out, "\n");
    if (is_spoilt(t->notes))
        uf_text_add(out, "NOT TO BE TRUSTED before this is mended:\n");
    else if (t->gain_sd_e_per_adu > 0.02 * t->gain_e_per_adu)
        uf_text_add(out, "ROUGH. The gain is known to no better than 2 %: add pairs or larger frames.\n");
    else
        uf_text_add(out, "GOOD. Noise follows light as it should.\n");
    for (int k = 0; k < NOTES; k++)
        if (t->notes & notes[k].bit)
            uf_text_printf(out, "  %s\n", notes[k].text);
    if (!f->has_excess && f->request->excess_noise == 1)
        uf_text_add(
            out, "A camera that multiplies electrons needs its excess noise: --excess-noise 1.41, or the same light "
                 "without\nmultiplication (--plain-dark, --plain-flat).\n");
}

void uf_camera_words(uf_text *out, const uf_camera_findings *f)
{
    static const char *const channels[] = {"near", "wide"};
    const uf_photon_transfer *t = &f->transfer;
    double none = (double)NAN;
    uf_text_printf(out, "%s camera, %d x %d px: %d dark frames, %d pairs of flats (%d in the fit)\n\n",
                   channels[f->request->channel], f->dark_frames.width, f->dark_frames.height, f->dark_frames.count,
                   f->point_count, t->points_used);
    uf_report_row(out, "offset", t->offset_adu, t->offset_sd_adu, 2, "ADU");
    uf_report_row(out, "  wanders from frame to frame by", f->dark.drift_adu, none, 2, "ADU");
    uf_report_row(out, "  fixed pattern", f->dark.pattern_adu, none, 2, "ADU");
    uf_report_row(out, "gain", t->gain_e_per_adu, t->gain_sd_e_per_adu, 4, "e/ADU");
    uf_report_row(out, "read noise", t->read_noise_e, t->read_noise_sd_e, 3, "e");
    if (f->has_excess)
        uf_report_row(out, "excess noise (measured)", t->excess_noise, t->excess_noise_sd, 3, "");
    else
        uf_report_row(out, "excess noise (as given)", t->excess_noise, none, 3, "");
    put_range(out, f);
    put_defects(out, &f->counts);
    uf_text_printf(out, "%-40s%12.2f over %d degrees of freedom (p %.3f)\n", "misfit of the line (chi-square)",
                   t->chi_square, t->points_used - 1, t->chi_square_p);
    put_verdict(out, f);
    if (!f->keeps_dark)
        uf_text_add(out, "No dark image is written: the offset is even, and the frames' own noise would be added to "
                         "every image.\n");
    uf_text_printf(out, "Written to %s: give it after the bench's own file, -i bench.ini -i %s\n",
                   f->request->common.out_path, f->request->common.out_path);
}

/* ---- JSON -------------------------------------------------------------------------------------- */

static json_t *points_json(const uf_camera_findings *f)
{
    static const char *const uses[] = {"used", "saturated", "past_the_top", "near_full", "no_light"};
    json_t *list = json_array();
    for (int k = 0; k < f->point_count; k++) {
        json_t *o = json_object();
        uf_json_number(o, "exposure_ms", f->points[k].exposure_ms);
        uf_json_number(o, "mean_adu", f->points[k].mean_adu);
        uf_json_number(o, "variance_adu2", f->points[k].variance_adu2);
        uf_json_number(o, "saturated_fraction", f->points[k].saturated_fraction);
        uf_json_number(o, "variance_departure", f->fits[k].departure);
        uf_json_number(o, "linearity_departure", f->fits[k].linearity);
        json_object_set_new(o, "use", json_string(uses[f->fits[k].use]));
        json_array_append_new(list, o);
    }
    return list;
}

uf_status uf_camera_json(uf_text *out, const uf_camera_findings *f, uf_error *error)
{
    const uf_photon_transfer *t = &f->transfer;
    json_t *o = json_object(), *words = json_array();
    uf_json_number(o, "offset_adu", t->offset_adu);
    uf_json_number(o, "offset_sd_adu", t->offset_sd_adu);
    uf_json_number(o, "gain_e_per_adu", t->gain_e_per_adu);
    uf_json_number(o, "gain_sd_e_per_adu", t->gain_sd_e_per_adu);
    uf_json_number(o, "read_noise_e", t->read_noise_e);
    uf_json_number(o, "read_noise_sd_e", t->read_noise_sd_e);
    uf_json_number(o, "excess_noise", t->excess_noise);
    uf_json_number(o, "excess_noise_sd", f->has_excess ? t->excess_noise_sd : (double)NAN);
    uf_json_number(o, "full_scale_adu", t->full_scale_from == UF_FULL_SCALE_UNSEEN ? (double)NAN : t->full_scale_adu);
    uf_json_number(o, "linear_to_adu", t->linear_to_adu);
    uf_json_number(o, "linear_departure", t->linear_departure);
    json_object_set_new(o, "dark_frames", json_integer(f->dark_frames.count));
    json_object_set_new(o, "pairs", json_integer(f->point_count));
    json_object_set_new(o, "pairs_used", json_integer(t->points_used));
    uf_json_number(o, "chi_square", t->chi_square);
    uf_json_number(o, "chi_square_p", t->chi_square_p);
    json_object_set_new(o, "bad_pixels", json_integer(f->counts.any));
    json_object_set_new(o, "bad_pixels_dark", json_integer(f->counts.dark));
    json_object_set_new(o, "bad_pixels_noise", json_integer(f->counts.noise));
    json_object_set_new(o, "bad_pixels_response", json_integer(f->counts.response));
    json_object_set_new(o, "points", points_json(f));
    for (int k = 0; k < NOTES; k++)
        if (t->notes & notes[k].bit)
            json_array_append_new(words, json_string(notes[k].word));
    json_object_set_new(o, "notes", words);
    json_object_set_new(o, "verdict", json_string(is_spoilt(t->notes) ? "not_to_be_trusted" : "good"));
    return uf_json_finish(out, o, error);
}

/* ---- plot -------------------------------------------------------------------------------------- */

enum { LINE_POINTS = 60 };

typedef struct plot_data {
    int used, left_out;
    double x[UF_REALS_LIMIT], y[UF_REALS_LIMIT], low[UF_REALS_LIMIT], high[UF_REALS_LIMIT], away[UF_REALS_LIMIT],
        away_low[UF_REALS_LIMIT], away_high[UF_REALS_LIMIT], bent[UF_REALS_LIMIT];
    double out_x[UF_REALS_LIMIT], out_y[UF_REALS_LIMIT];
    double line_x[LINE_POINTS], line_y[LINE_POINTS];
} plot_data;

static void fill_points(const uf_camera_findings *f, plot_data *d)
{
    double foot = f->dark.variance_adu2;
    for (int k = 0; k < f->point_count; k++) {
        const uf_photon_point *p = &f->points[k];
        double variance = p->variance_adu2 - foot;
        if (!(p->signal_adu > 0) || !(variance > 0))
            continue;
        if (f->fits[k].use != UF_POINT_USED) {
            d->out_x[d->left_out] = p->signal_adu;
            d->out_y[d->left_out++] = variance;
            continue;
        }
        int n = d->used++;
        double relative = 200 * p->variance_sd_adu2 / variance;
        d->x[n] = p->signal_adu;
        d->y[n] = variance;
        d->low[n] = fmax(variance - 2 * p->variance_sd_adu2, variance / 100);
        d->high[n] = variance + 2 * p->variance_sd_adu2;
        d->away[n] = 100 * f->fits[k].departure;
        d->away_low[n] = d->away[n] - relative;
        d->away_high[n] = d->away[n] + relative;
        d->bent[n] = 100 * f->fits[k].linearity;
    }
}

static void fill_line(const uf_camera_findings *f, plot_data *d)
{
    double from = INFINITY, to = 0;
    for (int k = 0; k < d->used + d->left_out; k++) {
        double x = k < d->used ? d->x[k] : d->out_x[k - d->used];
        from = fmin(from, x);
        to = fmax(to, x);
    }
    for (int k = 0; k < LINE_POINTS; k++) {
        d->line_x[k] = from * pow(to / from, (double)k / (LINE_POINTS - 1));
        d->line_y[k] = f->transfer.slope_adu * d->line_x[k];
    }
}

uf_status uf_camera_plot(const uf_camera_findings *f, const char *path, uf_error *error)
{
    plot_data d = {0};
    char title[96];
    double none = (double)NAN;
    fill_points(f, &d);
    fill_line(f, &d);
    double zero_x[] = {d.line_x[0], d.line_x[LINE_POINTS - 1]}, zero_y[] = {0, 0};
    (void)snprintf(title, sizeof title, "Photon transfer: %.4g e/ADU", f->transfer.gain_e_per_adu);
    const uf_plot_series line[] = {{"fit", LINE_POINTS, d.line_x, d.line_y, NULL, NULL, UF_PLOT_BLUE, UF_LINE_SOLID,
                                    UF_MARK_NONE, UF_SPREAD_NONE},
                                   {"pairs (bars: 2 sd)", d.used, d.x, d.y, d.low, d.high, UF_PLOT_DARK, UF_LINE_NONE,
                                    UF_MARK_DISC, UF_SPREAD_BARS},
                                   {"pairs left out", d.left_out, d.out_x, d.out_y, NULL, NULL, UF_PLOT_AMBER,
                                    UF_LINE_NONE, UF_MARK_DIAMOND, UF_SPREAD_NONE}};
    const uf_plot_series away[] = {
        {"variance (bars: 2 sd)", d.used, d.x, d.away, d.away_low, d.away_high, UF_PLOT_DARK, UF_LINE_NONE,
         UF_MARK_DISC, UF_SPREAD_BARS},
        {"mean against exposure", d.used, d.x, d.bent, NULL, NULL, UF_PLOT_AMBER, UF_LINE_NONE, UF_MARK_TRIANGLE,
         UF_SPREAD_NONE},
        {NULL, 2, zero_x, zero_y, NULL, NULL, UF_PLOT_BLUE, UF_LINE_SOLID, UF_MARK_NONE, UF_SPREAD_NONE}};
    const uf_plot_panel panels[] = {{title,
                                     {"signal above the dark (ADU)", none, none, 1},
                                     {"variance above the dark's (ADU\u00b2)", none, none, 1},
                                     line,
                                     d.left_out ? 3 : 2,
                                     NULL,
                                     0,
                                     NULL,
                                     0},
                                    {"Departure from a straight line",
                                     {"signal above the dark (ADU)", none, none, 1},
                                     {"departure (%)", none, none, 0},
                                     away,
                                     3,
                                     NULL,
                                     0,
                                     NULL,
                                     0}};
    return uf_plot_file(panels, 2, 1300, 560, path, error);
}
