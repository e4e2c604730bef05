/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Numbers that mathematics fixes (ISO C names none of them). */
#ifndef UF_BASE_CONSTANTS_H
#define UF_BASE_CONSTANTS_H

#define UF_PI 3.14159265358979323846

/* The median absolute deviation of normal scatter times this is its standard deviation: 1 / quantile(3/4). */
#define UF_MAD_TO_SD 1.4826022185056018

#endif
