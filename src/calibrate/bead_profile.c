/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "calibrate/bead_profile.h"

#include <gsl/gsl_integration.h>
#include <gsl/gsl_sf_bessel.h>
#include <math.h>
#include <stdlib.h>

#include "base/constants.h"

/* Rows and nodes a blur, and how many blurs away a node is still seen: each below 1e-4 of the profile. */
static const double rows_a_blur = 8, nodes_a_blur = 4, reach_blurs = 6;

double uf_bead_height_nm(double radius_um, double r_um)
{
    if (!(r_um <= radius_um))
        return (double)NAN;
    /* r^2 / (R + sqrt(R^2 - r^2)) is R - sqrt(R^2 - r^2) without the loss of digits near the axis. */
    return 1000 * r_um * r_um / (radius_um + sqrt(radius_um * radius_um - r_um * r_um));
}

/* ---- the blur, once ---------------------------------------------------------------------------- */

static double blur_weight(double r, double q, double blur)
{
    double z = (r - q) / blur;
    return exp(-0.5 * z * z) * gsl_sf_bessel_I0_scaled(r * q / (blur * blur)) / (blur * blur);
}

/* Gauss and Legendre's nodes in the angle t, and q dq there, times the pole of a surface's density where there is one. An
 * even grid would lose a fraction of a percent on the axis, where the integrand has a kink. */
static int place_nodes(uf_bead_profile *p)
{
    gsl_integration_glfixed_table *legendre = gsl_integration_glfixed_table_alloc((size_t)p->nodes);
    for (int k = 0; legendre && k < p->nodes; k++) {
        double t, step;
        gsl_integration_glfixed_point(0, UF_PI / 2, (size_t)k, &t, &step, legendre);
        double area = p->radius_um * p->radius_um * sin(t) * step;
        p->node_um[k] = p->radius_um * sin(t);
        p->measure[k] = p->dye == UF_DYE_SURFACE ? area : area * cos(t);
    }
    if (legendre)
        gsl_integration_glfixed_table_free(legendre);
    return legendre != NULL;
}

static void find_nodes_seen(uf_bead_profile *p, double blur)
{
    long place = 0;
    for (int row = 0; row < p->rows; row++) {
        double r = row * p->step_um;
        int from = 0, to = p->nodes;
        while (from < p->nodes && p->node_um[from] < r - reach_blurs * blur)
            from++;
        while (to > from && p->node_um[to - 1] > r + reach_blurs * blur)
            to--;
        p->first[row] = from;
        p->count[row] = to - from;
        p->place[row] = place;
        place += to - from;
    }
}

static void fill_weights(uf_bead_profile *p, double blur)
{
    for (int row = 0; row < p->rows; row++)
        for (int k = 0; k < p->count[row]; k++) {
            int node = p->first[row] + k;
            p->weight[p->place[row] + k] = blur_weight(row * p->step_um, p->node_um[node], blur) * p->measure[node];
        }
}

uf_status uf_bead_profile_init(uf_bead_profile *p, uf_bead_dye dye, double radius_um, double blur_um,
                               double farthest_um, uf_error *error)
{
    *p = (uf_bead_profile){.dye = dye, .radius_um = radius_um, .step_um = blur_um / rows_a_blur};
    p->rows = (int)ceil(farthest_um / p->step_um) + 2;
    p->nodes = (int)ceil(UF_PI / 2 * radius_um / blur_um * nodes_a_blur);
    p->node_um = calloc((size_t)p->nodes, sizeof *p->node_um);
    p->measure = calloc((size_t)p->nodes, sizeof *p->measure);
    p->values = calloc((size_t)p->nodes, sizeof *p->values);
    p->first = calloc((size_t)p->rows, sizeof *p->first);
    p->count = calloc((size_t)p->rows, sizeof *p->count);
    p->place = calloc((size_t)p->rows, sizeof *p->place);
    if (p->node_um && p->measure && p->values && p->first && p->count && p->place && place_nodes(p)) {
        find_nodes_seen(p, blur_um);
        long weights = p->place[p->rows - 1] + p->count[p->rows - 1];
        p->weight = malloc((size_t)(weights + 1) * sizeof *p->weight);
    }
    if (!p->weight) {
        uf_bead_profile_free(p);
        return uf_fail_memory(error, "a bead's profile");
    }
    fill_weights(p, blur_um);
    return UF_OK;
}

void uf_bead_profile_free(uf_bead_profile *p)
{
    free(p->node_um);
    free(p->measure);
    free(p->values);
    free(p->first);
    free(p->count);
    free(p->place);
    free(p->weight);
    *p = (uf_bead_profile){0};
}

/* ---- one exponential --------------------------------------------------------------------------- */

/* On a surface the pole is in the measure. In a medium what the bead takes the place of is blurred, and taken off the
 * whole. */
static double node_value(const uf_bead_profile *p, int node, double depth_nm)
{
    double low = uf_bead_height_nm(p->radius_um, p->node_um[node]), high = 2000 * p->radius_um - low;
    if (p->dye == UF_DYE_SURFACE)
        return exp(-low / depth_nm) + exp(-high / depth_nm);
    return depth_nm * (exp(-low / depth_nm) - exp(-high / depth_nm));
}

void uf_bead_profile_of(const uf_bead_profile *p, double depth_nm, double *table)
{
    for (int node = 0; node < p->nodes; node++)
        p->values[node] = node_value(p, node, depth_nm);
    for (int row = 0; row < p->rows; row++) {
        const double *weight = p->weight + p->place[row], *value = p->values + p->first[row];
        double sum = 0;
        for (int k = 0; k < p->count[row]; k++)
            sum += weight[k] * value[k];
        table[row] = p->dye == UF_DYE_SURFACE ? sum : depth_nm - sum;
    }
}

double uf_bead_profile_at(const uf_bead_profile *p, const double *table, double r_um)
{
    double at = r_um / p->step_um;
    int row = (int)at;
    if (row > p->rows - 2)
        row = p->rows - 2;
    return table[row] + (at - row) * (table[row + 1] - table[row]);
}
