/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "image/kernels.h"

#include <math.h>
#include <string.h>

/* Blocks keep the running sums in registers while the taps go by. */
enum { BLOCK = 32 };

static void convolve_row(float *restrict out, const float *restrict in, const float *restrict taps, int radius, int n)
{
    int x = 0;
    for (; x + BLOCK <= n; x += BLOCK) {
        float sum[BLOCK];
        for (int j = 0; j < BLOCK; j++)
            sum[j] = taps[0] * in[x + j];
        for (int k = 1; k <= radius; k++)
            for (int j = 0; j < BLOCK; j++)
                sum[j] += taps[k] * (in[x + j - k] + in[x + j + k]);
        memcpy(out + x, sum, sizeof sum);
    }
    for (; x < n; x++) {
        float sum = taps[0] * in[x];
        for (int k = 1; k <= radius; k++)
            sum += taps[k] * (in[x - k] + in[x + k]);
        out[x] = sum;
    }
}

static void convolve_column(float *restrict out, const float *const *rows, const float *restrict taps, int radius,
                            int n)
{
    const float *const *middle = rows + radius;
    int x = 0;
    for (; x + BLOCK <= n; x += BLOCK) {
        float sum[BLOCK];
        for (int j = 0; j < BLOCK; j++)
            sum[j] = taps[0] * middle[0][x + j];
        for (int k = 1; k <= radius; k++) {
            const float *above = middle[-k] + x, *below = middle[k] + x;
            for (int j = 0; j < BLOCK; j++)
                sum[j] += taps[k] * (above[j] + below[j]);
        }
        memcpy(out + x, sum, sizeof sum);
    }
    for (; x < n; x++) {
        float sum = taps[0] * middle[0][x];
        for (int k = 1; k <= radius; k++)
            sum += taps[k] * (middle[-k][x] + middle[k][x]);
        out[x] = sum;
    }
}

static void six_taps(float *restrict out, const float *restrict in, const float *restrict taps, int n)
{
    for (int x = 0; x < n; x++)
        out[x] = taps[0] * in[x] + taps[1] * in[x + 1] + taps[2] * in[x + 2] + taps[3] * in[x + 3] +
                 taps[4] * in[x + 4] + taps[5] * in[x + 5];
}

static void six_rows(float *restrict out, const float *const *rows, const float *restrict taps, int n)
{
    const float *r0 = rows[0], *r1 = rows[1], *r2 = rows[2], *r3 = rows[3], *r4 = rows[4], *r5 = rows[5];
    for (int x = 0; x < n; x++)
        out[x] =
            taps[0] * r0[x] + taps[1] * r1[x] + taps[2] * r2[x] + taps[3] * r3[x] + taps[4] * r4[x] + taps[5] * r5[x];
}

/*
 * Natural logarithm of a positive normal float. v = m 2^e with m in [sqrt(1/2), sqrt(2)); then
 * ln m = 2 atanh(s) with s = (m - 1)/(m + 1), |s| <= 0.1716, by its series up to s^9 / 9: the first term
 * left out is below 7e-10, so the error is that of float rounding (tests hold it to 3e-7 absolute near
 * 1 and 2 ulp elsewhere).
 */
static inline float natural_log(float v)
{
    uint32_t bits;
    memcpy(&bits, &v, sizeof bits);
    uint32_t shifted = bits - 0x3f3504f3u; /* sqrt(1/2) */
    int32_t exponent = (int32_t)shifted >> 23;
    bits -= (uint32_t)exponent << 23;
    float m;
    memcpy(&m, &bits, sizeof m);
    float s = (m - 1.0f) / (m + 1.0f), s2 = s * s;
    float series = s2 * (1.0f / 3 + s2 * (1.0f / 5 + s2 * (1.0f / 7 + s2 * (1.0f / 9))));
    return (float)exponent * 0.693147181f + 2.0f * (s + s * series);
}

enum { GAP_BLOCK = 256 };

/* Place in the lookup of each pixel's ratio. Values that have no logarithm are replaced first; no branch. */
static void lookup_places(float *restrict at, const float *restrict near, const float *restrict wide,
                          float ln_reference, const uf_gap_lookup *restrict lookup, int n)
{
    for (int x = 0; x < n; x++) {
        float n0 = near[x] > 1e-30f ? near[x] : 1e-30f, w0 = wide[x] > 1e-30f ? wide[x] : 1e-30f;
        at[x] = (lookup->first_ln - (natural_log(n0) - natural_log(w0) - ln_reference)) * lookup->inverse_step;
    }
}

/* In two steps, since reading a table at scattered places is the one thing vectors are no good at. */
static void gap(float *restrict gap_nm, const float *restrict near, const float *restrict wide, float ln_reference,
                const uf_gap_lookup *restrict lookup, int n)
{
    const float last = (float)(UF_DECAY_NODES - 2);
    float places[GAP_BLOCK];
    for (int from = 0; from < n; from += GAP_BLOCK) {
        int count = n - from < GAP_BLOCK ? n - from : GAP_BLOCK;
        lookup_places(places, near + from, wide + from, ln_reference, lookup, count);
        for (int k = 0; k < count; k++) {
            float inside = places[k] > 0.0f ? places[k] : 0.0f;
            int node = (int)(inside < last ? inside : last), x = from + k;
            float low = lookup->gap_nm[node], high = lookup->gap_nm[node + 1];
            float value = low + (places[k] - (float)node) * (high - low);
            gap_nm[x] = near[x] > 1e-30f && wide[x] > 1e-30f ? value : NAN;
        }
    }
}

static void two_sided(float *restrict best, const float *restrict here, const float *restrict before,
                      const float *restrict after, int n)
{
    for (int x = 0; x < n; x++) {
        float side = before[x] < after[x] ? before[x] : after[x];
        float contrast = side - here[x];
        best[x] = contrast > best[x] ? contrast : best[x];
    }
}

static void closed_sides(float *restrict closed, const float *restrict here, const float *restrict before,
                         const float *restrict after, float nowhere, int n)
{
    for (int x = 0; x < n; x++) {
        float b = before[x] > nowhere ? before[x] : 1e6f, a = after[x] > nowhere ? after[x] : 1e6f;
        float contrast = (b < a ? b : a) - here[x];
        closed[x] = contrast > closed[x] ? contrast : closed[x];
    }
}

static void above(uint8_t *restrict out, const float *restrict in, const float *restrict level, int n)
{
    for (int x = 0; x < n; x++)
        out[x] = in[x] > level[x];
}

#ifdef UF_KERNELS_V3
const uf_kernels uf_kernels_v3 = {"x86-64-v3",
#else
const uf_kernels uf_kernels_baseline = {"baseline",
#endif
                                  convolve_row, convolve_column, six_taps,     six_rows,
                                  gap,          two_sided,       closed_sides, above};
