/* SPDX-License-Identifier: GPL-3.0-or-later */
/* value ~ block + group. Blocks are swept out exactly (each value less its block's mean), which leaves as many
 * equations as there are groups however many blocks there are. */
#include <assert.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_linalg.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "stats/contrast_parts.h"
#include "stats/scale.h"

/* Scratch of one fit, and the rows on the scale of comparison. */
typedef struct sweep {
    const uf_blocked_row *rows;
    size_t count;
    int blocks, groups;
    double *y;                  /* [count] NaN where a row takes no part */
    double *in_cell;            /* [groups * blocks] values of a group in a block */
    double *in_block;           /* [blocks] values in a block, and their mean */
    double *block_mean;         /* [blocks] */
    double *normal;             /* [groups * groups] the reduced equations, then their inverse */
    double *right;              /* [groups] */
    int *joined, *joined_block; /* to the control, by a chain of blocks */
    int *place;                 /* [groups] its row in the equations, -1 for none */
} sweep;

static void sweep_free(sweep *s)
{
    free(s->y);
    free(s->in_cell);
    free(s->in_block);
    free(s->block_mean);
    free(s->normal);
    free(s->right);
    free(s->joined);
    free(s->joined_block);
    free(s->place);
}

static int sweep_new(sweep *s)
{
    size_t groups = (size_t)s->groups, blocks = (size_t)s->blocks;
    s->y = calloc(s->count + 1, sizeof *s->y);
    s->in_cell = calloc(groups * blocks, sizeof *s->in_cell);
    s->in_block = calloc(blocks, sizeof *s->in_block);
    s->block_mean = calloc(blocks, sizeof *s->block_mean);
    s->normal = calloc(groups * groups, sizeof *s->normal);
    s->right = calloc(groups, sizeof *s->right);
    s->joined = calloc(groups, sizeof *s->joined);
    s->joined_block = calloc(blocks, sizeof *s->joined_block);
    s->place = calloc(groups, sizeof *s->place);
    return s->y && s->in_cell && s->in_block && s->block_mean && s->normal && s->right && s->joined &&
           s->joined_block && s->place;
}

void uf_blocked_free(uf_blocked *fit)
{
    free(fit->counts);
    free(fit->means);
    free(fit->sds);
    free(fit->effects);
    free(fit->unscaled);
    *fit = (uf_blocked){0};
}

static int fit_new(uf_blocked *fit, int groups, uf_scale scale)
{
    size_t n = (size_t)groups;
    *fit = (uf_blocked){.scale = scale, .groups = groups, .residual_sd = (double)NAN, .df = (double)NAN};
    fit->counts = calloc(n, sizeof *fit->counts);
    fit->means = calloc(n, sizeof *fit->means);
    fit->sds = calloc(n, sizeof *fit->sds);
    fit->effects = calloc(n, sizeof *fit->effects);
    fit->unscaled = calloc(n * n, sizeof *fit->unscaled);
    return fit->counts && fit->means && fit->sds && fit->effects && fit->unscaled;
}

/* ---- plain figures of the groups ----------------------------------------------------------------- */

static void take_rows(sweep *s, uf_blocked *fit)
{
    for (size_t k = 0; k < s->count; k++) {
        const uf_blocked_row *row = s->rows + k;
        assert(row->block >= 0 && row->block < s->blocks && row->group >= 0 && row->group < s->groups);
        s->y[k] = uf_to_scale(fit->scale, row->value);
        if (isnan(row->value))
            continue;
        if (isnan(s->y[k]))
            fit->notes |= UF_NOTE_NOT_POSITIVE;
        fit->counts[row->group]++;
        fit->means[row->group] += s->y[k];
        s->in_cell[row->group * s->blocks + row->block]++;
    }
    for (int g = 0; g < s->groups; g++)
        fit->means[g] = fit->counts[g] ? fit->means[g] / (double)fit->counts[g] : (double)NAN;
    for (size_t k = 0; k < s->count; k++)
        if (!isnan(s->y[k]))
            fit->sds[s->rows[k].group] += pow(s->y[k] - fit->means[s->rows[k].group], 2);
    for (int g = 0; g < s->groups; g++)
        fit->sds[g] = fit->counts[g] > 1 ? sqrt(fit->sds[g] / (double)(fit->counts[g] - 1)) : (double)NAN;
}

/* ---- who is joined to the control ---------------------------------------------------------------- */

static int join_once(sweep *s)
{
    int changed = 0;
    for (int g = 0; g < s->groups; g++)
        for (int b = 0; b < s->blocks; b++)
            if (s->in_cell[g * s->blocks + b] > 0 && s->joined[g] != s->joined_block[b])
                changed = s->joined[g] = s->joined_block[b] = 1;
    return changed;
}

/* Forgets rows that are not joined, and numbers the groups that are. Returns how many equations there are. */
static int keep_joined(sweep *s, uf_blocked *fit)
{
    int equations = 0;
    s->joined[0] = 1;
    while (join_once(s)) {
    }
    for (int g = 0; g < s->groups; g++) {
        s->place[g] = g && s->joined[g] ? equations++ : -1;
        fit->effects[g] = s->joined[g] ? 0 : (double)NAN;
    }
    for (size_t k = 0; k < s->count; k++)
        if (!s->joined[s->rows[k].group])
            s->y[k] = (double)NAN;
    return equations;
}

/* ---- the equations ------------------------------------------------------------------------------- */

static void mean_blocks(sweep *s)
{
    for (int b = 0; b < s->blocks; b++)
        s->in_block[b] = s->block_mean[b] = 0;
    for (size_t k = 0; k < s->count; k++)
        if (!isnan(s->y[k])) {
            s->in_block[s->rows[k].block]++;
            s->block_mean[s->rows[k].block] += s->y[k];
        }
    for (int b = 0; b < s->blocks; b++)
        if (s->in_block[b] > 0)
            s->block_mean[b] /= s->in_block[b];
}

static void fill_equations(sweep *s, int equations)
{
    for (int g = 1; g < s->groups; g++)
        for (int h = 1; h < s->groups; h++)
            for (int b = 0; b < s->blocks; b++) {
                double in_g = s->in_cell[g * s->blocks + b], in_h = s->in_cell[h * s->blocks + b];
                if (s->place[g] >= 0 && s->place[h] >= 0 && s->in_block[b] > 0)
                    s->normal[s->place[g] * equations + s->place[h]] +=
                        (g == h ? in_g : 0) - in_g * in_h / s->in_block[b];
            }
    for (size_t k = 0; k < s->count; k++)
        if (!isnan(s->y[k]) && s->place[s->rows[k].group] >= 0)
            s->right[s->place[s->rows[k].group]] += s->y[k] - s->block_mean[s->rows[k].block];
}

static int invert(double *matrix, int size)
{
    gsl_matrix_view view = gsl_matrix_view_array(matrix, (size_t)size, (size_t)size);
    gsl_set_error_handler_off();
    return gsl_linalg_cholesky_decomp1(&view.matrix) == GSL_SUCCESS &&
           gsl_linalg_cholesky_invert(&view.matrix) == GSL_SUCCESS;
}

static void take_effects(const sweep *s, int equations, uf_blocked *fit)
{
    for (int g = 1; g < s->groups; g++)
        for (int h = 1; h < s->groups; h++) {
            int row = s->place[g], column = s->place[h];
            double part = row >= 0 && column >= 0 ? s->normal[row * equations + column] : (double)NAN;
            fit->unscaled[g * s->groups + h] = part;
            if (row >= 0)
                fit->effects[g] += column >= 0 ? part * s->right[column] : 0;
        }
}

/* ---- what is left -------------------------------------------------------------------------------- */

static void take_residual(sweep *s, int equations, uf_blocked *fit)
{
    double squares = 0, rows = 0, blocks = 0, size = 0;
    for (size_t k = 0; k < s->count; k++)
        if (!isnan(s->y[k])) {
            size = fmax(size, fabs(s->y[k]));
            s->y[k] -= fit->effects[s->rows[k].group];
        }
    mean_blocks(s);
    for (size_t k = 0; k < s->count; k++)
        if (!isnan(s->y[k])) {
            squares += pow(s->y[k] - s->block_mean[s->rows[k].block], 2);
            rows++;
        }
    for (int b = 0; b < s->blocks; b++)
        blocks += s->in_block[b] > 0;
    fit->df = rows - blocks - equations;
    if (fit->df > 0)
        fit->residual_sd = sqrt(squares / fit->df);
    if (fit->residual_sd < 1e-14 * size) /* rounding is no scatter */
        fit->residual_sd = 0;
}

uf_status uf_blocked_fit(const uf_blocked_row *rows, size_t count, int blocks, int groups, uf_scale scale,
                         uf_blocked *fit, uf_error *error)
{
    sweep s = {.rows = rows, .count = count, .blocks = blocks, .groups = groups};
    assert(groups > 0 && blocks > 0);
    if (!fit_new(fit, groups, scale) || !sweep_new(&s)) {
        sweep_free(&s);
        uf_blocked_free(fit);
        return uf_fail_memory(error, "a blocked comparison");
    }
    take_rows(&s, fit);
    if (!(fit->notes & UF_NOTE_NOT_POSITIVE)) {
        int equations = keep_joined(&s, fit);
        mean_blocks(&s);
        fill_equations(&s, equations);
        if (equations > 0 && invert(s.normal, equations))
            take_effects(&s, equations, fit);
        take_residual(&s, equations, fit);
    }
    sweep_free(&s);
    return UF_OK;
}

/* ---- contrasts ----------------------------------------------------------------------------------- */

/* A sum of effects, each times its weight: estimate and standard error in residual standard deviations. */
static void combine(const uf_blocked *fit, const int *groups, const double *weights, int count, uf_contrast *c,
                    double *estimate, double *unit)
{
    double variance = 0;
    *estimate = 0;
    for (int k = 0; k < count; k++) {
        *estimate += weights[k] * fit->effects[groups[k]];
        if (fit->counts[groups[k]] < UF_REPLICATES_LEAST)
            c->notes |= UF_NOTE_TOO_FEW;
        for (int j = 0; j < count; j++)
            variance += weights[k] * weights[j] * fit->unscaled[groups[k] * fit->groups + groups[j]];
    }
    *unit = sqrt(fmax(0, variance));
    if (fit->notes & UF_NOTE_NOT_POSITIVE)
        *estimate = (double)NAN;
    else if (isnan(*estimate))
        c->notes |= UF_NOTE_NOT_CONNECTED;
}

static uf_contrast plain_figures(const uf_blocked *fit, int group, int against)
{
    uf_contrast c = uf_contrast_empty(fit->scale);
    c.n_treated = fit->counts[group];
    c.n_control = fit->counts[against];
    c.mean_treated = uf_from_scale(fit->scale, fit->means[group]);
    c.mean_control = uf_from_scale(fit->scale, fit->means[against]);
    c.sd_treated = fit->sds[group];
    c.sd_control = fit->sds[against];
    c.notes = fit->notes;
    return c;
}

uf_contrast uf_blocked_contrast(const uf_blocked *fit, int group, int against, double level)
{
    const int groups[2] = {group, against};
    const double weights[2] = {1, -1};
    double estimate, unit;
    uf_contrast c = plain_figures(fit, group, against);
    combine(fit, groups, weights, 2, &c, &estimate, &unit);
    if (fit->df <= 0)
        c.notes |= UF_NOTE_TOO_FEW;
    uf_contrast_finish(&c, estimate, unit * fit->residual_sd, fit->df, level);
    if (!isnan(c.t))
        uf_contrast_set_g(&c, c.t, c.df, unit, level);
    return c;
}

uf_contrast uf_blocked_interaction(const uf_blocked *fit, int cells[2][2], double level)
{
    const int groups[4] = {cells[1][1], cells[0][1], cells[1][0], cells[0][0]};
    const double weights[4] = {1, -1, -1, 1};
    double estimate, unit;
    uf_contrast c = plain_figures(fit, cells[1][1], cells[0][0]);
    combine(fit, groups, weights, 4, &c, &estimate, &unit);
    if (fit->df <= 0)
        c.notes |= UF_NOTE_TOO_FEW;
    uf_contrast_finish(&c, estimate, unit * fit->residual_sd, fit->df, level);
    return c;
}
