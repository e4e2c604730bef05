/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * How right the numbers are: simulated fields with known truth through the measuring steps, without files.
 *
 *     truth          a grid of fields (signal, crowding, haze, model, pixel size), one line each: bias and mean absolute
 *                    error of every figure
 *     truth cover    200 fields whose angle, indices, reference ratio and flat are drawn from their stated sd while the
 *                    program is told the nominal ones: how often each 95 % interval holds the truth
 *
 * Seeds are fixed, so that the tables change only when the program does. The scene maker shares nothing with the steps
 * (src/layers.txt).
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "run/field.h"
#include "run/plan.h"
#include "scene/random.h"
#include "scene/scene.h"

enum { SEEDS = 3, COVER_FIELDS = 200, SIDE_UM = 56 };

static void stop_on(uf_status status, const uf_error *error)
{
    if (status == UF_OK)
        return;
    (void)fprintf(stderr, "truth: %s\n", error->text);
    exit(1);
}

/* ---- one field ------------------------------------------------------------------------------- */

/* What the program is told, beside the scene. */
typedef struct told {
    double angle_deg, angle_sd_deg, medium_n, medium_n_sd, cell_n, cell_n_sd, ratio, ratio_sd, normalisation_sd;
    uf_plane near_flat, wide_flat;
} told;

static told tell_truth(const uf_scene_settings *s, const uf_scene *scene)
{
    return (told){.angle_deg = s->angle_deg,
                  .medium_n = s->medium_n,
                  .cell_n = s->cell_n,
                  .ratio = scene->reference_ratio,
                  .ratio_sd = 0.01 * scene->reference_ratio,
                  .near_flat = scene->near_flat,
                  .wide_flat = scene->wide_flat};
}

static uf_settings *settings_for(const uf_scene_settings *s, const told *t)
{
    uf_settings *settings;
    uf_error error;
    uf_text text = {0}, assay = {0};
    stop_on(uf_settings_new(&settings, &error), &error);
    uf_text_printf(
        &text,
        "[light]\nwavelength_nm = %.9f\npolarization = s\n[interface]\nsubstrate_n = %.9f\nmedium_n = %.9f\n"
        "medium_n_sd = %.9f\ncell_n = %.9f\ncell_n_sd = %.9f\nangle_deg = %.9f\nangle_sd_deg = %.9f\n"
        "objective_na = 1.49\n[decay]\nmodel = %s\nscattered_fraction = %.9f\nscattered_depth_nm = %.9f\n"
        "[pixel]\nsize_um = %.9f\n[shift]\nestimate = yes\n[reference]\nratio = %.9f\nratio_sd = %.9f\n"
        "normalisation_sd = %.9f\n",
        s->wavelength_nm, s->substrate_n, t->medium_n, t->medium_n_sd, t->cell_n, t->cell_n_sd, t->angle_deg,
        t->angle_sd_deg, s->layered ? "layered" : "exponential", s->scattered_fraction, s->scattered_depth_nm,
        s->pixel_size_um, t->ratio, t->ratio_sd, t->normalisation_sd);
    for (int k = 0; k < 2; k++)
        uf_text_printf(&text, "[%s.camera]\noffset_adu = %.9f\ngain_e_per_adu = %.9f\nread_noise_e = %.9f\n",
                       k ? "wide" : "near", s->offset_adu, s->gain_e_per_adu, s->read_noise_e);
    uf_text_add(&assay, "[cells]\nmin_area_um2 = 20\n");
    stop_on(uf_settings_parse(settings, text.bytes, text.length, "bench", UF_INSTRUMENT_FILE, &error), &error);
    stop_on(uf_settings_parse(settings, assay.bytes, assay.length, "assay", UF_ASSAY_FILE, &error), &error);
    uf_text_free(&text);
    uf_text_free(&assay);
    return settings;
}

static void correct(uf_work *work, const uf_settings *settings, uf_channel_name which, uf_plane counts, uf_plane flat,
                    uf_channel *channel)
{
    uf_error error;
    uf_raw_channel raw = {.counts = counts,
                          .flat = flat,
                          .full_scale_adu = 65535,
                          .camera = &settings->camera[which],
                          .name = which == UF_NEAR ? "near" : "wide"};
    stop_on(uf_mask_take(work, counts.width, counts.height, &raw.saturated, &error), &error);
    stop_on(uf_field_correct(work, &raw, channel, &error), &error);
}

static void run_field(uf_work *work, const uf_scene_settings *s, const uf_scene *scene, const told *t,
                      uf_field_result *result)
{
    static uf_plan plan;
    uf_error error;
    uf_settings *settings = settings_for(s, t);
    stop_on(uf_plan_make(settings, s->pixel_size_um, &plan, &error), &error);
    *result = (uf_field_result){0};
    correct(work, settings, UF_NEAR, scene->near_adu, t->near_flat, &result->near);
    correct(work, settings, UF_WIDE, scene->wide_adu, t->wide_flat, &result->wide);
    stop_on(uf_field_run(work, &plan, settings, result, &error), &error);
    uf_settings_free(&settings);
}

/* ---- against the truth ----------------------------------------------------------------------- */

typedef struct true_cell {
    double pixels, contact, median_nm;
    int found; /* label of the found cell, 0: none with an overlap of half the union */
    int on_edge;
} true_cell;

static int ascending(const void *a, const void *b)
{
    float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

/* The found label that overlaps true cell k by more than half of their union. */
static int partner_of(const uf_scene *scene, uf_labels found, int k, double pixels)
{
    int64_t *overlap = calloc((size_t)found.count + 1, sizeof *overlap),
            *area = calloc((size_t)found.count + 1, sizeof *area);
    int best = 0;
    for (int y = 0; y < found.height; y++)
        for (int x = 0; x < found.width; x++) {
            int label = uf_labels_row(found, y)[x];
            area[label]++;
            overlap[label] += uf_labels_row(scene->labels, y)[x] == k;
        }
    for (int j = 1; j <= found.count; j++)
        if ((double)overlap[j] > 0.5 * (pixels + (double)(area[j] - overlap[j])))
            best = j;
    free(overlap);
    free(area);
    return best;
}

static true_cell look_at_truth(const uf_scene *scene, uf_labels found, int k, double cutoff_nm)
{
    true_cell cell = {0};
    uf_labels labels = scene->labels;
    float *gaps = malloc((size_t)labels.width * (size_t)labels.height * sizeof *gaps);
    size_t count = 0;
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++) {
            if (uf_labels_row(labels, y)[x] != k)
                continue;
            float gap = uf_plane_row(scene->gap_nm, y)[x];
            gaps[count++] = gap;
            cell.contact += (double)gap <= cutoff_nm;
            cell.on_edge |= x == 0 || y == 0 || x == labels.width - 1 || y == labels.height - 1;
        }
    cell.pixels = (double)count;
    qsort(gaps, count, sizeof *gaps, ascending);
    cell.median_nm = count ? (double)(gaps[(count - 1) / 2] + gaps[count / 2]) / 2 : 0;
    cell.found = count ? partner_of(scene, found, k, cell.pixels) : 0;
    free(gaps);
    return cell;
}

/* Errors of one figure over cells. */
typedef struct errors {
    double n, sum, absolute;
} errors;

static void add_error(errors *e, double value)
{
    if (isnan(value))
        return;
    e->n++;
    e->sum += value;
    e->absolute += fabs(value);
}

static double bias(const errors *e)
{
    return e->n > 0 ? e->sum / e->n : (double)NAN;
}

static double mean_absolute(const errors *e)
{
    return e->n > 0 ? e->absolute / e->n : (double)NAN;
}

typedef struct score {
    double true_cells, found_cells, matched, true_spots, found_spots, hit_spots;
    errors area, contact, fraction, median, gap; /* gap: of pixels more than 1 um inside, squares in `absolute` */
} score;

static void score_spots(const uf_scene *scene, const uf_field_result *r, double pixel_um, score *s)
{
    int spots = (int)0;
    for (int k = 0; k < r->cells.labels.count; k++)
        spots += isnan(r->rows[k].spot_count) ? 0 : (int)r->rows[k].spot_count;
    s->true_spots += scene->spots;
    s->found_spots += spots;
    for (int t = 0; t < scene->spots; t++)
        for (int k = 0; k < spots; k++)
            if (hypot(r->spots[k].x_px - (double)scene->spot_x_px[t],
                      r->spots[k].y_px - (double)scene->spot_y_px[t]) *
                    pixel_um <=
                0.7) {
                s->hit_spots++;
                break;
            }
}

static void score_map(const uf_scene *scene, const uf_field_result *r, double pixel_um, score *s)
{
    for (int y = 0; y < scene->labels.height; y++)
        for (int x = 0; x < scene->labels.width; x++) {
            double truth = (double)uf_plane_row(scene->gap_nm, y)[x],
                   found = (double)uf_plane_row(r->gaps.gap_nm, y)[x];
            if (!uf_labels_row(scene->labels, y)[x] || isnan(found) || truth > 200 ||
                (double)uf_plane_row(r->cells.distance_px, y)[x] * pixel_um < 1)
                continue;
            s->gap.n++;
            s->gap.sum += found - truth;
            s->gap.absolute += (found - truth) * (found - truth);
        }
}

static void score_field(const uf_scene_settings *settings, const uf_scene *scene, const uf_field_result *r, score *s)
{
    double um2 = settings->pixel_size_um * settings->pixel_size_um;
    s->found_cells += r->cells.labels.count;
    for (int k = 1; k <= scene->labels.count; k++) {
        true_cell t = look_at_truth(scene, r->cells.labels, k, 50);
        s->true_cells += t.pixels > 0;
        s->matched += t.found > 0;
        if (!t.found || t.on_edge)
            continue;
        const uf_cell *row = &r->rows[t.found - 1];
        add_error(&s->area, row->spread_area_um2 / (t.pixels * um2) - 1);
        add_error(&s->fraction, row->attachment_fraction - t.contact / t.pixels);
        if (t.contact * um2 > 5)
            add_error(&s->contact, row->contact_area_um2 / (t.contact * um2) - 1);
        if (t.median_nm < 150)
            add_error(&s->median, row->gap_median_nm - t.median_nm);
    }
    score_spots(scene, r, settings->pixel_size_um, s);
    score_map(scene, r, settings->pixel_size_um, s);
}

static double f1(double hits, double truth, double found)
{
    return truth + found > 0 ? 2 * hits / (truth + found) : (double)NAN;
}

/* ---- the grid -------------------------------------------------------------------------------- */

typedef struct variant {
    const char *signal, *crowding, *model;
    double peak, haze, pixel_um;
    int cells, layered;
    double touching, stray;
} variant;

static uf_scene_settings scene_of(const variant *v, uint64_t seed)
{
    uf_scene_settings s = uf_scene_defaults();
    s.seed = seed;
    s.pixel_size_um = v->pixel_um;
    s.width = s.height = (int)(SIDE_UM / v->pixel_um);
    s.cells = v->cells;
    s.touching = v->touching;
    s.near_peak_adu = v->peak;
    s.wide_peak_adu = v->peak / 1.5;
    s.haze = v->haze;
    s.layered = v->layered;
    s.scattered_fraction = v->stray;
    s.shift_dx_px = 1.4;
    s.shift_dy_px = -0.8;
    return s;
}

static void print_header(void)
{
    (void)printf(
        "signal,crowding,haze,model,pixel_um,cell_f1,area_bias_percent,area_mae_percent,contact_bias_percent,"
        "contact_mae_percent,fraction_bias,fraction_mae,median_bias_nm,median_mae_nm,map_bias_nm,map_rmse_nm,spot_"
        "f1\n");
}

static void print_row(const variant *v, const score *s)
{
    (void)printf("%s,%s,%g,%s,%g,%.3f,%.2f,%.2f,%.1f,%.1f,%.4f,%.4f,%.1f,%.1f,%.1f,%.1f,%.3f\n", v->signal,
                 v->crowding, v->haze, v->model, v->pixel_um, f1(s->matched, s->true_cells, s->found_cells),
                 100 * bias(&s->area), 100 * mean_absolute(&s->area), 100 * bias(&s->contact),
                 100 * mean_absolute(&s->contact), bias(&s->fraction), mean_absolute(&s->fraction), bias(&s->median),
                 mean_absolute(&s->median), bias(&s->gap), sqrt(mean_absolute(&s->gap)),
                 f1(s->hit_spots, s->true_spots, s->found_spots));
    (void)fflush(stdout);
}

static void run_variant(uf_work *work, const variant *v)
{
    score s = {0};
    for (uint64_t seed = 1; seed <= SEEDS; seed++) {
        uf_scene_settings settings = scene_of(v, seed);
        uf_error error;
        uf_scene scene;
        uf_field_result result;
        uf_arena_mark mark = uf_arena_now(&work->arena);
        stop_on(uf_scene_make(work, &settings, &scene, &error), &error);
        told t = tell_truth(&settings, &scene);
        run_field(work, &settings, &scene, &t, &result);
        score_field(&settings, &scene, &result, &s);
        uf_field_result_free(&result);
        uf_arena_back(&work->arena, mark);
    }
    print_row(v, &s);
}

static void run_grid(uf_work *work)
{
    static const double pixels_um[] = {0.065, 0.11, 0.16};
    static const char *const models[] = {"exponential", "layered", "stray"};
    print_header();
    for (int bright = 1; bright >= 0; bright--)
        for (int crowded = 0; crowded < 2; crowded++)
            for (int hazy = 0; hazy < 2; hazy++)
                for (int model = 0; model < 3; model++)
                    for (int p = 0; p < 3; p++) {
                        variant v = {.signal = bright ? "bright" : "dim",
                                     .crowding = crowded ? "crowded" : "sparse",
                                     .model = models[model],
                                     .peak = bright ? 9000 : 1000,
                                     .haze = hazy ? 0.08 : 0,
                                     .pixel_um = pixels_um[p],
                                     .cells = crowded ? 14 : 8,
                                     .layered = model == 1,
                                     .touching = crowded ? 0.6 : 0.1,
                                     .stray = model == 2 ? 0.1 : 0};
                        run_variant(work, &v);
                    }
}

/* ---- coverage -------------------------------------------------------------------------------- */

static const double angle_sd_deg = 0.3, medium_n_sd = 0.001, cell_n_sd = 0.005, ratio_sd = 0.03, flat_sd = 0.02;

/* What two flats that tilt by flat_sd across and down do to the ratio from cell to cell: positions spread by 1 / sqrt 12 of
 * the field, two directions, two channels. It is told as normalisation_sd, the setting for what differs between cells. */
static const double flat_spread = 0.02 * 0.288675 * 2;

typedef struct coverage {
    double cells, contact, fraction, median, contact_width, fraction_width, median_width, pulls;
} coverage;

/* A flat that tilts by a random part across and down. */
static uf_plane tilted(uf_work *work, uf_plane flat, double across, double down)
{
    uf_plane out;
    uf_error error;
    stop_on(uf_plane_take(work, flat.width, flat.height, &out, &error), &error);
    for (int y = 0; y < flat.height; y++)
        for (int x = 0; x < flat.width; x++) {
            double tilt = 1 + across * ((double)x / flat.width - 0.5) + down * ((double)y / flat.height - 0.5);
            uf_plane_row(out, y)[x] = (float)((double)uf_plane_row(flat, y)[x] * tilt);
        }
    return out;
}

static void add_cover(const uf_scene_settings *settings, const uf_scene *scene, const uf_field_result *r, coverage *c)
{
    double um2 = settings->pixel_size_um * settings->pixel_size_um;
    for (int k = 1; k <= scene->labels.count; k++) {
        true_cell t = look_at_truth(scene, r->cells.labels, k, 50);
        if (!t.found || t.on_edge || t.median_nm > 150)
            continue;
        const uf_cell *row = &r->rows[t.found - 1];
        double contact = t.contact * um2, fraction = t.contact / t.pixels;
        double half = 1.96 * hypot(row->gap_random_nm, row->gap_systematic_nm);
        c->cells++;
        c->contact += row->contact_area_low_um2 <= contact && contact <= row->contact_area_high_um2;
        c->fraction += row->attachment_fraction_low <= fraction && fraction <= row->attachment_fraction_high;
        c->median += fabs(row->gap_median_nm - t.median_nm) <= half;
        c->contact_width += row->contact_area_high_um2 - row->contact_area_low_um2;
        c->fraction_width += row->attachment_fraction_high - row->attachment_fraction_low;
        c->median_width += 2 * half;
        c->pulls += pow((row->gap_median_nm - t.median_nm) / (half / 1.96), 2);
    }
}

static void cover_field(uf_work *work, int k, const variant *v, coverage *c)
{
    uf_random dice;
    uf_error error;
    uf_scene scene;
    uf_field_result result;
    uf_scene_settings settings = scene_of(v, (uint64_t)(7000 + k));
    uf_random_start(&dice, (uint64_t)(9000 + k), 0);
    told t = {.angle_deg = settings.angle_deg,
              .angle_sd_deg = angle_sd_deg,
              .medium_n = settings.medium_n,
              .medium_n_sd = medium_n_sd,
              .cell_n = settings.cell_n,
              .cell_n_sd = cell_n_sd,
              .normalisation_sd = flat_spread};
    settings.angle_deg += angle_sd_deg * uf_random_normal(&dice);
    settings.medium_n += medium_n_sd * uf_random_normal(&dice);
    settings.cell_n += cell_n_sd * uf_random_normal(&dice);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    stop_on(uf_scene_make(work, &settings, &scene, &error), &error);
    t.ratio = scene.reference_ratio * (1 + ratio_sd * uf_random_normal(&dice));
    t.ratio_sd = ratio_sd * scene.reference_ratio;
    t.near_flat = tilted(work, scene.near_flat, flat_sd * uf_random_normal(&dice), flat_sd * uf_random_normal(&dice));
    t.wide_flat = tilted(work, scene.wide_flat, flat_sd * uf_random_normal(&dice), flat_sd * uf_random_normal(&dice));
    run_field(work, &settings, &scene, &t, &result);
    add_cover(&settings, &scene, &result, c);
    uf_field_result_free(&result);
    uf_arena_back(&work->arena, mark);
}

static void print_cover(const variant *v, const coverage *c)
{
    (void)printf("%s,%s,%g,%.0f,%.3f,%.3f,%.3f,%.2f,%.4f,%.2f,%.2f\n", v->signal, v->model, v->haze, c->cells,
                 c->contact / c->cells, c->fraction / c->cells, c->median / c->cells, c->contact_width / c->cells,
                 c->fraction_width / c->cells, c->median_width / c->cells, sqrt(c->pulls / c->cells));
    (void)fflush(stdout);
}

static void run_cover(uf_work *work)
{
    (void)printf("signal,model,haze,cells,contact_area_cover,attachment_fraction_cover,gap_median_cover,contact_area_"
                 "width_um2,"
                 "attachment_fraction_width,gap_median_width_nm,gap_median_pull_rms\n");
    for (int kind = 0; kind < 4; kind++) {
        coverage c = {0};
        variant v = {.signal = kind % 2 ? "dim" : "bright",
                     .model = kind / 2 ? "layered" : "exponential",
                     .peak = kind % 2 ? 1000 : 9000,
                     .haze = 0.04,
                     .pixel_um = 0.11,
                     .cells = 8,
                     .layered = kind / 2,
                     .touching = 0.15};
        for (int k = 0; k < COVER_FIELDS / 4; k++)
            cover_field(work, kind * COVER_FIELDS / 4 + k, &v, &c);
        print_cover(&v, &c);
    }
}

int main(int argc, char **argv)
{
    uf_work work = {0};
    if (argc > 1 && strcmp(argv[1], "cover") == 0)
        run_cover(&work);
    else
        run_grid(&work);
    uf_arena_free(&work.arena);
    return 0;
}
