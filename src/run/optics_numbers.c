/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/optics_numbers.h"

#include <math.h>
#include <stddef.h>

#include "base/constants.h"
#include "run/decay_law.h"
#include "run/plan.h"

const double uf_optics_gaps_nm[UF_OPTICS_GAPS] = {0, 10, 20, 50, 100, 200};
const uf_stray uf_usual_stray = {0.1, 1200};

/* ---- one input moved ------------------------------------------------------------------------- */

static double depth_of(const uf_bench *b)
{
    return uf_depth_nm(b->wavelength_nm, b->na_effective, b->medium_n);
}

/* What the nominal law reads where the truth obeys the moved bench at the cutoff, minus the cutoff. Both laws are
 * followed in steps of a tenth of a nanometre: good enough for an error, and free of tables. */
static double reading_change(const uf_bench *nominal, const uf_bench *moved, const uf_decay_law *law,
                             double cutoff_nm)
{
    static const double step_nm = 0.1;
    double wanted = uf_relative_excitation(moved, law, cutoff_nm), before = 1;
    if (isnan(wanted))
        return wanted;
    for (double gap = step_nm; gap < 20 * cutoff_nm; gap += step_nm) {
        double here = uf_relative_excitation(nominal, law, gap);
        if (here <= wanted)
            return gap - step_nm * (wanted - here) / (before - here) - cutoff_nm;
        before = here;
    }
    return (double)NAN;
}

static uf_optics_move move(const char *what, const char *unit, double sd, double usual_step)
{
    return (uf_optics_move){.what = what, .unit = unit, .step = sd > 0 ? sd : usual_step, .is_sd = sd > 0};
}

static void judge_move(const uf_optics_numbers *n, const uf_bench *moved, const uf_decay_law *law, uf_optics_move *m)
{
    m->depth_nm = depth_of(moved) - n->depth_nm;
    m->reading_nm = reading_change(&n->bench, moved, law, n->cutoff_nm);
}

static void move_angle(uf_optics_numbers *n)
{
    const uf_settings *s = n->settings;
    uf_bench moved = n->bench;
    uf_optics_move *m = &n->moves[0];
    if (!isnan(n->bench.depth_sd_nm)) {
        *m = move("measured depth", "nm", s->interface.depth_sd_nm, 1);
        moved.na_effective = uf_na_from_depth(n->depth_nm + m->step, moved.wavelength_nm, moved.medium_n);
    } else if (!isnan(s->interface.na_effective)) {
        *m = move("n sin(angle)", "", s->interface.na_effective_sd, 0.001);
        moved.na_effective += m->step;
    } else {
        double index = isnan(s->interface.angle_n) ? n->bench.substrate_n : s->interface.angle_n;
        *m = move("angle", "deg", s->interface.angle_sd_deg, 0.1);
        moved.na_effective = uf_na_from_angle(uf_angle_from_na(n->bench.na_effective, index) + m->step, index);
    }
    judge_move(n, &moved, &n->law, m);
}

static void move_substrate(uf_optics_numbers *n)
{
    const uf_settings *s = n->settings;
    uf_bench moved = n->bench;
    uf_optics_move *m = &n->moves[2];
    int angle_in_substrate = !isnan(s->interface.angle_deg) && isnan(s->interface.angle_n);
    if (!angle_in_substrate && !n->angle_from_wish)
        return;
    *m = move("substrate_n", "", n->bench.substrate_n_sd, 0.001);
    moved.substrate_n += m->step;
    moved.na_effective *= moved.substrate_n / n->bench.substrate_n;
    judge_move(n, &moved, &n->law, m);
}

/* The cell's index acts through the layered field, whichever is in force. */
static void move_cell(uf_optics_numbers *n)
{
    uf_decay_law layered = n->law;
    uf_bench moved = n->bench;
    uf_optics_move *m = &n->moves[3];
    layered.model = UF_FIELD_LAYERED;
    *m = move("cell_n", "", n->bench.cell_n_sd, 0.01);
    moved.cell_n += m->step;
    judge_move(n, &moved, &layered, m);
}

static void find_moves(uf_optics_numbers *n)
{
    uf_bench moved = n->bench;
    n->moves[1] = move("medium_n", "", n->bench.medium_n_sd, 0.001);
    moved.medium_n += n->moves[1].step;
    judge_move(n, &moved, &n->law, &n->moves[1]);
    move_angle(n);
    move_substrate(n);
    move_cell(n);
}

/* ---- wishes ---------------------------------------------------------------------------------- */

/* The largest n sin(angle) the set-up can send. */
static double largest_na(const uf_bench *b)
{
    return isnan(b->objective_na) ? b->substrate_n : fmin(b->substrate_n, b->objective_na);
}

static uf_status wish_depth(const uf_bench *b, double wanted_nm, uf_optics_wish *wish, uf_error *error)
{
    double na = uf_na_from_depth(wanted_nm, b->wavelength_nm, b->medium_n), most = largest_na(b);
    if (most <= b->medium_n)
        return uf_fail(
            error, UF_INPUT,
            "the %s of %.4f is not above medium_n %.4f: no angle is totally reflected, so none gives a depth",
            most < b->substrate_n ? "objective's aperture" : "substrate's index", most, b->medium_n);
    if (na >= most)
        return uf_fail(
            error, UF_INPUT,
            "a depth of %.4g nm needs n sin(angle) %.4f, more than the %s allows (%.4f); the thinnest depth "
            "here is %.1f nm",
            wanted_nm, na, most < b->substrate_n ? "objective" : "substrate", most,
            uf_depth_nm(b->wavelength_nm, most, b->medium_n));
    wish->na_low = wish->na_high = na;
    wish->angle_low_deg = wish->angle_high_deg = uf_angle_from_na(na, b->substrate_n);
    return UF_OK;
}

static int agrees(const uf_bench *bench, double na, double cutoff_nm, double within_nm)
{
    uf_bench b = *bench;
    b.na_effective = na;
    return fabs(uf_layered_effect_nm(&b, cutoff_nm)) <= within_nm &&
           fabs(uf_layered_effect_nm(&b, 2 * cutoff_nm)) <= within_nm;
}

/* The widest run of n sin(angle) where exponential and layered agree at the cutoff and at twice the cutoff. */
static uf_status wish_agreement(const uf_bench *b, double cutoff_nm, uf_optics_wish *wish, uf_error *error)
{
    static const double step = 0.0005;
    double first = fmax(b->medium_n, b->cell_n + 2 * b->cell_n_sd) + step, most = largest_na(b);
    double from = (double)NAN, widest = -1;
    if (most < first)
        return uf_fail(error, UF_INPUT,
                       "the %s of %.4f is below %.4f, which the light must exceed to stay out of medium and cells "
                       "(cell_n + 2 cell_n_sd): no angle will do",
                       most < b->substrate_n ? "objective's aperture" : "substrate's index", most, first);
    for (int k = 0; first + k * step <= most; k++) {
        double na = first + k * step;
        if (!agrees(b, na, cutoff_nm, wish->within_nm)) {
            from = (double)NAN;
            continue;
        }
        from = isnan(from) ? na : from;
        if (na - from > widest) {
            widest = na - from;
            wish->na_low = from;
            wish->na_high = na;
        }
    }
    if (widest < 0)
        return uf_fail(
            error, UF_INPUT,
            "between n sin(angle) %.4f and %.4f an exponential nowhere agrees with layered within %.3g nm at "
            "gaps of %.4g and %.4g nm; ask for more nm, or use model = layered",
            first, most, wish->within_nm, cutoff_nm, 2 * cutoff_nm);
    wish->angle_low_deg = uf_angle_from_na(wish->na_low, b->substrate_n);
    wish->angle_high_deg = uf_angle_from_na(wish->na_high, b->substrate_n);
    return UF_OK;
}

static uf_status find_wishes(const uf_optics_request *request, const uf_bench *bench, uf_optics_numbers *n,
                             uf_error *error)
{
    uf_status status = UF_OK;
    n->for_depth = (uf_optics_wish){.asked = !isnan(request->for_depth_nm), .depth_nm = request->for_depth_nm};
    n->for_agreement =
        (uf_optics_wish){.asked = !isnan(request->for_agreement_nm), .within_nm = request->for_agreement_nm};
    if (n->for_depth.asked)
        status = wish_depth(bench, request->for_depth_nm, &n->for_depth, error);
    if (status == UF_OK && n->for_agreement.asked)
        status = wish_agreement(bench, n->cutoff_nm, &n->for_agreement, error);
    return status;
}

/* ---- the set-up ------------------------------------------------------------------------------ */

/* Settings that name a series of angles stand for its smallest one, whose field reaches farthest. */
static void take_series_angle(uf_settings *s)
{
    for (int k = 0; k < s->series.angles_deg.count; k++)
        if (isnan(s->interface.angle_deg) || s->series.angles_deg.values[k] < s->interface.angle_deg)
            s->interface.angle_deg = s->series.angles_deg.values[k];
}

static int says_an_angle(const uf_settings *s)
{
    return !isnan(s->interface.angle_deg) || !isnan(s->interface.na_effective) || !isnan(s->interface.depth_nm);
}

/* The bench of the settings; without an angle, the one that is wished for. */
static uf_status find_bench(const uf_optics_request *request, uf_optics_numbers *n, uf_error *error)
{
    const uf_settings *s = request->settings;
    uf_settings with_angle = *s;
    uf_status status = uf_settings_check_optics(s, error);
    if (status != UF_OK)
        return status;
    if (!says_an_angle(s) && isnan(request->for_depth_nm) && isnan(request->for_agreement_nm))
        take_series_angle(&with_angle);
    n->series_angles = says_an_angle(s) ? 0 : s->series.angles_deg.count;
    if (says_an_angle(&with_angle)) {
        status = uf_bench_make(&with_angle, &n->bench, error);
        return status == UF_OK ? find_wishes(request, &n->bench, n, error) : status;
    }
    if (isnan(request->for_depth_nm) && isnan(request->for_agreement_nm))
        return uf_fail(error, UF_INPUT,
                       "optics needs angle_deg, na_effective or depth_nm, or a wish: --for-depth-nm 80, or "
                       "--for-agreement-nm 2");
    n->angle_from_wish = 1;
    status = uf_bench_without_angle(s, &n->bench, error);
    if (status == UF_OK)
        status = find_wishes(request, &n->bench, n, error);
    if (status != UF_OK)
        return status;
    const uf_optics_wish *wish = n->for_depth.asked ? &n->for_depth : &n->for_agreement;
    n->bench.na_effective = uf_round_digits((wish->na_low + wish->na_high) / 2, 12);
    return uf_bench_check(&n->bench, error);
}

/* The same bench by what was overridden: a measured angle beside the computed one. */
static void find_earlier(uf_optics_numbers *n)
{
    static const size_t members[UF_OPTICS_EARLIER] = {offsetof(struct uf_settings, interface.angle_deg),
                                                      offsetof(struct uf_settings, interface.na_effective),
                                                      offsetof(struct uf_settings, interface.depth_nm)};
    for (int k = 0; k < UF_OPTICS_EARLIER; k++) {
        const uf_setting *entry = uf_setting_at(members[k]);
        size_t index = (size_t)(entry - uf_setting_table);
        uf_settings before = *n->settings;
        uf_bench bench;
        if (!before.overridden[index])
            continue;
        before.interface.angle_deg = before.interface.na_effective = before.interface.depth_nm = (double)NAN;
        *(double *)((char *)&before + members[k]) = before.overridden_real[index];
        n->earlier[k] = (uf_optics_earlier){entry, before.overridden[index], (double)NAN};
        if (uf_bench_make(&before, &bench, NULL) == UF_OK)
            n->earlier[k].depth_nm = depth_of(&bench);
    }
}

static void find_decays(uf_optics_numbers *n)
{
    uf_decay_law exponential = {.model = UF_FIELD_EXPONENTIAL}, layered = {.model = UF_FIELD_LAYERED}, stray = n->law;
    stray.stray = n->law.stray.fraction > 0 ? n->law.stray : uf_usual_stray;
    for (int k = 0; k < UF_OPTICS_GAPS; k++) {
        double gap = uf_optics_gaps_nm[k];
        n->exponential[k] = uf_relative_excitation(&n->bench, &exponential, gap);
        n->layered[k] = uf_relative_excitation(&n->bench, &layered, gap);
        n->with_stray[k] = uf_relative_excitation(&n->bench, &stray, gap);
        n->in_force[k] = uf_relative_excitation(&n->bench, &n->law, gap);
    }
    n->layered_effect_nm = uf_layered_effect_nm(&n->bench, n->cutoff_nm);
    n->reads_50_nm = 50 + uf_layered_effect_nm(&n->bench, 50);
    n->reads_100_nm = 100 + uf_layered_effect_nm(&n->bench, 100);
}

static double interface_in(const uf_bench *bench, double p_fraction)
{
    uf_bench b = *bench;
    b.p_fraction = p_fraction;
    return uf_interface_intensity(&b);
}

static void find_angles(uf_optics_numbers *n)
{
    const uf_bench *b = &n->bench;
    double quoted_n = n->settings->interface.angle_n;
    n->angle_deg = uf_angle_from_na(b->na_effective, b->substrate_n);
    n->quoted_deg = isnan(quoted_n) ? quoted_n : uf_angle_from_na(b->na_effective, quoted_n);
    n->critical_medium_deg = uf_critical_angle_deg(b->substrate_n, b->medium_n);
    n->critical_cell_deg = uf_critical_angle_deg(b->substrate_n, b->cell_n);
    n->objective_limit_deg = uf_angle_from_na(largest_na(b), b->substrate_n);
    if (isnan(b->objective_na))
        n->objective_limit_deg = (double)NAN;
    n->depth_nm = depth_of(b);
    n->depth_sd_nm = uf_depth_sd(b);
    n->depth_with_cell_n_nm = uf_depth_nm(b->wavelength_nm, b->na_effective, b->cell_n);
    n->interface_s = interface_in(b, 0);
    n->interface_p = interface_in(b, 1);
    n->interface_mixed = interface_in(b, 0.5);
}

uf_status uf_optics_find(const uf_optics_request *request, uf_optics_numbers *numbers, uf_error *error)
{
    uf_optics_numbers *n = numbers;
    *n = (uf_optics_numbers){.settings = request->settings, .cutoff_nm = request->settings->contact.cutoff_nm};
    uf_status status = find_bench(request, n, error);
    if (status == UF_OK)
        status = uf_decay_law_make(request->settings, &n->law, error);
    if (status != UF_OK)
        return status;
    find_angles(n);
    find_earlier(n);
    find_decays(n);
    find_moves(n);
    return UF_OK;
}
