/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Empty labels to draw test shapes on. Include after <cmocka.h>. */
#ifndef TESTS_BLANK_H
#define TESTS_BLANK_H

#include <string.h>

#include "image/plane.h"

static inline uf_labels blank(uf_work *work, int width, int height)
{
    uf_labels labels;
    assert_int_equal(uf_labels_take(work, width, height, &labels, NULL), UF_OK);
    memset(labels.data, 0, (size_t)width * (size_t)height * sizeof *labels.data);
    labels.count = 1;
    return labels;
}

#endif
