/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/series_plan.h"

#include <math.h>

#include "run/plan.h"

int uf_series_widest(const uf_settings *s)
{
    int widest = 0;
    for (int k = 1; k < s->series.angles_deg.count; k++)
        if (s->series.angles_deg.values[k] < s->series.angles_deg.values[widest])
            widest = k;
    return widest;
}

/* The bench says the substrate's index, however the settings name it. */
static double angle_index(const uf_settings *s, const uf_bench *bench)
{
    return isnan(s->interface.angle_n) ? bench->substrate_n : s->interface.angle_n;
}

static uf_status refuse_angle(const uf_settings *s, int k, const uf_bench *bench, uf_error *error)
{
    return uf_fail(
        error, UF_INPUT,
        "[series] angles_deg: %.6g deg, the angle of page %d, is not totally reflected where a cell touches "
        "(n sin(angle) %.4f, cell_n %.4f); angles must be larger than %.2f deg",
        s->series.angles_deg.values[k], k + 1, bench->na_effective, bench->cell_n,
        uf_angle_from_na(bench->cell_n, angle_index(s, bench)));
}

/* The bench of one page: the settings' own with that page's angle. */
static uf_status bench_at(const uf_settings *s, int k, uf_bench *bench, uf_error *error)
{
    uf_settings page = *s;
    *bench = (uf_bench){0};
    page.interface.angle_deg = s->series.angles_deg.values[k];
    page.interface.na_effective = page.interface.depth_nm = (double)NAN;
    uf_status status = uf_bench_make(&page, bench, error);
    int is_made = bench->substrate_n > 0;
    return is_made && bench->na_effective <= bench->cell_n ? refuse_angle(s, k, bench, error) : status;
}

uf_status uf_series_plan_bench(const uf_settings *s, uf_plan *plan, uf_error *error)
{
    uf_series *series = &plan->series;
    _Static_assert((int)UF_SERIES_MOST >= (int)UF_REALS_LIMIT, "a series must hold all angles that can be set");
    series->count = s->series.angles_deg.count;
    series->widest = uf_series_widest(s);
    uf_status status = UF_OK;
    if (s->decay.model == UF_DECAY_TABLE)
        status =
            uf_fail(error, UF_INPUT,
                    "a series needs the field itself, a table has its fall only; set [decay] model to layered or "
                    "exponential");
    for (int k = 0; status == UF_OK && k < series->count; k++) {
        uf_bench page;
        status = bench_at(s, k, &page, error);
        series->na_effective[k] = page.na_effective;
        series->power[k] = s->series.power.count ? s->series.power.values[k] : 1;
    }
    return status == UF_OK ? bench_at(s, series->widest, &plan->bench, error) : status;
}

/* ---- what is not known exactly --------------------------------------------------------------- */

/* One input moved: the bench, and the angles of all pages. */
typedef struct movement {
    double angle_deg, na_effective, substrate_n, medium_n, cell_n;
} movement;

static void move(const uf_settings *s, const uf_plan *plan, movement by, double sign, uf_bench *bench,
                 uf_series *series)
{
    double n = angle_index(s, &plan->bench);
    *bench = plan->bench;
    *series = plan->series;
    bench->substrate_n += sign * by.substrate_n;
    bench->medium_n += sign * by.medium_n;
    bench->cell_n += sign * by.cell_n;
    /* An angle quoted in the substrate moves with the substrate's index. */
    n += isnan(s->interface.angle_n) ? sign * by.substrate_n : 0;
    for (int k = 0; k < series->count; k++) {
        double angle = s->series.angles_deg.values[k] + sign * by.angle_deg;
        series->na_effective[k] = uf_na_from_angle(fmin(89.9, angle), n) + sign * by.na_effective;
    }
}

/* How far moved fields place the gap of unmoved signals, nm; NaN where they have left total reflection. */
static double effect(const uf_settings *s, const uf_plan *plan, movement by, double sign, double gap_nm)
{
    double field[UF_SERIES_MOST], slope[UF_SERIES_MOST], weight[UF_SERIES_MOST], gain[UF_SERIES_MOST];
    double moved[UF_SERIES_MOST], moved_slope[UF_SERIES_MOST], sum = 0;
    uf_field_kind kind = {&plan->bench, plan->law.model, plan->law.stray};
    uf_bench bench;
    uf_series series;
    move(s, plan, by, sign, &bench, &series);
    uf_field_kind moved_kind = {&bench, plan->law.model, plan->law.stray};
    uf_series_field(&plan->series, &kind, gap_nm, field, slope);
    uf_series_field(&series, &moved_kind, gap_nm, moved, moved_slope);
    for (int k = 0; k < series.count; k++)
        weight[k] = 1 / field[k];
    uf_series_gain(series.count, field, slope, weight, gain);
    for (int k = 0; k < series.count; k++)
        sum -= gain[k] * (moved[k] - field[k]);
    return sum;
}

static double moved_sd(const uf_settings *s, const uf_plan *plan, movement by, double gap_nm)
{
    double up = effect(s, plan, by, 1, gap_nm), down = effect(s, plan, by, -1, gap_nm);
    if (isnan(up))
        return isnan(down) ? 0 : fabs(down);
    return isnan(down) ? fabs(up) : fabs(up - down) / 2;
}

/* The gap that the exponential in force finds where a layered field made the signals, less the true one. */
static double layered_effect(const uf_plan *plan, double gap_nm)
{
    double signal[UF_SERIES_MOST], slope[UF_SERIES_MOST], weight[UF_SERIES_MOST];
    uf_field_kind layered = {&plan->bench, UF_FIELD_LAYERED, plan->law.stray};
    uf_field_kind in_force = {&plan->bench, plan->law.model, plan->law.stray};
    uf_series_field(&plan->series, &layered, gap_nm, signal, slope);
    for (int k = 0; k < plan->series.count; k++)
        weight[k] = 1 / signal[k];
    return uf_series_fit(&plan->series, &in_force, signal, weight, NULL) - gap_nm;
}

void uf_series_plan_limits(const uf_settings *s, uf_plan *plan)
{
    const movement inputs[] = {{.angle_deg = s->interface.angle_sd_deg},
                               {.na_effective = s->interface.na_effective_sd},
                               {.substrate_n = plan->bench.substrate_n_sd},
                               {.medium_n = plan->bench.medium_n_sd},
                               {.cell_n = plan->law.model == UF_FIELD_LAYERED ? plan->bench.cell_n_sd : 0}};
    uf_field_kind kind = {&plan->bench, plan->law.model, plan->law.stray};
    plan->series.farthest_nm = uf_series_farthest(&plan->series, &kind);
    for (int g = 0; g < UF_SERIES_GAPS; g++) {
        double squares = 0;
        for (size_t k = 0; k < sizeof inputs / sizeof inputs[0]; k++) {
            double sd = moved_sd(s, plan, inputs[k], g * UF_SERIES_GAP_STEP_NM);
            squares += sd * sd;
        }
        plan->series.systematic_nm[g] = round(sqrt(squares) * 1e6) * 1e-6;
    }
    plan->layered_effect_nm = 0;
    if (plan->law.model == UF_FIELD_EXPONENTIAL)
        plan->layered_effect_nm = uf_round_digits(layered_effect(plan, s->contact.cutoff_nm), 6);
}
