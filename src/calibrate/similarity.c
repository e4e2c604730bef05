/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "calibrate/similarity.h"

#include <math.h>

#include "base/constants.h"
#include "fit/linear.h"
#include "fit/robust.h"

enum { ROUNDS = 5, MOST_SHIFTS = 4096, PARAMETERS = 4 };
static const double outlier_sds = 4, least_outlier_px = 0.1;

static void add(uf_linear *sums, const uf_local_shift *s, double reach)
{
    double x = s->x_px / reach, y = s->y_px / reach;
    const double across[] = {1, 0, x, -y}, down[] = {0, 1, y, x};
    uf_linear_add(sums, across, s->dx_px, 1);
    uf_linear_add(sums, down, s->dy_px, 1);
}

static double distance_from(const uf_linear_fit *fit, const uf_local_shift *s, double reach)
{
    double x = s->x_px / reach, y = s->y_px / reach;
    return hypot(fit->value[0] + fit->value[2] * x - fit->value[3] * y - s->dx_px,
                 fit->value[1] + fit->value[3] * x + fit->value[2] * y - s->dy_px);
}

static int solve(uf_local_shift *shifts, int count, double reach, uf_linear_fit *fit)
{
    uf_linear sums = {.parameters = PARAMETERS};
    int used = 0;
    for (int k = 0; k < count; k++)
        if (!shifts[k].is_outlier) {
            add(&sums, &shifts[k], reach);
            used++;
        }
    return used >= 4 && uf_linear_solve(&sums, fit) ? used : 0;
}

/* How many changed sides. The median distance of a plane's normal errors is 1.1774 sd (Rayleigh's distribution). */
static int mark_outliers(uf_local_shift *shifts, int count, double reach, const uf_linear_fit *fit)
{
    double away[MOST_SHIFTS];
    int changed = 0;
    for (int k = 0; k < count; k++)
        away[k] = distance_from(fit, &shifts[k], reach);
    double most = fmax(least_outlier_px, outlier_sds * uf_median(away, (size_t)count) / 1.1774);
    for (int k = 0; k < count; k++) {
        int is_outlier = distance_from(fit, &shifts[k], reach) > most;
        changed += is_outlier != shifts[k].is_outlier;
        shifts[k].is_outlier = is_outlier;
    }
    return changed;
}

int uf_similarity_fit(uf_local_shift *shifts, int count, double reach_px, uf_similarity *out)
{
    uf_linear_fit fit;
    count = count > MOST_SHIFTS ? MOST_SHIFTS : count;
    for (int k = 0; k < count; k++)
        shifts[k].is_outlier = 0;
    int used = solve(shifts, count, reach_px, &fit);
    for (int round = 0; used && round < ROUNDS && mark_outliers(shifts, count, reach_px, &fit); round++)
        used = solve(shifts, count, reach_px, &fit);
    if (!used)
        return 0;
    *out = (uf_similarity){.dx_px = fit.value[0],
                           .dy_px = fit.value[1],
                           .shift_sd_px = fmax(fit.sd[0], fit.sd[1]),
                           .scale = fit.value[2] / reach_px,
                           .scale_sd = fit.sd[2] / reach_px,
                           .rotation_deg = fit.value[3] / reach_px * 180 / UF_PI,
                           .rotation_sd_deg = fit.sd[3] / reach_px * 180 / UF_PI,
                           .residual_px = fit.residual_sd,
                           .used = used};
    return 1;
}

double uf_similarity_departure(const uf_similarity *fit, double reach_px)
{
    return reach_px * hypot(fit->scale, fit->rotation_deg * UF_PI / 180);
}
