/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Pictures of a plate run: what its tables hold, to be looked at. Like the tables they are made of plan and records alone (and
 * of the thumbnails that stand beside the records), whole and anew in each run.
 */
#ifndef UF_RUN_PLATE_PICTURES_H
#define UF_RUN_PLATE_PICTURES_H

#include "run/plate_tables.h"

/*
 * maps/PLATE_METRIC.png, a plate each; wells/PLATE_WELL.png, all fields of a well each; drift.png. The session (or the time) is
 * part of a name where a plate has more than one. Rows without a well are in no map and on no contact sheet. UF_OUTPUT,
 * UF_INPUT (a record that vanished), UF_MEMORY.
 */
UF_MUST_USE uf_status uf_plate_pictures(const uf_output *output, const uf_plate_plan *plan,
                                        const uf_plate_well_list *wells, uf_pool *pool, uf_error *error);

#endif
