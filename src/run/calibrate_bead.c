/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/calibrate_bead.h"

#include <math.h>
#include <stdio.h>

#include "run/calibrate_bead_parts.h"
#include "run/plan.h"

/* Where the search begins when the instrument file names no angle, and the stray depth it begins with. */
static const double usual_depth_nm = 100;

/* The beads may depart from the instrument file by this much before one of the two is called wrong; by more than this no
 * fragment is written unless asked for. Real benches agree within a few percent (common practice, no source). */
static const double agreement = 0.05, contradiction = 0.25;

static const double rough = 0.05, most_misfit = 4, psf_uncertainty = 0.1;

/* ---- set-up ------------------------------------------------------------------------------------ */

static uf_status check_request(const uf_bead_request *r, uf_error *error)
{
    if (!(r->radius_nm >= 200 && r->radius_nm <= 50000))
        return uf_fail(error, UF_USAGE,
                       "--radius-nm %.4g: expected the beads' radius (half the diameter), 200 to 50000 nm, like 2500",
                       r->radius_nm);
    if (!(r->radius_sd_nm >= 0 && r->radius_sd_nm < r->radius_nm / 2))
        return uf_fail(error, UF_USAGE, "--radius-sd-nm %.4g: expected 1 sigma of the radius, 0 to half of it",
                       r->radius_sd_nm);
    if (r->common.image_count < 1)
        return uf_fail(
            error, UF_USAGE,
            "calibrate bead needs near images of beads: underfoot calibrate bead IMAGE... --radius-nm R -i "
            "INSTRUMENT -o FILE");
    return UF_OK;
}

/* The bench, and what it computes for the depth where it names an angle. */
static uf_status find_bench(uf_bead_findings *f, uf_error *error)
{
    const uf_settings *s = f->request->common.settings;
    uf_status status = uf_settings_check_optics(s, error);
    int has_angle =
        !isnan(s->interface.angle_deg) || !isnan(s->interface.na_effective) || !isnan(s->interface.depth_nm);
    if (status == UF_OK)
        status = has_angle ? uf_bench_make(s, &f->bench, error) : uf_bench_without_angle(s, &f->bench, error);
    if (status != UF_OK)
        return status;
    if (!isnan(f->request->medium_n))
        f->bench.medium_n = f->request->medium_n;
    f->computed_depth_nm = f->computed_sd_nm = (double)NAN;
    if (!has_angle)
        return UF_OK;
    const uf_bench *b = &f->bench;
    if (b->na_effective <= b->medium_n)
        return uf_fail(error, UF_INPUT,
                       "n sin(angle) %.4f is not above the beads' medium of %.4f: nothing is evanescent there; set a "
                       "steeper angle or use a medium of lower index",
                       b->na_effective, b->medium_n);
    f->computed_depth_nm = uf_depth_nm(b->wavelength_nm, b->na_effective, b->medium_n);
    f->computed_sd_nm = uf_depth_sd(b);
    return UF_OK;
}

/* Light runs on into a bead whose index exceeds n sin(angle), first of all where it touches. */
static uf_status check_bead_index(const uf_bead_request *r, double na, uf_error *error)
{
    if (isnan(r->bead_n) || isnan(na) || r->bead_n < na)
        return UF_OK;
    return uf_fail(
        error, UF_INPUT,
        "beads of index %.4f frustrate total reflection at n sin(angle) %.4f: light runs on into them where they "
        "touch, and the depth comes out too long; use beads of lower index, or match the medium and the angle "
        "to them (docs/calibration.md)",
        r->bead_n, na);
}

static void fill_setup(uf_bead_findings *f, double image_pixel_um)
{
    const uf_settings *s = f->request->common.settings;
    double psf = f->request->psf_sigma_nm;
    f->setup = (uf_bead_setup){
        .dye = f->request->immersed ? UF_DYE_IMMERSED : UF_DYE_SURFACE,
        .with_stray = f->request->with_stray,
        .radius_um = f->request->radius_nm / 1000,
        .pixel_size_um = isnan(s->pixel.size_um) ? image_pixel_um : s->pixel.size_um,
        .psf_sigma_um = isnan(psf) ? uf_psf_sigma_um(s) : psf / 1000,
        .expected_depth_nm = isnan(f->computed_depth_nm) ? usual_depth_nm : f->computed_depth_nm,
        .scattered_depth_nm = s->decay.scattered_depth_nm,
    };
}

static uf_status check_setup(const uf_bead_setup *s, uf_error *error)
{
    if (isnan(s->pixel_size_um))
        return uf_fail(error, UF_INPUT,
                       "neither the instrument file nor the image says how large a pixel is; add size_um to [pixel]");
    double blur = hypot(s->psf_sigma_um, s->pixel_size_um / sqrt(12));
    if (s->radius_um < 3 * blur)
        return uf_fail(
            error, UF_INPUT,
            "a radius of %.4g nm is less than three times the blur (%.0f nm): the profile shows the point spread "
            "function, not the bead; use larger beads",
            1000 * s->radius_um, 1000 * blur);
    return UF_OK;
}

/* ---- images ------------------------------------------------------------------------------------ */

static uf_status find_in_images(uf_bead_findings *f, uf_reader *reader, uf_error *error)
{
    const uf_calibration_request *r = &f->request->common;
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < r->image_count; k++) {
        uf_arena_mark mark = uf_arena_now(&reader->work->arena);
        uf_channel channel;
        double pixel_um;
        status = uf_read_channel(reader, UF_NEAR, r->images[k], 0, &channel, 1, &pixel_um, error);
        if (status == UF_OK && k == 0) {
            fill_setup(f, pixel_um);
            status = check_setup(&f->setup, error);
        }
        if (status == UF_OK)
            status = uf_beads_find(reader->work, &f->setup, &channel, &f->set, error);
        uf_arena_back(&reader->work->arena, mark);
    }
    return status;
}

/* ---- what it means ----------------------------------------------------------------------------- */

static void find_uncertainty(uf_bead_findings *f)
{
    const uf_bench *b = &f->bench;
    double depth = f->fit.depth_nm.value, na, n = b->medium_n;
    f->by_beads_nm = f->fit.depth_nm.sd;
    f->by_psf_nm = fabs(f->fit.depth_per_psf_nm) * psf_uncertainty / 0.1;
    /* At a given distance from the centre the height goes with 1 / R, and so does the depth. */
    f->by_radius_nm = depth * f->request->radius_sd_nm / f->request->radius_nm;
    f->depth_sd_nm = hypot(hypot(f->by_beads_nm, f->by_psf_nm), f->by_radius_nm);
    na = uf_na_from_depth(depth, b->wavelength_nm, n);
    f->na_effective = na;
    /* na^2 = n^2 + (wavelength / (4 pi d))^2 */
    f->na_effective_sd = hypot((na * na - n * n) / na * f->depth_sd_nm / depth, n / na * b->medium_n_sd);
}

static double departure(const uf_bead_findings *f)
{
    return f->fit.depth_nm.value / f->computed_depth_nm - 1;
}

static uf_bead_verdict judge(const uf_bead_findings *f)
{
    double both_sd = hypot(f->depth_sd_nm, f->computed_sd_nm) / f->computed_depth_nm;
    if (fabs(departure(f)) > fmax(agreement, 2 * both_sd))
        return UF_BEADS_DISAGREE;
    if (f->fit.misfit > most_misfit)
        return UF_BEADS_MISFIT;
    return f->depth_sd_nm > rough * f->fit.depth_nm.value ? UF_BEADS_ROUGH : UF_BEADS_GOOD;
}

static uf_status check_findings(const uf_bead_findings *f, uf_error *error)
{
    const uf_bench *b = &f->bench;
    double depth = f->fit.depth_nm.value,
           most = isnan(b->objective_na) ? b->substrate_n : fmin(b->objective_na, b->substrate_n);
    double thinnest = uf_depth_nm(b->wavelength_nm, most, b->medium_n);
    if (f->na_effective - 2 * f->na_effective_sd > most)
        return uf_fail(
            error, UF_INPUT,
            "the beads give a depth of %.1f nm, thinner than any this bench can make (%.1f nm): is %.4g nm the "
            "radius, and the pixel size right? A wrong radius R gives a depth wrong by its inverse",
            depth, thinnest, f->request->radius_nm);
    if (isnan(f->computed_depth_nm) || fabs(departure(f)) <= contradiction || f->request->despite_optics)
        return check_bead_index(f->request, f->na_effective, error);
    return uf_fail(
        error, UF_INPUT,
        "the beads give a depth of %.1f nm, the instrument file %.1f nm: one of the two is wrong by %.0f %%. A "
        "radius of %.0f nm would agree; check radius (not diameter), pixel size, angle and medium. "
        "--despite-optics writes the beads' result anyway",
        depth, f->computed_depth_nm, 100 * fabs(departure(f)), f->request->radius_nm * depth / f->computed_depth_nm);
}

/* ---- results ----------------------------------------------------------------------------------- */

static uf_status write_fragment(const uf_bead_findings *f, const uf_reader *reader, uf_error *error)
{
    uf_fragment fragment;
    char note[160];
    uf_fragment_start(&fragment, "bead", reader);
    (void)snprintf(note, sizeof note, "%d beads of %.6g nm radius in a medium of %.6g: depth %.4g nm, 1 sd %.2g",
                   f->fit.used, f->request->radius_nm, f->bench.medium_n, f->fit.depth_nm.value, f->depth_sd_nm);
    uf_fragment_note(&fragment, note);
    uf_fragment_number(&fragment, "interface", "na_effective", f->na_effective, 7);
    uf_fragment_number(&fragment, "interface", "na_effective_sd", f->na_effective_sd, 3);
    double share = f->request->with_stray ? fmin(fmax(f->fit.scattered_fraction.value, 0), 0.9) : 0;
    uf_fragment_number(&fragment, "decay", "scattered_fraction", share, 4);
    if (share > 0)
        uf_fragment_number(&fragment, "decay", "scattered_depth_nm",
                           fmin(fmax(f->fit.scattered_depth_nm.value, 100), 100000), 4);
    return uf_fragment_write(&fragment, f->request->common.out_path, error);
}

static uf_status find_all(uf_bead_findings *f, uf_reader *reader, uf_error *error)
{
    uf_status status = check_request(f->request, error);
    if (status == UF_OK)
        status = find_bench(f, error);
    if (status == UF_OK)
        status =
            check_bead_index(f->request, isnan(f->computed_depth_nm) ? (double)NAN : f->bench.na_effective, error);
    if (status == UF_OK)
        status = find_in_images(f, reader, error);
    if (status == UF_OK)
        status = uf_beads_fit(reader->work, &f->setup, &f->set, &f->fit, error);
    if (status != UF_OK)
        return status;
    find_uncertainty(f);
    f->verdict = judge(f);
    return check_findings(f, error);
}

static uf_status write_all(const uf_bead_findings *f, const uf_reader *reader, uf_text *out, uf_error *error)
{
    const uf_calibration_request *r = &f->request->common;
    uf_status status = r->plot_path ? uf_bead_plot(f, r->plot_path, error) : UF_OK;
    if (status == UF_OK)
        status = write_fragment(f, reader, error);
    if (status == UF_OK && r->as_json)
        status = uf_bead_json(out, f, error);
    else if (status == UF_OK)
        uf_bead_words(out, f);
    return status == UF_OK ? uf_text_check(out, "the report", error) : status;
}

uf_status uf_calibrate_bead(const uf_bead_request *request, uf_text *out, uf_error *error)
{
    uf_work work = {0};
    uf_reader reader = {.work = &work, .settings = request->common.settings};
    uf_bead_findings findings = {.request = request};
    uf_status status = uf_pool_new(&work.pool, request->common.threads, error);
    if (status == UF_OK)
        status = find_all(&findings, &reader, error);
    if (status == UF_OK)
        status = write_all(&findings, &reader, out, error);
    uf_bead_set_free(&findings.set);
    uf_reader_free(&reader);
    uf_pool_free(&work.pool);
    uf_arena_free(&work.arena);
    return status;
}
