/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Row kernels: the loops that touch every pixel. They allocate nothing, print nothing and cannot fail;
 * each has a slow, obvious twin in tests/image/. kernels_rows.c is built twice from one source, for the
 * baseline processor and for x86-64-v3 (AVX2), and picked through this table. Both give the same bits:
 * nothing is contracted or reordered, only done side by side.
 */
#ifndef UF_IMAGE_KERNELS_H
#define UF_IMAGE_KERNELS_H

#include <stddef.h>
#include <stdint.h>

enum { UF_DECAY_NODES = 4097 };

/* Gap against ln(relative excitation) on an even grid: node k is the gap at ln = first_ln - k * step_ln.
 * Beyond both ends the last segment goes on as a straight line, so that noise above the reference gives
 * a negative gap and nothing is clipped. */
typedef struct uf_gap_lookup {
    float first_ln, inverse_step;
    float gap_nm[UF_DECAY_NODES];
} uf_gap_lookup;

typedef struct uf_kernels {
    const char *name; /* "baseline" or "x86-64-v3" */

    /* out[x] = taps[0] in[x] + sum over k of taps[k] (in[x-k] + in[x+k]); `in` reaches radius beyond both ends. */
    void (*convolve_row)(float *out, const float *in, const float *taps, int radius, int n);

    /* The same across rows: rows[radius + k] is the row k below. */
    void (*convolve_column)(float *out, const float *const *rows, const float *taps, int radius, int n);

    /* out[x] = sum over k < 6 of taps[k] in[x + k]: one row of a sub-pixel shift; 6 values beyond n are read. */
    void (*six_taps)(float *out, const float *in, const float *taps, int n);

    /* The same across six rows. */
    void (*six_rows)(float *out, const float *const *rows, const float *taps, int n);

    /* gap[x] = lookup(ln(near[x] / wide[x]) - ln_reference); NaN where near or wide is not above 0. */
    void (*gap)(float *gap_nm, const float *near, const float *wide, float ln_reference, const uf_gap_lookup *lookup,
                int n);

    /* best[x] = max(best[x], min(before[x], after[x]) - here[x]): contrast that holds on both sides. */
    void (*two_sided)(float *best, const float *here, const float *before, const float *after, int n);

    /* closed[x] = max(closed[x], min(before, after) - here): as two_sided, but a side where there is nothing (at
     * or below `nowhere`) asks nothing. */
    void (*closed_sides)(float *closed, const float *here, const float *before, const float *after, float nowhere,
                         int n);

    /* out[x] = in[x] > level[x]. */
    void (*above)(uint8_t *out, const float *in, const float *level, int n);
} uf_kernels;

/* The fastest table this processor can run; UNDERFOOT_KERNELS=baseline in the environment picks the other,
 * for tests. */
const uf_kernels *uf_kernels_in_use(void);

extern const uf_kernels uf_kernels_baseline;
#if defined(__x86_64__)
extern const uf_kernels uf_kernels_v3;
#endif

#endif
