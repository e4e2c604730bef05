/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "image/kernels.h"

#include <stdlib.h>
#include <string.h>

const uf_kernels *uf_kernels_in_use(void)
{
#if defined(__x86_64__)
    const char *asked = getenv("UNDERFOOT_KERNELS");
    if (asked && strcmp(asked, "baseline") == 0)
        return &uf_kernels_baseline;
    if (__builtin_cpu_supports("avx2") && __builtin_cpu_supports("bmi") && __builtin_cpu_supports("bmi2") &&
        __builtin_cpu_supports("fma"))
        return &uf_kernels_v3;
#endif
    return &uf_kernels_baseline;
}
