/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `calibrate shift`: how the wide image lies against the near image. */
#ifndef UF_RUN_CALIBRATE_SHIFT_H
#define UF_RUN_CALIBRATE_SHIFT_H

#include "run/calibration.h"

/* request->images: NEAR WIDE, or several such pairs. Appends the report to `out`, writes fragment and plot. UF_INPUT, with no
 * file written, when the shift cannot be told. */
UF_MUST_USE uf_status uf_calibrate_shift(const uf_calibration_request *request, uf_text *out, uf_error *error);

#endif
