/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/draw.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/random.h"

enum { MOST_WELLS = UF_MOST_ROWS * UF_MOST_COLUMNS, ROUNDS = 100, TRIES = 8 };

/* Wells that should lie apart: those of an arm, or of all doses of a treatment. */
typedef struct group {
    int row[UF_MOST_ROWS], column[UF_MOST_COLUMNS], quarter[4], edge;
    long pairs; /* in one row or one column */
    int wells, weight;
    bool is_control;
} group;

typedef struct draw_job {
    const uf_arm *arms;
    int arm_count, treatment_count;
    uf_drawing *drawing;
    uf_random random;
    uf_well wells[MOST_WELLS]; /* that may be used, in the order in which blocks are cut */
    int content[MOST_WELLS];   /* arm, -1 empty */
    int block[MOST_WELLS];
    int well_count, edge_count;
    int first[MOST_WELLS + 1]; /* of each block; one more for the end */
    group *groups;             /* arms, then treatments */
} draw_job;

/* ---- wells and blocks ------------------------------------------------------------------------ */

/* Column by column, there and back, so that a cut anywhere leaves neighbours together. */
static void list_wells(draw_job *job, bool edge)
{
    uf_vessel v = job->drawing->vessel;
    job->well_count = job->edge_count = 0;
    for (int c = 0; c < v.columns; c++)
        for (int k = 0; k < v.rows; k++) {
            uf_well well = {c % 2 ? v.rows - 1 - k : k, c};
            bool at_edge = uf_well_at_edge(v, well);
            if (at_edge && !edge)
                continue;
            job->edge_count += at_edge;
            job->wells[job->well_count++] = well;
        }
}

static uf_status choose_wells(draw_job *job, uf_edge_use edge, uf_error *error)
{
    double needed = 0;
    for (int k = 0; k < job->arm_count; k++)
        needed += job->arms[k].wells;
    list_wells(job, edge == UF_EDGE_USE);
    if (edge == UF_EDGE_AUTO && needed > job->well_count)
        list_wells(job, true);
    job->drawing->edge_used = job->edge_count > 0;
    if (needed <= job->well_count)
        return UF_OK;
    return uf_fail(
        error, UF_USAGE,
        "%.0f wells are asked for, the plate of %d has %d%s; take fewer wells a treatment, a larger plate, or divide "
        "the treatments over several",
        needed, job->drawing->vessel.wells, job->well_count, edge == UF_EDGE_LEAVE ? " inside its edge" : "");
}

/* As many blocks as the rarest sample has wells: each holds all of them. */
static int count_blocks(const draw_job *job)
{
    int least = MOST_WELLS, any = MOST_WELLS;
    for (int k = 0; k < job->arm_count; k++) {
        any = job->arms[k].wells < any ? job->arms[k].wells : any;
        if (job->arms[k].role == UF_ROLE_SAMPLE && job->arms[k].wells < least)
            least = job->arms[k].wells;
    }
    least = least < MOST_WELLS ? least : any;
    return least < job->drawing->vessel.columns ? least : job->drawing->vessel.columns;
}

static void shuffle(draw_job *job, int *list, int count)
{
    for (int k = count - 1; k > 0; k--) {
        int other = uf_random_whole(&job->random, 0, k), swap = list[k];
        list[k] = list[other];
        list[other] = swap;
    }
}

/* The share of each block: equal, and what is left over one by one, over blocks in random order that goes on from arm to
 * arm, so that blocks differ by a well at most. */
static void share_out(const draw_job *job, int *shares, int wells, int *next, const int *order)
{
    int blocks = job->drawing->blocks;
    for (int b = 0; b < blocks; b++)
        shares[b] = wells / blocks;
    for (int k = 0; k < wells % blocks; k++)
        shares[order[(*next)++ % blocks]]++;
}

static uf_status fill_blocks(draw_job *job, uf_error *error)
{
    int blocks = job->drawing->blocks, next = 0, used = 0, at = 0;
    size_t size = (size_t)blocks * (size_t)(job->arm_count + 1);
    int *shares = malloc((size + (size_t)blocks) * sizeof *shares), *order = shares ? shares + size : NULL;
    if (!shares)
        return uf_fail_memory(error, "a plate");
    for (int b = 0; b < blocks; b++)
        order[b] = b;
    shuffle(job, order, blocks);
    for (int k = 0; k < job->arm_count; k++) {
        share_out(job, shares + k * blocks, job->arms[k].wells, &next, order);
        used += job->arms[k].wells;
    }
    share_out(job, shares + job->arm_count * blocks, job->well_count - used, &next, order);
    for (int b = 0; b < blocks; b++) {
        job->first[b] = at;
        for (int k = 0; k <= job->arm_count; k++)
            for (int i = 0; i < shares[k * blocks + b]; i++) {
                job->block[at] = b;
                job->content[at++] = k < job->arm_count ? k : -1;
            }
        shuffle(job, job->content + job->first[b], at - job->first[b]);
    }
    job->first[blocks] = at;
    free(shares);
    return UF_OK;
}

/* ---- spreading ------------------------------------------------------------------------------- */

static int quarter_of(uf_vessel v, uf_well well)
{
    return (2 * well.row >= v.rows) * 2 + (2 * well.column >= v.columns);
}

static void count_in(const draw_job *job, group *g, uf_well well, int by)
{
    /* A well that comes makes a pair with each that is there; one that goes takes as many with it. */
    int others = g->row[well.row] + g->column[well.column] - (by < 0 ? 2 : 0);
    g->pairs += by * others;
    g->row[well.row] += by;
    g->column[well.column] += by;
    g->quarter[quarter_of(job->drawing->vessel, well)] += by;
    g->edge += by * uf_well_at_edge(job->drawing->vessel, well);
}

/* Pairs in one row or column, quarters with less than their share, edge wells more or less than the share. Whole numbers,
 * so that every machine swaps the same wells. */
static long cost_of(const draw_job *job, const group *g)
{
    long uneven = 0;
    for (int q = 0; q < 4; q++) {
        int short_by = g->wells / 4 - g->quarter[q];
        uneven += short_by > 0 ? (g->is_control ? 40L : 4L) * short_by : 0;
        uneven += g->is_control && g->wells >= 4 && !g->quarter[q] ? 1000L : 0;
    }
    long over = ((long)g->edge * job->well_count - (long)g->wells * job->edge_count) * 4 / job->well_count;
    return g->weight * (4 * g->pairs + uneven + (job->edge_count ? over * over / 2 : 0));
}

static void group_ids(const draw_job *job, int content, int ids[2])
{
    ids[0] = content;
    ids[1] = content < 0 ? -1 : job->arm_count + job->arms[content].treatment_index;
}

static uf_status count_groups(draw_job *job, uf_error *error)
{
    size_t count = (size_t)job->arm_count + (size_t)job->treatment_count;
    job->groups = calloc(count + 1, sizeof *job->groups);
    if (!job->groups)
        return uf_fail_memory(error, "a plate");
    for (int k = 0; k < job->arm_count; k++) {
        group *arm = &job->groups[k], *treatment = &job->groups[job->arm_count + job->arms[k].treatment_index];
        arm->weight = 4;
        treatment->weight = 1;
        arm->wells = job->arms[k].wells;
        treatment->wells += job->arms[k].wells;
        arm->is_control = job->arms[k].role == UF_ROLE_CONTROL || job->arms[k].role == UF_ROLE_POSITIVE;
    }
    for (int k = 0; k < job->well_count; k++) {
        int ids[2];
        group_ids(job, job->content[k], ids);
        for (int i = 0; i < 2; i++)
            if (ids[i] >= 0)
                count_in(job, &job->groups[ids[i]], job->wells[k], 1);
    }
    return UF_OK;
}

static void swap_wells(draw_job *job, int a, int b)
{
    int ids[2], content = job->content[a];
    for (int k = 0; k < 2; k++) {
        int from = k ? b : a, to = k ? a : b;
        group_ids(job, job->content[from], ids);
        for (int i = 0; i < 2; i++)
            if (ids[i] >= 0) {
                count_in(job, &job->groups[ids[i]], job->wells[from], -1);
                count_in(job, &job->groups[ids[i]], job->wells[to], 1);
            }
    }
    job->content[a] = job->content[b];
    job->content[b] = content;
}

/* Cost of the groups that a swap of two wells touches; each once. */
static long touched_cost(const draw_job *job, int a, int b)
{
    int ids[4];
    long cost = 0;
    group_ids(job, job->content[a], ids);
    group_ids(job, job->content[b], ids + 2);
    for (int k = 0; k < 4; k++) {
        bool seen = ids[k] < 0;
        for (int i = 0; i < k; i++)
            seen |= ids[i] == ids[k];
        cost += seen ? 0 : cost_of(job, &job->groups[ids[k]]);
    }
    return cost;
}

static void spread(draw_job *job)
{
    long tries = (long)ROUNDS * job->well_count;
    for (long k = 0; k < tries; k++) {
        int a = uf_random_whole(&job->random, 0, job->well_count - 1), block = job->block[a];
        int b = uf_random_whole(&job->random, job->first[block], job->first[block + 1] - 1);
        if (job->content[a] == job->content[b])
            continue;
        long before = touched_cost(job, a, b);
        swap_wells(job, a, b);
        if (touched_cost(job, a, b) > before)
            swap_wells(job, a, b);
    }
}

/* ---- all of it ------------------------------------------------------------------------------- */

static void put_drawing(const draw_job *job)
{
    uf_drawing *d = job->drawing;
    for (int r = 0; r < UF_MOST_ROWS; r++)
        for (int c = 0; c < UF_MOST_COLUMNS; c++)
            d->arm[r][c] = d->block[r][c] = -1;
    for (int k = 0; k < job->well_count; k++) {
        uf_well well = job->wells[k];
        d->arm[well.row][well.column] = job->content[k];
        d->block[well.row][well.column] = job->content[k] < 0 ? -1 : job->block[k];
    }
}

int uf_quarters_without(const uf_drawing *drawing, const uf_arm *arms, uf_role role)
{
    bool has[4] = {false};
    for (int r = 0; r < drawing->vessel.rows; r++)
        for (int c = 0; c < drawing->vessel.columns; c++)
            if (drawing->arm[r][c] >= 0 && arms[drawing->arm[r][c]].role == role)
                has[quarter_of(drawing->vessel, (uf_well){r, c})] = true;
    return 4 - has[0] - has[1] - has[2] - has[3];
}

static int wells_of_role(const draw_job *job, uf_role role)
{
    int wells = 0;
    for (int k = 0; k < job->arm_count; k++)
        wells += job->arms[k].role == role ? job->arms[k].wells : 0;
    return wells;
}

/* Several starts, should the swaps of one end with a quarter without a control. */
static uf_status draw(draw_job *job, uint64_t seed, int plate, uf_error *error)
{
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < TRIES; k++) {
        uf_random_start(&job->random, seed, (uint64_t)plate * TRIES + (uint64_t)k + 1);
        status = fill_blocks(job, error);
        if (status == UF_OK)
            status = count_groups(job, error);
        if (status == UF_OK) {
            spread(job);
            put_drawing(job);
        }
        free(job->groups);
        job->groups = NULL;
        if (wells_of_role(job, UF_ROLE_CONTROL) < 4 || !uf_quarters_without(job->drawing, job->arms, UF_ROLE_CONTROL))
            break;
    }
    return status;
}

uf_status uf_draw_plate(const uf_arm *arms, int arm_count, uf_vessel vessel, uf_edge_use edge, uint64_t seed,
                        int plate, uf_drawing *drawing, uf_error *error)
{
    draw_job *job = calloc(1, sizeof *job);
    if (!job)
        return uf_fail_memory(error, "a plate");
    *drawing = (uf_drawing){.vessel = vessel};
    job->arms = arms;
    job->arm_count = arm_count;
    job->drawing = drawing;
    for (int k = 0; k < arm_count; k++)
        job->treatment_count =
            arms[k].treatment_index >= job->treatment_count ? arms[k].treatment_index + 1 : job->treatment_count;
    uf_status status = choose_wells(job, edge, error);
    if (status == UF_OK) {
        drawing->blocks = count_blocks(job);
        status = draw(job, seed, plate, error);
    }
    free(job);
    return status;
}
