/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the demo's experiments are made of: benches, fields, and what the sheet says of them. Run's own. */
#ifndef UF_RUN_DEMO_PLAN_H
#define UF_RUN_DEMO_PLAN_H

#include "base/work.h"
#include "scene/scene.h"

enum { DEMO_WORD = 48, DEMO_BENCHES = 3, DEMO_FIELDS = 96 };

/* One sitting at the bench: an instrument file and a pair of flats, NAME.ini, NAME_flat_near.tif. */
typedef struct demo_bench {
    char name[DEMO_WORD];
    uf_scene_settings scene; /* optics, camera, light */
} demo_bench;

/* One field: what the sheet says of it, and the scene it is. An empty word or NaN is an empty cell. */
typedef struct demo_field {
    char name[DEMO_WORD]; /* of its files: NAME_near.tif */
    int bench;
    char plate[DEMO_WORD], well[DEMO_WORD], field[DEMO_WORD], treatment[DEMO_WORD], coating[DEMO_WORD];
    char role[DEMO_WORD];
    double dose_um;
    int replicate;
    int minute;    /* of acquisition, from the start of its session */
    int with_maps; /* its true gap and labels are written as images too */
    uf_scene_settings scene;
} demo_field;

typedef struct demo_plan {
    const char *columns; /* of the sheet after near,wide, joined by commas */
    const char *story;   /* for README.txt */
    demo_bench benches[DEMO_BENCHES];
    demo_field fields[DEMO_FIELDS];
    int bench_count, field_count;
} demo_plan;

/* Fills in the plan of the scenario called `name`; UF_USAGE names the three there are. */
UF_MUST_USE uf_status demo_plan_make(const char *name, demo_plan *plan, uf_error *error);

#endif
