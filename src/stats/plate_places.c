/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Row, column and edge effects. A kind of place sorts wells into classes (the rows, the columns, rim and inside);
 * what follows is the same for all three. */
#include <assert.h>
#include <math.h>
#include <stdlib.h>

#include "base/constants.h"
#include "fit/robust.h"
#include "stats/plate_quality.h"

typedef struct places {
    const uf_plate_well *wells;
    size_t count;
    int rows, columns, treatments;
    double *residual; /* [count] NaN where there is none */
    double *scratch;  /* [count] */
    int *in;          /* [treatments * classes] wells of a treatment in a class */
    int *treatment_joined, *class_joined;
} places;

typedef int class_of(const places *p, const uf_plate_well *well);

static int row_of(const places *p, const uf_plate_well *well)
{
    (void)p;
    return well->row;
}

static int column_of(const places *p, const uf_plate_well *well)
{
    (void)p;
    return well->column;
}

static int at_rim(const places *p, const uf_plate_well *well)
{
    return well->row == 0 || well->row == p->rows - 1 || well->column == 0 || well->column == p->columns - 1;
}

/* ---- residuals -------------------------------------------------------------------------------- */

static void take_residuals(places *p)
{
    for (int t = 0; t < p->treatments; t++) {
        size_t n = 0;
        for (size_t k = 0; k < p->count; k++)
            if (p->wells[k].treatment == t && !isnan(p->wells[k].value))
                p->scratch[n++] = p->wells[k].value;
        double median = uf_median(p->scratch, n);
        for (size_t k = 0; k < p->count; k++)
            if (p->wells[k].treatment == t)
                p->residual[k] = n > 1 ? p->wells[k].value - median : (double)NAN;
    }
}

/* Robust sd of the residuals, for the degrees of freedom that the medians took. */
static double residual_sd_of(places *p)
{
    size_t n = 0;
    double medians = 0;
    for (int t = 0; t < p->treatments; t++) {
        size_t before = n;
        for (size_t k = 0; k < p->count; k++)
            if (p->wells[k].treatment == t && !isnan(p->residual[k]))
                p->scratch[n++] = fabs(p->residual[k]);
        medians += n > before ? 1 : 0;
    }
    double left = (double)n - medians;
    return left > 0 ? UF_MAD_TO_SD * uf_median(p->scratch, n) * sqrt((double)n / left) : (double)NAN;
}

/* ---- can the layout tell? ---------------------------------------------------------------------- */

static void count_classes(places *p, class_of *class_in, int classes)
{
    for (int k = 0; k < p->treatments * classes; k++)
        p->in[k] = 0;
    for (size_t k = 0; k < p->count; k++)
        if (!isnan(p->wells[k].value))
            p->in[p->wells[k].treatment * classes + class_in(p, p->wells + k)]++;
}

/* Joins classes by treatments that stand in several of them, from the first class that holds a well. */
static int join_once(places *p, int classes)
{
    int changed = 0;
    for (int t = 0; t < p->treatments; t++)
        for (int c = 0; c < classes; c++)
            if (p->in[t * classes + c] && p->treatment_joined[t] != p->class_joined[c])
                changed = p->treatment_joined[t] = p->class_joined[c] = 1;
    return changed;
}

static int holds_wells(const places *p, int class, int classes)
{
    for (int t = 0; t < p->treatments; t++)
        if (p->in[t * classes + class])
            return 1;
    return 0;
}

/* 1 when all classes that hold wells are joined, and there are two or more. */
static int layout_tells(places *p, int classes)
{
    int first = 0, held = 0;
    for (int t = 0; t < p->treatments; t++)
        p->treatment_joined[t] = 0;
    for (int c = 0; c < classes; c++)
        p->class_joined[c] = 0;
    while (first < classes && !holds_wells(p, first, classes))
        first++;
    if (first == classes)
        return 0;
    p->class_joined[first] = 1;
    while (join_once(p, classes)) {
    }
    for (int c = 0; c < classes; c++)
        if (holds_wells(p, c, classes)) {
            held++;
            if (!p->class_joined[c])
                return 0;
        }
    return held > 1;
}

/* A treatment that stands in one class only says nothing about classes. */
static int spreads(const places *p, int treatment, int classes)
{
    int held = 0;
    for (int c = 0; c < classes; c++)
        held += p->in[treatment * classes + c] > 0;
    return held > 1;
}

/* ---- effects ----------------------------------------------------------------------------------- */

/* Median residual of wells in `class` (-1: in any) of treatments that spread; *n how many. */
static double middle_of(places *p, class_of *class_in, int class, int classes, size_t *n)
{
    *n = 0;
    for (size_t k = 0; k < p->count; k++) {
        const uf_plate_well *well = p->wells + k;
        if (!isnan(p->residual[k]) && spreads(p, well->treatment, classes) &&
            (class < 0 || class_in(p, well) == class))
            p->scratch[(*n)++] = p->residual[k];
    }
    return uf_median(p->scratch, *n);
}

static double sigma_of(double effect, double sd, size_t n)
{
    double error = sqrt(UF_PI / 2 / (double)n) * sd;
    return n && error > 0 ? effect / error : (double)NAN;
}

static const uf_place_effect confounded = {(double)NAN, (double)NAN, -1, 1};

static uf_place_effect largest_effect(places *p, class_of *class_in, int classes, double sd)
{
    uf_place_effect largest = {(double)NAN, (double)NAN, -1, 0};
    size_t n;
    count_classes(p, class_in, classes);
    if (!layout_tells(p, classes))
        return confounded;
    double all = middle_of(p, class_in, -1, classes, &n);
    for (int c = 0; c < classes; c++) {
        double effect = middle_of(p, class_in, c, classes, &n) - all;
        if (n > 1 && !(fabs(effect) <= fabs(largest.effect)))
            largest = (uf_place_effect){effect, sigma_of(effect, sd, n), c, 0};
    }
    return largest;
}

static uf_place_effect edge_effect(places *p, double sd)
{
    size_t outside, inside;
    count_classes(p, at_rim, 2);
    if (!layout_tells(p, 2))
        return confounded;
    double effect = middle_of(p, at_rim, 1, 2, &outside) - middle_of(p, at_rim, 0, 2, &inside);
    double error = sqrt(UF_PI / 2 * (1 / (double)outside + 1 / (double)inside)) * sd;
    return (uf_place_effect){effect, error > 0 ? effect / error : (double)NAN, -1, 0};
}

static void places_free(places *p)
{
    free(p->residual);
    free(p->scratch);
    free(p->in);
    free(p->treatment_joined);
    free(p->class_joined);
}

static int places_new(places *p)
{
    size_t classes = (size_t)(p->rows > p->columns ? p->rows : p->columns) + 2,
           treatments = (size_t)p->treatments + 1;
    p->residual = calloc(p->count + 1, sizeof *p->residual);
    p->scratch = calloc(p->count + 1, sizeof *p->scratch);
    p->in = calloc(treatments * classes, sizeof *p->in);
    p->treatment_joined = calloc(treatments, sizeof *p->treatment_joined);
    p->class_joined = calloc(classes, sizeof *p->class_joined);
    return p->residual && p->scratch && p->in && p->treatment_joined && p->class_joined;
}

uf_status uf_place_effects_of(const uf_plate_well *wells, size_t count, int rows, int columns, int treatments,
                              uf_place_effects *effects, uf_error *error)
{
    places p = {.wells = wells, .count = count, .rows = rows, .columns = columns, .treatments = treatments};
    *effects = (uf_place_effects){confounded, confounded, confounded, (double)NAN, 0};
    for (size_t k = 0; k < count; k++)
        assert(wells[k].row >= 0 && wells[k].row < rows && wells[k].column >= 0 && wells[k].column < columns &&
               wells[k].treatment >= 0 && wells[k].treatment < treatments);
    if (!places_new(&p)) {
        places_free(&p);
        return uf_fail_memory(error, "effects of the place on the plate");
    }
    take_residuals(&p);
    double sd = effects->residual_sd = residual_sd_of(&p);
    effects->row = largest_effect(&p, row_of, rows, sd);
    effects->column = largest_effect(&p, column_of, columns, sd);
    effects->edge = edge_effect(&p, sd);
    if (effects->row.confounded || effects->column.confounded || effects->edge.confounded)
        effects->notes |= UF_NOTE_CONFOUNDED;
    places_free(&p);
    return UF_OK;
}
