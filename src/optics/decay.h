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

/* exp(-gap / depth). depth_nm above 0. */
void uf_decay_exponential(uf_decay *decay, double depth_nm);

/* Gap at ln(relative excitation): the scalar twin of the kernel, in double. */
double uf_decay_gap(const uf_decay *decay, double ln_relative);

/* ln(relative excitation) at a gap, by searching the table: the inverse of uf_decay_gap. */
double uf_decay_ln(const uf_decay *decay, double gap_nm);

/* How many nm further than `gap_nm` an exponential places a membrane that lies at `gap_nm` when the field
 * really obeys uf_layered_intensity (negative: closer). What `layered` would have said is about gap minus this. */
double uf_layered_effect_nm(const uf_bench *bench, double gap_nm);

#endif
