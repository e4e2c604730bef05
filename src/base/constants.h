/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Numbers that mathematics fixes (ISO C names none of them). */
#ifndef UF_BASE_CONSTANTS_H
#define UF_BASE_CONSTANTS_H

#define UF_PI 3.14159265358979323846

#endif
