/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * How right the statistics are: invented experiments with known truth, one line each of what share of runs ended as
 * said.
 *
 *     stats > tests/bench/stats.csv
 *
 * Cells differ between replicates, wells and each other by stated variances; seeds are fixed, so that the table
 * changes only when the program does. A replicate's share of the variance (its ICC) is what makes cells poor
 * witnesses: the line of the cell-level test shows what counting them as independent costs.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "base/random.h"
#include "stats/bootstrap.h"
#include "stats/contrast.h"
#include "stats/dose.h"
#include "stats/many.h"
#include "stats/plate_quality.h"
#include "stats/ranks.h"
#include "stats/share.h"
#include "stats/variance.h"

enum { RUNS = 2000, REPLICATES_MOST = 12, WELLS = 2, CELLS = 200, ARMS_MOST = 5 };

static void stop_on(uf_status status, const uf_error *error)
{
    if (status == UF_OK)
        return;
    (void)fprintf(stderr, "stats: %s\n", error->text);
    exit(1);
}

/* Percent of runs, its own standard error, and the range the design asks for. */
static void print_line(const char *figure, const char *experiment, double hits, double runs, double low, double high)
{
    double share = hits / runs;
    (void)printf("%s,%s,%.0f,%.2f,%.2f,%g,%g,%s\n", figure, experiment, runs, 100 * share,
                 100 * sqrt(share * (1 - share) / runs), low, high,
                 100 * share >= low && 100 * share <= high ? "yes" : "no");
}

/* ---- an experiment ------------------------------------------------------------------------------ */

/* Variances of replicates, of wells in them, and of cells, summing to 1. In blocks the replicate's part is made of
 * a day common to all arms and of what the day does to each. */
typedef struct design {
    double replicate, well, cell, day;
    int replicates;
    int positive; /* cells are exponentials: ratios */
} design;

typedef struct outcome {
    double cells[CELLS], means[REPLICATES_MOST], wells[REPLICATES_MOST * WELLS];
    uf_nested_row rows[CELLS];
} outcome;

/* One arm: CELLS cells dealt out over the wells; day[r] is added to all of a replicate. */
static void make_arm(const design *d, double level, const double *day, uf_random *random, outcome *out)
{
    int wells = d->replicates * WELLS, cell = 0;
    for (int r = 0; r < d->replicates; r++) {
        double replicate = level + day[r] + sqrt(d->replicate) * uf_random_normal(random);
        out->means[r] = 0;
        for (int w = 0; w < WELLS; w++) {
            int in_well = CELLS * (r * WELLS + w + 1) / wells - CELLS * (r * WELLS + w) / wells;
            double well = replicate + sqrt(d->well) * uf_random_normal(random), mean = 0;
            for (int k = 0; k < in_well; k++, cell++) {
                double value = well + sqrt(d->cell) * uf_random_normal(random);
                out->cells[cell] = d->positive ? exp(0.3 * value) : value;
                out->rows[cell] = (uf_nested_row){out->cells[cell], 0, r, w};
                mean += out->cells[cell] / in_well;
            }
            out->wells[r * WELLS + w] = mean;
            out->means[r] += mean / WELLS;
        }
    }
}

static void make_days(const design *d, uf_random *random, double *day)
{
    for (int r = 0; r < d->replicates; r++)
        day[r] = d->day > 0 ? sqrt(d->day) * uf_random_normal(random) : 0;
}

static int holds(double low, double truth, double high)
{
    return low <= truth && truth <= high;
}

/* ---- contrasts ---------------------------------------------------------------------------------- */

static const design three_days = {0.3, 0.05, 0.65, 0, 3, 0};

/* Nothing differs: false positives of replicates and of cells, and what intervals hold. */
static void bench_two_arms(const char *name, design d, double shift, uint64_t seed)
{
    static outcome a, b;
    double day[REPLICATES_MOST] = {0}, found = 0, by_cells = 0, held = 0, g_held = 0;
    double sd = sqrt(d.replicate + (d.well + d.cell / (CELLS / (d.replicates * (double)WELLS))) / WELLS);
    uf_random random;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < RUNS; k++) {
        uf_scale scale = d.positive ? UF_SCALE_RATIO : UF_SCALE_DIFFERENCE;
        make_arm(&d, shift, day, &random, &a);
        make_arm(&d, 0, day, &random, &b);
        uf_contrast c =
            uf_welch((uf_arm){a.means, (size_t)d.replicates}, (uf_arm){b.means, (size_t)d.replicates}, scale, 0.95);
        uf_contrast cells = uf_welch((uf_arm){a.cells, CELLS}, (uf_arm){b.cells, CELLS}, scale, 0.95);
        found += c.p <= 0.05;
        by_cells += cells.p <= 0.05;
        held += holds(c.effect_low, d.positive ? exp(0.3 * shift) : shift, c.effect_high);
        g_held += holds(c.hedges_g_low, shift / sd, c.hedges_g_high);
    }
    if (shift == 0) {
        print_line("false positives of the test on replicates", name, found, RUNS, 2.5, 6);
        print_line("false positives of a test on cells", name, by_cells, RUNS, 30, 100);
    }
    print_line("interval of the effect", name, held, RUNS, 93, 98);
    if (!d.positive)
        print_line("interval of Hedges' g", name, g_held, RUNS, 93, 98);
}

/* Days move all arms together: blocks against the same data taken as independent. */
static void bench_blocks(const char *name, design d, double shift, uint64_t seed)
{
    static outcome arms[2];
    uf_blocked_row rows[2 * REPLICATES_MOST];
    double day[REPLICATES_MOST], found = 0, held = 0, unblocked = 0;
    uf_random random;
    uf_error error;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < RUNS; k++) {
        size_t n = 0;
        uf_blocked fit;
        make_days(&d, &random, day);
        for (int g = 0; g < 2; g++) {
            make_arm(&d, g ? shift : 0, day, &random, &arms[g]);
            for (int r = 0; r < d.replicates; r++)
                rows[n++] = (uf_blocked_row){arms[g].means[r], r, g};
        }
        stop_on(uf_blocked_fit(rows, n, d.replicates, 2, UF_SCALE_DIFFERENCE, &fit, &error), &error);
        uf_contrast c = uf_blocked_contrast(&fit, 1, 0, 0.95);
        uf_contrast w = uf_welch((uf_arm){arms[1].means, (size_t)d.replicates},
                                 (uf_arm){arms[0].means, (size_t)d.replicates}, UF_SCALE_DIFFERENCE, 0.95);
        found += c.p <= 0.05;
        unblocked += w.p <= 0.05;
        held += holds(c.effect_low, shift, c.effect_high);
        uf_blocked_free(&fit);
    }
    print_line(shift == 0 ? "false positives of the blocked test" : "power of the blocked test", name, found, RUNS,
               shift == 0 ? 2.5 : 0, shift == 0 ? 6 : 100);
    print_line(shift == 0 ? "false positives without blocks" : "power without blocks", name, unblocked, RUNS, 0,
               shift == 0 ? 6 : 100);
    print_line("interval of the blocked effect", name, held, RUNS, 93, 98);
}

/* Four treatments that do nothing: any found, and do all intervals hold at once? */
static void bench_many(const char *name, design d, uint64_t seed)
{
    static outcome arms[ARMS_MOST];
    double day[REPLICATES_MOST] = {0}, found = 0, unadjusted = 0, held = 0;
    uf_random random;
    uf_error error;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < RUNS; k++) {
        uf_arm values[ARMS_MOST];
        uf_many many[ARMS_MOST];
        int any = 0, any_plain = 0, all = 1;
        for (int g = 0; g < ARMS_MOST; g++) {
            make_arm(&d, 0, day, &random, &arms[g]);
            values[g] = (uf_arm){arms[g].means, (size_t)d.replicates};
        }
        stop_on(uf_dunnett_arms(values, ARMS_MOST, UF_SCALE_DIFFERENCE, UF_TWO_SIDED, 0.95, many, NULL, NULL, &error),
                &error);
        for (int g = 1; g < ARMS_MOST; g++) {
            any |= many[g].p_adjusted <= 0.05;
            any_plain |= uf_welch(values[g], values[0], UF_SCALE_DIFFERENCE, 0.95).p <= 0.05;
            all &= holds(many[g].low, 0, many[g].high);
        }
        found += any;
        unadjusted += any_plain;
        held += all;
    }
    print_line("any false positive of four by Dunnett", name, found, RUNS, 2.5, 6.5);
    print_line("any false positive of four unadjusted", name, unadjusted, RUNS, 6, 100);
    print_line("all four simultaneous intervals", name, held, RUNS, 93, 98);
}

/* ---- ranks, bootstrap, components ------------------------------------------------------------------ */

static void bench_ranks_and_bootstrap(const char *name, design d, uint64_t seed)
{
    static outcome arms[2];
    double day[REPLICATES_MOST] = {0}, found = 0, held = 0, boot_held = 0;
    uf_random random;
    uf_error error;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < RUNS; k++) {
        uf_boot_well wells[2][REPLICATES_MOST * WELLS];
        uf_rank_test t;
        uf_bootstrap b = {0};
        for (int g = 0; g < 2; g++) {
            make_arm(&d, g ? 0.4 : 0, day, &random, &arms[g]);
            for (int w = 0; w < d.replicates * WELLS; w++)
                wells[g][w] = (uf_boot_well){arms[g].wells[w], w / WELLS};
        }
        uf_arm a[2] = {{arms[0].means, (size_t)d.replicates}, {arms[1].means, (size_t)d.replicates}};
        stop_on(uf_mann_whitney(a[1], a[0], UF_SCALE_DIFFERENCE, 0.95, UF_RANKS_LEAST, &t, &error), &error);
        held += holds(t.shift_low, 0.4, t.shift_high);
        for (int r = 0; r < d.replicates; r++)
            arms[1].means[r] -= 0.4;
        stop_on(uf_mann_whitney(a[1], a[0], UF_SCALE_DIFFERENCE, 0.95, UF_RANKS_LEAST, &t, &error), &error);
        found += t.p <= 0.05;
        if (d.replicates < UF_BOOTSTRAP_LEAST)
            continue;
        uf_boot_arm boot[2] = {{wells[0], (size_t)(d.replicates * WELLS), d.replicates},
                               {wells[1], (size_t)(d.replicates * WELLS), d.replicates}};
        stop_on(uf_bootstrap_effect(boot[1], boot[0], 0, UF_SCALE_DIFFERENCE, 0.95, 1000, (uint64_t)k, &b, &error),
                &error);
        boot_held += holds(b.low, 0.4, b.high);
    }
    print_line("false positives of Mann-Whitney", name, found, RUNS, 1, 6);
    print_line("interval of the Hodges-Lehmann shift", name, held, RUNS, 93, 99);
    if (d.replicates >= UF_BOOTSTRAP_LEAST)
        print_line("interval by bootstrap", name, boot_held, RUNS, 91, 98);
}

/* Cells in wells, one level: the interval of the intraclass correlation. */
static void bench_icc(const char *name, uint64_t seed)
{
    enum { GROUPS = 12, IN_GROUP = 9 };
    double held = 0;
    uf_random random;
    uf_error error;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < RUNS; k++) {
        double values[GROUPS * IN_GROUP];
        int group[GROUPS * IN_GROUP];
        uf_one_way fit;
        for (int g = 0; g < GROUPS; g++) {
            double level = sqrt(0.3) * uf_random_normal(&random);
            for (int j = 0; j < IN_GROUP; j++) {
                values[g * IN_GROUP + j] = level + sqrt(0.7) * uf_random_normal(&random);
                group[g * IN_GROUP + j] = g;
            }
        }
        stop_on(uf_one_way_fit(values, group, GROUPS * IN_GROUP, GROUPS, 0.95, &fit, &error), &error);
        held += holds(fit.icc_low, 0.3, fit.icc_high);
    }
    print_line("interval of the ICC", name, held, RUNS, 93, 98);
}

/* Shares over wells whose own share scatters. */
static void bench_share(const char *name, int wells, double scatter, uint64_t seed)
{
    double held = 0, by_cells = 0;
    uf_random random;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < RUNS; k++) {
        double hits[REPLICATES_MOST] = {0}, trials[REPLICATES_MOST], hit = 0, all = 0;
        for (int w = 0; w < wells; w++) {
            double share = fmin(1, fmax(0, 0.4 + scatter * uf_random_normal(&random)));
            trials[w] = uf_random_whole(&random, 30, 70);
            for (int j = 0; j < (int)trials[w]; j++)
                hits[w] += uf_random_uniform(&random) < share;
            hit += hits[w];
            all += trials[w];
        }
        uf_share s = uf_share_of_wells(hits, trials, (size_t)wells, 0.95).share, plain = uf_wilson(hit, all, 0.95);
        held += holds(s.low, 0.4, s.high);
        by_cells += holds(plain.low, 0.4, plain.high);
    }
    print_line("interval of a share over wells", name, held, RUNS, 93, 98.5);
    print_line("interval of a share by cells", name, by_cells, RUNS, 0, 96);
}

/* ---- doses and plates -------------------------------------------------------------------------------- */

enum { DOSES = 8, A_DOSE = 3, VEHICLES = 6, POINTS = VEHICLES + DOSES * A_DOSE };

static void make_curve(double log10_ec50, double noise, uf_random *random, uf_dose_point *points)
{
    int n = 0;
    for (int k = 0; k < VEHICLES; k++)
        points[n++] = (uf_dose_point){0, 100 + noise * uf_random_normal(random)};
    for (int d = 0; d < DOSES; d++)
        for (int k = 0; k < A_DOSE; k++) {
            double dose = 0.01 * pow(sqrt(10), d), gone = 1 / (1 + pow(pow(10, log10_ec50) / dose, 1.3));
            points[n++] = (uf_dose_point){dose, 100 - 80 * gone + noise * uf_random_normal(random)};
        }
}

/* log10 EC50 varies by 0.2 between replicates: the t interval over replicates holds it, one replicate's own does
 * not pretend to. */
static void bench_doses(const char *name, int replicates, double sd, double noise, uint64_t seed)
{
    double held = 0, own_held = 0, runs = 0, own_runs = 0;
    uf_random random;
    uf_error error;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < RUNS; k++) {
        uf_dose_fit fits[REPLICATES_MOST];
        for (int r = 0; r < replicates; r++) {
            uf_dose_point points[POINTS];
            double truth = -0.4 + sd * uf_random_normal(&random);
            make_curve(truth, noise, &random, points);
            stop_on(uf_dose_fit_one(points, POINTS, 0.05, 0.95, &fits[r], &error), &error);
            if (fits[r].status == UF_DOSE_OK) {
                own_runs++;
                own_held += holds(fits[r].ec50_low, pow(10, truth), fits[r].ec50_high);
            }
        }
        uf_dose_combined c = uf_dose_combine(fits, (size_t)replicates, 0.95);
        if (c.status == UF_DOSE_OK) {
            runs++;
            held += holds(c.ec50_low, pow(10, -0.4), c.ec50_high);
        }
    }
    print_line("interval of the EC50 over replicates", name, held, runs, 92, 98);
    print_line("profile interval of each replicate's own EC50", name, own_held, own_runs, 92, 98);
    print_line("replicates with status ok", name, own_runs, RUNS * (double)replicates, 95, 100);
}

static void bench_flat(const char *name, uint64_t seed)
{
    double seen = 0;
    uf_random random;
    uf_error error;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < RUNS; k++) {
        uf_dose_point points[POINTS];
        uf_dose_fit fit;
        make_curve(60, 5, &random, points); /* 60 decades up: no effect */
        stop_on(uf_dose_fit_one(points, POINTS, 0.05, 0.95, &fit, &error), &error);
        seen += fit.status != UF_DOSE_FLAT;
    }
    print_line("flat compounds not called flat", name, seen, RUNS, 3.5, 6.5);
}

static void bench_plates(const char *name, int wells, uint64_t seed)
{
    enum { WELLS_MOST = 32 };
    static const char *const figures[] = {"interval of Z'", "interval of robust Z'", "interval of SSMD",
                                          "interval of robust SSMD", "interval of the signal window"};
    double held[5] = {0}, z = 1 - 3 * 3.5 / 20, ssmd = -20 / sqrt(6.25), window = (20 - 3 * 3.5) / 2;
    const double truth[] = {z, z, ssmd, ssmd, window};
    uf_random random;
    uf_error error;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < RUNS; k++) {
        double control[WELLS_MOST], positive[WELLS_MOST];
        uf_plate_quality q;
        for (int j = 0; j < wells; j++) {
            control[j] = 30 + 2 * uf_random_normal(&random);
            positive[j] = 10 + 1.5 * uf_random_normal(&random);
        }
        stop_on(uf_plate_quality_of(control, (size_t)wells, positive, (size_t)wells, 0.95, &q, &error), &error);
        const uf_index all[] = {q.z_prime, q.z_prime_robust, q.ssmd, q.ssmd_robust, q.signal_window};
        for (int j = 0; j < 5; j++)
            held[j] += holds(all[j].low, truth[j], all[j].high);
    }
    for (int j = 0; j < 5; j++)
        print_line(figures[j], name, held[j], RUNS, j == 1 || j == 3 ? 85 : 92, 99.5);
}

int main(void)
{
    const design ratios = {0.3, 0.05, 0.65, 0, 3, 1}, five = {0.3, 0.05, 0.65, 0, 5, 0},
                 twelve = {0.3, 0.05, 0.65, 0, 12, 0}, days = {0.05, 0.05, 0.65, 0.25, 4, 0};
    (void)printf("figure,experiment,runs,percent,standard_error,wanted_low,wanted_high,met\n");
    bench_two_arms("3 replicates no difference", three_days, 0, 1);
    bench_two_arms("3 replicates shift 1", three_days, 1, 2);
    bench_two_arms("3 replicates ratios no difference", ratios, 0, 3);
    bench_two_arms("3 replicates ratio 1.35", ratios, 1, 4);
    bench_two_arms("5 replicates no difference", five, 0, 5);
    bench_blocks("4 blocks no difference", days, 0, 6);
    bench_blocks("4 blocks shift 0.8", days, 0.8, 7);
    bench_many("3 replicates", three_days, 8);
    bench_many("5 replicates", five, 9);
    bench_ranks_and_bootstrap("5 replicates", five, 10);
    bench_ranks_and_bootstrap("12 replicates", twelve, 11);
    bench_icc("12 wells of 9 cells", 12);
    bench_share("6 wells scatter 0.1", 6, 0.1, 13);
    bench_share("6 wells like", 6, 0, 14);
    bench_share("12 wells scatter 0.2", 12, 0.2, 15);
    bench_doses("3 replicates sd 0.2", 3, 0.2, 5, 16);
    bench_doses("5 replicates sd 0.2", 5, 0.2, 5, 17);
    bench_doses("5 replicates sd 0.2 noisy", 5, 0.2, 12, 18);
    bench_flat("8 doses", 19);
    bench_plates("8 + 8 wells", 8, 20);
    bench_plates("16 + 16 wells", 16, 21);
    bench_plates("32 + 32 wells", 32, 22);
    return 0;
}
