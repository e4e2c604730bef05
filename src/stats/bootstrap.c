/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/bootstrap.h"

#include <assert.h>
#include <math.h>
#include <stdlib.h>

#include "base/random.h"
#include "fit/robust.h"
#include "stats/scale.h"

/* The wells of an arm by replicate: those of replicate r are value[first[r]] up to value[first[r + 1]]. */
typedef struct nest {
    double *value;
    size_t *first;
    int replicates;
} nest;

static void nest_free(nest *n)
{
    free(n->value);
    free(n->first);
}

static int nest_fill(nest *n, uf_boot_arm arm)
{
    size_t place = 0;
    n->replicates = arm.replicates;
    n->value = calloc(arm.count + 1, sizeof *n->value);
    n->first = calloc((size_t)arm.replicates + 1, sizeof *n->first);
    if (!n->value || !n->first)
        return 0;
    for (int r = 0; r < arm.replicates; r++) {
        n->first[r] = place;
        for (size_t k = 0; k < arm.count; k++) {
            assert(arm.wells[k].replicate >= 0 && arm.wells[k].replicate < arm.replicates);
            if (arm.wells[k].replicate == r && !isnan(arm.wells[k].value))
                n->value[place++] = arm.wells[k].value;
        }
    }
    n->first[arm.replicates] = place;
    return 1;
}

static size_t wells_of(const nest *n, int replicate)
{
    return replicate < n->replicates ? n->first[replicate + 1] - n->first[replicate] : 0;
}

/* A replicate's value on the scale of comparison: of its wells, or of as many drawn from them. */
static double replicate_value(const nest *n, int replicate, uf_scale scale, uf_random *random)
{
    size_t count = wells_of(n, replicate);
    double sum = 0;
    for (size_t k = 0; k < count; k++)
        sum += n->value[n->first[replicate] + (random ? (size_t)uf_random_whole(random, 0, (int)count - 1) : k)];
    return uf_to_scale(scale, sum / (double)count);
}

/* Replicates that can be drawn: with wells, and in both arms for blocks. Returns how many; `which` lists them. */
static int usable(const nest *n, const nest *other, int *which)
{
    int count = 0;
    for (int r = 0; r < n->replicates; r++)
        if (wells_of(n, r) && (!other || wells_of(other, r)))
            which[count++] = r;
    return count;
}

typedef struct bootstrap_job {
    nest arms[2];
    int *which[2];
    int count[2];
    int paired;
    uf_scale scale;
} bootstrap_job;

/* The effect of the arms as they are, or of one draw. */
static double effect_of(const bootstrap_job *job, uf_random *random)
{
    double mean[2] = {0, 0};
    for (int a = 0; a < (job->paired ? 1 : 2); a++)
        for (int k = 0; k < job->count[a]; k++) {
            int r = job->which[a][random ? uf_random_whole(random, 0, job->count[a] - 1) : k];
            mean[a] += replicate_value(&job->arms[a], r, job->scale, random) / job->count[a];
            if (job->paired)
                mean[1] += replicate_value(&job->arms[1], r, job->scale, random) / job->count[a];
        }
    return mean[0] - mean[1];
}

static void draw_interval(const bootstrap_job *job, double level, int draws, uint64_t seed, double *effects,
                          uf_bootstrap *result)
{
    uf_random random;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < draws; k++) {
        effects[result->draws] = effect_of(job, &random);
        result->draws += isnan(effects[result->draws]) ? 0 : 1;
    }
    uf_sort(effects, (size_t)result->draws);
    double tail = (1 - level) / 2;
    result->low = uf_from_scale(job->scale, uf_sorted_quantile(effects, (size_t)result->draws, tail));
    result->high = uf_from_scale(job->scale, uf_sorted_quantile(effects, (size_t)result->draws, 1 - tail));
}

static void run_job(bootstrap_job *job, double level, int draws, uint64_t seed, double *effects, uf_bootstrap *result)
{
    job->count[0] = usable(&job->arms[0], job->paired ? &job->arms[1] : NULL, job->which[0]);
    job->count[1] = usable(&job->arms[1], job->paired ? &job->arms[0] : NULL, job->which[1]);
    if (job->count[0] && job->count[1])
        result->effect = uf_from_scale(job->scale, effect_of(job, NULL));
    if (job->count[0] < UF_BOOTSTRAP_LEAST || job->count[1] < UF_BOOTSTRAP_LEAST)
        result->notes |= UF_NOTE_TOO_FEW;
    else if (isnan(result->effect))
        result->notes |= UF_NOTE_NOT_POSITIVE;
    else
        draw_interval(job, level, draws, seed, effects, result);
}

uf_status uf_bootstrap_effect(uf_boot_arm treated, uf_boot_arm control, int paired, uf_scale scale, double level,
                              int draws, uint64_t seed, uf_bootstrap *result, uf_error *error)
{
    bootstrap_job job = {.paired = paired, .scale = scale};
    *result = (uf_bootstrap){(double)NAN, (double)NAN, (double)NAN, 0, 0};
    assert(draws > 0);
    double *effects = malloc((size_t)draws * sizeof *effects);
    job.which[0] = calloc((size_t)treated.replicates + 1, sizeof **job.which);
    job.which[1] = calloc((size_t)control.replicates + 1, sizeof **job.which);
    int has_room = nest_fill(&job.arms[0], treated) && nest_fill(&job.arms[1], control) && effects && job.which[0] &&
                   job.which[1];
    if (has_room)
        run_job(&job, level, draws, seed, effects, result);
    nest_free(&job.arms[0]);
    nest_free(&job.arms[1]);
    free(job.which[0]);
    free(job.which[1]);
    free(effects);
    return has_room ? UF_OK : uf_fail_memory(error, "a bootstrap");
}
