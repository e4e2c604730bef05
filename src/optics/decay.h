/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Decay: relative excitation of the dye against gap, 1 at gap 0, strictly decreasing. Built once a run as a
 * table; every pixel is converted by looking it up (image/kernels.h), whatever the model.
 */
#ifndef UF_OPTICS_DECAY_H
#define UF_OPTICS_DECAY_H

#include "image/kernels.h"
#include "optics/evanescent.h"

typedef struct uf_decay {
    double depth_nm;      /* 1/e depth of the evanescent intensity in the medium */
    uf_gap_lookup lookup; /* gap against ln(relative excitation) */
} uf_decay;

typedef enum uf_field_model { UF_FIELD_EXPONENTIAL, UF_FIELD_LAYERED, UF_FIELD_TABLE } uf_field_model;

/* Stray light: a share of the excitation at gap 0, with a depth of its own (objective set-ups: about a tenth, of
 * micrometre depth; Mattheyses and Axelrod 2006, J. Biomed. Opt. 11:014006). fraction 0: none. */
typedef struct uf_stray {
    double fraction, depth_nm;
} uf_stray;

enum { UF_DECAY_POINTS = 1000 };

/* A measured decay: gaps rising from 0, ln(relative) falling from 0; straight between points, and beyond the last one
 * as between the last two. */
typedef struct uf_decay_points {
    int count; /* at least 2 where they are used */
    double gap_nm[UF_DECAY_POINTS], ln_relative[UF_DECAY_POINTS];
} uf_decay_points;

/* Which decay is in force, as a formula; uf_decay is its table. */
typedef struct uf_decay_law {
    uf_field_model model;
    uf_stray stray;         /* added to any model */
    uf_decay_points points; /* of UF_FIELD_TABLE */
} uf_decay_law;

/* Relative excitation at a gap of at least 0: (1 - s) model(gap) + s exp(-gap / D), 1 at gap 0. */
double uf_relative_excitation(const uf_bench *bench, const uf_decay_law *law, double gap_nm);

/* exp(-gap / depth). depth_nm above 0. */
void uf_decay_exponential(uf_decay *decay, double depth_nm);

/* The table of any law, by walking the excitation out from gap 0 in steps of 0.25 nm and joining its logarithm by
 * straight lines: right to 0.01 nm. UF_INPUT when the excitation does not fall strictly with the gap (a layered field
 * too near the critical angle), since a ratio then has no one gap. */
UF_MUST_USE uf_status uf_decay_make(uf_decay *decay, const uf_bench *bench, const uf_decay_law *law, uf_error *error);

/* Gap at ln(relative excitation): the scalar twin of the kernel, in double. */
double uf_decay_gap(const uf_decay *decay, double ln_relative);

/* ln(relative excitation) at a gap, by searching the table: the inverse of uf_decay_gap. */
double uf_decay_ln(const uf_decay *decay, double gap_nm);

/* How many nm further than `gap_nm` an exponential places a membrane that lies at `gap_nm` when the field
 * really obeys uf_layered_intensity (negative: closer). What `layered` would have said is about gap minus this. */
double uf_layered_effect_nm(const uf_bench *bench, double gap_nm);

#endif
