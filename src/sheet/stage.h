/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From coordinates of the microscope's stage to wells. */
#ifndef UF_SHEET_STAGE_H
#define UF_SHEET_STAGE_H

#include "sheet/well.h"

typedef struct uf_stage_point {
    double x_um, y_um;
    uf_well well; /* found */
} uf_stage_point;

/* Distance of neighbouring wells (ANSI SLAS 4-2004: 9, 4.5 and 2.25 mm for 96, 384 and 1536 wells); NaN for other plates,
 * whose makers differ. */
double uf_well_pitch_um(uf_vessel vessel);

/* Finds the well of each point, given where on the stage the centre of A1 is. Stages count either way along each axis: of
 * the four ways exactly one must put every point onto the plate, within 0.4 of a pitch of a well's centre. UF_INPUT says
 * which point fits no well, or that the points fit in several ways. */
UF_MUST_USE uf_status uf_stage_find(uf_stage_point *points, int count, double a1_x_um, double a1_y_um,
                                    uf_vessel vessel, uf_error *error);

#endif
