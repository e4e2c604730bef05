/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The one error convention: a status that must be used, and one line for the person who has to mend it. */
#ifndef UF_BASE_STATUS_H
#define UF_BASE_STATUS_H

#include "underfoot.h"

/* Fills `error` (when there is one) with a printf-style line and returns `status`, so that a failing
 * function can end in `return uf_fail(...)`. The line says where, what was found, what was expected
 * and the mend; it has no full stop and no newline at its end. */
uf_status uf_fail(uf_error *error, uf_status status, const char *format, ...) UF_PRINTF(3, 4);

/* The same for memory that could not be had: `what` names the thing that wanted it. */
uf_status uf_fail_memory(uf_error *error, const char *what);

/* Puts `where: ` before the line of an error already filled, once a caller knows more than the callee. */
uf_status uf_fail_in(uf_error *error, uf_status status, const char *where);

#endif
