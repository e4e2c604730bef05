/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a careful person would say of a field and the bench it came from, one line each. */
#ifndef UF_RUN_FIELD_WARNINGS_H
#define UF_RUN_FIELD_WARNINGS_H

#include "base/text.h"
#include "run/field.h"

void uf_field_warn(uf_text *out, const uf_settings *settings, const uf_plan *plan, const uf_field_result *result);

#endif
