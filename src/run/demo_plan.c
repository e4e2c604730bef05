/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The demo's three experiments. All of them are invented:
 *
 *   coatings  does a lab's own coating ("marram") make cells hold on better than plain glass? Two fields of each on
 *             three days, each day with its own bench.
 *   doses     at what dose does a compound ("samphire") release cells from the substrate? Eight doses and the
 *             vehicle on three plates; the highest dose washes most cells away.
 *   screen    part of a plate: twelve treatments, controls that hold and controls that let go; one well is out of
 *             focus, one has dust, one is empty.
 */
#include "run/demo_plan.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "scene/random.h"

/* How firmly cells hold on, 0 hardly to 1 well, as the traits of a scene. */
static void set_hold(uf_scene_settings *scene, double hold)
{
    scene->base_gap_nm = 130 - 40 * hold;
    scene->patch_fraction = 0.06 + 0.32 * hold;
    scene->lifted = 0.45 * (1 - hold) * (1 - hold);
    scene->spots_min = (int)(2 + 10 * hold);
    scene->spots_max = (int)(6 + 24 * hold);
}

static demo_field *add_field(demo_plan *plan, int bench, uint64_t seed)
{
    demo_field *field = &plan->fields[plan->field_count++];
    *field = (demo_field){.bench = bench, .dose_um = (double)NAN, .scene = plan->benches[bench].scene};
    field->scene.seed = seed;
    return field;
}

static demo_bench *add_bench(demo_plan *plan, const char *name)
{
    demo_bench *bench = &plan->benches[plan->bench_count++];
    (void)snprintf(bench->name, sizeof bench->name, "%s", name);
    bench->scene = uf_scene_defaults();
    return bench;
}

/* ---- coatings -------------------------------------------------------------------------------- */

/* The bench of each day, as far as it differs from the maker's usual one. */
static void add_days(demo_plan *plan)
{
    static const struct {
        double angle_deg, near_peak, wide_peak, near_background, dx, dy, haze;
    } days[] = {{70, 9000, 6000, 250, 1.4, -0.8, 0},
                {69.6, 8200, 6600, 310, 1.1, -0.5, 0.03},
                {70.5, 9900, 5700, 220, 1.7, -1.2, 0}};
    for (int day = 0; day < 3; day++) {
        char name[DEMO_WORD];
        (void)snprintf(name, sizeof name, "day%d", day + 1);
        uf_scene_settings *s = &add_bench(plan, name)->scene;
        s->angle_deg = days[day].angle_deg;
        s->near_peak_adu = days[day].near_peak;
        s->wide_peak_adu = days[day].wide_peak;
        s->near_background_adu = days[day].near_background;
        s->shift_dx_px = days[day].dx;
        s->shift_dy_px = days[day].dy;
        s->haze = days[day].haze;
    }
}

static void set_coating(demo_field *field, int day, int k)
{
    int on_coating = k < 2;
    uf_scene_settings *s = &field->scene;
    (void)snprintf(field->name, sizeof field->name, "day%d_%c", day + 1, 'a' + k);
    (void)snprintf(field->field, sizeof field->field, "%c", 'a' + k);
    (void)snprintf(field->coating, sizeof field->coating, "%s", on_coating ? "marram" : "glass");
    field->replicate = day + 1;
    field->minute = 6 * k;
    field->with_maps = 1;
    s->base_gap_nm = (on_coating ? 90 : 118) + 4 * (day == 1) - 3 * (day == 2);
    s->patch_fraction = on_coating ? 0.38 : 0.16;
    s->lifted = on_coating ? 0.1 * (k == 1) : 0.3;
    s->spots_min = on_coating ? 12 : 3;
    s->spots_max = on_coating ? 30 : 12;
}

static void plan_coatings(demo_plan *plan)
{
    plan->columns = "field,vessel,coating,replicate,session,instrument,acquired";
    plan->story =
        "A lab asks whether cells hold on to its coating \"marram\" better than to bare glass: two fields on\n"
        "each, on three days. Angle, lamp and shift differ from day to day; day1.ini to day3.ini say how.\n";
    add_days(plan);
    for (int day = 0; day < 3; day++)
        for (int k = 0; k < 4; k++)
            set_coating(add_field(plan, day, (uint64_t)(100 * day + 11 + k)), day, k);
}

/* ---- plates ---------------------------------------------------------------------------------- */

/* A plate's bench: more cells a field through larger pixels. */
static void set_plate_bench(uf_scene_settings *s, int plate)
{
    s->pixel_size_um = 0.16;
    s->cells = 16;
    s->near_peak_adu = 7000 + 600 * plate;
    s->wide_peak_adu = 5000 - 250 * plate;
    s->angle_deg = 70 + 0.3 * (plate - 1);
    s->shift_dx_px = -0.9 + 0.2 * plate;
    s->shift_dy_px = 0.6;
    s->haze = 0.02;
    s->scattered_fraction = 0.06; /* stray light, as the instrument file says */
}

/* The first `count` wells of the plate's inside (rows B to G, columns 2 to 11), in random order. */
static void shuffle_wells(uint64_t seed, int *wells, int count)
{
    enum { INSIDE = 60 };
    int order[INSIDE];
    uf_random random;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < INSIDE; k++)
        order[k] = k;
    for (int k = 0; k < count; k++) {
        int other = uf_random_whole(&random, k, INSIDE - 1), swap = order[k];
        order[k] = order[other];
        order[other] = swap;
        wells[k] = order[k];
    }
}

static void place_in(demo_field *field, const char *plate, int well)
{
    const char row = "BCDEFG"[well / 10 % 6];
    int column = 2 + well % 10;
    (void)snprintf(field->plate, sizeof field->plate, "%s", plate);
    (void)snprintf(field->well, sizeof field->well, "%c%02d", row, column);
    (void)snprintf(field->name, sizeof field->name, "%.30s_%c%02d", plate, row, column);
    field->minute = 2 * well;
}

/* ---- doses ----------------------------------------------------------------------------------- */

static const double doses_um[] = {0.03, 0.1, 0.3, 1, 3, 10, 30, 100};
enum { DOSES = 8, WELLS_A_DOSE = 3, VEHICLE_WELLS = 8, WELLS_A_PLATE = DOSES * WELLS_A_DOSE + VEHICLE_WELLS };
static const double half_dose_um = 2.4, dose_slope = 1.3, washing_dose_um = 100;

static void set_dose(demo_field *field, int plate, double dose_um)
{
    /* Hill's curve; each plate's cells hold on a little differently. */
    double effect = dose_um > 0 ? 1 / (1 + pow(half_dose_um / dose_um, dose_slope)) : 0;
    set_hold(&field->scene, (0.95 - 0.07 * plate) * (1 - effect) + 0.02);
    field->dose_um = dose_um;
    field->replicate = plate + 1;
    (void)snprintf(field->treatment, sizeof field->treatment, "%s", dose_um > 0 ? "samphire" : "vehicle");
    (void)snprintf(field->role, sizeof field->role, "%s", dose_um > 0 ? "sample" : "control");
    if (dose_um >= washing_dose_um)
        field->scene.cells = (int)(field->scene.seed % 3);
}

static void plan_doses(demo_plan *plan)
{
    plan->columns = "plate,well,vessel,treatment,dose,dose_unit,replicate,session,instrument,role,acquired";
    plan->story =
        "A lab asks at what dose its compound \"samphire\" makes cells let go: eight doses in three wells each\n"
        "and eight wells of vehicle on each of three plates, one plate a day, places drawn at random. Half the\n"
        "effect is at 2.4 uM. The highest dose washes most cells away; some wells are left empty.\n";
    for (int plate = 0; plate < 3; plate++) {
        char name[DEMO_WORD];
        int wells[WELLS_A_PLATE];
        (void)snprintf(name, sizeof name, "plate%d", plate + 1);
        set_plate_bench(&add_bench(plan, name)->scene, plate);
        shuffle_wells((uint64_t)(900 + plate), wells, WELLS_A_PLATE);
        for (int k = 0; k < WELLS_A_PLATE; k++) {
            demo_field *field = add_field(plan, plate, (uint64_t)(1000 * (plate + 1) + k));
            set_dose(field, plate, k < DOSES * WELLS_A_DOSE ? doses_um[k / WELLS_A_DOSE] : 0);
            place_in(field, name, wells[k]);
            field->with_maps = plate == 0 && k % WELLS_A_DOSE == 0 && k < DOSES * WELLS_A_DOSE;
        }
    }
}

/* ---- screen ---------------------------------------------------------------------------------- */

enum {
    CONTROLS = 8,
    TREATMENTS = 12,
    WELLS_A_TREATMENT = 2,
    SCREEN_WELLS = 2 * CONTROLS + TREATMENTS * WELLS_A_TREATMENT
};
enum { OUT_OF_FOCUS = 18, DUSTY = 23, EMPTY = 30 };

static void set_screen_well(demo_field *field, int k)
{
    static const double holds[TREATMENTS] = {0.9, 0.85, 0.93, 0.35, 0.88, 0.95, 0.8, 0.1, 0.9, 0.6, 0.87, 0.92};
    int treatment = (k - 2 * CONTROLS) / WELLS_A_TREATMENT;
    (void)snprintf(field->role, sizeof field->role, "%s",
                   k < CONTROLS       ? "control"
                   : k < 2 * CONTROLS ? "positive"
                                      : "sample");
    if (k < 2 * CONTROLS)
        (void)snprintf(field->treatment, sizeof field->treatment, "%s", k < CONTROLS ? "vehicle" : "releaser");
    else
        (void)snprintf(field->treatment, sizeof field->treatment, "t%02d", treatment + 1);
    set_hold(&field->scene, k < CONTROLS ? 0.92 : k < 2 * CONTROLS ? 0.05 : holds[treatment]);
    field->scene.defocus_um = k == OUT_OF_FOCUS ? 0.55 : 0;
    field->scene.dust = k == DUSTY ? 14 : 0;
    field->scene.cells = k == EMPTY ? 0 : field->scene.cells;
    field->replicate = 1;
    field->with_maps = k == 0 || k == CONTROLS;
}

static void plan_screen(demo_plan *plan)
{
    plan->columns = "plate,well,vessel,treatment,replicate,session,instrument,role,acquired";
    plan->story =
        "Part of a screening plate: eight wells of vehicle (control), eight of a compound that makes cells let\n"
        "go (positive), twelve treatments t01 to t12 in two wells each. The first well of t02 is out of focus,\n"
        "the second of t04 has dust in it, the first of t08 has no cells. Do the numbers notice?\n";
    int wells[SCREEN_WELLS];
    demo_bench *bench = add_bench(plan, "screen1");
    set_plate_bench(&bench->scene, 1);
    bench->scene.layered = 1;
    shuffle_wells(950, wells, SCREEN_WELLS);
    for (int k = 0; k < SCREEN_WELLS; k++) {
        demo_field *field = add_field(plan, 0, (uint64_t)(5000 + k));
        set_screen_well(field, k);
        place_in(field, "screen1", wells[k]);
    }
}

/* ---- all of them ----------------------------------------------------------------------------- */

uf_status demo_plan_make(const char *name, demo_plan *plan, uf_error *error)
{
    static const struct {
        const char *name;
        void (*make)(demo_plan *plan);
    } scenarios[] = {{"coatings", plan_coatings}, {"doses", plan_doses}, {"screen", plan_screen}};
    for (size_t k = 0; k < sizeof scenarios / sizeof scenarios[0]; k++)
        if (strcmp(name, scenarios[k].name) == 0) {
            scenarios[k].make(plan);
            return UF_OK;
        }
    return uf_fail(error, UF_USAGE, "--scenario %.60s: expected coatings, doses, screen or bench", name);
}
