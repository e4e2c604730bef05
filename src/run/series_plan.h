/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The part of a plan that a series of angles adds. */
#ifndef UF_RUN_SERIES_PLAN_H
#define UF_RUN_SERIES_PLAN_H

#include "optics/plan.h"
#include "settings/settings.h"

/* Page of the smallest angle; the first of equal ones. */
int uf_series_widest(const uf_settings *settings);

/* Pages and bench of a series: the bench is that of the smallest angle. UF_INPUT when an angle is not totally
 * reflected against the cell (names the first, and the smallest angle that would do) or cannot leave the
 * objective. */
UF_MUST_USE uf_status uf_series_plan_bench(const uf_settings *settings, uf_plan *plan, uf_error *error);

/*
 * Once bench, model and stray light stand: how far the series can tell gaps, and 1 sigma of a gap by the angles (one shift common to all), the indices of
 * substrate, medium and, with a layered field, cell. Each is moved up and down by its sd, the fields made anew, and
 * what that does to the gap fitted to the unmoved signals (weights those of photon noise) is added in squares. Also
 * how far the exponential, if in force, reads a layered cutoff off.
 */
void uf_series_plan_limits(const uf_settings *settings, uf_plan *plan);

#endif
