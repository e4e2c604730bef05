/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From shifts at several places of a field to shift, scale and rotation between two channels. */
#ifndef UF_CALIBRATE_SIMILARITY_H
#define UF_CALIBRATE_SIMILARITY_H

/* What is at (x, y) in near, from the field's centre, lies at (x + dx, y + dy) in wide. */
typedef struct uf_local_shift {
    double x_px, y_px, dx_px, dy_px;
    int is_outlier; /* filled by the fit */
} uf_local_shift;

typedef struct uf_similarity {
    double dx_px, dy_px, shift_sd_px;     /* at the field's centre; sd of each */
    double scale, scale_sd;               /* wide over near, minus 1 */
    double rotation_deg, rotation_sd_deg; /* of wide against near, from x towards y (clockwise on screen) */
    double residual_px;                   /* rms of what is left */
    int used;
} uf_similarity;

/*
 * Least squares of dx = tx + s x - r y, dy = ty + r x + s y (a similarity near identity: s the scale minus 1, r the rotation
 * in radians). Shifts further than 4 robust sd and 0.1 px from the fit are left out and the rest fitted again. `reach_px`,
 * half the field's diagonal, only scales the equations. 0 with fewer than 4 shifts, or with places on one line.
 */
int uf_similarity_fit(uf_local_shift *shifts, int count, double reach_px, uf_similarity *fit);

/* Largest distance, over a field of this reach, between the similarity and its plain shift. */
double uf_similarity_departure(const uf_similarity *fit, double reach_px);

#endif
