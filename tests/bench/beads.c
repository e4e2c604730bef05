/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * How right `calibrate bead` is: 200 simulated experiments a row (scene/beads.h: light summed over points on spheres), with
 * the share of 95 % intervals that hold the truth. Writes CSV to standard output; kept as tests/bench/beads.csv.
 *
 *   beads [RUNS]
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "calibrate/bead.h"
#include "scene/beads.h"

typedef struct bench_case {
    const char *name;
    double radius_um, depth_nm, fraction, radius_spread, floating;
    int beads, immersed;
    double peak_adu;
} bench_case;

static const bench_case cases[] = {
    {"surface 1 um", 1, 80, 0.1, 0, 0, 16, 0, 4000},
    {"surface 2.5 um", 2.5, 80, 0.1, 0, 0, 16, 0, 4000},
    {"surface 5 um", 5, 80, 0.1, 0, 0, 14, 0, 4000},
    {"surface 7.5 um", 7.5, 80, 0.1, 0, 0, 12, 0, 4000},
    {"surface 1 um, dim", 1, 80, 0.1, 0, 0, 20, 0, 400},
    {"surface 2.5 um, dim", 2.5, 80, 0.1, 0, 0, 16, 0, 400},
    {"surface 2.5 um, deep", 2.5, 150, 0.1, 0, 0, 16, 0, 4000},
    {"surface 2.5 um, no stray", 2.5, 80, 0, 0, 0, 16, 0, 4000},
    {"surface 2.5 um, sizes 3 %", 2.5, 80, 0.1, 0.03, 0, 16, 0, 4000},
    {"surface 2.5 um, a fifth float", 2.5, 80, 0.1, 0, 0.2, 20, 0, 4000},
    {"surface 5 um, strong stray", 5, 80, 0.25, 0, 0, 14, 0, 4000},
    {"immersed 2.5 um", 2.5, 80, 0.1, 0, 0, 16, 1, 4000},
    {"immersed 5 um", 5, 80, 0.1, 0, 0, 14, 1, 4000},
};
enum { CASES = sizeof cases / sizeof cases[0] };

static int image_side(const bench_case *c)
{
    return (int)(c->radius_um * 2.7 / 0.11 * sqrt(c->beads) * 1.15) + 60;
}

static uf_bead_scene scene_of(const bench_case *c, unsigned seed)
{
    return (uf_bead_scene){.seed = seed,
                           .width = image_side(c),
                           .height = image_side(c),
                           .pixel_size_um = 0.11,
                           .beads = c->beads,
                           .radius_um = c->radius_um,
                           .radius_spread = c->radius_spread,
                           .immersed = c->immersed,
                           .depth_nm = c->depth_nm,
                           .scattered_fraction = c->fraction,
                           .scattered_depth_nm = 1200,
                           .psf_sigma_um = 0.078,
                           .peak_adu = c->peak_adu,
                           .label_spread = 0.1,
                           .floating = c->floating,
                           .floating_nm = 300,
                           .background_adu = 60,
                           .offset_adu = 100,
                           .full_scale_adu = 65535,
                           .gain_e_per_adu = 2.17,
                           .read_noise_e = 1.6};
}

static uf_status one_run(uf_work *work, const bench_case *c, unsigned seed, uf_bead_result *result, uf_error *error)
{
    uf_bead_scene scene = scene_of(c, seed);
    uf_bead_truth truth;
    uf_bead_set set = {0};
    uf_channel channel = {.noise = {scene.gain_e_per_adu, scene.read_noise_e / scene.gain_e_per_adu, 1}};
    uf_bead_setup setup = {.dye = c->immersed ? UF_DYE_IMMERSED : UF_DYE_SURFACE,
                           .with_stray = 1,
                           .radius_um = c->radius_um,
                           .pixel_size_um = scene.pixel_size_um,
                           .psf_sigma_um = scene.psf_sigma_um,
                           .expected_depth_nm = 1.15 * c->depth_nm,
                           .scattered_depth_nm = 1000};
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_scene_beads(work, &scene, &channel.image, &truth, error);
    for (int y = 0; status == UF_OK && y < scene.height; y++)
        for (int x = 0; x < scene.width; x++)
            uf_plane_row(channel.image, y)[x] -= (float)scene.offset_adu;
    if (status == UF_OK)
        status = uf_beads_find(work, &setup, &channel, &set, error);
    if (status == UF_OK)
        status = uf_beads_fit(work, &setup, &set, result, error);
    uf_bead_set_free(&set);
    uf_arena_back(&work->arena, mark);
    return status;
}

typedef struct tally {
    double sum, sum2, sd_sum;
    int held;
} tally;

static void add(tally *t, const uf_bead_figure *f, double truth)
{
    t->sum += f->value - truth;
    t->sum2 += (f->value - truth) * (f->value - truth);
    t->sd_sum += f->sd;
    t->held += f->low <= truth && truth <= f->high;
}

static void run_case(uf_work *work, const bench_case *c, int runs)
{
    tally depth = {0}, share = {0}, stray = {0};
    int done = 0, beads = 0, stray_fitted = 0;
    double misfit = 0;
    for (int k = 0; k < runs; k++) {
        uf_bead_result r;
        uf_error error;
        if (one_run(work, c, 1000u + (unsigned)k, &r, &error) != UF_OK) {
            (void)fprintf(stderr, "%s, run %d: %s\n", c->name, k, error.text);
            continue;
        }
        done++;
        beads += r.used;
        misfit += r.misfit;
        add(&depth, &r.depth_nm, c->depth_nm);
        add(&share, &r.scattered_fraction, c->fraction);
        if (r.scattered_depth_fitted) {
            stray_fitted++;
            add(&stray, &r.scattered_depth_nm, 1200);
        }
    }
    (void)printf("%s,%d,%.1f,%.4f,%.4f,%.4f,%.3f,%.4f,%.4f,%.4f,%.3f,%.3f,%.3f,%.3f\n", c->name, done, (double)beads / done,
                 depth.sum / done / c->depth_nm, sqrt(depth.sum2 / done) / c->depth_nm,
                 depth.sd_sum / done / c->depth_nm, (double)depth.held / done, share.sum / done,
                 sqrt(share.sum2 / done), share.sd_sum / done, (double)share.held / done, (double)stray_fitted / done,
                 stray_fitted ? (double)stray.held / stray_fitted : (double)NAN, misfit / done);
    (void)fflush(stdout);
}

int main(int argc, char **argv)
{
    int runs = argc > 1 ? atoi(argv[1]) : 200;
    uf_work work = {0};
    (void)printf("case,runs,beads_used,depth_bias,depth_rmse,depth_sd_told,depth_cover,share_bias,share_rmse,share_sd_told,"
                 "share_cover,stray_depth_fitted,stray_depth_cover,misfit\n");
    for (int k = 0; k < CASES; k++)
        run_case(&work, &cases[k], runs);
    uf_arena_free(&work.arena);
    return 0;
}
